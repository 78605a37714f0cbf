//! What can be wrong with a line, as data; the wording is in `Display`.

use crate::text::TextRange;

/// One fault of the text and its place.
#[derive(Clone, PartialEq, Debug)]
pub struct SyntaxError {
    /// What is wrong.
    pub kind: SyntaxErrorKind,
    /// The word at fault.
    pub range: TextRange,
    /// A second place that belongs to it (where something was opened, say).
    pub other: Option<TextRange>,
}

/// The kinds of fault.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum SyntaxErrorKind {
    /// A card starts with a letter (or sign) that names no element.
    UnknownElement(String),
    /// A card ends before its needed fields.
    MissingFields {
        /// What the card needs, in words.
        needed: &'static str,
    },
    /// A word that should be a number is none.
    BadNumber(String),
    /// A number that a double cannot hold.
    NumberOutOfRange(String),
    /// An expression cannot be read.
    BadExpression(expr_error::ExprFault),
    /// A quote or brace is not closed on its card.
    UnclosedQuote(char),
    /// `key=` without a value.
    MissingValue(String),
    /// A `+` line with no card before it.
    NothingToContinue,
    /// A `*~+` line with no mark before it.
    NoMarkToContinue,
    /// A `+` line separated from its card by blank lines, comments or marks.
    StrayContinuation,
    /// `.subckt` without a matching `.ends`.
    UnclosedSubcircuit(String),
    /// `.ends` without an open `.subckt`.
    StrayEnds,
    /// `.ends NAME` closes another subcircuit than the open one.
    EndsMismatch {
        /// The name written behind `.ends`.
        given: String,
        /// The open subcircuit.
        open: String,
    },
    /// `.lib` section without `.endl`, or the reverse.
    UnpairedSection,
    /// Words that the card has no place for.
    UnexpectedWord(String),
}

pub use crate::syntax::expr as expr_error;

impl std::fmt::Display for SyntaxErrorKind {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::UnknownElement(word) => {
                write!(f, "no element starts with `{word}`")
            }
            Self::MissingFields { needed } => write!(f, "fields are missing: needed are {needed}"),
            Self::BadNumber(text) => write!(f, "`{text}` is not a number"),
            Self::NumberOutOfRange(text) => write!(f, "`{text}` is too large for a number"),
            Self::BadExpression(fault) => write!(f, "expression cannot be read: {fault}"),
            Self::UnclosedQuote(sign) => write!(f, "`{sign}` is not closed on this card"),
            Self::MissingValue(key) => write!(f, "`{key}=` has no value"),
            Self::NothingToContinue => f.write_str("`+` continues nothing: no card stands before it"),
            Self::NoMarkToContinue => {
                f.write_str("`*~+` continues nothing: no mark stands before it")
            }
            Self::StrayContinuation => f.write_str(
                "`+` continues a card across blank, comment or mark lines; other programs may read this differently",
            ),
            Self::UnclosedSubcircuit(name) => {
                write!(f, "subcircuit `{name}` is not closed by .ends")
            }
            Self::StrayEnds => f.write_str(".ends without an open .subckt"),
            Self::EndsMismatch { given, open } => {
                write!(f, ".ends names `{given}` but the open subcircuit is `{open}`")
            }
            Self::UnpairedSection => f.write_str(".lib section and .endl do not pair"),
            Self::UnexpectedWord(word) => write!(f, "`{word}` has no place on this card"),
        }
    }
}
