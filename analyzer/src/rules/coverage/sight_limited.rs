//! `sight-limited`: a device is known at its terminals only.

use crate::circuit::PartKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("sight-limited"),
    family: Family::Coverage,
    severity: Severity::Info,
    summary: "a device is known at its terminals only",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a part of a block that is data at its terminals, so that the sources inside it are not accessible.

## Why it matters
Switching sources off is then only possible at the terminals, and the normalized determinant may be blind
to an instability inside the part.

## Method and source
Counter-examples of the device-terminal form of the normalized determinant are derived in the test cases.

## Limits
None.

## Example
`q1 is known at its terminals only`

## Fix
Give the small-signal equivalent by `*~ device q1 gm=..`.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    for (id, part) in context.block.circuit.numbered_parts() {
        let is_data = matches!(&part.kind, PartKind::NotComputed { reason, .. } if is_data(reason, &part.name));
        if !is_data {
            continue;
        }
        let Some(span) = context.part_span(id) else {
            continue;
        };
        let name = part.name.trim_end_matches(".data");
        let message = format!(
            "`{name}` is known at its terminals only: the sources inside it cannot be switched off"
        );
        out.push(context.finding(&RULE, span, message));
    }
}

/// Data blocks: stand-ins by `data=` and S-parameter blocks.
fn is_data(reason: &str, name: &str) -> bool {
    name.ends_with(".data") || reason.starts_with("an S-parameter block")
}
