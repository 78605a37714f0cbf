//! `current-source-cut`: nodes that only current sources connect to the rest.

use crate::circuit::{Islands, NodeRef, PartKind};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::circuits;
use crate::rules::{Family, Rule, TextContext};
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("current-source-cut"),
    family: Family::Wiring,
    severity: Severity::Error,
    summary: "nodes that only current sources connect to the rest",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an I source that connects a part of the circuit to the rest which nothing else connects.

## Why it matters
The current of the source has no way back, so the circuit has no solution.

## Method and source
The graph of all parts but I sources; sensing terminals carry no current and do not connect.

## Limits
Controlled current sources (G, F) connect; what they leave undetermined shows as an undetermined block.

## Example
```
I1 0 a 1m
C1 a b 1p
```

## Fix
Give the nodes a path that carries current.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        let mut islands = Islands::new(circuit.nodes.len());
        for part in &circuit.parts {
            if !matches!(part.kind, PartKind::CurrentSource { .. }) {
                for pair in part.kind.terminals().windows(2) {
                    islands.join(pair[0], pair[1]);
                }
            }
        }
        for (id, part) in circuit.numbered_parts() {
            let PartKind::CurrentSource { nodes: [a, b] } = part.kind else {
                continue;
            };
            let ground = islands.root(NodeRef::Ground);
            let apart = [a, b]
                .into_iter()
                .find(|node| islands.root(*node) != ground);
            let (Some(node), Some(origin)) = (apart, map.part(id)) else {
                continue;
            };
            if islands.root(a) != islands.root(b) && told.insert(origin.span()) {
                let message = format!(
                    "`{}` alone connects node `{}` to the rest: its current has no way back",
                    part.name,
                    circuit.node_name(node)
                );
                out.push(RULE.finding(origin.span(), message));
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 a 0 1
I1 a q 1m
^^ current-source-cut
     ^ no-dc-path
R2 q r 1
R3 q r 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 1
I1 a q 1m
R2 q 0 1
"#,
        );
        check(
            r#"title
R1 a 0 1
I1 a 0 1m
"#,
        );
    }
}
