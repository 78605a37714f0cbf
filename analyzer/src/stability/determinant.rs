//! Normalized determinant: det A with the active sources on over det A with them off (R. A.
//! Struble, A. Platzker, GaAs IC Symposium, 1993; A. Platzker, W. Struble, INMMIC workshop,
//! 1994; both from memory).
//!
//! Its clockwise encirclements of the origin over the whole axis are Z - P, right-half-plane modes
//! with the sources on and off. Both determinants are followed separately: near a stability
//! boundary a pole and a zero of the ratio nearly cancel and would not show.

use super::modes::Modes;
use super::probe::{Solver, hertz_of, normalised_rad};
use crate::linalg::count::{CountFailure, Polynomial, right_half_plane_roots};
use crate::linalg::error::NumericError;
use num_complex::Complex64;

/// What the determinant tells.
#[derive(Clone, PartialEq, Debug)]
pub struct Determinant {
    /// Z: right-half-plane modes with the sources on, by the phase of det A.
    pub on_roots: usize,
    /// P: with the sources off; `None` when det A0 = 0 for every s.
    pub off_roots: Option<usize>,
    /// Points at which the determinants were evaluated.
    pub evaluations: usize,
    /// Largest distance of a count from a whole number before rounding.
    pub remainder: f64,
    /// Above this frequency the determinant cannot be followed in double precision and the natural
    /// modes were relied on; `None` when it was followed to the end.
    pub relied_above_hz: Option<f64>,
}

impl Determinant {
    /// Clockwise encirclements of the normalized determinant.
    pub fn turns(&self) -> Option<i64> {
        Some(self.on_roots as i64 - self.off_roots? as i64)
    }
}

/// Why there is no count.
#[derive(Clone, PartialEq, Debug)]
pub struct DeterminantFailure {
    /// Stopped by the caller.
    pub stopped: bool,
    /// In words.
    pub reason: String,
    /// The interval at fault, hertz.
    pub failed_hz: Option<[f64; 2]>,
    /// Points used.
    pub evaluations: usize,
}

/// Counts by the argument of both determinants. `on_modes` and `off_modes` place the first steps,
/// and stand in for the determinant where it cannot be followed any more (far above the band).
///
/// # Errors
/// See [`DeterminantFailure`].
pub fn count(
    solver: &Solver,
    on_modes: Option<&Modes>,
    off_modes: Option<&Modes>,
    stop: &dyn Fn() -> bool,
) -> Result<Determinant, DeterminantFailure> {
    let (on_known, off_known) = (whole_plane(on_modes), whole_plane(off_modes));
    let mut seeds: Vec<f64> = on_known
        .iter()
        .chain(&off_known)
        .map(|mode| mode.norm())
        .collect();
    seeds.extend([normalised_rad(1e3), normalised_rad(1e11)]);
    let on = Polynomial {
        values: &solver.on,
        degree: solver.on_structure.finite_modes,
        at_zero: solver.on_structure.zero_modes,
        known: &on_known,
    };
    let off = Polynomial {
        values: &solver.off,
        degree: solver.off_structure.finite_modes,
        at_zero: solver.off_structure.zero_modes,
        known: &off_known,
    };
    let both = [on, off];
    let polynomials = if solver.off_structure.singular {
        &both[..1]
    } else {
        &both[..]
    };
    let count = right_half_plane_roots(&solver.plan, polynomials, &seeds, stop)
        .map_err(|failure| in_words(&failure))?;
    Ok(Determinant {
        on_roots: count.roots.first().copied().unwrap_or(0),
        off_roots: count.roots.get(1).copied(),
        evaluations: count.evaluations,
        remainder: count.remainder,
        relied_above_hz: count.relied_above.map(hertz_of),
    })
}

/// All modes of the whole plane, normalised; none when they are not known.
fn whole_plane(modes: Option<&Modes>) -> Vec<Complex64> {
    modes.map_or_else(Vec::new, |modes| modes.whole_plane().collect())
}

pub(super) fn in_words(failure: &CountFailure) -> DeterminantFailure {
    let (reason, failed_hz, evaluations) = match failure {
        CountFailure::Unresolved {
            low,
            high,
            evaluations,
        } => (
            "the phase of the determinant could not be followed".to_owned(),
            Some([hertz_of(*low), hertz_of(*high)]),
            *evaluations,
        ),
        CountFailure::Open { at } => (
            "the determinant does not settle toward zero or infinity".to_owned(),
            Some([hertz_of(*at); 2]),
            0,
        ),
        CountFailure::NotWhole { count } => (
            format!(
                "the phase of the determinant gives {count:.2} modes, which is no whole number"
            ),
            None,
            0,
        ),
        CountFailure::Numeric(error) => (error.to_string(), None, 0),
        CountFailure::Stopped => ("stopped".to_owned(), None, 0),
    };
    DeterminantFailure {
        stopped: *failure == CountFailure::Stopped,
        reason,
        failed_hz,
        evaluations,
    }
}

/// The normalized determinant at given frequencies.
///
/// # Errors
/// What factorisation reports.
pub fn normalized_determinant(solver: &Solver, hz: &[f64]) -> Result<Vec<Complex64>, NumericError> {
    let mut ws = solver.plan.workspace();
    let mut out = Vec::with_capacity(hz.len());
    for batch in hz.chunks(solver.plan.lanes()) {
        let s: Vec<Complex64> = batch
            .iter()
            .map(|hz| Complex64::new(0.0, normalised_rad(*hz)))
            .collect();
        solver.plan.factor_sound(&solver.on, &s, &mut ws)?;
        let on: Vec<_> = (0..s.len()).map(|lane| ws.det(lane)).collect();
        solver.plan.factor_sound(&solver.off, &s, &mut ws)?;
        for (lane, det) in on.iter().enumerate() {
            out.push(det.ratio(&ws.det(lane)).to_complex());
        }
    }
    Ok(out)
}
