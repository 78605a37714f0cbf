//! `source-loop`: a loop of ideal voltage sources.

use crate::circuit::{Circuit, NodeRef, PartId, PartKind, voltage_loops};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::views::{View, name_list, whole_views};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::{HashMap, HashSet, VecDeque};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("source-loop"),
    family: Family::Wiring,
    severity: Severity::Error,
    summary: "a loop of ideal voltage sources",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a part that closes a loop of V, E and H sources with no impedance in it.

## Why it matters
The voltages around the loop must add up to zero whatever the circuit does, and nothing determines the current
that flows around it: the system of equations has no single solution.

## Method and source
Kirchhoff's voltage law over a loop of voltage sources (Desoer and Kuh, *Basic Circuit Theory*, 1969,
from memory). A spanning forest of the ideal voltage branches is built in the order of the
text; a branch whose ends it connects already closes a loop, and the path between them is the rest of it.

## Limits
A source with the impedance of a port or rail in series is not ideal. Loops that inductors close are not
reported: they have a current of their own, a mode at s = 0. Subcircuits that no circuit holds are not
looked at.

## Example
```
V1 vdd 0 5
V2 vdd 0 5
```

## Fix
Take one of the sources out, or put the resistance in series that it has in fact.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for view in whole_views(context) {
        let closing = voltage_loops(view.circuit);
        if closing.is_empty() {
            continue;
        }
        let forest = Forest::new(view.circuit, &closing);
        for part in closing {
            if let Some(place) = view.part_span(part)
                && told.insert(place)
            {
                out.push(finding(&view, &forest, part, place));
            }
        }
    }
}

fn finding(view: &View<'_>, forest: &Forest, part: PartId, place: Span) -> Finding {
    let others = forest.path(view.circuit, part);
    let name = view.part_name(part);
    let message = if others.is_empty() {
        format!("`{name}` is an ideal voltage source with both ends at one node")
    } else {
        let names = name_list(others.iter().map(|part| view.part_name(*part)), 6);
        format!("`{name}` closes a loop of ideal voltage sources with {names}")
    };
    let finding = RULE.finding(place, message);
    view.place(others.iter().fold(finding, |finding, part| {
        finding.also_maybe(view.part_span(*part), "in the loop too")
    }))
}

/// The ideal voltage branches that close no loop, by the nodes they touch.
struct Forest {
    branches: HashMap<NodeRef, Vec<(NodeRef, PartId)>>,
}

impl Forest {
    fn new(circuit: &Circuit, closing: &[PartId]) -> Self {
        let closing: HashSet<PartId> = closing.iter().copied().collect();
        let mut branches: HashMap<NodeRef, Vec<(NodeRef, PartId)>> = HashMap::new();
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
            if let (true, false, [a, b]) = (ideal, closing.contains(&id), part.kind.terminals()) {
                branches.entry(*a).or_default().push((*b, id));
                branches.entry(*b).or_default().push((*a, id));
            }
        }
        Self { branches }
    }

    /// The branches between the ends of `part`, in order from its first terminal.
    fn path(&self, circuit: &Circuit, part: PartId) -> Vec<PartId> {
        let terminals = circuit.part(part).map(|part| part.kind.terminals());
        let Some(&[from, to]) = terminals else {
            return Vec::new();
        };
        // From the far end, so that walking back gives the order from the near one.
        let mut came: HashMap<NodeRef, (NodeRef, PartId)> = HashMap::new();
        let mut open = VecDeque::from([to]);
        while let Some(at) = open.pop_front() {
            if at == from {
                break;
            }
            for (next, branch) in self.branches.get(&at).into_iter().flatten() {
                if *next != to && !came.contains_key(next) {
                    came.insert(*next, (at, *branch));
                    open.push_back(*next);
                }
            }
        }
        let mut path = Vec::new();
        let mut at = from;
        while let (true, Some((next, branch))) = (at != to, came.get(&at)) {
            path.push(*branch);
            at = *next;
        }
        path
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
Vlow vdd 0 5
Vhigh vdd 0 5.1
^^^^^ source-loop
R1 vdd 0 1k
",
        );
        check(
            "\
title
V1 a 0 1
R1 a c 1k
E1 b a a 0 2
H1 b 0 V1 10
^^ source-loop
R2 b c 1k
",
        );
        check(
            "\
title
V1 a a 1
^^ source-loop
R1 a 0 1k
",
        );
    }

    #[test]
    fn the_loop_is_named_in_order() {
        let text = "title\nV1 a 0 1\nV9 d 0 1\nE1 b a a 0 2\nV3 c b 1\nV4 c 0 1\nR1 c d 1\n";
        let found = findings(text, "source-loop");
        assert_eq!(found.len(), 1);
        assert_eq!(
            found[0].message,
            "`V4` closes a loop of ideal voltage sources with `V3`, `E1` and `V1`"
        );
        assert_eq!(found[0].related.len(), 3);
    }

    #[test]
    fn near_misses() {
        check("title\nV1 a 0 1\nV2 b 0 1\nR1 a b 1k\nV3 c b 1\nR2 c 0 1\n");
        check("title\n*~ block amp in=V1\nV1 a 0\nV2 a 0 5\nR1 a 0 1k\n");
        check("title\nV1 a 0 1\nL1 a 0 1n\n");
    }
}
