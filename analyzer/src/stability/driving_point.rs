//! Driving-point admittance with everything connected: Y = 1/Z, Z the diagonal of A^-1 at a node,
//! or between two nodes. Ranges of negative conductance and start-up frequencies.
//!
//! A start-up frequency is a zero of Im Y that rises with frequency while Re Y is negative
//! (K. Kurokawa, "Some basic characteristics of broadband negative resistance oscillator
//! circuits", Bell Syst. Tech. J., 1969, from memory; the small-signal reduction is common
//! practice). It is a hint and no verdict.

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

/// Conductance this much smaller than the admittance (relative) is rounding, not negative: it is
/// what a lossless network leaves.
const NOISE: f64 = 1e-11;
/// An impedance below this (ohms) is an ideal short: the node has no driving point.
const SHORT_OHM: f64 = 1e-12;

/// Whether an impedance has a conductance that is negative beyond rounding.
fn is_negative(z: Complex64) -> bool {
    z.norm() > SHORT_OHM && z.re < -NOISE * z.norm()
}

/// Driving-point admittance of a probe at given frequencies, siemens.
///
/// # Errors
/// What factorisation reports.
pub fn driving_point_admittance(
    solver: &Solver,
    probe: Probe,
    hz: &[f64],
) -> Result<Vec<Complex64>, NumericError> {
    let mut evaluator = Evaluator::new(solver);
    let jobs: Vec<(Probe, f64)> = hz.iter().map(|hz| (probe, *hz)).collect();
    let z = evaluator.impedances(&jobs)?;
    Ok(z.into_iter().map(|z| z.inv()).collect())
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
    let mut evaluator = Evaluator::new(solver);
    let z = evaluator.sweep(&[probe], grid_hz)?;
    let brackets = edges(0, probe, grid_hz, &z[0]);
    let roots = evaluator.refine(&brackets)?;
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
    let mut evaluator = Evaluator::new(solver);
    let z = evaluator.sweep(&[probe], grid_hz)?;
    let brackets = zeros_of_susceptance(0, probe, grid_hz, &z[0], rising);
    let roots = evaluator.refine(&brackets)?;
    Ok(roots
        .iter()
        .filter(|root| is_negative(root.z))
        .map(|root| Crossing {
            hz: root.hz,
            siemens: root.z.inv().re,
        })
        .collect())
}

/// All nodes of a system that have a negative range on the grid.
///
/// # Errors
/// What factorisation reports; `None` when stopped.
pub fn driving_points(
    solver: &Solver,
    grid_hz: &[f64],
    nodes: Option<&[NodeId]>,
    stop: &dyn Fn() -> bool,
) -> Result<Option<Vec<DrivingPoint>>, NumericError> {
    let probes: Vec<Probe> = match nodes {
        Some(nodes) => nodes.iter().map(|node| Probe::Node(*node)).collect(),
        None => (0..solver.system.unknowns.nodes() as u32)
            .map(|k| Probe::Node(NodeId(k)))
            .collect(),
    };
    let mut evaluator = Evaluator::new(solver);
    let mut all: Vec<Vec<Complex64>> = probes
        .iter()
        .map(|_| Vec::with_capacity(grid_hz.len()))
        .collect();
    for batch in grid_hz.chunks(solver.plan.lanes()) {
        if stop() {
            return Ok(None);
        }
        evaluator.sweep_into(&probes, batch, &mut all)?;
    }
    let mut brackets = Vec::new();
    let mut crossings = Vec::new();
    let mut lowest = Vec::new();
    for (index, (probe, z)) in probes.iter().zip(&all).enumerate() {
        if z.iter().any(|z| is_negative(*z)) {
            brackets.extend(edges(index, *probe, grid_hz, z));
            crossings.extend(zeros_of_susceptance(index, *probe, grid_hz, z, true));
            lowest.push(Lowest::new(index, *probe, grid_hz, z));
        }
    }
    let edges = evaluator.refine(&brackets)?;
    let zeros = evaluator.refine(&crossings)?;
    evaluator.search(&mut lowest)?;
    let mut out = Vec::with_capacity(lowest.len());
    for low in &lowest {
        let Probe::Node(node) = low.probe else {
            continue;
        };
        let own: Vec<f64> = edges
            .iter()
            .filter(|root| root.index == low.index)
            .map(|root| root.hz)
            .collect();
        let startup_hz = zeros
            .iter()
            .filter(|root| root.index == low.index && is_negative(root.z))
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

/// An interval in which a function of Z changes sign.
#[derive(Clone, Copy, Debug)]
struct Bracket {
    index: usize,
    probe: Probe,
    low_hz: f64,
    high_hz: f64,
    low: f64,
    high: f64,
    part: Part,
}

/// Which part of Z is zero at the root.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Part {
    Real,
    Imaginary,
}

impl Part {
    fn of(self, z: Complex64) -> f64 {
        match self {
            Self::Real => z.re,
            Self::Imaginary => z.im,
        }
    }
}

/// A refined root.
#[derive(Clone, Copy, Debug)]
struct Root {
    index: usize,
    hz: f64,
    z: Complex64,
}

fn edges(index: usize, probe: Probe, grid_hz: &[f64], z: &[Complex64]) -> Vec<Bracket> {
    let mut found = Vec::new();
    for k in 1..z.len() {
        let (before, after) = (is_negative(z[k - 1]), is_negative(z[k]));
        if before != after {
            found.push(Bracket {
                index,
                probe,
                low_hz: grid_hz[k - 1],
                high_hz: grid_hz[k],
                low: z[k - 1].re,
                high: z[k].re,
                part: Part::Real,
            });
        }
    }
    found
}

/// Im Y rises through zero where Im Z falls.
fn zeros_of_susceptance(
    index: usize,
    probe: Probe,
    grid_hz: &[f64],
    z: &[Complex64],
    rising: bool,
) -> Vec<Bracket> {
    let mut found = Vec::new();
    for k in 1..z.len() {
        let (a, b) = (z[k - 1], z[k]);
        let negative = is_negative(a) || is_negative(b);
        let crosses = if rising {
            a.im > 0.0 && b.im <= 0.0
        } else {
            a.im < 0.0 && b.im >= 0.0
        };
        if negative && crosses {
            found.push(Bracket {
                index,
                probe,
                low_hz: grid_hz[k - 1],
                high_hz: grid_hz[k],
                low: a.im,
                high: b.im,
                part: Part::Imaginary,
            });
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

/// Golden-section search for the most negative conductance between two grid points.
#[derive(Clone, Debug)]
struct Lowest {
    index: usize,
    probe: Probe,
    siemens: f64,
    hz: f64,
    low_hz: f64,
    high_hz: f64,
}

impl Lowest {
    fn new(index: usize, probe: Probe, grid_hz: &[f64], z: &[Complex64]) -> Self {
        let conductance = |z: &Complex64| {
            if is_negative(*z) {
                z.inv().re
            } else {
                f64::INFINITY
            }
        };
        let best = (0..z.len())
            .min_by(|a, b| conductance(&z[*a]).total_cmp(&conductance(&z[*b])))
            .unwrap_or(0);
        Self {
            index,
            probe,
            siemens: conductance(&z[best]),
            hz: grid_hz[best],
            low_hz: grid_hz[best.saturating_sub(1)],
            high_hz: grid_hz[(best + 1).min(grid_hz.len() - 1)],
        }
    }
}

/// Evaluates impedances, as many frequencies at once as the plan has lanes.
struct Evaluator<'a> {
    solver: &'a Solver,
    workspace: Workspace,
}

impl<'a> Evaluator<'a> {
    fn new(solver: &'a Solver) -> Self {
        Self {
            solver,
            workspace: solver.plan.workspace(),
        }
    }

    fn factor(&mut self, hz: &[f64]) -> Result<(), NumericError> {
        let s: Vec<Complex64> = hz
            .iter()
            .map(|hz| Complex64::new(0.0, normalised_rad(*hz)))
            .collect();
        let plan = &self.solver.plan;
        match plan.factor_sound(&self.solver.on, &s, &mut self.workspace) {
            Err(NumericError::SingularPoint { .. }) => {
                // A mode exactly on the axis: look a hair beside it.
                let beside: Vec<Complex64> = s
                    .iter()
                    .map(|s| s * Complex64::new(1.0 + 1e-12, -1e-12))
                    .collect();
                plan.factor_sound(&self.solver.on, &beside, &mut self.workspace)?;
            }
            other => other?,
        }
        plan.invert_selected(&mut self.workspace)
    }

    fn impedance(&self, probe: Probe, lane: usize) -> Complex64 {
        let entry = |a: NodeRef, b: NodeRef| {
            let (a, b) = (a.node().map(|n| n.0), b.node().map(|n| n.0));
            match (a, b) {
                (Some(a), Some(b)) => self
                    .workspace
                    .inverse(lane, a, b)
                    .unwrap_or(Complex64::new(f64::NAN, f64::NAN)),
                _ => Complex64::new(0.0, 0.0),
            }
        };
        let z = match probe {
            Probe::Node(node) => entry(NodeRef::Node(node), NodeRef::Node(node)),
            Probe::Pair(a, b) => entry(a, a) + entry(b, b) - entry(a, b) - entry(b, a),
        };
        Complex64::new(ohms(z.re), ohms(z.im))
    }

    fn sweep_into(
        &mut self,
        probes: &[Probe],
        hz: &[f64],
        out: &mut [Vec<Complex64>],
    ) -> Result<(), NumericError> {
        self.factor(hz)?;
        for (probe, values) in probes.iter().zip(out) {
            for lane in 0..hz.len() {
                values.push(self.impedance(*probe, lane));
            }
        }
        Ok(())
    }

    fn sweep(&mut self, probes: &[Probe], hz: &[f64]) -> Result<Vec<Vec<Complex64>>, NumericError> {
        let mut out: Vec<Vec<Complex64>> = probes.iter().map(|_| Vec::new()).collect();
        for batch in hz.chunks(self.solver.plan.lanes()) {
            self.sweep_into(probes, batch, &mut out)?;
        }
        Ok(out)
    }

    /// One impedance per job, each at its own frequency.
    fn impedances(&mut self, jobs: &[(Probe, f64)]) -> Result<Vec<Complex64>, NumericError> {
        let mut out = Vec::with_capacity(jobs.len());
        for batch in jobs.chunks(self.solver.plan.lanes()) {
            let hz: Vec<f64> = batch.iter().map(|(_, hz)| *hz).collect();
            self.factor(&hz)?;
            for (lane, (probe, _)) in batch.iter().enumerate() {
                out.push(self.impedance(*probe, lane));
            }
        }
        Ok(out)
    }

    /// Refines all brackets together by false position with bisection every third step, to a
    /// relative width of 1e-12.
    fn refine(&mut self, brackets: &[Bracket]) -> Result<Vec<Root>, NumericError> {
        const ROUNDS: usize = 90;
        const WIDTH: f64 = 1e-12;
        let mut work: Vec<Bracket> = brackets.to_vec();
        let mut roots: Vec<Option<Root>> = vec![None; work.len()];
        for round in 0..ROUNDS {
            let open: Vec<usize> = (0..work.len())
                .filter(|&k| work[k].high_hz > work[k].low_hz * (1.0 + WIDTH))
                .collect();
            if open.is_empty() {
                break;
            }
            let jobs: Vec<(Probe, f64)> = open
                .iter()
                .map(|&k| (work[k].probe, next_point(&work[k], round)))
                .collect();
            let z = self.impedances(&jobs)?;
            for ((&k, (_, hz)), z) in open.iter().zip(&jobs).zip(z) {
                let bracket = &mut work[k];
                let value = bracket.part.of(z);
                roots[k] = Some(Root {
                    index: bracket.index,
                    hz: *hz,
                    z,
                });
                if value == 0.0 {
                    (bracket.low_hz, bracket.high_hz) = (*hz, *hz);
                } else if (value > 0.0) == (bracket.low > 0.0) {
                    (bracket.low_hz, bracket.low) = (*hz, value);
                } else {
                    (bracket.high_hz, bracket.high) = (*hz, value);
                }
            }
        }
        Ok(work
            .iter()
            .zip(roots)
            .map(|(bracket, root)| {
                root.unwrap_or(Root {
                    index: bracket.index,
                    hz: bracket.low_hz,
                    z: Complex64::new(f64::NAN, f64::NAN),
                })
            })
            .collect())
    }

    fn search(&mut self, lowest: &mut [Lowest]) -> Result<(), NumericError> {
        const ROUNDS: usize = 20;
        const GOLDEN: f64 = 0.381_966_011_250_105;
        for round in 0..ROUNDS {
            let jobs: Vec<(Probe, f64)> = lowest
                .iter()
                .map(|low| {
                    // The larger of the two gaps beside the best point is cut.
                    let (below, above) = (low.hz / low.low_hz, low.high_hz / low.hz);
                    let hz = if below > above || (below == above && round % 2 == 0) {
                        low.hz / below.powf(GOLDEN)
                    } else {
                        low.hz * above.powf(GOLDEN)
                    };
                    (low.probe, hz)
                })
                .collect();
            let z = self.impedances(&jobs)?;
            for ((low, (_, hz)), z) in lowest.iter_mut().zip(jobs).zip(z) {
                let siemens = if is_negative(z) {
                    z.inv().re
                } else {
                    f64::INFINITY
                };
                if siemens < low.siemens {
                    if hz < low.hz {
                        low.high_hz = low.hz;
                    } else {
                        low.low_hz = low.hz;
                    }
                    (low.siemens, low.hz) = (siemens, hz);
                } else if hz < low.hz {
                    low.low_hz = hz;
                } else {
                    low.high_hz = hz;
                }
            }
        }
        Ok(())
    }
}

fn next_point(bracket: &Bracket, round: usize) -> f64 {
    let middle = (bracket.low_hz * bracket.high_hz).sqrt();
    let spread = bracket.high - bracket.low;
    if round % 3 == 2 || spread == 0.0 || !spread.is_finite() {
        return middle;
    }
    let guess = bracket.low_hz - bracket.low * (bracket.high_hz - bracket.low_hz) / spread;
    let inside = guess > bracket.low_hz && guess < bracket.high_hz;
    if inside { guess } else { middle }
}
