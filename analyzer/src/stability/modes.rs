//! Natural modes: every finite natural frequency of a lumped circuit, exact in number, with the
//! nodes and parts that take part.
//!
//! A mode s = sigma + j omega goes as exp(s t). Shares: at node k |(w C)_k x_k|, for a part
//! |ds/d ln value| = |w^T (dM/d ln value) x| / |w^T M' x| with right and left null vectors x, w of
//! M(s) and M' = dM/ds.

use super::probe::Solver;
use crate::assembly::{Unknown, rad_per_s};
use crate::circuit::{Circuit, NodeId, PartId, PartKind};
use crate::linalg::eigen::finite_modes;
use crate::linalg::error::NumericError;
use crate::linalg::polish::{Polished, null_vectors, polish};
use num_complex::Complex64;

/// One mode of each conjugate pair.
#[derive(Clone, PartialEq, Debug)]
pub struct Mode {
    /// Natural frequency, rad/s, im >= 0.
    pub s_rad_per_s: Complex64,
    /// The same in the system's units.
    pub normalised: Complex64,
    /// Whether Newton steps settled on it.
    pub converged: bool,
}

impl Mode {
    /// Frequency, hertz.
    pub fn hz(&self) -> f64 {
        self.s_rad_per_s.im / (2.0 * std::f64::consts::PI)
    }

    /// Growth, 1/s.
    pub fn growth_per_s(&self) -> f64 {
        self.s_rad_per_s.re
    }

    /// -Re s / |s|.
    pub fn damping(&self) -> f64 {
        -self.s_rad_per_s.re / self.s_rad_per_s.norm()
    }

    /// How many modes of the whole plane it stands for: 2 for a conjugate pair.
    pub fn count(&self) -> usize {
        if self.s_rad_per_s.im > 0.0 { 2 } else { 1 }
    }
}

/// Largest |Re s|/|s| that counts as on the axis.
pub const AXIS_TOLERANCE: f64 = 1e-9;

/// Modes of less damping are listed.
pub const LISTED_DAMPING: f64 = 0.5;

/// All finite modes.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Modes {
    /// Modes not at the origin, growth falling.
    pub list: Vec<Mode>,
    /// Modes exactly at s = 0.
    pub at_zero: usize,
}

impl Modes {
    /// Right-half-plane modes in the whole plane.
    pub fn unstable(&self) -> usize {
        self.list
            .iter()
            .filter(|mode| mode.damping() < -AXIS_TOLERANCE)
            .map(Mode::count)
            .sum()
    }

    /// Modes on the axis in the whole plane, s = 0 not counted.
    pub fn on_axis(&self) -> usize {
        self.list
            .iter()
            .filter(|mode| mode.damping().abs() <= AXIS_TOLERANCE)
            .map(Mode::count)
            .sum()
    }

    /// All modes of the whole plane but those at the origin, normalised.
    pub(super) fn whole_plane(&self) -> impl Iterator<Item = Complex64> + '_ {
        self.list.iter().flat_map(|mode| {
            let s = mode.normalised;
            [Some(s), (s.im > 0.0).then(|| s.conj())]
                .into_iter()
                .flatten()
        })
    }

    /// Whether no two modes of the list are the same to rounding.
    fn all_apart(&self) -> bool {
        const SAME: f64 = 1e-6;
        let mut by_size: Vec<Complex64> = self.list.iter().map(|mode| mode.normalised).collect();
        by_size.sort_by(|a, b| a.norm().total_cmp(&b.norm()));
        by_size.iter().enumerate().all(|(k, s)| {
            let near = |other: &&Complex64| other.norm() <= s.norm() * (1.0 + SAME);
            let mut rest = by_size[k + 1..].iter().take_while(near);
            rest.all(|other| (other - s).norm() > SAME * s.norm())
        })
    }

    /// Number of finite modes in the whole plane, those at zero included.
    pub fn finite(&self) -> usize {
        self.at_zero + self.list.iter().map(Mode::count).sum::<usize>()
    }
}

/// Why the modes are not known.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum ModeFailure {
    /// More states than the limit.
    TooMany {
        /// States.
        states: usize,
    },
    /// Numerics failed.
    Numeric(NumericError),
}

/// All finite modes with the sources on (`off` false) or off. `earlier` are those of a system of
/// the same structure with other values: Newton steps from them are tried first.
///
/// # Errors
/// See [`ModeFailure`].
pub fn natural_modes(
    solver: &Solver,
    off: bool,
    limit: usize,
    earlier: Option<&Modes>,
    stop: &dyn Fn() -> bool,
) -> Result<Modes, ModeFailure> {
    let (values, exact, structure) = if off {
        (&solver.off, &solver.off_exact, &solver.off_structure)
    } else {
        (&solver.on, &solver.on_exact, &solver.on_structure)
    };
    if structure.finite_modes > limit {
        return Err(ModeFailure::TooMany {
            states: structure.finite_modes,
        });
    }
    if let Some(modes) = earlier.and_then(|earlier| restarted(solver, off, earlier, stop)) {
        return Ok(modes);
    }
    let found = finite_modes(&solver.plan, values, &exact.0, &exact.1, structure, stop)
        .map_err(ModeFailure::Numeric)?;
    let total = found.nonzero.len() + found.at_zero;
    if total != structure.finite_modes || found.at_zero != structure.zero_modes {
        return Err(ModeFailure::Numeric(NumericError::ModeCount {
            expected: structure.finite_modes,
            found: total,
        }));
    }
    let polished = polish(&solver.plan, values, &found.nonzero, found.at_zero, stop)
        .map_err(ModeFailure::Numeric)?;
    Ok(sorted(polished, found.at_zero))
}

/// The modes by Newton steps from those of an earlier system of the same kind. They are all of them
/// when every one settled, no two are the same, and their number is the exact one; otherwise `None`.
fn restarted(
    solver: &Solver,
    off: bool,
    earlier: &Modes,
    stop: &dyn Fn() -> bool,
) -> Option<Modes> {
    let (values, structure) = if off {
        (&solver.off, &solver.off_structure)
    } else {
        (&solver.on, &solver.on_structure)
    };
    if earlier.at_zero != structure.zero_modes || earlier.finite() != structure.finite_modes {
        return None;
    }
    let seeds: Vec<Complex64> = earlier.whole_plane().collect();
    let polished = polish(&solver.plan, values, &seeds, earlier.at_zero, stop).ok()?;
    let settled = polished
        .iter()
        .all(|mode| mode.converged && mode.cluster == 1);
    let modes = sorted(polished, earlier.at_zero);
    (settled && modes.finite() == structure.finite_modes && modes.all_apart()).then_some(modes)
}

fn sorted(polished: Vec<Polished>, at_zero: usize) -> Modes {
    let mut list: Vec<Mode> = polished
        .into_iter()
        .map(|mode| Mode {
            s_rad_per_s: Complex64::new(rad_per_s(mode.s.re), rad_per_s(mode.s.im)),
            normalised: mode.s,
            converged: mode.converged,
        })
        .collect();
    list.sort_by(|a, b| {
        b.growth_per_s()
            .total_cmp(&a.growth_per_s())
            .then(a.hz().total_cmp(&b.hz()))
    });
    Modes { list, at_zero }
}

/// Shares in one mode.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct Participation {
    /// |(w C)_k x_k| over |w C x|, per node, in node order.
    pub raw_nodes: Vec<f64>,
    /// Nodes with their share, normalised over the nodes, falling.
    pub nodes: Vec<(NodeId, f64)>,
    /// Parts with their share, normalised over the parts, falling.
    pub parts: Vec<(PartId, f64)>,
    /// ds/d ln value per part, rad/s, in part order.
    pub sensitivity_rad_per_s: Vec<Complex64>,
    /// Right null vector by unknown.
    pub shape: Vec<Complex64>,
}

/// Shares of nodes and parts in modes of the system with its sources on.
///
/// # Errors
/// What factorisation reports.
pub fn participation(
    solver: &Solver,
    circuit: &Circuit,
    modes: &[Mode],
) -> Result<Vec<Participation>, NumericError> {
    let points: Vec<Complex64> = modes.iter().map(|mode| mode.normalised).collect();
    let vectors = null_vectors(&solver.plan, &solver.on, &points)?;
    Ok(vectors
        .into_iter()
        .zip(points)
        .map(|((right, left), s)| shares(solver, circuit, s, right, &left))
        .collect())
}

fn shares(
    solver: &Solver,
    circuit: &Circuit,
    s: Complex64,
    right: Vec<Complex64>,
    left: &[Complex64],
) -> Participation {
    let at = |vector: &[Complex64], k: u32| vector.get(k as usize).copied().unwrap_or_default();
    let mut state = vec![Complex64::default(); right.len()];
    let mut parts = vec![Complex64::default(); circuit.parts.len()];
    for stamp in &solver.system.stamps {
        let product = at(left, stamp.row) * at(&right, stamp.column) * stamp.value;
        // The entry is value * factor; its derivative in s is value * slope.
        let (factor, slope) = if stamp.delay > 0.0 {
            let factor = (-s * stamp.delay).exp();
            (factor, -stamp.delay * factor)
        } else if stamp.with_s {
            (s, Complex64::new(1.0, 0.0))
        } else {
            (Complex64::new(1.0, 0.0), Complex64::default())
        };
        if let Some(sum) = state.get_mut(stamp.column as usize) {
            *sum += product * slope;
        }
        let weight = f64::from(stamp.power);
        if let Some(sum) = parts.get_mut(stamp.part.0 as usize) {
            *sum += product * factor * weight;
        }
    }
    let whole: Complex64 = state.iter().sum();
    let scale = whole.norm();
    let nodes = solver.system.unknowns.nodes();
    let raw_nodes: Vec<f64> = state.iter().take(nodes).map(|z| z.norm() / scale).collect();
    let sensitivity: Vec<Complex64> = parts
        .iter()
        .map(|z| -z / whole)
        .map(|z| Complex64::new(rad_per_s(z.re), rad_per_s(z.im)))
        .collect();
    let node_shares = ranked(raw_nodes.iter().copied().enumerate())
        .into_iter()
        .filter_map(
            |(k, share)| match solver.system.unknowns.of_row(k as u32)? {
                Unknown::Node(node) => Some((node, share)),
                Unknown::Branch(_) => None,
            },
        )
        .collect();
    let part_shares = ranked(sensitivity.iter().map(|z| z.norm()).enumerate())
        .into_iter()
        .map(|(k, share)| (PartId(k as u32), share))
        .filter(|(id, _)| !is_termination_only(circuit, *id))
        .collect();
    Participation {
        raw_nodes,
        nodes: node_shares,
        parts: part_shares,
        sensitivity_rad_per_s: sensitivity,
        shape: right,
    }
}

/// Parts that have no value of their own never take part.
fn is_termination_only(circuit: &Circuit, id: PartId) -> bool {
    matches!(
        circuit.part(id).map(|part| &part.kind),
        Some(PartKind::CurrentSource { .. } | PartKind::NotComputed { .. }) | None
    )
}

/// Shares normalised to a sum of one, falling, those below a millionth left out.
fn ranked(shares: impl Iterator<Item = (usize, f64)>) -> Vec<(usize, f64)> {
    let mut all: Vec<(usize, f64)> = shares.filter(|(_, share)| share.is_finite()).collect();
    let total: f64 = all.iter().map(|(_, share)| share).sum();
    if total <= 0.0 {
        return Vec::new();
    }
    for (_, share) in &mut all {
        *share /= total;
    }
    all.retain(|(_, share)| *share > 1e-6);
    // Equal shares of equal parts differ by rounding only: the first of them comes first.
    let rank = |share: f64| (share * 1e5).round();
    all.sort_by(|a, b| rank(b.1).total_cmp(&rank(a.1)).then(a.0.cmp(&b.0)));
    all
}
