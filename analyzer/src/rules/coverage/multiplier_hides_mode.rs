//! `multiplier-hides-mode`: `m=` makes identical copies whose odd modes are not seen.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("multiplier-hides-mode"),
    family: Family::Coverage,
    severity: Severity::Info,
    summary: "`m=` makes identical copies whose odd modes are not seen",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports an instance or device with `m=` above one that holds an active source.

## Why it matters
`m` copies are computed as one part of m times the admittance. Modes in which the copies work against each
other (odd modes, a frequent cause of oscillation in combined stages) do not exist in that circuit.

## Method and source
Superposition of identical parts in parallel; odd-mode oscillation is common practice.

## Limits
None.

## Example
`x1 stands for 4 copies in parallel: odd modes between them are not seen`

## Fix
Write the copies out, with the lines that connect them.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    for (name, span, copies) in &context.block.multiplied {
        let message = format!(
            "`{name}` stands for {copies} copies in parallel: odd modes between them are not seen"
        );
        out.push(context.finding(&RULE, *span, message));
    }
}
