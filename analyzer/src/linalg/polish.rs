//! Newton steps on modes, and their null vectors.
//!
//! With D(s) = d ln det A / ds = tr(A^-1 A') the step of Ehrlich (Comm. ACM 1967) and Aberth
//! (Math. Comp. 1973; both from memory) is s <- s - 1/(D - sum over the others 1/(s - s_j)); it
//! keeps modes from running into each other.

use super::error::NumericError;
use super::plan::Plan;
use super::values::Values;
use super::workspace::Workspace;
use num_complex::Complex64;

/// A mode and how far its last step went.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Polished {
    /// The mode, im >= 0.
    pub s: Complex64,
    /// Size of the last step over |s|.
    pub last_step: f64,
    /// Whether the steps settled.
    pub converged: bool,
    /// How many modes lie so near that they cannot be told apart (1: alone).
    pub cluster: usize,
}

/// Modes nearer than this (over |s|) are one cluster and keep their eigenvalues.
const CLUSTER: f64 = 1e-6;
/// Steps larger than this (over |s|) are not taken: the seed is better.
const LARGEST_STEP: f64 = 1e-3;
/// A last step below this (over |s|) counts as settled.
const SETTLED: f64 = 1e-11;
/// Damping below which a mode gets a last step by sound factors.
const RESONANT: f64 = 0.5;
/// Steps at the most.
const STEPS: usize = 6;

/// Polishes the modes of the upper half plane (and the real ones); conjugates are implied.
/// `all` are all nonzero modes, conjugates included, `at_zero` the number of modes at the origin.
///
/// # Errors
/// What factorisation reports; a mode hit exactly is no error.
pub fn polish(
    plan: &Plan,
    values: &Values,
    all: &[Complex64],
    at_zero: usize,
    stop: &dyn Fn() -> bool,
) -> Result<Vec<Polished>, NumericError> {
    let mut current: Vec<Complex64> = all.to_vec();
    let upper: Vec<usize> = (0..all.len()).filter(|&k| all[k].im >= 0.0).collect();
    let mut partner: Vec<Option<usize>> = vec![None; all.len()];
    for &k in &upper {
        if all[k].im > 0.0 {
            partner[k] = conjugate_of(all, k);
        }
    }
    let mut out: Vec<Polished> = upper
        .iter()
        .map(|&k| Polished {
            s: all[k],
            last_step: f64::INFINITY,
            converged: false,
            cluster: cluster_size(all, k),
        })
        .collect();
    let mut ws = plan.workspace();
    for _ in 0..STEPS {
        let open: Vec<usize> = (0..out.len())
            .filter(|&i| !out[i].converged && out[i].cluster == 1)
            .collect();
        if open.is_empty() || stop() {
            break;
        }
        for batch in open.chunks(plan.lanes()) {
            let points: Vec<Complex64> = batch.iter().map(|&i| out[i].s).collect();
            let sums = derivatives(plan, values, &points, &mut ws)?;
            for (&i, derivative) in batch.iter().zip(sums) {
                let k = upper[i];
                step(&mut out[i], derivative, &current, k, at_zero);
                current[k] = out[i].s;
                if let Some(other) = partner[k] {
                    current[other] = out[i].s.conj();
                }
            }
        }
    }
    let resonant: Vec<usize> = (0..out.len())
        .filter(|&i| out[i].converged && out[i].cluster == 1)
        .filter(|&i| out[i].s.re.abs() < RESONANT * out[i].s.norm())
        .collect();
    for batch in resonant.chunks(plan.lanes()) {
        if stop() {
            break;
        }
        let points: Vec<Complex64> = batch.iter().map(|&i| out[i].s).collect();
        for (&i, derivative) in batch
            .iter()
            .zip(sound_derivatives(plan, values, &points, &mut ws))
        {
            let mut last = Polished {
                last_step: f64::INFINITY,
                ..out[i]
            };
            step(&mut last, derivative, &current, upper[i], at_zero);
            // A long step here would be a fault of the point, not of the mode.
            if last.converged || last.last_step < 1e-6 {
                out[i].s = last.s;
            }
        }
    }
    for mode in out.iter_mut().filter(|mode| mode.cluster > 1) {
        mode.converged = true;
        mode.last_step = CLUSTER;
    }
    Ok(out)
}

fn conjugate_of(all: &[Complex64], k: usize) -> Option<usize> {
    let wanted = all[k].conj();
    (0..all.len())
        .filter(|&j| all[j].im < 0.0)
        .min_by(|&a, &b| {
            let far = |j: usize| (all[j] - wanted).norm();
            far(a).total_cmp(&far(b))
        })
}

fn cluster_size(all: &[Complex64], k: usize) -> usize {
    let size = all[k].norm();
    all.iter()
        .filter(|s| (**s - all[k]).norm() <= CLUSTER * size)
        .count()
}

/// D at each point; infinite where the point is a mode exactly.
fn derivatives(
    plan: &Plan,
    values: &Values,
    points: &[Complex64],
    ws: &mut Workspace,
) -> Result<Vec<Option<Complex64>>, NumericError> {
    match plan.factor_rough(values, points, ws) {
        Ok(()) => {
            plan.invert_selected(ws)?;
            Ok((0..points.len())
                .map(|lane| Some(ws.log_derivative(lane)))
                .collect())
        }
        Err(NumericError::SingularPoint { .. } | NumericError::Unsound { .. }) => {
            // One of the points is a mode to the last bit: ask one by one.
            let mut found = Vec::with_capacity(points.len());
            for point in points {
                found.push(match plan.factor_rough(values, &[*point], ws) {
                    Ok(()) => {
                        plan.invert_selected(ws)?;
                        Some(ws.log_derivative(0))
                    }
                    Err(NumericError::SingularPoint { .. } | NumericError::Unsound { .. }) => None,
                    Err(other) => return Err(other),
                });
            }
            Ok(found)
        }
        Err(other) => Err(other),
    }
}

/// D at each point by lanes that are sound, so that the root is that of the matrix and not of its
/// rounded factors; `None` where there is no such lane.
fn sound_derivatives(
    plan: &Plan,
    values: &Values,
    points: &[Complex64],
    ws: &mut Workspace,
) -> Vec<Option<Complex64>> {
    let mut at = |points: &[Complex64]| -> Option<Vec<Complex64>> {
        plan.factor_sound(values, points, ws).ok()?;
        plan.invert_selected(ws).ok()?;
        Some(
            (0..points.len())
                .map(|lane| ws.log_derivative(lane))
                .collect(),
        )
    };
    match at(points) {
        Some(all) => all.into_iter().map(Some).collect(),
        // One of the points is a mode to the last bit.
        None => points.iter().map(|point| at(&[*point])?.pop()).collect(),
    }
}

fn step(
    mode: &mut Polished,
    derivative: Option<Complex64>,
    all: &[Complex64],
    own: usize,
    at_zero: usize,
) {
    let Some(derivative) = derivative.filter(|d| d.re.is_finite() && d.im.is_finite()) else {
        // det is zero (or its derivative infinite) here: nothing is left to improve.
        mode.last_step = 0.0;
        mode.converged = true;
        return;
    };
    let mut others = at_zero as f64 * mode.s.inv();
    for (k, s) in all.iter().enumerate() {
        if k != own {
            let gap = mode.s - s;
            if gap.norm_sqr() > 0.0 {
                others += gap.inv();
            }
        }
    }
    let mut change = (derivative - others).inv();
    if mode.s.im == 0.0 {
        change.im = 0.0;
    }
    let size = change.norm() / mode.s.norm();
    if !size.is_finite() || size > LARGEST_STEP || size >= mode.last_step {
        // Rounding has taken over, or the seed was no neighbour of the root.
        mode.converged = mode.last_step <= SETTLED.max(1e-9);
        if !mode.converged {
            mode.last_step = mode.last_step.min(size);
        }
        return;
    }
    mode.s -= change;
    mode.last_step = size;
    mode.converged = size <= SETTLED;
}

/// Right and left null vector, each of length n.
pub type NullVectors = (Vec<Complex64>, Vec<Complex64>);

/// Right and left null vector of A(s) at a mode, by inverse iteration beside it.
/// `out` per mode: (right x, left w), each of length n.
///
/// # Errors
/// What factorisation reports.
pub fn null_vectors(
    plan: &Plan,
    values: &Values,
    modes: &[Complex64],
) -> Result<Vec<NullVectors>, NumericError> {
    const ROUNDS: usize = 3;
    let (n, lanes) = (plan.n(), plan.lanes());
    let mut ws = plan.workspace();
    let mut out = Vec::with_capacity(modes.len());
    for batch in modes.chunks(lanes) {
        factor_beside(plan, values, batch, &mut ws)?;
        let start: Vec<Complex64> = (0..n * lanes)
            .map(|k| {
                let row = (k / lanes) as f64;
                Complex64::new(1.0 + (row * 0.7).sin(), (row * 1.3).cos())
            })
            .collect();
        let mut right = start.clone();
        let mut left = start;
        for _ in 0..ROUNDS {
            plan.solve_full(&mut ws, &mut right)?;
            normalise(&mut right, lanes);
            plan.solve_full_transposed(&mut ws, &mut left)?;
            normalise(&mut left, lanes);
        }
        for lane in 0..batch.len() {
            let pick = |x: &[Complex64]| (0..n).map(|i| x[i * lanes + lane]).collect();
            out.push((pick(&right), pick(&left)));
        }
    }
    Ok(out)
}

/// Factors beside each mode: as near as the pivots bear. Where several modes coincide, the matrix
/// is so nearly singular that more distance is needed.
fn factor_beside(
    plan: &Plan,
    values: &Values,
    modes: &[Complex64],
    ws: &mut Workspace,
) -> Result<(), NumericError> {
    let mut result = Ok(());
    for beside in [1e-9, 1e-8, 1e-7, 1e-6, 1e-5] {
        let points: Vec<Complex64> = modes
            .iter()
            .map(|s| s * Complex64::new(1.0 + beside, 0.3 * beside))
            .collect();
        result = plan.factor_rough(values, &points, ws);
        match &result {
            Err(NumericError::SingularPoint { .. } | NumericError::Unsound { .. }) => {}
            _ => return result,
        }
    }
    result
}

fn normalise(x: &mut [Complex64], lanes: usize) {
    for lane in 0..lanes {
        let largest = x
            .iter()
            .skip(lane)
            .step_by(lanes)
            .map(|z| z.norm())
            .fold(0.0, f64::max);
        if largest > 0.0 && largest.is_finite() {
            for z in x.iter_mut().skip(lane).step_by(lanes) {
                *z /= largest;
            }
        }
    }
}
