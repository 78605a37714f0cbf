//! `sweep-too-narrow`: an oscillatory mode of an active source lies outside the sweep asked for.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::LISTED_DAMPING;
use crate::units::{hertz, hertz_range};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("sweep-too-narrow"),
    family: Family::Coverage,
    severity: Severity::Warning,
    summary: "an oscillatory mode of an active source lies outside the sweep asked for",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports a mode of damping below 0.5 in which an active source takes part, outside an explicit `sweep=`.

## Why it matters
Driving points and two-port factors are not looked at there; most oscillations are far from the band.

## Method and source
Natural modes have no sweep: they are all known.

## Limits
Only an explicit sweep is checked; the default one is widened to such modes.

## Example
`38.2 GHz mode of damping 0.11 lies outside the sweep from 1.00 MHz to 10.0 GHz`

## Fix
Widen `sweep=`, or leave it out.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let (Some(screen), Some([low, high])) = (context.screen, context.block.sweep_hz) else {
        return;
    };
    let outside = screen.listed.iter().find(|listed| {
        let hz = listed.mode.hz();
        let seen = hz >= low && hz <= high;
        listed.active && hz > 0.0 && !seen && listed.mode.damping() < LISTED_DAMPING
    });
    let Some(listed) = outside else { return };
    let message = format!(
        "{} mode of damping {:.2} lies outside the sweep {}",
        hertz(listed.mode.hz()),
        listed.mode.damping(),
        hertz_range(low, high)
    );
    let mut found = context.finding(&RULE, context.block.span, message);
    found.values = vec![("hz", listed.mode.hz()), ("damping", listed.mode.damping())];
    out.push(found);
}
