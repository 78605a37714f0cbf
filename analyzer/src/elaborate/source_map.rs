//! The way back from the flat circuit to the text: which card wrote a part, through which
//! instances, and where a node is first named. One card of a subcircuit stands for many parts.

use crate::circuit::{NodeId, PartId};
use crate::text::{FileId, Span, TextRange};

/// An instance of a subcircuit in the flat circuit.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct InstanceId(pub u32);

/// Where a part comes from.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Origin {
    /// The file of its card or mark.
    pub file: FileId,
    /// Its name on the card (or the word of the mark that adds it).
    pub name: TextRange,
    /// The value or gain on the card; empty when there is none.
    pub value: TextRange,
    /// The instance it stands in; `None` at the root.
    pub instance: Option<InstanceId>,
}

impl Origin {
    /// The place of the part's name.
    pub fn span(&self) -> Span {
        Span::new(self.file, self.name)
    }
}

/// One instance and the card that writes it.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct InstanceOrigin {
    /// Full path.
    pub path: String,
    /// The instance around it.
    pub parent: Option<InstanceId>,
    /// The place of its name.
    pub span: Span,
}

/// Places of everything in one flat circuit, by the same numbers.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct SourceMap {
    pub(super) parts: Vec<Origin>,
    pub(super) nodes: Vec<Span>,
    pub(super) instances: Vec<InstanceOrigin>,
}

impl SourceMap {
    /// Where a part comes from.
    pub fn part(&self, id: PartId) -> Option<&Origin> {
        self.parts.get(id.0 as usize)
    }

    /// Where a node is first named.
    pub fn node(&self, id: NodeId) -> Option<Span> {
        self.nodes.get(id.0 as usize).copied()
    }

    /// The instance cards around a part, from the inside out.
    pub fn instance_path(&self, from: Option<InstanceId>) -> Vec<&InstanceOrigin> {
        let mut path = Vec::new();
        let mut next = from;
        while let Some(instance) = next.and_then(|id| self.instances.get(id.0 as usize)) {
            path.push(instance);
            next = instance.parent;
        }
        path
    }
}
