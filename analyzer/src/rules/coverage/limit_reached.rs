//! `limit-reached`: a limit of the product cut something off.

use crate::elaborate::{IssueKind, LimitKey};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("limit-reached"),
    family: Family::Coverage,
    severity: Severity::Warning,
    summary: "a limit of the product cut something off",
    explanation: EXPLANATION,
    text: Some(check_text),
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports that a limit of the configuration was reached, and its key.

## Why it matters
What lies beyond was not read or not computed.

## Method and source
The limits keep time and memory bounded for any text: states for exact modes 1,500 (beyond: counted by the
phase of the determinant), flat parts 1,000,000, nesting 64, 64 MiB a file.

## Limits
None.

## Example
`circuit cut off at 1000000 parts (limit parts)`

## Fix
Raise the key under `[limits]` of the configuration, or find what makes the circuit so large.
";

fn check_text(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    context.issues(&RULE, out, |issue| match &issue.kind {
        IssueKind::LimitReached { key, limit } => Some(format!(
            "{} (limit `{}` = {limit})",
            match key {
                LimitKey::Parts => "the circuit is cut off here: too many parts",
                LimitKey::Nesting => "this is not entered: nested too deep",
                LimitKey::States => "modes are counted, not computed: too many states",
                LimitKey::FileBytes => "the file is not read: too large",
            },
            key.key()
        )),
        _ => None,
    });
}

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let states = context.screen.and_then(|screen| screen.too_many_states);
    if let Some(states) = states {
        let message = format!(
            "block `{}` has {states} states: its modes are counted by the phase of the determinant, not computed (limit `{}` = {})",
            context.block.name,
            LimitKey::States.key(),
            context.text.config.limits.states
        );
        out.push(context.finding(&RULE, context.block.span, message));
    }
}
