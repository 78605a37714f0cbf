//! `startup-condition`: a node meets the start-up condition though no mode is seen to grow.

use super::negative_conductance::ending;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::Verdict;
use crate::units::{engineering, hertz};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("startup-condition"),
    family: Family::Stability,
    severity: Severity::Info,
    summary: "a node meets the start-up condition though no mode is seen to grow",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a node at which the driving-point susceptance rises through zero while the conductance is
negative, in a block that is not found unstable. In an unstable block the growing mode is reported instead.

## Why it matters
By itself the condition says that an oscillation can start. Where all modes are damped it shows how far a
one-node test would mislead, and that the loop is conditionally stable.

## Method and source
K. Kurokawa, Bell System Technical Journal 48 (1969), from memory; the small-signal reduction is common
practice.

## Limits
Neither sufficient nor necessary; the verdict comes from the natural modes.

## Example
`start-up condition met at node n at 2.83 kHz (-588 S); all natural modes damped as terminated`

## Fix
None is needed while all modes are damped. Check the gain margin: such a loop may oscillate when gain falls.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let Some(screen) = context.screen else { return };
    if context.verdict == Verdict::Unstable {
        return;
    }
    let meets = screen
        .driving
        .iter()
        .filter(|point| !point.startup_hz.is_empty())
        .min_by(|a, b| a.worst_siemens.total_cmp(&b.worst_siemens));
    let (Some(point), Some(hz)) = (meets, meets.and_then(|p| p.startup_hz.first())) else {
        return;
    };
    let name = context.node_name(point.node);
    let message = format!(
        "start-up condition met at node {name} at {} (worst conductance there {}){}",
        hertz(*hz),
        engineering(point.worst_siemens, "S"),
        ending(context.verdict, &[])
    );
    let span = context.node_span(point.node).unwrap_or(context.block.span);
    let mut found = context.finding(&RULE, span, message);
    found.node = Some(name.to_owned());
    found.ranges_hz = point.ranges_hz.clone();
    found.values = vec![("startup_hz", *hz)];
    out.push(found.also(
        context.block.span,
        format!("block `{}`", context.block.name),
    ));
}
