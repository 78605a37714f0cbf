//! Right-half-plane zeros of det(G + s C) by the argument along a ray beside the imaginary axis.
//!
//! On s = w (1e-9 + j), w from 0 to infinity, a polynomial of degree d with a root of
//! multiplicity z at the origin turns by D radians; then N = (d - z)/2 - D/pi roots lie to the
//! right of the ray and its mirror image. Roots on the axis are passed on the right, so they are
//! not counted (argument principle, Cauchy; the degree and z are exact, see `exact`).
//!
//! The steps are chosen so that no root can be passed unseen: see `passes`.

use super::error::NumericError;
use super::plan::Plan;
use super::values::Values;
use super::workspace::Workspace;
use num_complex::Complex64;
use std::f64::consts::PI;

/// Slope of the ray: modes of smaller Re s / |s| count as on the axis.
pub const AXIS_TOLERANCE: f64 = 1e-9;

/// One determinant: values, exact degree, exact multiplicity of the root at zero.
#[derive(Debug, Clone, Copy)]
pub struct Polynomial<'a> {
    /// The matrices.
    pub values: &'a Values,
    /// Degree of the determinant.
    pub degree: usize,
    /// Multiplicity of the root at zero.
    pub at_zero: usize,
    /// All nonzero roots as found otherwise (conjugates included); empty when they are not known.
    /// They are used only beyond the frequency up to which the determinant can be followed.
    pub known: &'a [Complex64],
}

impl<'a> Polynomial<'a> {
    /// A determinant of which nothing is known but its values.
    pub(super) fn open(values: &'a Values) -> Self {
        Self {
            values,
            degree: 0,
            at_zero: 0,
            known: &[],
        }
    }
}

impl Polynomial<'_> {
    /// d ln det / d ln s by the known roots.
    fn predicted_slope(&self, s: Complex64) -> Option<Complex64> {
        if self.known.is_empty() {
            return None;
        }
        let sum: Complex64 = self.known.iter().map(|root| s / (s - root)).sum();
        Some(sum + self.at_zero as f64)
    }

    /// Phase of det / s^degree at s, by the known roots; it goes to zero at infinity.
    fn predicted_rest(&self, s: Complex64) -> f64 {
        let one = Complex64::new(1.0, 0.0);
        self.known.iter().map(|root| (one - root / s).arg()).sum()
    }
}

/// What the count found.
#[derive(Debug, Clone, PartialEq)]
pub struct Count {
    /// Right-half-plane roots of each determinant.
    pub roots: Vec<usize>,
    /// Points at which all determinants were evaluated.
    pub evaluations: usize,
    /// Largest distance of a count from a whole number before rounding.
    pub remainder: f64,
    /// Above this w the determinant cannot be followed (rounding ghosts) and the known roots were
    /// relied on; `None` when it was followed to its monomial.
    pub relied_above: Option<f64>,
}

/// Why there is no count.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum CountFailure {
    /// Stopped by the caller.
    Stopped,
    /// This interval (of w) could not be resolved within the budget or within rounding.
    Unresolved {
        /// Lower end.
        low: f64,
        /// Upper end.
        high: f64,
        /// Points used.
        evaluations: usize,
    },
    /// The phase does not settle toward zero or infinity within range.
    Open {
        /// Last point tried.
        at: f64,
    },
    /// A count is too far from a whole number.
    NotWhole {
        /// Before rounding.
        count: f64,
    },
    /// Factorisation failed.
    Numeric(NumericError),
}

impl From<NumericError> for CountFailure {
    fn from(error: NumericError) -> Self {
        Self::Numeric(error)
    }
}

/// Largest step in ln w.
const WIDEST: f64 = 0.6;
/// Intervals narrower than this (over w) are not split any more.
const NARROWEST: f64 = 1e-12;
/// Points are at most so many.
const BUDGET: usize = 400_000;

/// Counts the right-half-plane roots of several determinants along one ray. `seeds` are w at
/// which something is expected (frequencies of modes); they only help to place the first steps.
///
/// # Errors
/// See [`CountFailure`].
pub fn right_half_plane_roots(
    plan: &Plan,
    polynomials: &[Polynomial<'_>],
    seeds: &[f64],
    stop: &dyn Fn() -> bool,
) -> Result<Count, CountFailure> {
    let mut walker = Walker::new(plan, polynomials, stop);
    let finite = || seeds.iter().copied().filter(|w| *w > 0.0 && w.is_finite());
    let low = finite().fold(1.0, f64::min);
    let high = finite().fold(1.0, f64::max);
    let (first, _) = walker.settle(low, false)?;
    let (last, relied) = walker.settle(high, true)?;
    let mut grid: Vec<f64> = finite()
        .flat_map(|w| [w * 0.999, w, w * 1.001])
        .filter(|w| *w > first.w && *w < last.w)
        .collect();
    grid.sort_by(f64::total_cmp);
    grid.dedup_by(|a, b| (*a - *b).abs() <= 1e-9 * *b);
    let mut turned = vec![0.0; polynomials.len()];
    walker.walk(&first, &last, &grid, &mut turned)?;
    walker.close(&first, &last, relied, &turned)
}

/// Values of all determinants at one point of the ray.
#[derive(Debug, Clone)]
pub(super) struct Sample {
    pub(super) w: f64,
    /// ln det, phase in -pi..pi.
    pub(super) ln: Vec<Complex64>,
    /// d ln det / d ln w.
    pub(super) slope: Vec<Complex64>,
}

/// Evaluates and follows the determinants along the ray.
pub(super) struct Walker<'a> {
    plan: &'a Plan,
    polynomials: &'a [Polynomial<'a>],
    workspace: Workspace,
    evaluations: usize,
    stop: &'a dyn Fn() -> bool,
}

impl<'a> Walker<'a> {
    pub(super) fn new(
        plan: &'a Plan,
        polynomials: &'a [Polynomial<'a>],
        stop: &'a dyn Fn() -> bool,
    ) -> Self {
        Self {
            plan,
            polynomials,
            workspace: plan.workspace(),
            evaluations: 0,
            stop,
        }
    }
}

impl Walker<'_> {
    /// Points evaluated so far.
    pub(super) fn evaluations(&self) -> usize {
        self.evaluations
    }

    pub(super) fn samples(&mut self, w: &[f64]) -> Result<Vec<Sample>, CountFailure> {
        let mut out: Vec<Sample> = w
            .iter()
            .map(|&w| Sample {
                w,
                ln: Vec::with_capacity(2),
                slope: Vec::with_capacity(2),
            })
            .collect();
        for batch in out.chunks_mut(self.plan.lanes()) {
            if (self.stop)() {
                return Err(CountFailure::Stopped);
            }
            let s: Vec<Complex64> = batch
                .iter()
                .map(|sample| sample.w * Complex64::new(AXIS_TOLERANCE, 1.0))
                .collect();
            for polynomial in self.polynomials {
                self.plan
                    .factor_sound(polynomial.values, &s, &mut self.workspace)?;
                self.plan.invert_selected(&mut self.workspace)?;
                for (lane, sample) in batch.iter_mut().enumerate() {
                    sample.ln.push(self.workspace.det(lane).ln());
                    let slope = s[lane] * self.workspace.log_derivative(lane);
                    sample.slope.push(slope);
                }
            }
        }
        self.evaluations += w.len();
        Ok(out)
    }

    /// Goes outward from `w` until every determinant is nearly a monomial: its slope is within 0.5
    /// of the exact power. Every root beyond would take a whole 1 from the slope, and the phase left
    /// over is then well below the quarter turn that `near_real` can tell. Going no further than
    /// needed matters: where a coefficient is exactly zero, rounding leaves a ghost of about 1e-16
    /// that takes over far outside.
    ///
    /// Upward, where the ghost comes before the monomial does, the last point at which the slope
    /// is what the known roots say is taken instead (second value: true).
    fn settle(&mut self, w: f64, upward: bool) -> Result<(Sample, bool), CountFailure> {
        const NEAR: f64 = 0.5;
        let factor = if upward { 4.0 } else { 0.25 };
        let mut at = if upward { w / 256.0 } else { w * factor };
        let mut last_good: Option<Sample> = None;
        loop {
            let sample = match self.samples(&[at]) {
                Ok(mut samples) => samples.remove(0),
                Err(CountFailure::Numeric(error)) => {
                    let good = last_good.ok_or(CountFailure::Numeric(error))?;
                    return Ok((good, true));
                }
                Err(other) => return Err(other),
            };
            let settled = self.polynomials.iter().enumerate().all(|(k, polynomial)| {
                let power = if upward {
                    polynomial.degree
                } else {
                    polynomial.at_zero
                };
                (sample.slope[k] - power as f64).norm() < NEAR
            });
            if settled && (!upward || at > w) {
                return Ok((sample, false));
            }
            if upward {
                let s = at * Complex64::new(AXIS_TOLERANCE, 1.0);
                let as_known = self.polynomials.iter().enumerate().all(|(k, polynomial)| {
                    polynomial
                        .predicted_slope(s)
                        .is_some_and(|slope| (sample.slope[k] - slope).norm() < 0.05)
                });
                match (as_known, last_good.take()) {
                    (true, _) => last_good = Some(sample),
                    (false, Some(good)) => return Ok((good, true)),
                    (false, None) => {}
                }
            }
            at *= factor;
            if !(1e-30..1e30).contains(&at) {
                return Err(CountFailure::Open { at });
            }
        }
    }

    /// Adds up the phase from `first` to `last` by adaptive steps. Returns the lower ends of all
    /// steps, and the last point.
    pub(super) fn walk(
        &mut self,
        first: &Sample,
        last: &Sample,
        inside: &[f64],
        turned: &mut [f64],
    ) -> Result<Vec<Sample>, CountFailure> {
        let mut points = vec![first.clone()];
        points.extend(self.samples(inside)?);
        points.push(last.clone());
        let mut open: Vec<(Sample, Sample)> = points
            .windows(2)
            .map(|pair| (pair[0].clone(), pair[1].clone()))
            .collect();
        let mut seen = vec![last.clone()];
        while !open.is_empty() {
            let mut middles = Vec::new();
            let mut failing = Vec::new();
            for (a, b) in open {
                if passes(&a, &b) {
                    for (sum, (x, y)) in turned.iter_mut().zip(a.ln.iter().zip(&b.ln)) {
                        *sum += wrapped(y.im - x.im);
                    }
                    seen.push(a);
                } else {
                    if b.w <= a.w * (1.0 + NARROWEST) {
                        return Err(self.open_interval(&a, &b));
                    }
                    middles.push(split(a.w, b.w));
                    failing.push((a, b));
                }
            }
            if self.evaluations + middles.len() > BUDGET
                && let Some((a, b)) = failing.first()
            {
                return Err(self.open_interval(a, b));
            }
            let samples = self.samples(&middles)?;
            open = Vec::with_capacity(2 * samples.len());
            for ((a, b), middle) in failing.into_iter().zip(samples) {
                open.push((a, middle.clone()));
                open.push((middle, b));
            }
        }
        Ok(seen)
    }

    fn open_interval(&self, a: &Sample, b: &Sample) -> CountFailure {
        CountFailure::Unresolved {
            low: a.w,
            high: b.w,
            evaluations: self.evaluations,
        }
    }

    /// The phase left over beyond both ends, and the counts.
    fn close(
        &self,
        first: &Sample,
        last: &Sample,
        relied: bool,
        turned: &[f64],
    ) -> Result<Count, CountFailure> {
        let ray = (1.0f64).atan2(AXIS_TOLERANCE);
        let mut roots = Vec::new();
        let mut remainder: f64 = 0.0;
        for (k, polynomial) in self.polynomials.iter().enumerate() {
            let (d, z) = (polynomial.degree as f64, polynomial.at_zero as f64);
            // det / s^z is real at the origin, det / s^d at infinity.
            let before = near_real(first.ln[k].im - z * ray);
            let after = if relied {
                let s = last.w * Complex64::new(AXIS_TOLERANCE, 1.0);
                -polynomial.predicted_rest(s)
            } else {
                -near_real(last.ln[k].im - d * ray)
            };
            let total = before + turned[k] + after;
            let count = (ray * (d - z) - total) / PI;
            let whole = count.round();
            remainder = remainder.max((count - whole).abs());
            if (count - whole).abs() > 0.1 || whole < 0.0 {
                return Err(CountFailure::NotWhole { count });
            }
            roots.push(whole as usize);
        }
        Ok(Count {
            roots,
            evaluations: self.evaluations,
            remainder,
            relied_above: relied.then_some(last.w),
        })
    }
}

/// Whether no root can hide between two points. With D = d ln det / d ln w at both ends, k the
/// power of w that they agree on best, and h the distance in ln w:
/// * h <= 0.6 and max |D - k| h <= 1: a root at a distance of less than about h from an end
///   would show there;
/// * |change of ln|det| - trapezoid of Re D| <= 0.3: a root between the ends bends ln|det|;
/// * |change of the phase| <= 1 rad: a pair of roots close to the ray turns it by pi.
///
/// This is a strong test and no proof (exact cancellation of D at all samples stays possible);
/// the count is therefore also compared with the modes.
fn passes(a: &Sample, b: &Sample) -> bool {
    let h = (b.w / a.w).ln();
    if h > WIDEST {
        return false;
    }
    a.ln.iter().zip(&b.ln).enumerate().all(|(k, (x, y))| {
        let (da, db) = (a.slope[k], b.slope[k]);
        let power = (0.5 * (da.re + db.re)).round();
        let steep = (da - power).norm().max((db - power).norm());
        let trapezoid = 0.5 * h * (da.re + db.re);
        steep * h <= 1.0
            && (y.re - x.re - trapezoid).abs() <= 0.3
            && wrapped(y.im - x.im).abs() <= 1.0
    })
}

/// Not the middle: equally spaced roots must not alias with the split.
fn split(low: f64, high: f64) -> f64 {
    low * (high / low).powf(0.382)
}

/// An angle in -pi..pi.
fn wrapped(angle: f64) -> f64 {
    angle - 2.0 * PI * (angle / (2.0 * PI)).round()
}

/// An angle's distance from the nearest multiple of pi.
pub(super) fn near_real(angle: f64) -> f64 {
    angle - PI * (angle / PI).round()
}
