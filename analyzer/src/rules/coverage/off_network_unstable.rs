//! `off-network-unstable`: the network is unstable even with its active sources off.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("off-network-unstable"),
    family: Family::Coverage,
    severity: Severity::Warning,
    summary: "the network is unstable even with its active sources off",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports right-half-plane modes that remain when all active sources are switched off.

## Why it matters
Then encirclements of the normalized determinant count Z - P, and a plot without encirclements does not
mean stable. squeg adds P; a plot made by hand would mislead.

## Method and source
Natural modes and phase of the determinant with the sources off.

## Limits
With `of=` only the sources of the judged instance are off: the rest may be active.

## Example
`1 unstable mode remains with all active sources off`

## Fix
Look for negative resistors, inductors or capacitors and for couplings that are not realisable.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let determinant = context
        .screen
        .and_then(|screen| screen.determinant.as_ref());
    let remaining = determinant.and_then(|d| d.off_roots).unwrap_or(0);
    if remaining == 0 {
        return;
    }
    let whose = if context.block.judged.is_some() {
        "the active sources of the judged instance off"
    } else {
        "all active sources off"
    };
    let message = match remaining {
        1 => format!("1 unstable mode remains with {whose}"),
        n => format!("{n} unstable modes remain with {whose}"),
    };
    let mut found = context.finding(&RULE, context.block.span, message);
    found.values = vec![("off_network_unstable", remaining as f64)];
    out.push(found);
}
