//! `no-dc-path`: nodes without a direct-current path to ground.

use crate::circuit::{NodeRef, dc_islands};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::circuits;
use crate::rules::{BlockContext, Family, Rule, TextContext};
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("no-dc-path"),
    family: Family::Wiring,
    severity: Severity::Warning,
    summary: "nodes without a direct-current path to ground",
    explanation: EXPLANATION,
    text: Some(check),
    screen: Some(check_block),
};

const EXPLANATION: &str = "\
## What it does
Reports groups of nodes that no resistor, inductor or voltage source connects to ground.

## Why it matters
Their charge is trapped: the circuit has a natural mode at s = 0, which is neither growth nor decay, and no operating point.

## Method and source
The graph of the parts that conduct direct current. In a block, modes at s = 0 that no such group explains (a loop of inductors without resistance, say) are reported at its mark.

## Limits
Parts that are not computed are taken to conduct. Circuits of blocks are looked at with their ports and rails.

## Example
```
C1 a b 1n
C2 b 0 1n
```

## Fix
Give the node a bleeder or bias resistor.
";

const MOST: usize = 6;

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        for island in dc_islands(circuit) {
            let Some(span) = island.first().and_then(|node| map.node(*node)) else {
                continue;
            };
            if !told.insert(span) {
                continue;
            }
            let name =
                |node: &crate::circuit::NodeId| circuit.node_name(NodeRef::Node(*node)).to_owned();
            let names: Vec<String> = island
                .iter()
                .take(MOST)
                .map(|n| format!("`{}`", name(n)))
                .collect();
            let more = match island.len().saturating_sub(MOST) {
                0 => String::new(),
                more => format!(" and {more} more"),
            };
            let word = if island.len() == 1 { "node" } else { "nodes" };
            let message = format!(
                "no direct-current path to ground from {word} {}{more}",
                names.join(", ")
            );
            let mut finding = RULE.finding(span, message);
            finding.node = island.first().map(name);
            out.push(finding);
        }
    }
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
            "{rest} natural modes at 0 Hz that neither grow nor decay: a loop of inductors without resistance, or charge that no path drains"
        );
        out.push(context.finding(&RULE, context.block.span, message));
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 a 0 1k
C1 a bb 1n
     ^^ no-dc-path
C2 bb 0 3n
"#,
        );
        check(
            r#"title
*~ block amp in=a
C1 a bb 1n
     ^^ no-dc-path
C2 bb cc 3n
R1 bb cc 1k
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 1k
C1 a bb 1n
C2 bb 0 3n
L1 bb 0 1u
"#,
        );
        check(
            r#"title
*~ block amp in=a out=bb
C1 a bb 1n
C2 bb a 3n
"#,
        );
    }
}
