//! Scattering parameters between the ports (power waves, each port's own real resistance:
//! K. Kurokawa, IEEE Trans. MTT, 1965, from memory), Rollett's K (J. M. Rollett, IRE Trans. CT,
//! 1962, from memory) and mu (M. L. Edwards, J. H. Sinsky, IEEE Trans. MTT 40, 1992).
//!
//! The ports are part of the system: a wave is sent into one termination at a time and read at
//! all others. The figures are those of the swept points; nothing is said between them.

use super::probe::{Solver, normalised_rad};
use crate::assembly::{REFERENCE_OHM, Unknowns};
use crate::circuit::{Circuit, NodeRef, Port, PortDrive};
use crate::linalg::error::NumericError;
use crate::linalg::workspace::Workspace;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// Least K and mu over a sweep.
#[derive(Clone, PartialEq, Debug)]
pub struct TwoPort {
    /// Least mu.
    pub mu_min: f64,
    /// Where, hertz.
    pub mu_min_hz: f64,
    /// Whether mu falls below 1 by more than rounding somewhere.
    pub below_one: bool,
    /// Least finite K.
    pub k_min: Option<f64>,
    /// Where, hertz.
    pub k_min_hz: Option<f64>,
    /// No reverse or no forward transmission at any swept point.
    pub unilateral: bool,
}

/// A scattering matrix, rows and columns in port order.
#[derive(Clone, PartialEq, Debug)]
pub struct Scattering {
    /// The matrix.
    pub s: DMatrix<Complex64>,
    /// Bound of the rounding error of its entries.
    pub error: f64,
}

/// K and mu of one S matrix.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Factors {
    /// Rollett's K; infinite without transmission in one direction, NaN where its digits are lost.
    pub k: f64,
    /// mu (load side); NaN where its digits are lost.
    pub mu: f64,
    /// Bound of the rounding error of mu.
    pub mu_error: f64,
}

/// K and mu from a 2x2 scattering matrix. Where both ports reflect nearly everything, or nearly
/// nothing comes back, the differences that they are made of drown in rounding: a figure without two
/// sure digits is NaN.
pub fn factors(scattering: &Scattering) -> Factors {
    const SURE: f64 = 100.0;
    let (s, error) = (&scattering.s, scattering.error);
    let (s11, s12, s21, s22) = (s[(0, 0)], s[(0, 1)], s[(1, 0)], s[(1, 1)]);
    let delta = s11 * s22 - s12 * s21;
    let loop_size = (s12 * s21).norm();
    let size = 1.0 + [s11, s12, s21, s22].iter().map(|s| s.norm()).sum::<f64>();
    // A relative error of the figure: that of the numerator and that of the denominator.
    let sure = |numerator: f64, denominator: f64, degree: i32| {
        let lost = SURE * error * size.powi(degree);
        numerator.abs() > lost && (denominator > lost || denominator == 0.0)
    };
    let figure = |numerator: f64, denominator: f64, degree: i32| {
        if sure(numerator, denominator, degree) {
            numerator / denominator
        } else {
            f64::NAN
        }
    };
    let numerator = 1.0 - s11.norm_sqr() - s22.norm_sqr() + delta.norm_sqr();
    let above = 1.0 - s11.norm_sqr();
    let denominator = (s22 - delta * s11.conj()).norm() + loop_size;
    let mu = figure(above, denominator, 2);
    let lost = 4.0 * error * size.powi(2);
    Factors {
        k: figure(numerator, 2.0 * loop_size, 3),
        mu,
        mu_error: mu.abs() * lost * (1.0 / above.abs() + 1.0 / denominator),
    }
}

/// Unknown-side reading of a port: what `b` is made of.
struct Reading {
    rows: Vec<(u32, f64)>,
    ohm: f64,
    series: bool,
}

impl Reading {
    fn new(unknowns: &Unknowns, port: &Port) -> Option<Self> {
        let across = |plus: NodeRef, minus: NodeRef| {
            [(plus, 1.0), (minus, -1.0)]
                .into_iter()
                .filter_map(|(node, sign)| Some((unknowns.node(node)?, sign)))
                .collect::<Vec<_>>()
        };
        match &port.drive {
            PortDrive::Shunt { node, .. } => Some(Self {
                rows: across(NodeRef::Node(*node), NodeRef::Ground),
                ohm: port.ohm,
                series: false,
            }),
            PortDrive::Across { nodes, .. } => Some(Self {
                rows: across(nodes[0], nodes[1]),
                ohm: port.ohm,
                series: false,
            }),
            PortDrive::Series { part } => Some(Self {
                rows: vec![(unknowns.branch(*part)?, 1.0)],
                ohm: port.ohm,
                series: true,
            }),
        }
    }

    /// The right-hand side of a wave a = 1 into this port: an EMF of 2 sqrt(R).
    fn drive(&self) -> Vec<(u32, f64)> {
        let emf = 2.0 * self.ohm.sqrt();
        // Shunt ports are driven by the current emf/R (current laws are scaled by 50 ohm).
        let value = if self.series {
            emf
        } else {
            emf / self.ohm * REFERENCE_OHM
        };
        self.rows
            .iter()
            .map(|(row, sign)| (*row, sign * value))
            .collect()
    }

    /// b = (2 V - E) / (2 sqrt R), with V = E + R I for a series port of branch current I. `sum`
    /// is what the port's rows read.
    fn wave(&self, sum: Complex64, driven: bool) -> Complex64 {
        let emf = if driven { 2.0 * self.ohm.sqrt() } else { 0.0 };
        let volts = if self.series {
            emf + self.ohm / REFERENCE_OHM * sum
        } else {
            sum
        };
        (2.0 * volts - emf) / (2.0 * self.ohm.sqrt())
    }
}

/// Pairs (unknown, equation) of the inverse that the waves between the ports of a circuit need.
pub(super) fn wanted(circuit: &Circuit, unknowns: &Unknowns) -> Vec<(u32, u32)> {
    let rows: Vec<u32> = circuit
        .ports
        .iter()
        .filter_map(|port| Reading::new(unknowns, port))
        .flat_map(|reading| reading.rows)
        .map(|(row, _)| row)
        .collect();
    rows.iter()
        .flat_map(|a| rows.iter().map(|b| (*a, *b)))
        .collect()
}

/// Reads scattering matrices from a selected inverse.
struct Waves {
    readings: Vec<Reading>,
    /// Per pair of ports (row, column): entries of the inverse with what they are multiplied by.
    terms: Vec<Vec<(usize, f64)>>,
}

impl Waves {
    /// `None` when a port cannot be read.
    fn new(solver: &Solver, circuit: &Circuit) -> Option<Self> {
        let unknowns = &solver.system.unknowns;
        let readings = circuit
            .ports
            .iter()
            .map(|port| Reading::new(unknowns, port))
            .collect::<Option<Vec<_>>>()?;
        let mut terms = Vec::new();
        for to in &readings {
            for from in &readings {
                let mut pair = Vec::new();
                for (equation, drive) in from.drive() {
                    for (unknown, sign) in &to.rows {
                        let index = solver.plan.inverse_index(*unknown, equation)?;
                        pair.push((index, drive * sign));
                    }
                }
                terms.push(pair);
            }
        }
        Some(Self { readings, terms })
    }

    /// The matrices of one batch of points.
    fn read(&self, ws: &Workspace, points: usize) -> Vec<Scattering> {
        let ports = self.readings.len();
        let mut matrices = vec![DMatrix::zeros(ports, ports); points];
        let mut lanes = vec![Complex64::default(); points];
        for (k, pair) in self.terms.iter().enumerate() {
            let (i, j) = (k / ports, k % ports);
            for (index, factor) in pair {
                ws.inverse_lanes(*index, &mut lanes);
                for (matrix, z) in matrices.iter_mut().zip(&lanes) {
                    matrix[(i, j)] += z * *factor;
                }
            }
            for matrix in &mut matrices {
                matrix[(i, j)] = self.readings[i].wave(matrix[(i, j)], i == j);
            }
        }
        let rounding = |lane: usize| 4.0 * f64::EPSILON * ws.growth(lane).max(1.0);
        matrices
            .into_iter()
            .enumerate()
            .map(|(lane, s)| Scattering {
                s,
                error: rounding(lane),
            })
            .collect()
    }
}

/// The scattering matrix at each frequency. `None` when a port cannot be read.
///
/// # Errors
/// What factorisation reports.
pub fn scattering(
    solver: &Solver,
    circuit: &Circuit,
    hz: &[f64],
) -> Result<Option<Vec<Scattering>>, NumericError> {
    let Some(waves) = Waves::new(solver, circuit) else {
        return Ok(None);
    };
    let plan = &solver.plan;
    let mut ws = plan.workspace();
    let mut out = Vec::with_capacity(hz.len());
    for batch in hz.chunks(plan.lanes()) {
        let s: Vec<Complex64> = batch
            .iter()
            .map(|hz| Complex64::new(0.0, normalised_rad(*hz)))
            .collect();
        plan.factor_sound(&solver.on, &s, &mut ws)?;
        plan.invert_selected(&mut ws)?;
        out.extend(waves.read(&ws, batch.len()));
    }
    Ok(Some(out))
}

/// Collects the least K and mu while a block with exactly two ports is swept.
pub struct TwoPortWatch {
    waves: Option<Waves>,
    mu_min: (f64, f64),
    below_one: bool,
    k_min: Option<(f64, f64)>,
    transmits: bool,
}

impl TwoPortWatch {
    /// A watch that sees nothing unless the circuit has two ports that can be read.
    pub fn new(solver: &Solver, circuit: &Circuit) -> Self {
        let two = circuit.ports.len() == 2;
        Self {
            waves: two.then(|| Waves::new(solver, circuit)).flatten(),
            mu_min: (f64::INFINITY, 0.0),
            below_one: false,
            k_min: None,
            transmits: false,
        }
    }

    /// Takes one batch of points (hertz) with its selected inverse in.
    pub fn see(&mut self, ws: &Workspace, hz: &[f64]) {
        let Some(waves) = &self.waves else {
            return;
        };
        for (hz, scattering) in hz.iter().zip(waves.read(ws, hz.len())) {
            let found = factors(&scattering);
            if found.mu < self.mu_min.0 {
                self.mu_min = (found.mu, *hz);
            }
            self.below_one |= found.mu + found.mu_error < 1.0;
            let s = &scattering.s;
            self.transmits |= (s[(0, 1)] * s[(1, 0)]).norm() > 0.0;
            if found.k.is_finite() && self.k_min.is_none_or(|(k, _)| found.k < k) {
                self.k_min = Some((found.k, *hz));
            }
        }
    }

    /// The least figures; `None` when there is no mu at any point.
    pub fn finish(self) -> Option<TwoPort> {
        self.mu_min.0.is_finite().then(|| TwoPort {
            mu_min: self.mu_min.0,
            mu_min_hz: self.mu_min.1,
            below_one: self.below_one,
            k_min: self.k_min.map(|(k, _)| k),
            k_min_hz: self.k_min.map(|(_, hz)| hz),
            unilateral: !self.transmits,
        })
    }
}
