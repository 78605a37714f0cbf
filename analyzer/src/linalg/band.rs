//! Encirclements of the ratio of two determinants whose entries hold delays, over a band.
//!
//! Such determinants have no degree: their roots may be infinitely many, and far up the axis their
//! phase never settles. Their ratio does settle where what differs between the two has no effect any
//! more. The phase of both is followed apart by the steps of `count`, from where the ratio is real
//! below the band to where it is real and stays so above it.

use super::count::{AXIS_TOLERANCE, CountFailure, Polynomial, Sample, Walker, near_real};
use super::plan::Plan;
use super::values::Values;
use num_complex::Complex64;
use std::f64::consts::PI;

/// What was counted.
#[derive(Debug, Clone, PartialEq)]
pub struct BandCount {
    /// Clockwise encirclements of the ratio over the whole axis, before rounding; what lies outside
    /// `low..high` is taken as real.
    pub turns: f64,
    /// Lower end of what was followed.
    pub low: f64,
    /// Upper end of what was followed.
    pub high: f64,
    /// Whether the ratio is real at the upper end and stayed around that value over the last octave.
    pub settled: bool,
    /// Points at which both determinants were evaluated.
    pub evaluations: usize,
    /// Guesses of roots of the first determinant near the axis.
    pub near: Vec<Complex64>,
}

/// Phase that counts as real, radians.
const REAL: f64 = 0.1;
/// Octaves above the band that are tried.
const OCTAVES: usize = 6;
/// Points after which no further octave is tried.
const ENOUGH: usize = 60_000;

/// Follows `on` over `off` along the ray of `count` over `band` and as far beyond as needed.
/// `seeds` are w at which something is expected.
///
/// # Errors
/// See [`CountFailure`]; an interval within the band that cannot be resolved is one, a ratio that
/// does not settle above the band is not.
pub fn turns_in_band(
    plan: &Plan,
    on: &Values,
    off: &Values,
    band: [f64; 2],
    seeds: &[f64],
    stop: &dyn Fn() -> bool,
) -> Result<BandCount, CountFailure> {
    let both = [Polynomial::open(on), Polynomial::open(off)];
    let mut walker = Walker::new(plan, &both, stop);
    let (first, before) = settle_below(&mut walker, band[0])?;
    let mut last = walker.samples(&[band[1]])?.remove(0);
    let mut grid: Vec<f64> = seeds
        .iter()
        .copied()
        .filter(|w| *w > first.w && *w < last.w)
        .collect();
    grid.sort_by(f64::total_cmp);
    grid.dedup();
    let mut turned = vec![0.0; 2];
    let mut seen = walker.walk(&first, &last, &grid, &mut turned)?;
    let mut settled = false;
    for _ in 0..OCTAVES {
        let next = walker.samples(&[2.0 * last.w])?.remove(0);
        let mut further = turned.clone();
        let octave = match walker.walk(&last, &next, &[], &mut further) {
            Ok(octave) => octave,
            Err(CountFailure::Stopped) => return Err(CountFailure::Stopped),
            Err(_) => break,
        };
        settled = unreal(&next).abs() < REAL && stays(&octave, &next);
        (last, turned) = (next, further);
        seen.extend(octave);
        if settled || walker.evaluations() > ENOUGH {
            break;
        }
    }
    let total = before + (turned[0] - turned[1]) - unreal(&last);
    Ok(BandCount {
        turns: -total / PI,
        low: first.w,
        high: last.w,
        settled,
        evaluations: walker.evaluations(),
        near: seen.iter().filter_map(guess).collect(),
    })
}

/// Whether the ratio stays around its value at `end`, so that it cannot turn around the origin.
fn stays(octave: &[Sample], end: &Sample) -> bool {
    const NEAR: f64 = 0.5;
    let ratio = |sample: &Sample| sample.ln[0] - sample.ln[1];
    octave
        .iter()
        .all(|sample| ((ratio(sample) - ratio(end)).exp() - 1.0).norm() < NEAR)
}

/// Distance of the ratio's phase from a multiple of pi.
fn unreal(sample: &Sample) -> f64 {
    near_real(sample.ln[0].im - sample.ln[1].im)
}

/// Goes down until both determinants are nearly monomials and their ratio, less the powers of s, is
/// real. Returns the point and the phase there, counted from the real axis to the right of the origin:
/// roots at the origin are passed on the right.
fn settle_below(walker: &mut Walker<'_>, from: f64) -> Result<(Sample, f64), CountFailure> {
    const NEAR: f64 = 0.2;
    let ray = (1.0f64).atan2(AXIS_TOLERANCE);
    let mut at = from;
    while at > 1e-24 {
        let sample = walker.samples(&[at])?.remove(0);
        let powers = [0, 1].map(|k| sample.slope[k].re.round());
        let monomial = (0..2).all(|k| (sample.slope[k] - powers[k]).norm() < NEAR);
        let rest = near_real(unreal(&sample) - (powers[0] - powers[1]) * ray);
        if monomial && rest.abs() < REAL {
            return Ok((sample, rest + (powers[0] - powers[1]) * ray));
        }
        at *= 0.25;
    }
    Err(CountFailure::Open { at })
}

/// One Newton step from a point of the axis, where it stays near.
fn guess(sample: &Sample) -> Option<Complex64> {
    const REACH: f64 = 0.4;
    let step = sample.slope[0].inv();
    let s = sample.w * Complex64::new(AXIS_TOLERANCE, 1.0);
    (step.norm() < REACH).then(|| s * (1.0 - step))
}
