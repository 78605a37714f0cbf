//! `block-undetermined`: a block about which nothing certain can be said.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::{Doubt, Verdict};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("block-undetermined"),
    family: Family::Coverage,
    severity: Severity::Error,
    summary: "a block about which nothing certain can be said",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports that a block has no verdict, with the reason.

## Why it matters
Silence would read as success. What cannot be computed is said.

## Method and source
A verdict needs every part of the block, a system with a solution, and methods that agree.

## Limits
Findings that were made all the same stay; a mode that is seen to grow makes the block unstable.

## Example
`block driver: M1 is a MOS field-effect transistor whose model is not computed yet`

## Fix
The message names the way out, such as a stand-in by `*~ device`.
";

/// A contradiction between the methods is `methods-disagree`, when nothing else is wrong.
fn is_told_otherwise(context: &BlockContext<'_>) -> bool {
    let doubt = context.screen.and_then(|screen| screen.doubt.as_ref());
    matches!(doubt, Some(Doubt::Disagree(_))) && context.block.gaps.is_empty()
}

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    if context.verdict != Verdict::Undetermined || is_told_otherwise(context) {
        return;
    }
    let why = context.why.unwrap_or("no reason is known");
    let message = format!("block `{}` is undetermined: {why}", context.block.name);
    let mut found = context.finding(&RULE, context.block.span, message);
    for gap in context.block.gaps.iter().take(8) {
        found = found.also(gap.span, gap.reason.clone());
    }
    out.push(found);
}
