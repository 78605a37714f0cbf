//! `methods-disagree`: two methods contradict each other.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::Doubt;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("methods-disagree"),
    family: Family::Stability,
    severity: Severity::Error,
    summary: "two methods contradict each other",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports that the natural modes and the phase of the determinant give different numbers of right-half-plane
modes, with the sources on or off.

## Why it matters
One of the two is wrong, so the block is undetermined.

## Method and source
Z, the right-half-plane modes, must equal the encirclements of the normalized determinant plus P, the
right-half-plane modes with the sources off (argument principle).

## Limits
None: this is the safety net of the others.

## Example
`2 right-half-plane modes, but the phase of the determinant counts 0`

## Fix
Look for extreme values (below 1e-18, above 1e15) in the block; if there are none, report the netlist as a
fault of squeg.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let doubt = context.screen.and_then(|screen| screen.doubt.as_ref());
    if let Some(Doubt::Disagree(text)) = doubt {
        out.push(context.finding(&RULE, context.block.span, text.clone()));
    }
}
