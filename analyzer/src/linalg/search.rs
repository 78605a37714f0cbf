//! Roots of det A(s) near given points, for determinants without a degree (entries with delays).
//!
//! Newton's method with D = d ln det A / ds: s <- s - 1/(D - sum over the known roots 1/(s - s_j)),
//! the known ones deflated as in Ehrlich (Comm. ACM 1967) and Aberth (Math. Comp. 1973; both from
//! memory). Far from a root the many others rule D; they nearly cancel in D less that of a second
//! determinant which has them too, so that the ratio of the two is followed until the steps are short.

use super::error::NumericError;
use super::plan::Plan;
use super::values::Values;
use super::workspace::Workspace;
use num_complex::Complex64;

/// Steps at the most.
const STEPS: usize = 40;
/// A step below this (over |s|) counts as settled.
const SETTLED: f64 = 1e-11;
/// Largest step over |s|.
const LONGEST: f64 = 0.5;
/// A step of the ratio below this (over |s|) is followed by steps of the determinant itself.
const NEAR: f64 = 1e-5;
/// Roots nearer than this (over |s|) are one.
const SAME: f64 = 1e-7;

/// A seed on its way.
#[derive(Clone, Copy)]
struct Walk {
    s: Complex64,
    open: bool,
    near: bool,
    settled: bool,
}

/// Roots with im >= 0 reached from `seeds`, each once and none of `known` (conjugates are implied).
/// `other` is a determinant with most of the same roots, none of them sought, for seeds far from any
/// root. Seeds that do not settle are left out, so that nothing is said about roots that were not
/// found.
///
/// # Errors
/// [`NumericError::Stopped`], and what factorisation reports; a root hit exactly is no error.
pub fn roots_near(
    plan: &Plan,
    values: &Values,
    other: Option<&Values>,
    seeds: &[Complex64],
    known: &[Complex64],
    stop: &dyn Fn() -> bool,
) -> Result<Vec<Complex64>, NumericError> {
    let mut walks: Vec<Walk> = seeds
        .iter()
        .map(|s| Walk {
            s: *s,
            open: s.norm() > 0.0,
            near: other.is_none(),
            settled: false,
        })
        .collect();
    let mut ws = plan.workspace();
    for _ in 0..STEPS {
        let mut open: Vec<&mut Walk> = walks.iter_mut().filter(|walk| walk.open).collect();
        if open.is_empty() {
            break;
        }
        for batch in open.chunks_mut(plan.lanes()) {
            if stop() {
                return Err(NumericError::Stopped);
            }
            let points: Vec<Complex64> = batch.iter().map(|walk| walk.s).collect();
            let derivatives = derivatives(plan, values, &points, &mut ws).and_then(|of_values| {
                let of_other = match other {
                    Some(other) if batch.iter().any(|walk| !walk.near) => {
                        derivatives(plan, other, &points, &mut ws)?
                    }
                    _ => vec![Complex64::default(); points.len()],
                };
                Ok((of_values, of_other))
            });
            let (own, others) = match derivatives {
                Ok(derivatives) => derivatives,
                Err(NumericError::SingularPoint { .. } | NumericError::Unsound { .. }) => {
                    // One of them is a root to the last bit, or out of range: look beside it.
                    for walk in batch.iter_mut() {
                        walk.s *= Complex64::new(1.0 + 1e-13, 1e-13);
                        walk.open = walk.s.norm() < 1e12;
                    }
                    continue;
                }
                Err(other) => return Err(other),
            };
            for (walk, (own, other)) in batch.iter_mut().zip(own.into_iter().zip(others)) {
                let derivative = if walk.near { own } else { own - other };
                advance(walk, derivative, known);
            }
        }
    }
    let mut found: Vec<Complex64> = Vec::new();
    for walk in walks.iter().filter(|walk| walk.settled) {
        let s = Complex64::new(walk.s.re, walk.s.im.abs());
        let is = |other: &Complex64| (other - s).norm() <= SAME * s.norm();
        if !found.iter().chain(known).any(is) {
            found.push(s);
        }
    }
    Ok(found)
}

fn derivatives(
    plan: &Plan,
    values: &Values,
    points: &[Complex64],
    ws: &mut Workspace,
) -> Result<Vec<Complex64>, NumericError> {
    plan.factor_rough(values, points, ws)?;
    plan.invert_selected(ws)?;
    Ok((0..points.len())
        .map(|lane| ws.log_derivative(lane))
        .collect())
}

fn advance(walk: &mut Walk, derivative: Complex64, known: &[Complex64]) {
    let s = walk.s;
    let deflation: Complex64 = known
        .iter()
        .flat_map(|root| [Some(*root), (root.im > 0.0).then(|| root.conj())])
        .flatten()
        .map(|root| (s - root).inv())
        .filter(|term| term.is_finite())
        .sum();
    let mut step = (derivative - deflation).inv();
    let size = step.norm() / s.norm();
    if !size.is_finite() {
        walk.open = false;
        return;
    }
    if size > LONGEST {
        step *= LONGEST / size;
    }
    walk.s -= step;
    if !walk.near {
        walk.near = size <= NEAR;
    } else if size <= SETTLED {
        walk.open = false;
        walk.settled = true;
        // A real root is real to rounding.
        if walk.s.im.abs() <= SETTLED * walk.s.norm() {
            walk.s.im = 0.0;
        }
    }
}
