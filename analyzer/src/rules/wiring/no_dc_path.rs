//! `no-dc-path`: nodes without a path for direct current to ground.

use super::{current_source_cut, single_connection};
use crate::circuit::{NodeId, dc_islands};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::views::{View, whole_views};
use crate::rules::{BlockContext, Family, Rule, TextContext};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("no-dc-path"),
    family: Family::Wiring,
    severity: Severity::Warning,
    summary: "nodes without a path for direct current to ground",
    explanation: EXPLANATION,
    text: Some(check),
    screen: Some(check_block),
};

const EXPLANATION: &str = "\
## What it does
Reports a group of nodes that no resistor, inductor, source of voltage or device connects to ground, and
names up to six of them.

## Why it matters
Their operating point is not determined; a simulator stops there or adds a conductance of its own. In the
small-signal system the group has a natural mode at s = 0, which is not counted as an oscillation and says
nothing about stability.

## Method and source
Connected components over the parts that conduct direct current (union-find; Tarjan, *Journal of the ACM*
22, 1975, from memory): R, L, V, E, H, a G across its own nodes, and parts that are not computed.

## Limits
In a block, ports, rails and ties conduct; where blocks are marked at the top level, the top level is
looked at with their terminations. Pins of which is not said how they are terminated, and nodes on cards that
cannot be read, are left to their own rules, as is a node with one terminal (`single-connection`)
and one that only current sources feed (`current-source-cut`). The same place is told once.

## Example
```
C1 in gate 10p
C2 gate 0 1p
```

## Fix
Add the bias resistor that is missing, or a large resistor to ground.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let views = whole_views(context);
    let islands: Vec<_> = views.iter().map(|view| dc_islands(view.circuit)).collect();
    if islands.iter().all(Vec::is_empty) {
        return;
    }
    let lone = single_connection::places(context);
    let mut told: HashSet<Span> = HashSet::new();
    for (view, islands) in views.iter().zip(islands) {
        let cut: HashSet<NodeId> = current_source_cut::cuts(view.circuit)
            .into_iter()
            .flat_map(|cut| cut.into_nodes())
            .collect();
        for nodes in islands {
            let Some(first) = nodes.first().copied() else {
                continue;
            };
            let Some(place) = view.map.node(first) else {
                continue;
            };
            let alone = nodes.len() == 1 && lone.around(place).is_some();
            let known = alone || cut.contains(&first) || view.is_doubtful(&nodes);
            if !known && told.insert(place) {
                out.push(finding(view, &nodes, place));
            }
        }
    }
}

fn finding(view: &View<'_>, nodes: &[NodeId], place: Span) -> Finding {
    let names: Vec<&str> = nodes.iter().map(|node| view.node_name(*node)).collect();
    let message = match names.as_slice() {
        [first, others @ ..] if !others.is_empty() => {
            let shown: Vec<String> = others.iter().take(5).map(|n| format!("`{n}`")).collect();
            let more = match others.len() - shown.len() {
                0 => String::new(),
                more => format!(" and {more} more"),
            };
            let others = shown.join(", ");
            format!("no DC path to ground from node `{first}`, nor from {others}{more}")
        }
        _ => format!("no DC path to ground from node `{}`", names.join("")),
    };
    let mut finding = RULE.finding(place, message);
    finding.node = names.first().map(|name| (*name).to_owned());
    view.place(finding)
}

/// Modes at s = 0 beyond those of the nodes without a path.
fn check_block(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let Some(modes) = context.screen.and_then(|screen| screen.modes.as_ref()) else {
        return;
    };
    let explained = dc_islands(&context.block.circuit).len();
    let rest = modes.at_zero.saturating_sub(explained);
    if rest > 0 {
        let message = format!(
            "{rest} natural modes at 0 Hz neither grow nor decay: a loop of inductors without resistance, or charge that no path drains"
        );
        out.push(context.finding(&RULE, context.block.span, message));
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
V1 in 0 1
C1 in gate 10p
      ^^^^ no-dc-path
C2 gate 0 1p
R1 in 0 50
",
        );
        check(
            "\
title
.subckt amp in out
*~ block AMP in=in out=out
C1 in g 1p
      ^ no-dc-path
R1 g g2 10
G1 out 0 g2 0 10m
R2 out 0 1k
.ends
V1 a 0 1
R1 a b 50
X1 b c amp
X2 c d amp
R2 d 0 50
",
        );
    }

    #[test]
    fn names_are_listed_and_counted() {
        let chain: String = (1..8)
            .map(|i| format!("R{i} n{i} n{} 1\n", i + 1))
            .collect();
        let text = format!("title\nV1 a 0 1\nC1 a n1 1p\nC2 n8 0 1p\nR9 a 0 1\n{chain}");
        let found = findings(&text, "no-dc-path");
        assert_eq!(found.len(), 1);
        assert_eq!(
            found[0].message,
            "no DC path to ground from node `n1`, nor from `n8`, `n2`, `n3`, `n4`, `n5` and 2 more"
        );
        assert_eq!(found[0].node.as_deref(), Some("n1"));
    }

    #[test]
    fn a_port_is_a_path_for_its_block() {
        check("title\n*~ block amp in=a\nC1 a 0 1p\nC2 a 0 2p\n");
        check(
            "\
title
V1 b 0 1
R1 b 0 1k
C1 a b 1p
   ^ no-dc-path
C2 a 0 2p
",
        );
    }

    #[test]
    fn what_another_rule_tells_is_not_told_again() {
        check(
            "\
title
V1 b 0 1
R1 b 0 1k
C1 a b 1p
   ^ single-connection
",
        );
        check(
            "title\n.subckt amp in vdd\n*~ block AMP in=in\nR1 in 0 1k\nC1 vdd 0 1p\nR2 vdd n 1\nC2 n 0 1p\n.ends\n",
        );
        check(
            "\
title
V1 b 0 1
R1 b 0 1k
C1 a b 1p
C2 a 0 1p
R2 a 0
^^ unreadable-card
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\nV1 in 0 1\nC1 in gate 10p\nC2 gate 0 1p\nR1 gate 0 1meg\n");
        check("title\nV1 in 0 1\nC1 in d 10p\nG1 d 0 d 0 1m\n");
        check("title\nV1 in 0 1\nC1 in d 10p\nM1 d in 0 0 nch\n.model nch nmos\n");
    }
}
