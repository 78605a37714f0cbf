//! `current-source-cut`: nodes that only current sources connect to the rest.

use crate::circuit::{Circuit, Islands, NodeId, NodeRef, PartId, PartKind};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::spans::SpanMap;
use crate::rules::views::{View, name_list, whole_views};
use crate::rules::{Family, Rule, TextContext};
use std::collections::{BTreeMap, HashSet};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("current-source-cut"),
    family: Family::Wiring,
    severity: Severity::Error,
    summary: "nodes that only current sources connect to the rest of the circuit",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a node, or a group of nodes, that is connected to the rest of the circuit by nothing but
independent current sources.

## Why it matters
The currents into the group must add up to zero whatever the circuit does, so its voltage against ground
is not determined, neither at the operating point nor for small signals.

## Method and source
Kirchhoff's current law over a cutset of current sources (Desoer and Kuh, *Basic Circuit Theory*, 1969,
from memory). Nodes are joined by every part but `I` cards; a group without ground that an
`I` card leads into is reported.

## Limits
Controlled current sources (G, F) count as connections, because their current may follow the voltage of
the group; so do capacitors (then it is `no-dc-path`), and parts that are not computed. A group without
any current source into it is `no-dc-path` as well. Subcircuits that no circuit holds are not looked at.

## Example
```
I1 0 tail 1m
I2 tail 0 1m
```

## Fix
Give the node a path for the difference of the currents, such as a large resistor to ground.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for view in whole_views(context) {
        for cut in cuts(view.circuit) {
            let place = cut.sources.first().and_then(|part| view.part_span(*part));
            let Some(place) = place else { continue };
            if !view.is_doubtful(&cut.nodes) && told.insert(place) {
                out.push(finding(&view, &cut, place));
            }
        }
    }
}

/// Nodes and the I sources that alone connect them, in order.
pub(super) struct Cut {
    nodes: Vec<NodeId>,
    sources: Vec<PartId>,
}

impl Cut {
    /// Its nodes.
    pub(super) fn into_nodes(self) -> Vec<NodeId> {
        self.nodes
    }
}

fn finding(view: &View<'_>, cut: &Cut, place: crate::text::Span) -> Finding {
    let sources = name_list(cut.sources.iter().map(|part| view.part_name(*part)), 6);
    let nodes = name_list(cut.nodes.iter().map(|node| view.node_name(*node)), 6);
    let (what, verb) = match cut.nodes.len() {
        1 => ("node", "is"),
        _ => ("nodes", "are"),
    };
    let message = format!("{what} {nodes} {verb} connected by current sources only: {sources}");
    let mut finding = RULE.finding(place, message);
    finding.node = cut.nodes.first().map(|n| view.node_name(*n).to_owned());
    for source in cut.sources.iter().skip(1) {
        finding = finding.also_maybe(view.part_span(*source), "a source of the cut");
    }
    let node = cut.nodes.first().and_then(|node| view.map.node(*node));
    view.place(finding.also_maybe(node, "the node"))
}

/// Groups of nodes that nothing but I sources connects to the rest, in node order.
pub(super) fn cuts(circuit: &Circuit) -> Vec<Cut> {
    let mut islands = Islands::new(circuit.nodes.len());
    for part in &circuit.parts {
        if !matches!(part.kind, PartKind::CurrentSource { .. }) {
            for pair in part.kind.terminals().windows(2) {
                if let [a, b] = pair {
                    islands.join(*a, *b);
                }
            }
        }
    }
    let ground = islands.root(NodeRef::Ground);
    let mut groups: BTreeMap<u32, Cut> = BTreeMap::new();
    for (id, part) in circuit.numbered_parts() {
        let PartKind::CurrentSource { nodes: [a, b] } = &part.kind else {
            continue;
        };
        let (a, b) = (islands.root(*a), islands.root(*b));
        for root in [a, b] {
            if a != b && root != ground {
                let group = groups.entry(root).or_insert_with(|| Cut {
                    nodes: Vec::new(),
                    sources: Vec::new(),
                });
                group.sources.push(id);
            }
        }
    }
    if !groups.is_empty() {
        for index in 0..circuit.nodes.len() as u32 {
            let node = NodeId(index);
            let root = islands.root(NodeRef::Node(node));
            if let Some(group) = groups.get_mut(&root) {
                group.nodes.push(node);
            }
        }
    }
    groups.into_values().collect()
}

/// Places of the nodes that stand alone in a reported cut: no other rule tells them again.
pub(super) fn lone_nodes(context: &TextContext<'_>) -> SpanMap<()> {
    let mut places = SpanMap::new();
    for view in whole_views(context) {
        for cut in cuts(view.circuit) {
            if let [node] = cut.nodes.as_slice()
                && !view.is_doubtful(&cut.nodes)
                && let Some(place) = view.map.node(*node)
            {
                places.insert(place, ());
            }
        }
    }
    places
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a 0 1k
I1 a tail 1m
^^ current-source-cut
I2 tail 0 1m
",
        );
        check(
            "\
title
V1 a 0 1
R1 a 0 1k
Ifeed 0 b 1m
^^^^^ current-source-cut
R2 b c 1k
C2 b c 1p
",
        );
    }

    #[test]
    fn a_lone_terminal_of_a_current_source_is_told_once() {
        check(
            "\
title
R1 a 0 1k
C1 a 0 1p
I1 0 b 1m
^^ current-source-cut
",
        );
    }

    #[test]
    fn members_are_named() {
        let text = "title\nR1 a 0 1k\nI1 a tail 1m\nI2 tail 0 1m\n";
        let found = findings(text, "current-source-cut");
        assert_eq!(
            found[0].message,
            "node `tail` is connected by current sources only: `I1` and `I2`"
        );
        assert_eq!(found[0].node.as_deref(), Some("tail"));
    }

    #[test]
    fn near_misses() {
        check("title\nI1 0 a 1m\nR1 a b 1k\nR2 b 0 1k\n");
        check("title\nI1 0 d 1m\nG1 d 0 g 0 10m\nR1 g 0 1k\nR2 d g 1meg\n");
        check("title\n*~ block amp in=a\nI1 0 a 1m\n");
    }
}
