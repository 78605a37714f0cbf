//! Systems with delays: transmission lines and delayed sources. Their modes are infinitely many, so
//! none of the exact counts holds; what is said is said of a band.
//!
//! Z, the right-half-plane modes, is the number of encirclements of the normalized determinant: with
//! the active sources off the network is passive part by part, so P = 0. The encirclements are
//! certified as far as the determinants were followed; above, the ratio has become real and stays so
//! for an octave. The modes themselves are sought by Newton's method from the points where the
//! determinant turns.

use super::active::ActiveSet;
use super::determinant::{Determinant, DeterminantFailure, in_words};
use super::modes::{AXIS_TOLERANCE, LISTED_DAMPING, Mode, Modes};
use super::probe::{Solver, hertz_of, normalised_rad};
use crate::assembly::rad_per_s;
use crate::circuit::{Circuit, PartId, PartKind};
use crate::linalg::band::{BandCount, turns_in_band};
use crate::linalg::error::NumericError;
use crate::linalg::search::roots_near;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// What was found of a system with delays.
#[derive(Clone, PartialEq, Debug)]
pub struct Delayed {
    /// Modes that were found, growth falling: those of little damping in the band, and growing ones.
    pub modes: Modes,
    /// The count, or why there is none.
    pub counted: Result<Determinant, DeterminantFailure>,
    /// Ends of what was followed, hertz.
    pub band_hz: [f64; 2],
}

/// Seeds that are followed at the most.
const SEEDS: usize = 600;

/// Counts and finds the modes of a system with delays over a band (hertz).
///
/// # Errors
/// [`NumericError::Stopped`], and what factorisation reports.
pub(super) fn judge(
    solver: &Solver,
    circuit: &Circuit,
    off: &[PartId],
    active: &ActiveSet,
    band_hz: [f64; 2],
    stop: &dyn Fn() -> bool,
) -> Result<Delayed, NumericError> {
    let band = band_hz.map(normalised_rad);
    let seeds = first_seeds(circuit, band);
    let count = match turns_in_band(&solver.plan, &solver.on, &solver.off, band, &seeds, stop) {
        Ok(count) => count,
        Err(failure) => {
            let failure = in_words(&failure);
            if failure.stopped {
                return Err(NumericError::Stopped);
            }
            return Ok(Delayed {
                modes: Modes::default(),
                counted: Err(failure),
                band_hz,
            });
        }
    };
    let modes = listed(search(solver, &count, stop)?);
    let left_on = first_active_part_left(circuit, off, active);
    Ok(Delayed {
        band_hz: [hertz_of(count.low), hertz_of(count.high)],
        counted: verdict_on(left_on, &count, modes.unstable()),
        modes,
    })
}

/// Growing modes of a system without delays whose modes are too many to be computed: those that are
/// found within a band (hertz) until `counted` are.
///
/// # Errors
/// [`NumericError::Stopped`], and what factorisation reports.
pub(super) fn growing_modes(
    solver: &Solver,
    band_hz: [f64; 2],
    counted: usize,
    stop: &dyn Fn() -> bool,
) -> Result<Modes, NumericError> {
    let [low, high] = band_hz.map(normalised_rad);
    let count = BandCount {
        turns: counted as f64,
        low,
        high,
        settled: true,
        evaluations: 0,
        near: Vec::new(),
    };
    let mut modes = listed(search(solver, &count, stop)?);
    modes.list.retain(|mode| mode.damping() < -AXIS_TOLERANCE);
    Ok(modes)
}

/// The count as a determinant's, when it can be one.
fn verdict_on(
    left_on: Option<&str>,
    count: &BandCount,
    found: usize,
) -> Result<Determinant, DeterminantFailure> {
    let failure = |reason: String, failed_hz: Option<[f64; 2]>| DeterminantFailure {
        stopped: false,
        reason,
        failed_hz,
        evaluations: count.evaluations,
    };
    if let Some(part) = left_on {
        return Err(failure(
            format!(
                "with delays the modes are counted against a passive network, but with the active sources off `{part}` is not passive"
            ),
            None,
        ));
    }
    let high_hz = hertz_of(count.high);
    if !count.settled && found > 0 && count.turns > 0.5 {
        // Modes that grow, and a phase that has turned for them: how many lie above is not known.
        return Ok(Determinant {
            on_roots: found,
            off_roots: None,
            evaluations: count.evaluations,
            remainder: (count.turns - count.turns.round()).abs(),
            relied_above_hz: Some(high_hz),
        });
    }
    if !count.settled {
        return Err(failure(
            format!(
                "with delays the normalized determinant does not settle by {}",
                crate::units::hertz(high_hz)
            ),
            Some([high_hz, high_hz]),
        ));
    }
    let whole = count.turns.round();
    if (count.turns - whole).abs() > 0.1 || whole < 0.0 {
        let reason = format!(
            "the phase of the determinant gives {:.2} modes, which is no whole number",
            count.turns
        );
        return Err(failure(reason, None));
    }
    Ok(Determinant {
        on_roots: whole as usize,
        off_roots: Some(0),
        evaluations: count.evaluations,
        remainder: (count.turns - whole).abs(),
        relied_above_hz: None,
    })
}

/// Frequencies at which lines and delays resonate first, and a coarse grid.
fn first_seeds(circuit: &Circuit, band: [f64; 2]) -> Vec<f64> {
    let mut seeds: Vec<f64> = circuit
        .parts
        .iter()
        .map(|part| part.kind.delay_s())
        .filter(|delay_s| *delay_s > 0.0)
        .flat_map(|delay_s| [0.25, 0.5].map(|turns| normalised_rad(turns / delay_s)))
        .collect();
    seeds.extend(grid(band, 6.0));
    seeds
}

fn grid([low, high]: [f64; 2], per_decade: f64) -> Vec<f64> {
    let steps = ((high / low).log10() * per_decade).ceil().max(1.0) as usize;
    (0..=steps)
        .map(|k| low * (high / low).powf(k as f64 / steps as f64))
        .collect()
}

/// Roots near the axis, then, while the count says that there are more to the right, further inside.
fn search(
    solver: &Solver,
    count: &BandCount,
    stop: &dyn Fn() -> bool,
) -> Result<Vec<Complex64>, NumericError> {
    let damping = |s: &Complex64| -s.re / s.norm();
    let mut near = count.near.clone();
    near.retain(|s| s.is_finite() && damping(s) < LISTED_DAMPING);
    near.sort_by(|a, b| damping(a).total_cmp(&damping(b)));
    near.truncate(SEEDS);
    for share in [-0.35, -0.1] {
        near.extend(inside(count, share, 12.0));
    }
    let (plan, on) = (&solver.plan, &solver.on);
    let mut roots = roots_near(plan, on, None, &near, &[], stop)?;
    let growing = |roots: &[Complex64]| -> usize {
        let right = roots.iter().filter(|s| damping(s) < -AXIS_TOLERANCE);
        right.map(|s| if s.im > 0.0 { 2 } else { 1 }).sum()
    };
    for share in [0.05, 0.2, 0.5, 0.8, 1.0] {
        if growing(&roots) as f64 >= count.turns.round() {
            break;
        }
        for other in [None, Some(&solver.off)] {
            let seeds = inside(count, share, 10.0);
            let more = roots_near(plan, on, other, &seeds, &roots, stop)?;
            roots.extend(more);
        }
    }
    roots.retain(|s| damping(s) < LISTED_DAMPING && s.norm() <= count.high);
    Ok(roots)
}

/// Points of one damping (-`share`) over all that was followed.
fn inside(count: &BandCount, share: f64, per_decade: f64) -> Vec<Complex64> {
    let height = (1.0 - share * share).max(0.0).sqrt();
    grid([count.low, count.high], per_decade)
        .into_iter()
        .map(|w| w * Complex64::new(share, height))
        .collect()
}

fn listed(roots: Vec<Complex64>) -> Modes {
    let mut list: Vec<Mode> = roots
        .into_iter()
        .map(|s| Mode {
            s_rad_per_s: Complex64::new(rad_per_s(s.re), rad_per_s(s.im)),
            normalised: s,
            converged: true,
        })
        .collect();
    list.sort_by(|a, b| b.growth_per_s().total_cmp(&a.growth_per_s()));
    Modes { list, at_zero: 0 }
}

/// The first part that is not passive although the sources `off` are.
fn first_active_part_left<'a>(
    circuit: &'a Circuit,
    off: &[PartId],
    active: &ActiveSet,
) -> Option<&'a str> {
    let negative = circuit.numbered_parts().find(|(id, part)| {
        !off.contains(id)
            && match &part.kind {
                PartKind::Resistor { ohm, .. } => *ohm < 0.0,
                PartKind::Capacitor { farad, .. } => *farad < 0.0,
                PartKind::Inductor { henry, .. } => *henry < 0.0,
                _ => active.sources.contains(id),
            }
    });
    let (_, part) = negative.or_else(|| coupling_in_excess(circuit))?;
    Some(&part.name)
}

/// A coupling when the coupled inductances together are not positive semidefinite.
fn coupling_in_excess(circuit: &Circuit) -> Option<(PartId, &crate::circuit::Part)> {
    let mut inductors: Vec<PartId> = circuit
        .parts
        .iter()
        .filter_map(|part| match &part.kind {
            PartKind::Coupling { inductors, .. } => Some(*inductors),
            _ => None,
        })
        .flatten()
        .collect();
    inductors.sort_unstable();
    inductors.dedup();
    let mut matrix: DMatrix<f64> = DMatrix::identity(inductors.len(), inductors.len());
    let mut last = None;
    for (id, part) in circuit.numbered_parts() {
        if let PartKind::Coupling {
            inductors: [a, b],
            factor,
        } = &part.kind
        {
            let at = |id: &PartId| inductors.iter().position(|other| other == id);
            if let (Some(i), Some(j)) = (at(a), at(b)) {
                matrix[(i, j)] += factor;
                matrix[(j, i)] += factor;
            }
            last = Some((id, part));
        }
    }
    let last = last?;
    let least = matrix.symmetric_eigenvalues().min();
    (least < -1e-12).then_some(last)
}
