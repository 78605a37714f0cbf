//! The unknowns of the system: node voltages first, then branch currents.

use crate::circuit::{Circuit, NodeId, NodeRef, PartId, PartKind};
use std::collections::HashMap;

/// What a row or column stands for.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Unknown {
    /// A node's voltage; its row is the node's current law.
    Node(NodeId),
    /// A part's current; its row is the part's own law.
    Branch(PartId),
}

/// Rows and columns of the system, both ways.
#[derive(Clone, Debug)]
pub struct Unknowns {
    nodes: usize,
    branches: Vec<PartId>,
    row_of_branch: HashMap<PartId, u32>,
}

impl Unknowns {
    /// Numbers the unknowns of a circuit.
    pub fn new(circuit: &Circuit) -> Self {
        let nodes = circuit.nodes.len();
        let mut branches = Vec::new();
        let mut row_of_branch = HashMap::new();
        for (id, part) in circuit.numbered_parts() {
            if has_branch(&part.kind) {
                row_of_branch.insert(id, (nodes + branches.len()) as u32);
                branches.push(id);
                if matches!(part.kind, PartKind::Line { .. }) {
                    branches.push(id);
                }
            }
        }
        Self {
            nodes,
            branches,
            row_of_branch,
        }
    }

    /// How many there are.
    pub fn len(&self) -> usize {
        self.nodes + self.branches.len()
    }

    /// Whether there are none.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The row of a node; `None` for ground.
    pub fn node(&self, node: NodeRef) -> Option<u32> {
        node.node().map(|id| id.0)
    }

    /// The row of a part's current, if it has one; that of a line's second end is the next.
    pub fn branch(&self, part: PartId) -> Option<u32> {
        self.row_of_branch.get(&part).copied()
    }

    /// What a row stands for.
    pub fn of_row(&self, row: u32) -> Option<Unknown> {
        let row = row as usize;
        if row < self.nodes {
            return Some(Unknown::Node(NodeId(row as u32)));
        }
        let part = self.branches.get(row - self.nodes)?;
        Some(Unknown::Branch(*part))
    }

    /// Number of node voltages; they are the first rows.
    pub fn nodes(&self) -> usize {
        self.nodes
    }
}

/// Whether a part's current is an unknown of its own.
fn has_branch(kind: &PartKind) -> bool {
    match kind {
        PartKind::Resistor { ohm, .. } => *ohm == 0.0,
        PartKind::Inductor { .. }
        | PartKind::VoltageSource { .. }
        | PartKind::Vcvs { .. }
        | PartKind::Ccvs { .. }
        | PartKind::Line { .. } => true,
        _ => false,
    }
}
