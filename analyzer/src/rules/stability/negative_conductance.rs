//! `negative-conductance`: a node has negative driving-point conductance.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::{DrivingPoint, Verdict};
use crate::units::{engineering, hertz, hertz_range};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("negative-conductance"),
    family: Family::Stability,
    severity: Severity::Info,
    summary: "a node has negative driving-point conductance",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports the node of a block with the most negative driving-point conductance, everything connected, with
its frequency range; the other nodes with a negative range are named as related places.

## Why it matters
A negative conductance can undamp a resonance that is attached there: a cable, a filter, a supply lead.

## Method and source
Y = 1/Z with Z the diagonal of the inverse of the system matrix, at every node; edges of the range are
refined to a relative width of 1e-12.

## Limits
A hint and no verdict: a stable circuit may show it, and an unstable one need not (a real mode has no
start-up frequency). Nodes held by an ideal source have no driving point.

## Example
`negative driving-point conductance at node g2: -1.92 mS at 1.31 GHz, negative from 0.94 GHz to 1.72 GHz;
all natural modes damped as terminated`

## Fix
None is needed while all modes are damped; a stopper resistor or a lossy bypass removes it.
";

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    const MOST_RELATED: usize = 8;
    let Some(screen) = context.screen else { return };
    let worst = screen
        .driving
        .iter()
        .min_by(|a, b| a.worst_siemens.total_cmp(&b.worst_siemens));
    let Some(worst) = worst else { return };
    let span = context.node_span(worst.node).unwrap_or(context.block.span);
    let mut found = context.finding(&RULE, span, message(context, worst));
    found.node = Some(context.node_name(worst.node).to_owned());
    found.ranges_hz = worst.ranges_hz.clone();
    found.values = vec![
        ("worst_siemens", worst.worst_siemens),
        ("worst_hz", worst.worst_hz),
    ];
    let others = screen
        .driving
        .iter()
        .filter(|point| point.node != worst.node);
    for point in others.take(MOST_RELATED) {
        let message = format!(
            "node `{}`: {} at {}",
            context.node_name(point.node),
            engineering(point.worst_siemens, "S"),
            hertz(point.worst_hz)
        );
        found = found.also_maybe(context.node_span(point.node), &message);
    }
    found = found.also(
        context.block.span,
        format!("block `{}`", context.block.name),
    );
    out.push(found);
}

fn message(context: &BlockContext<'_>, worst: &DrivingPoint) -> String {
    let mut message = format!(
        "negative driving-point conductance at node {}: {} at {}",
        context.node_name(worst.node),
        engineering(worst.worst_siemens, "S"),
        hertz(worst.worst_hz)
    );
    let inside = worst
        .ranges_hz
        .iter()
        .find(|[low, high]| *low <= worst.worst_hz && worst.worst_hz <= *high);
    if let Some([low, high]) = inside {
        message += &format!(", negative {}", hertz_range(*low, *high));
    }
    if worst.ranges_hz.len() > 1 {
        message += &format!(" and in {} more ranges", worst.ranges_hz.len() - 1);
    }
    message + &ending(context.verdict, &worst.startup_hz)
}

/// What may be said of oscillation: only of a block that is unstable or undetermined.
pub(super) fn ending(verdict: Verdict, startup_hz: &[f64]) -> String {
    match (verdict, startup_hz.first()) {
        (Verdict::Unstable | Verdict::Undetermined, Some(hz)) => {
            format!("; oscillation can start near {}", hertz(*hz))
        }
        (Verdict::Unstable | Verdict::Undetermined, None) => String::new(),
        _ => "; all natural modes damped as terminated".to_owned(),
    }
}
