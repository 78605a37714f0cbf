//! Driving-point impedances of many probes, as many frequencies at once as the plan has lanes, read
//! from the selected inverse.

use super::probe::{Solver, normalised_rad};
use crate::assembly::ohms;
use crate::circuit::{NodeId, NodeRef};
use crate::linalg::error::NumericError;
use crate::linalg::workspace::Workspace;
use num_complex::Complex64;

/// Where a driving point is looked at.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Probe {
    /// From a node to ground.
    Node(NodeId),
    /// Between two nodes; the solver must have been told of the pair.
    Pair(NodeRef, NodeRef),
}

/// Conductance this much smaller than the admittance (relative) is rounding, not negative: it is
/// what a lossless network leaves.
const NOISE: f64 = 1e-11;
/// An impedance below this (ohms) is an ideal short: the node has no driving point.
const SHORT_OHM: f64 = 1e-12;

/// Whether an impedance has a conductance that is negative beyond rounding.
pub(super) fn is_negative(z: Complex64) -> bool {
    if z.re >= 0.0 {
        return false;
    }
    let size2 = z.norm_sqr();
    size2 > SHORT_OHM * SHORT_OHM && z.re * z.re > NOISE * NOISE * size2
}

/// Evaluates the impedances of its probes.
pub(super) struct Evaluator<'a> {
    solver: &'a Solver,
    workspace: Workspace,
    /// Per probe: entries of the inverse with their signs; `None` when one was not asked for.
    readings: Vec<Option<Vec<(usize, f64)>>>,
    points: Vec<Complex64>,
    lane_values: Vec<Complex64>,
}

impl<'a> Evaluator<'a> {
    pub(super) fn new(solver: &'a Solver, probes: &[Probe]) -> Self {
        Self {
            solver,
            workspace: solver.plan.workspace(),
            readings: probes.iter().map(|probe| reading(solver, *probe)).collect(),
            points: Vec::new(),
            lane_values: Vec::new(),
        }
    }

    /// Factors and inverse of the last batch.
    pub(super) fn workspace(&self) -> &Workspace {
        &self.workspace
    }

    /// Frequencies treated at once.
    pub(super) fn lanes(&self) -> usize {
        self.solver.plan.lanes()
    }

    /// Factors one batch of frequencies and inverts what is wanted.
    fn factor(&mut self, hz: impl Iterator<Item = f64>) -> Result<(), NumericError> {
        self.points.clear();
        self.points
            .extend(hz.map(|hz| Complex64::new(0.0, normalised_rad(hz))));
        let plan = &self.solver.plan;
        match plan.factor_sound(&self.solver.on, &self.points, &mut self.workspace) {
            Err(NumericError::SingularPoint { .. }) => {
                // A mode exactly on the axis: look a hair beside it.
                for s in &mut self.points {
                    *s *= Complex64::new(1.0 + 1e-12, -1e-12);
                }
                plan.factor_sound(&self.solver.on, &self.points, &mut self.workspace)?;
            }
            other => other?,
        }
        plan.invert_selected(&mut self.workspace)
    }

    /// The impedance of a probe in all lanes of the last batch, ohms.
    fn read(&mut self, probe: usize, lanes: usize) -> &[Complex64] {
        let nan = Complex64::new(f64::NAN, f64::NAN);
        self.lane_values.clear();
        self.lane_values.resize(2 * lanes, Complex64::default());
        let (sum, term) = self.lane_values.split_at_mut(lanes);
        match &self.readings[probe] {
            Some(entries) => {
                for (index, sign) in entries {
                    self.workspace.inverse_lanes(*index, term);
                    for (sum, term) in sum.iter_mut().zip(term.iter()) {
                        *sum += *term * ohms(*sign);
                    }
                }
            }
            None => sum.fill(nan),
        }
        sum
    }

    /// Appends the impedances of all probes at one batch of frequencies.
    pub(super) fn sweep_into(
        &mut self,
        hz: &[f64],
        out: &mut [Vec<Complex64>],
    ) -> Result<(), NumericError> {
        self.factor(hz.iter().copied())?;
        for (probe, values) in out.iter_mut().enumerate() {
            values.extend_from_slice(self.read(probe, hz.len()));
        }
        Ok(())
    }

    /// The impedances of all probes at any number of frequencies.
    pub(super) fn sweep(&mut self, hz: &[f64]) -> Result<Vec<Vec<Complex64>>, NumericError> {
        let mut out = vec![Vec::with_capacity(hz.len()); self.readings.len()];
        for batch in hz.chunks(self.lanes()) {
            self.sweep_into(batch, &mut out)?;
        }
        Ok(out)
    }

    /// One impedance per job (number of a probe, hertz), each at its own frequency.
    pub(super) fn impedances(
        &mut self,
        jobs: &[(usize, f64)],
    ) -> Result<Vec<Complex64>, NumericError> {
        let mut out = Vec::with_capacity(jobs.len());
        for batch in jobs.chunks(self.lanes()) {
            self.factor(batch.iter().map(|(_, hz)| *hz))?;
            for (lane, (probe, _)) in batch.iter().enumerate() {
                let z = self.read(*probe, batch.len())[lane];
                out.push(z);
            }
        }
        Ok(out)
    }
}

fn reading(solver: &Solver, probe: Probe) -> Option<Vec<(usize, f64)>> {
    let entry = |a: NodeRef, b: NodeRef, sign: f64| match (a.node(), b.node()) {
        (Some(a), Some(b)) => solver
            .plan
            .inverse_index(a.0, b.0)
            .map(|index| Some((index, sign))),
        _ => Some(None),
    };
    let entries = match probe {
        Probe::Node(node) => {
            let node = NodeRef::Node(node);
            vec![entry(node, node, 1.0)?]
        }
        Probe::Pair(a, b) => vec![
            entry(a, a, 1.0)?,
            entry(b, b, 1.0)?,
            entry(a, b, -1.0)?,
            entry(b, a, -1.0)?,
        ],
    };
    Some(entries.into_iter().flatten().collect())
}
