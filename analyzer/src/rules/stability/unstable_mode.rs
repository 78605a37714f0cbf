//! `unstable-mode`: a natural mode grows: the block oscillates or latches.

use crate::circuit::{PartId, PartKind};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{BlockContext, Family, Rule};
use crate::stability::{DrivingPoint, ListedMode, Screen, Verdict};
use crate::text::Span;
use crate::units::{hertz, hertz_range, seconds};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unstable-mode"),
    family: Family::Stability,
    severity: Severity::Error,
    summary: "a natural mode grows: the block oscillates or latches",
    explanation: EXPLANATION,
    text: None,
    screen: Some(check),
};

const EXPLANATION: &str = "\
## What it does
Reports every natural mode of the terminated block that grows, on the active part with the largest
share in it (controlled source, device or negative part). The message carries frequency, growth as a
time constant, the strongest node, and the range in which a node's driving-point conductance is negative
around it.

## Why it matters
A growing mode starts from noise and ends as oscillation, or as a latched operating point where its
frequency is zero.

## Method and source
All finite natural frequencies of the small-signal system (exact for lumped circuits), counted a second
time by the phase of the determinant; both counts must agree. Shares are |ds/d ln value| by the adjoint
(left and right null vectors of the system at the mode).

## Limits
A linear small-signal screen at the given bias, with the given terminations. It does not replace
large-signal analysis, measurement, radio licensing or the judgement of a qualified engineer.

## Example
`3.37 MHz natural mode grows with time constant 2.1 us, driven by m1.gm, strongest at node gate`

## Fix
Add loss where the mode is strongest (gate or base stopper, damped choke, odd-mode resistor between
paralleled devices), or take away what couples the part to itself; then screen again.
";

/// Modes nearer to each other than this (over |s|), with the same culprit, are told as one.
const ALIKE: f64 = 1e-3;

fn check(context: &BlockContext<'_>, out: &mut Vec<Finding>) {
    let Some(screen) = context.screen else { return };
    // One count alone is no verdict: `methods-disagree` says so.
    if context.verdict != Verdict::Unstable {
        return;
    }
    if screen.growing().next().is_none() {
        out.push(counted_only(context, screen));
        return;
    }
    let mut told: Vec<(Span, &ListedMode, usize)> = Vec::new();
    // A delay loop has modes without end, all of one cause.
    let delayed = screen.delays_followed_hz.is_some();
    for listed in screen.growing() {
        let span = culprit(context, listed)
            .and_then(|part| context.part_span(part))
            .unwrap_or(context.block.span);
        let s = listed.mode.s_rad_per_s;
        let same = told.iter_mut().find(|(place, other, _)| {
            let alike = (other.mode.s_rad_per_s - s).norm() <= ALIKE * s.norm();
            *place == span && (alike || delayed)
        });
        match same {
            Some((_, _, count)) => *count += 1,
            None => told.push((span, listed, 1)),
        }
    }
    for (span, listed, count) in told {
        out.push(finding(context, span, listed, count));
    }
}

/// Modes that the phase of the determinant counts and nothing has found.
fn counted_only(context: &BlockContext<'_>, screen: &Screen) -> Finding {
    let count = screen.unstable_modes().unwrap_or(0);
    let message = format!(
        "{count} natural modes grow, counted by the phase of the determinant; where they are was not found"
    );
    let mut found = context.finding(&RULE, context.block.span, message);
    found.values = vec![("modes", count as f64)];
    found
}

/// The active part with the largest share; of equal ones the first in the circuit.
fn culprit(context: &BlockContext<'_>, listed: &ListedMode) -> Option<PartId> {
    const TIE: f64 = 1e-6;
    let screen = context.screen?;
    let active = |id: PartId| screen.active.sources.contains(&id) || is_negative(context, id);
    let mut candidates = listed.shares.parts.iter().filter(|(id, _)| active(*id));
    let (first, best) = candidates.next().copied()?;
    let equal = candidates.filter(|(_, share)| *share >= best * (1.0 - TIE));
    Some(
        equal
            .map(|(id, _)| *id)
            .chain([first])
            .min()
            .unwrap_or(first),
    )
}

/// Whether a part is negative by its own value.
fn is_negative(context: &BlockContext<'_>, id: PartId) -> bool {
    match context.block.circuit.part(id).map(|part| &part.kind) {
        Some(PartKind::Resistor { ohm, .. }) => *ohm < 0.0,
        Some(PartKind::Capacitor { farad, .. }) => *farad < 0.0,
        Some(PartKind::Inductor { henry, .. }) => *henry < 0.0,
        Some(PartKind::Coupling { factor, .. }) => factor.abs() > 1.0,
        _ => false,
    }
}

fn finding(context: &BlockContext<'_>, span: Span, listed: &ListedMode, count: usize) -> Finding {
    let (hz, growth) = (listed.mode.hz(), listed.mode.growth_per_s());
    let kind = match (hz > 0.0, count) {
        (true, 1) => format!("{} natural mode grows", hertz(hz)),
        (true, n) => format!("{n} natural modes grow, the fastest at {}", hertz(hz)),
        (false, 1) => "real natural mode (0 Hz) grows".to_owned(),
        (false, n) => format!("{n} real natural modes (0 Hz) grow"),
    };
    let mut message = format!("{kind} with time constant {}", seconds(1.0 / growth));
    if let Some(part) = culprit(context, listed) {
        message += &format!(", driven by `{}`", context.part_name(part));
    }
    if let Some((node, _)) = listed.shares.nodes.first() {
        message += &format!(", strongest at node `{}`", context.node_name(*node));
    }
    let range = range_around(context, listed);
    match &range {
        Some((point, [low, high])) => {
            let node = context.node_name(point.node);
            message += &format!(
                "; conductance at node `{node}` negative {}",
                hertz_range(*low, *high)
            );
        }
        None => message += "; no node shows negative conductance there",
    }
    let mut found = context.finding(&RULE, span, message);
    found.node = listed
        .shares
        .nodes
        .first()
        .map(|(node, _)| context.node_name(*node).to_owned());
    found.ranges_hz = range.iter().map(|(_, range)| *range).collect();
    found.values = vec![
        ("hz", hz),
        ("growth_per_s", growth),
        ("time_constant_sec", 1.0 / growth),
        ("damping", listed.mode.damping()),
        ("modes", count as f64),
    ];
    add_related(context, listed, &mut found);
    found
}

/// Instance cards around the culprit, other active parts, the strongest node, the block mark.
fn add_related(context: &BlockContext<'_>, listed: &ListedMode, found: &mut Finding) {
    const MOST: usize = 4;
    if let Some(origin) = culprit(context, listed).and_then(|part| context.block.map.part(part)) {
        for instance in context.block.map.instance_path(origin.instance) {
            let message = format!("inside instance `{}`", instance.path);
            *found = found.clone().also(instance.span, message);
        }
    }
    let mut places = vec![found.span];
    for (part, share) in listed.shares.parts.iter().take(MOST) {
        let Some(span) = context.part_span(*part) else {
            continue;
        };
        if places.contains(&span) {
            continue;
        }
        places.push(span);
        let message = format!(
            "`{}` takes part with a share of {:.0} %",
            context.part_name(*part),
            share * 100.0
        );
        *found = found.clone().also(span, message);
    }
    if let Some((node, _)) = listed.shares.nodes.first() {
        let message = format!(
            "node `{}`, where the mode is strongest",
            context.node_name(*node)
        );
        *found = found.clone().also_maybe(context.node_span(*node), &message);
    }
    let evidence = match context
        .screen
        .and_then(|screen| screen.determinant.as_ref())
    {
        Some(determinant) => match (determinant.turns(), determinant.off_roots) {
            (Some(turns), Some(off)) => format!(
                "block `{}`: the normalized determinant confirms it ({turns} clockwise encirclements, {off} unstable modes with the sources off)",
                context.block.name
            ),
            _ => format!(
                "block `{}`: the phase of the determinant confirms it",
                context.block.name
            ),
        },
        None => format!("block `{}`", context.block.name),
    };
    *found = found.clone().also(context.block.span, evidence);
}

/// The range of negative conductance that holds the mode, at the node that takes part most.
fn range_around<'a>(
    context: &BlockContext<'a>,
    listed: &ListedMode,
) -> Option<(&'a DrivingPoint, [f64; 2])> {
    let hz = listed.mode.hz();
    let driving = &context.screen?.driving;
    let around = |point: &'a DrivingPoint| {
        let range = point.ranges_hz.iter().find(|[low, high]| {
            // A real mode has no frequency: the range that starts at the sweep's low end shows it.
            let low_end = hz == 0.0 && *low <= context.screen.map_or(0.0, |s| s.sweep_hz[0]);
            low_end || (*low <= hz && hz <= *high)
        })?;
        Some((point, *range))
    };
    listed
        .shares
        .nodes
        .iter()
        .filter_map(|(node, _)| driving.iter().find(|point| point.node == *node))
        .find_map(around)
        .or_else(|| driving.iter().find_map(around))
}
