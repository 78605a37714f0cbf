//! Questions about a circuit's graph: islands without a DC path to ground, loops of
//! voltage sources.

use super::part::{Circuit, NodeId, NodeRef, PartId, PartKind};

/// Union-find over nodes, ground as element 0 (Tarjan, "Efficiency of a Good But Not Linear
/// Set Union Algorithm", J. ACM, 1975, from memory).
#[derive(Clone, Debug)]
pub struct Islands {
    parent: Vec<u32>,
}

impl Islands {
    /// Every node on its own.
    pub fn new(nodes: usize) -> Self {
        Self {
            parent: (0..=nodes as u32).collect(),
        }
    }

    fn index(node: NodeRef) -> u32 {
        match node {
            NodeRef::Ground => 0,
            NodeRef::Node(NodeId(id)) => id + 1,
        }
    }

    /// The representative of a node's island.
    pub fn root(&mut self, node: NodeRef) -> u32 {
        let mut at = Self::index(node);
        while let Some(&parent) = self.parent.get(at as usize) {
            if parent == at {
                break;
            }
            let grand = self.parent.get(parent as usize).copied().unwrap_or(parent);
            if let Some(slot) = self.parent.get_mut(at as usize) {
                *slot = grand;
            }
            at = grand;
        }
        at
    }

    /// Joins two nodes; `false` when they were in one island already.
    pub fn join(&mut self, a: NodeRef, b: NodeRef) -> bool {
        let (a, b) = (self.root(a), self.root(b));
        if a == b {
            return false;
        }
        let (low, high) = (a.min(b), a.max(b));
        if let Some(slot) = self.parent.get_mut(high as usize) {
            *slot = low;
        }
        true
    }
}

/// Whether a part conducts direct current between all its terminals. Parts that are not
/// computed are taken to conduct, so that they raise no false alarm.
pub fn conducts_dc(kind: &PartKind) -> bool {
    match kind {
        PartKind::Resistor { .. }
        | PartKind::Inductor { .. }
        | PartKind::VoltageSource { .. }
        | PartKind::Vcvs { .. }
        | PartKind::Ccvs { .. }
        | PartKind::NotComputed { .. } => true,
        PartKind::Vccs { nodes, control, .. } => {
            // A G across its own control pair is a conductance.
            nodes == control || (nodes[0] == control[1] && nodes[1] == control[0])
        }
        _ => false,
    }
}

/// Groups of nodes that no part connects to ground for direct current, each in node order.
pub fn dc_islands(circuit: &Circuit) -> Vec<Vec<NodeId>> {
    let mut islands = Islands::new(circuit.nodes.len());
    for part in &circuit.parts {
        if conducts_dc(&part.kind) {
            let terminals = part.kind.terminals();
            for pair in terminals.windows(2) {
                islands.join(pair[0], pair[1]);
            }
        } else if let PartKind::Line { nodes, .. } = &part.kind {
            // At zero frequency a line joins its ends, conductor by conductor.
            islands.join(nodes[0], nodes[2]);
            islands.join(nodes[1], nodes[3]);
        }
    }
    let ground = islands.root(NodeRef::Ground);
    let mut groups: Vec<(u32, Vec<NodeId>)> = Vec::new();
    let mut place = std::collections::HashMap::new();
    for index in 0..circuit.nodes.len() as u32 {
        let node = NodeId(index);
        let root = islands.root(NodeRef::Node(node));
        if root == ground {
            continue;
        }
        let at = *place.entry(root).or_insert_with(|| {
            groups.push((root, Vec::new()));
            groups.len() - 1
        });
        if let Some((_, group)) = groups.get_mut(at) {
            group.push(node);
        }
    }
    groups.into_iter().map(|(_, group)| group).collect()
}

/// Parts that close a loop of ideal voltage branches (V without series impedance, E, H): with
/// the branches before it, each leaves a loop whose current nothing determines.
pub fn voltage_loops(circuit: &Circuit) -> Vec<PartId> {
    let mut islands = Islands::new(circuit.nodes.len());
    let mut closing = Vec::new();
    for (id, part) in circuit.numbered_parts() {
        let ideal = match &part.kind {
            PartKind::VoltageSource {
                series_ohm,
                series_henry,
                ..
            } => *series_ohm == 0.0 && *series_henry == 0.0,
            PartKind::Vcvs { .. } | PartKind::Ccvs { .. } => true,
            _ => false,
        };
        if !ideal {
            continue;
        }
        if let [a, b] = part.kind.terminals()
            && !islands.join(*a, *b)
        {
            closing.push(id);
        }
    }
    closing
}
