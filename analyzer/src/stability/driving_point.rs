//! Driving-point admittance with everything connected: Y = 1/Z, Z the diagonal of A^-1 at a node,
//! or between two nodes. Ranges of negative conductance and start-up frequencies.
//!
//! A start-up frequency is a zero of Im Y that rises with frequency while Re Y is negative
//! (K. Kurokawa, "Some basic characteristics of broadband negative resistance oscillator
//! circuits", Bell Syst. Tech. J., 1969, from memory; the small-signal reduction is common
//! practice). It is a hint and no verdict.

use super::impedance::{Evaluator, Probe, is_negative};
use super::probe::Solver;
use super::refine::{Bracket, Lowest, Part, lowest, roots};
use crate::circuit::NodeId;
use crate::linalg::error::NumericError;
use crate::linalg::workspace::Workspace;
use num_complex::Complex64;

/// What was found at one node.
#[derive(Clone, PartialEq, Debug)]
pub struct DrivingPoint {
    /// The node.
    pub node: NodeId,
    /// Most negative conductance, siemens.
    pub worst_siemens: f64,
    /// Where, hertz.
    pub worst_hz: f64,
    /// Ranges of negative conductance, hertz; open ends are the ends of the sweep.
    pub ranges_hz: Vec<[f64; 2]>,
    /// Start-up frequencies, hertz.
    pub startup_hz: Vec<f64>,
}

/// A zero of Im Y where Re Y is negative.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Crossing {
    /// Hertz.
    pub hz: f64,
    /// Re Y there, siemens.
    pub siemens: f64,
}

/// Driving-point impedance of a probe at given frequencies, ohms.
///
/// # Errors
/// What factorisation reports.
pub fn driving_point_impedance(
    solver: &Solver,
    probe: Probe,
    hz: &[f64],
) -> Result<Vec<Complex64>, NumericError> {
    let mut all = Evaluator::new(solver, &[probe]).sweep(hz)?;
    Ok(all.pop().unwrap_or_default())
}

/// Driving-point admittance of a probe at given frequencies, siemens; infinite at an ideal short.
///
/// # Errors
/// What factorisation reports.
pub fn driving_point_admittance(
    solver: &Solver,
    probe: Probe,
    hz: &[f64],
) -> Result<Vec<Complex64>, NumericError> {
    let z = driving_point_impedance(solver, probe, hz)?;
    let admittance = |z: Complex64| {
        if z == Complex64::default() {
            Complex64::new(f64::INFINITY, 0.0)
        } else {
            z.inv()
        }
    };
    Ok(z.into_iter().map(admittance).collect())
}

/// Ranges of negative conductance of one probe over a rising grid, hertz.
///
/// # Errors
/// What factorisation reports.
pub fn conductance_ranges(
    solver: &Solver,
    probe: Probe,
    grid_hz: &[f64],
) -> Result<Vec<[f64; 2]>, NumericError> {
    let mut evaluator = Evaluator::new(solver, &[probe]);
    let z = evaluator.sweep(grid_hz)?;
    let roots = roots(&mut evaluator, edges(0, grid_hz, &z[0]))?;
    let edges: Vec<f64> = roots.iter().map(|root| root.hz).collect();
    Ok(assemble_ranges(grid_hz, &z[0], &edges))
}

/// Zeros of Im Y with negative Re Y of one probe: rising ones (start-up) or falling ones.
///
/// # Errors
/// What factorisation reports.
pub fn startup_crossings(
    solver: &Solver,
    probe: Probe,
    grid_hz: &[f64],
    rising: bool,
) -> Result<Vec<Crossing>, NumericError> {
    let mut evaluator = Evaluator::new(solver, &[probe]);
    let z = evaluator.sweep(grid_hz)?;
    let brackets = zeros_of_susceptance(0, grid_hz, &z[0], rising);
    let roots = roots(&mut evaluator, brackets)?;
    Ok(roots
        .iter()
        .filter(|root| is_negative(root.z))
        .map(|root| Crossing {
            hz: root.hz,
            siemens: root.z.inv().re,
        })
        .collect())
}

/// All nodes of a system that have a negative range on the grid. `watch` sees the factors of every
/// batch of grid points, its selected inverse included, so that other figures of the sweep need no
/// factorisation of their own.
///
/// # Errors
/// What factorisation reports; `None` when stopped.
pub fn driving_points(
    solver: &Solver,
    grid_hz: &[f64],
    nodes: Option<&[NodeId]>,
    watch: &mut dyn FnMut(&Workspace, &[f64]),
    stop: &dyn Fn() -> bool,
) -> Result<Option<Vec<DrivingPoint>>, NumericError> {
    let probes: Vec<Probe> = match nodes {
        Some(nodes) => nodes.iter().map(|node| Probe::Node(*node)).collect(),
        None => (0..solver.system.unknowns.nodes() as u32)
            .map(|k| Probe::Node(NodeId(k)))
            .collect(),
    };
    let mut evaluator = Evaluator::new(solver, &probes);
    let mut all: Vec<Vec<Complex64>> = probes
        .iter()
        .map(|_| Vec::with_capacity(grid_hz.len()))
        .collect();
    for batch in grid_hz.chunks(solver.plan.lanes()) {
        if stop() {
            return Ok(None);
        }
        evaluator.sweep_into(batch, &mut all)?;
        watch(evaluator.workspace(), batch);
    }
    let mut brackets = Vec::new();
    let mut crossings = Vec::new();
    let mut worst = Vec::new();
    for (index, z) in all.iter().enumerate() {
        if z.iter().any(|z| is_negative(*z)) {
            brackets.extend(edges(index, grid_hz, z));
            crossings.extend(zeros_of_susceptance(index, grid_hz, z, true));
            worst.push(Lowest::new(index, grid_hz, z));
        }
    }
    let edges = roots(&mut evaluator, brackets)?;
    let zeros = roots(&mut evaluator, crossings)?;
    let worst = lowest(&mut evaluator, worst)?;
    if stop() {
        return Ok(None);
    }
    let of = |index: usize| move |root: &&super::refine::Root| root.index == index;
    let mut out = Vec::with_capacity(worst.len());
    for low in &worst {
        let Probe::Node(node) = probes[low.index] else {
            continue;
        };
        let own: Vec<f64> = edges.iter().filter(of(low.index)).map(|r| r.hz).collect();
        let startup_hz = zeros
            .iter()
            .filter(of(low.index))
            .filter(|root| is_negative(root.z))
            .map(|root| root.hz)
            .collect();
        out.push(DrivingPoint {
            node,
            worst_siemens: low.siemens,
            worst_hz: low.hz,
            ranges_hz: assemble_ranges(grid_hz, &all[low.index], &own),
            startup_hz,
        });
    }
    Ok(Some(out))
}

fn edges(index: usize, grid_hz: &[f64], z: &[Complex64]) -> Vec<Bracket> {
    let mut found = Vec::new();
    let mut before = z.first().is_some_and(|z| is_negative(*z));
    for k in 1..z.len() {
        let now = is_negative(z[k]);
        if now != before {
            let ends = [(grid_hz[k - 1], z[k - 1]), (grid_hz[k], z[k])];
            found.push(Bracket::new(index, Part::Real, ends));
        }
        before = now;
    }
    found
}

/// Im Y rises through zero where Im Z falls.
fn zeros_of_susceptance(
    index: usize,
    grid_hz: &[f64],
    z: &[Complex64],
    rising: bool,
) -> Vec<Bracket> {
    let mut found = Vec::new();
    for k in 1..z.len() {
        let (a, b) = (z[k - 1], z[k]);
        let crosses = if rising {
            a.im > 0.0 && b.im <= 0.0
        } else {
            a.im < 0.0 && b.im >= 0.0
        };
        if crosses && (is_negative(a) || is_negative(b)) {
            let ends = [(grid_hz[k - 1], a), (grid_hz[k], b)];
            found.push(Bracket::new(index, Part::Imaginary, ends));
        }
    }
    found
}

/// Ranges from the signs on the grid and the refined edges between them.
fn assemble_ranges(grid_hz: &[f64], z: &[Complex64], edges_hz: &[f64]) -> Vec<[f64; 2]> {
    let mut ranges = Vec::new();
    let mut start: Option<f64> = None;
    let mut edges = edges_hz.iter();
    for k in 0..z.len() {
        let now = is_negative(z[k]);
        let before = k > 0 && is_negative(z[k - 1]);
        if k == 0 && now {
            start = Some(grid_hz[0]);
        } else if k > 0 && now != before {
            let edge = edges.next().copied().unwrap_or(grid_hz[k]);
            match start.take() {
                Some(from) => ranges.push([from, edge]),
                None => start = Some(edge),
            }
        }
    }
    if let (Some(from), Some(last)) = (start, grid_hz.last()) {
        ranges.push([from, *last]);
    }
    ranges
}
