//! What can be wrong with the meaning of a netlist, as data. The rules word it.

use crate::text::Span;

/// One fault and its place.
#[derive(Clone, PartialEq, Debug)]
pub struct Issue {
    /// What is wrong.
    pub kind: IssueKind,
    /// The word at fault.
    pub span: Span,
    /// A second place that belongs to it.
    pub other: Option<Span>,
}

/// The limits of the product, by configuration key.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum LimitKey {
    /// Flat parts of one circuit.
    Parts,
    /// Nesting of instances and includes.
    Nesting,
    /// States for exact natural modes.
    States,
    /// Bytes of one file.
    FileBytes,
}

impl LimitKey {
    /// The key under `[limits]`.
    pub fn key(self) -> &'static str {
        match self {
            Self::Parts => "parts",
            Self::Nesting => "nesting",
            Self::States => "states",
            Self::FileBytes => "file-bytes",
        }
    }
}

/// The kinds of fault.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum IssueKind {
    /// An instance names a subcircuit that is not defined.
    UnknownSubcircuit {
        /// As written.
        name: String,
        /// The nearest known name.
        nearest: Option<String>,
    },
    /// A device names a model that is not defined.
    UnknownModel {
        /// As written.
        name: String,
        /// The nearest known name.
        nearest: Option<String>,
    },
    /// A name without a value in an expression, or an instance parameter that the subcircuit
    /// does not have.
    UnknownParameter {
        /// As written.
        name: String,
        /// The nearest known name.
        nearest: Option<String>,
    },
    /// A mark names a node, part or terminal that is not there.
    UnknownNodeInMark {
        /// As written.
        name: String,
        /// The nearest known name.
        nearest: Option<String>,
    },
    /// A card names a part (sensing source, inductor) that is not there.
    UnknownPart {
        /// As written.
        name: String,
        /// What was expected.
        expected: &'static str,
    },
    /// An instance gives another number of nodes than its subcircuit has pins.
    PinCount {
        /// Nodes on the card.
        given: usize,
        /// Pins of the subcircuit.
        wanted: usize,
        /// The subcircuit.
        name: String,
    },
    /// Two things of one kind bear one name in one scope.
    DuplicateName {
        /// `part`, `subcircuit`, `model` or `block`.
        what: &'static str,
        /// The name.
        name: String,
    },
    /// A parameter depends on itself.
    ParameterCycle {
        /// Names around the cycle.
        names: Vec<String>,
    },
    /// A subcircuit contains itself.
    RecursiveSubcircuit {
        /// The subcircuit.
        name: String,
    },
    /// An include could not be had.
    MissingInclude {
        /// The path as written.
        path: String,
        /// Why.
        reason: String,
    },
    /// A file includes itself, directly or through others.
    IncludeCycle {
        /// The path as written.
        path: String,
    },
    /// A value is no finite number.
    ValueNotFinite {
        /// As written.
        text: String,
    },
    /// A mark that cannot be read.
    BadMark {
        /// What is wrong with it, in words.
        message: String,
        /// The nearest known word or key.
        nearest: Option<String>,
    },
    /// A limit of the product cut something off.
    LimitReached {
        /// Which.
        key: LimitKey,
        /// Its value.
        limit: usize,
    },
}
