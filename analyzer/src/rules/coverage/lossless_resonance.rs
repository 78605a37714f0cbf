//! `lossless-resonance`: a resonance without any loss, which the active sources do not touch.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::Verdict;
use crate::units::hertz;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("lossless-resonance"),
    family: Family::Coverage,
    severity: Severity::Info,
    summary: "a resonance without any loss, which the active sources do not touch",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a natural mode on the imaginary axis that is there with the sources off as well.

## Why it matters
It neither grows nor decays in the model; a real part always has loss. It makes a block marginal.

## Method and source
Natural modes with the sources on and off.

## Limits
A mode on the axis that moves when the sources are switched off is reported as an error of the block
(marginal for a reason that any change of value decides).

## Example
`31.8 MHz resonance has no loss`

## Fix
Give the inductor or capacitor its series resistance.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let Some(screen) = context.screen else { return };
    for listed in screen.resting() {
        let part = listed.shares.parts.first().map(|(part, _)| *part);
        let span = part
            .and_then(|part| context.part_span(part))
            .unwrap_or(context.block.span);
        let (severity, message) = if listed.unmoved {
            let severity = if context.verdict == Verdict::Marginal {
                Severity::Warning
            } else {
                Severity::Info
            };
            (
                severity,
                format!("{} resonance has no loss", hertz(listed.mode.hz())),
            )
        } else {
            let message = format!(
                "{} natural mode neither grows nor decays, and the active sources hold it there",
                hertz(listed.mode.hz())
            );
            (Severity::Error, message)
        };
        let mut found = context.finding_as(&RULE, severity, span, message);
        found.node = listed
            .shares
            .nodes
            .first()
            .map(|(node, _)| context.node_name(*node).to_owned());
        found.values = vec![("hz", listed.mode.hz())];
        out.push(found.also(
            context.block.span,
            format!("block `{}`", context.block.name),
        ));
    }
}
