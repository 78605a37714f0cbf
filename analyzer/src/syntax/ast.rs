//! Typed views of the items: what a card, a dot line or a mark says, as ranges of the
//! text. Nothing is evaluated or looked up here.

use crate::text::TextRange;

/// A word of the text.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Word {
    /// Where it stands.
    pub range: TextRange,
}

/// A value as written: a number, a parameter's name or an expression.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Value {
    /// Where it stands, quotes or braces included.
    pub range: TextRange,
    /// Written in quotes or braces.
    pub quoted: bool,
}

/// `key=value`.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Param {
    /// The key.
    pub key: Word,
    /// The value (an empty range when it is missing).
    pub value: Value,
}

/// One definition of a `.param` line or a `.subckt` default.
#[derive(Clone, PartialEq, Debug)]
pub struct ParamDef {
    /// The name that is defined.
    pub name: Word,
    /// Argument names, for a function; `None` for a plain parameter.
    pub arguments: Option<Vec<Word>>,
    /// The defining text.
    pub value: Value,
}

/// One statement of a file, in order of the text.
#[derive(Clone, PartialEq, Debug)]
pub struct Statement {
    /// Index of its item in the tree.
    pub item: u32,
    /// Whole extent from its first to its last word.
    pub range: TextRange,
    /// What it says.
    pub kind: StatementKind,
}

/// What a statement says.
#[derive(Clone, PartialEq, Debug)]
pub enum StatementKind {
    /// An element card.
    Card(Box<Card>),
    /// A dot line that squeg reads.
    Dot(Box<Dot>),
    /// A mark.
    Mark(Box<Mark>),
    /// The title line.
    Title,
}

/// An element card.
#[derive(Clone, PartialEq, Debug)]
pub struct Card {
    /// The element's name, its letter included.
    pub name: Word,
    /// The letter in lower case.
    pub letter: char,
    /// What the letter's fields say.
    pub kind: CardKind,
    /// All `key=value` fields.
    pub params: Vec<Param>,
}

/// The fields of a card by family.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum CardKind {
    /// `R C L`: two nodes and a value.
    TwoTerminal {
        /// The nodes.
        nodes: [Word; 2],
        /// The value field, or that of `R= C= L=`.
        value: Option<Value>,
        /// A model's name before the value.
        model: Option<Word>,
    },
    /// `K`: inductors and the coupling factor.
    Coupling {
        /// Two or more inductor names.
        inductors: Vec<Word>,
        /// The factor.
        factor: Option<Value>,
    },
    /// `V I`: independent source.
    Source {
        /// Positive and negative node.
        nodes: [Word; 2],
        /// DC value, if written.
        value: Option<Value>,
    },
    /// Linear `E G`: output nodes, control nodes, gain.
    VoltageControlled {
        /// n+ n- c+ c-.
        nodes: [Word; 4],
        /// Gain (E: volts per volt, G: siemens).
        gain: Value,
    },
    /// Linear `F H`: output nodes, sensed V source, gain.
    CurrentControlled {
        /// n+ n-.
        nodes: [Word; 2],
        /// The V source whose current controls.
        sense: Word,
        /// Gain (F: amperes per ampere, H: ohms).
        gain: Value,
    },
    /// An instance of a subcircuit.
    Instance {
        /// Outer nodes in pin order.
        nodes: Vec<Word>,
        /// The subcircuit's name.
        subcircuit: Word,
    },
    /// `D Q J M Z`: a semiconductor device.
    Device {
        /// Its nodes.
        nodes: Vec<Word>,
        /// The model's name.
        model: Word,
    },
    /// `T`: an ideal transmission line of two conductors.
    Line {
        /// in, its reference, out, its reference.
        nodes: [Word; 4],
        /// Characteristic impedance, ohms.
        z0: Value,
        /// How its delay is written.
        delay: LineDelay,
    },
    /// A card that is read but not computed; `what` says it in words.
    NotComputed {
        /// The nodes it touches, as far as the card tells.
        nodes: Vec<Word>,
        /// What it is, for messages.
        what: &'static str,
    },
}

/// The delay of a `T` card, as IBIS-ISS 1.0 writes it.
#[derive(Clone, Copy, PartialEq, Debug)]
pub enum LineDelay {
    /// `TD=` seconds, for each unit of the length `L=` (1 when not written).
    PerLength {
        /// `TD=`.
        delay: Value,
        /// `L=`.
        length: Option<Value>,
    },
    /// `F=` hertz at which the line is `NL=` wavelengths long (a quarter when not written).
    Wavelengths {
        /// `F=`.
        hz: Value,
        /// `NL=`.
        wavelengths: Option<Value>,
    },
}

impl CardKind {
    /// The words that name nodes, in card order.
    pub fn nodes(&self) -> &[Word] {
        match self {
            Self::TwoTerminal { nodes, .. }
            | Self::Source { nodes, .. }
            | Self::CurrentControlled { nodes, .. } => nodes,
            Self::VoltageControlled { nodes, .. } | Self::Line { nodes, .. } => nodes,
            Self::Instance { nodes, .. }
            | Self::Device { nodes, .. }
            | Self::NotComputed { nodes, .. } => nodes,
            Self::Coupling { .. } => &[],
        }
    }
}

/// A dot line.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum Dot {
    /// `.subckt NAME pins.. key=value..`
    Subckt {
        /// Name.
        name: Word,
        /// Pins in order.
        pins: Vec<Word>,
        /// Defaults.
        params: Vec<ParamDef>,
    },
    /// `.ends [NAME]`
    Ends {
        /// The name, if written.
        name: Option<Word>,
    },
    /// `.param name=value ..`
    Param(Vec<ParamDef>),
    /// `.model NAME TYPE ..`
    Model {
        /// Name.
        name: Word,
        /// Type word.
        kind: Word,
        /// Parameters.
        params: Vec<Param>,
    },
    /// `.include PATH`, or `.lib PATH SECTION`
    Include(IncludePath),
    /// `.lib SECTION`: opens a section.
    Section(Word),
    /// `.endl`
    EndSection,
    /// `.global nodes..`
    Global(Vec<Word>),
    /// `.temp value`
    Temp(Value),
    /// `.end`
    End,
    /// Any other dot line: it belongs to a simulator.
    Other,
}

/// What an include asks for.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct IncludePath {
    /// The path, quotes not included.
    pub path: Word,
    /// The section, for `.lib PATH SECTION`.
    pub section: Option<Word>,
}

/// A mark: its word, positional words and keys.
#[derive(Clone, PartialEq, Debug)]
pub struct Mark {
    /// `block`, `rail`, ..; empty range when the mark has no word.
    pub word: Word,
    /// Words without `=`.
    pub words: Vec<Word>,
    /// Keys.
    pub params: Vec<Param>,
}
