//! `passive-claim-fails`: sources said to model a passive part are not passive.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("passive-claim-fails"),
    family: Family::Coverage,
    severity: Severity::Warning,
    summary: "sources said to model a passive part are not passive",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Checks the sources named by `*~ passive` and reports the claim when they can deliver power.

## Why it matters
Sources that stay on in the reference network must be passive, or the normalized determinant proves less.

## Method and source
The symmetric matrix of the power that the sources absorb must have no negative eigenvalue.

## Limits
The current of an E or H output must flow through a V source that an F or H of the set senses; otherwise
passivity cannot be shown.

## Example
`G1, G2 are not passive: they can deliver power`

## Fix
Correct the values (equal and opposite for a gyrator, equal for a transformer), or drop the claim.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let Some(screen) = context.screen else { return };
    for index in &screen.active.failed_claims {
        let Some(claim) = context.block.passive_claims.get(*index) else {
            continue;
        };
        let names: Vec<String> = claim
            .parts
            .iter()
            .map(|part| format!("`{}`", context.part_name(*part)))
            .collect();
        let message = format!(
            "{} cannot be shown to be passive together; they are treated as active",
            names.join(", ")
        );
        out.push(context.finding(&RULE, claim.span, message));
    }
}
