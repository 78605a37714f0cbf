//! One system with a plan that serves it with its active sources on and off: what every method
//! works on. No fixture is inserted anywhere; all methods read the same matrices.

use super::active::ActiveSet;
use super::two_port;
use crate::assembly::{REFERENCE_RAD_PER_S, Switch, System};
use crate::circuit::{Circuit, NodeRef};
use crate::linalg::error::NumericError;
use crate::linalg::exact::{ExactEntry, Structure, structure};
use crate::linalg::plan::Plan;
use crate::linalg::values::Values;

/// A circuit's system with some sources on and off.
#[derive(Clone, Debug)]
pub struct Solver {
    /// Rows, columns and stamps.
    pub system: System,
    /// All sources on.
    pub on: Values,
    /// The chosen sources off.
    pub off: Values,
    /// The plan for both.
    pub plan: Plan,
    /// Exact structure of both determinants.
    pub on_structure: Structure,
    /// As above, sources off.
    pub off_structure: Structure,
    /// Exact entries of G and C with all sources on.
    pub on_exact: (Vec<ExactEntry>, Vec<ExactEntry>),
    /// As above, sources off.
    pub off_exact: (Vec<ExactEntry>, Vec<ExactEntry>),
}

/// Why there is no system to work on.
#[derive(Clone, PartialEq, Debug)]
#[non_exhaustive]
pub enum SolverFailure {
    /// No unknowns.
    Empty,
    /// A value is not finite.
    NotFinite,
    /// det A(s) = 0 for every s; the unknowns of the null vectors.
    Singular {
        /// Rows or columns, ascending.
        unknowns: Vec<u32>,
    },
    /// No pivot order was found.
    Numeric(NumericError),
}

/// Frequencies at which the pivot order is checked, hertz: the range that real circuits live in.
const REFERENCES_HZ: [f64; 4] = [1e3, 5e5, 2.5e8, 1e11];
/// With delays the determinant is followed above the sweep, until it settles.
const DELAYED_REFERENCE_HZ: f64 = 1e12;

impl Solver {
    /// Assembles a circuit and plans its factorisation. `switch` names the sources that are
    /// switched off for the comparison; `pairs` the node pairs whose driving point is wanted
    /// besides all nodes.
    ///
    /// # Errors
    /// See [`SolverFailure`].
    pub fn new(
        circuit: &Circuit,
        switch: &Switch,
        pairs: &[[NodeRef; 2]],
    ) -> Result<Self, SolverFailure> {
        Self::with_plan(circuit, switch, pairs, None)
    }

    /// As [`Solver::new`] with a plan that served a circuit before; it is taken over when it fits
    /// this one and is sound at the reference frequencies, so that a change of values alone needs
    /// no new plan.
    ///
    /// # Errors
    /// See [`SolverFailure`].
    pub fn with_plan(
        circuit: &Circuit,
        switch: &Switch,
        pairs: &[[NodeRef; 2]],
        earlier: Option<&Plan>,
    ) -> Result<Self, SolverFailure> {
        let system = System::new(circuit);
        let n = system.unknowns.len();
        if n == 0 {
            return Err(SolverFailure::Empty);
        }
        let on_exact = system
            .exact(&Switch::all_on())
            .ok_or(SolverFailure::NotFinite)?;
        let off_exact = system.exact(switch).ok_or(SolverFailure::NotFinite)?;
        let on_structure = structure(n, &on_exact.0, &on_exact.1);
        if on_structure.singular {
            let mut unknowns = on_structure.null_columns.clone();
            unknowns.extend(&on_structure.null_rows);
            unknowns.sort_unstable();
            unknowns.dedup();
            return Err(SolverFailure::Singular { unknowns });
        }
        let off_structure = structure(n, &off_exact.0, &off_exact.1);
        let on = system.values(&Switch::all_on());
        let off = system.values(switch);
        let mut wanted = wanted(&system, pairs);
        wanted.extend(two_port::wanted(circuit, &system.unknowns));
        let above = system.has_delays().then_some(DELAYED_REFERENCE_HZ);
        let reference: Vec<f64> = REFERENCES_HZ
            .into_iter()
            .chain(above)
            .map(normalised_rad)
            .collect();
        let samples: Vec<&Values> = if off_structure.singular {
            vec![&on]
        } else {
            vec![&on, &off]
        };
        let fits = |plan: &&Plan| plan.serves(&samples, &reference, &wanted);
        let plan = match earlier.filter(fits) {
            Some(plan) => plan.clone(),
            None => Plan::new(
                std::sync::Arc::clone(&system.pattern),
                &samples,
                &reference,
                &wanted,
            )
            .map_err(SolverFailure::Numeric)?,
        };
        Ok(Self {
            system,
            on,
            off,
            plan,
            on_structure,
            off_structure,
            on_exact,
            off_exact,
        })
    }

    /// As [`Solver::new`] with all active sources of a set switched off.
    ///
    /// # Errors
    /// See [`SolverFailure`].
    pub fn with_active(circuit: &Circuit, active: &ActiveSet) -> Result<Self, SolverFailure> {
        let switch = Switch::off(active.sources.iter().copied());
        Self::new(circuit, &switch, &[])
    }
}

/// Entries of the inverse for the driving points of all nodes and of some pairs.
fn wanted(system: &System, pairs: &[[NodeRef; 2]]) -> Vec<(u32, u32)> {
    let nodes = system.unknowns.nodes() as u32;
    let mut wanted: Vec<(u32, u32)> = (0..nodes).map(|k| (k, k)).collect();
    for [a, b] in pairs {
        if let (Some(a), Some(b)) = (system.unknowns.node(*a), system.unknowns.node(*b)) {
            wanted.extend([(a, b), (b, a)]);
        }
    }
    wanted
}

/// Hertz to the normalised angular frequency of the system.
pub(super) fn normalised_rad(hz: f64) -> f64 {
    2.0 * std::f64::consts::PI * hz / REFERENCE_RAD_PER_S
}

/// The normalised angular frequency to hertz.
pub(super) fn hertz_of(normalised: f64) -> f64 {
    normalised * REFERENCE_RAD_PER_S / (2.0 * std::f64::consts::PI)
}
