//! Scattering parameters between the ports (power waves, each port's own real resistance:
//! K. Kurokawa, IEEE Trans. MTT, 1965, from memory), Rollett's K (J. M. Rollett, IRE Trans. CT,
//! 1962, from memory) and mu (M. L. Edwards, J. H. Sinsky, IEEE Trans. MTT 40, 1992).
//!
//! The ports are part of the system: a wave is sent into one termination at a time and read at
//! all others. The figures are those of the swept points; nothing is said between them.

use super::probe::{Solver, normalised_rad};
use crate::assembly::REFERENCE_OHM;
use crate::circuit::{Circuit, NodeRef, Port, PortDrive};
use crate::linalg::error::NumericError;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// Least K and mu over a sweep.
#[derive(Clone, PartialEq, Debug)]
pub struct TwoPort {
    /// Least mu.
    pub mu_min: f64,
    /// Where, hertz.
    pub mu_min_hz: f64,
    /// Least finite K.
    pub k_min: Option<f64>,
    /// Where, hertz.
    pub k_min_hz: Option<f64>,
    /// No reverse or no forward transmission at any swept point.
    pub unilateral: bool,
}

/// K and mu of one S matrix.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Factors {
    /// Rollett's K; infinite without transmission in one direction.
    pub k: f64,
    /// mu (load side).
    pub mu: f64,
}

/// K and mu from a 2x2 scattering matrix.
pub fn factors(s: &DMatrix<Complex64>) -> Factors {
    let (s11, s12, s21, s22) = (s[(0, 0)], s[(0, 1)], s[(1, 0)], s[(1, 1)]);
    let delta = s11 * s22 - s12 * s21;
    let loop_size = (s12 * s21).norm();
    let numerator = 1.0 - s11.norm_sqr() - s22.norm_sqr() + delta.norm_sqr();
    let k = numerator / (2.0 * loop_size);
    let mu = (1.0 - s11.norm_sqr()) / ((s22 - delta * s11.conj()).norm() + loop_size);
    Factors { k, mu }
}

/// Unknown-side reading of a port: what `b` is made of.
struct Reading {
    rows: Vec<(u32, f64)>,
    ohm: f64,
    series: bool,
}

impl Reading {
    fn new(solver: &Solver, port: &Port) -> Option<Self> {
        let unknowns = &solver.system.unknowns;
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
    fn drive(&self) -> Vec<(u32, Complex64)> {
        let emf = 2.0 * self.ohm.sqrt();
        // Shunt ports are driven by the current emf/R (current laws are scaled by 50 ohm).
        let value = if self.series {
            emf
        } else {
            emf / self.ohm * REFERENCE_OHM
        };
        self.rows
            .iter()
            .map(|(row, sign)| (*row, Complex64::new(sign * value, 0.0)))
            .collect()
    }

    /// b = (2 V - E) / (2 sqrt R), with V = E + R I for a series port of branch current I.
    fn wave(&self, x: &dyn Fn(u32) -> Complex64, driven: bool) -> Complex64 {
        let sum: Complex64 = self.rows.iter().map(|(row, sign)| x(*row) * *sign).sum();
        let emf = if driven { 2.0 * self.ohm.sqrt() } else { 0.0 };
        let volts = if self.series {
            emf + self.ohm / REFERENCE_OHM * sum
        } else {
            sum
        };
        (2.0 * volts - emf) / (2.0 * self.ohm.sqrt())
    }
}

/// The scattering matrix at each frequency; rows and columns in port order. `None` when a port
/// cannot be read.
///
/// # Errors
/// What factorisation reports.
pub fn scattering(
    solver: &Solver,
    circuit: &Circuit,
    hz: &[f64],
) -> Result<Option<Vec<DMatrix<Complex64>>>, NumericError> {
    let readings: Option<Vec<Reading>> = circuit
        .ports
        .iter()
        .map(|port| Reading::new(solver, port))
        .collect();
    let Some(readings) = readings else {
        return Ok(None);
    };
    let ports = readings.len();
    let (plan, lanes) = (&solver.plan, solver.plan.lanes());
    let mut ws = plan.workspace();
    let mut x = vec![Complex64::default(); plan.n() * lanes];
    let mut out = Vec::with_capacity(hz.len());
    for batch in hz.chunks(lanes) {
        let s: Vec<Complex64> = batch
            .iter()
            .map(|hz| Complex64::new(0.0, normalised_rad(*hz)))
            .collect();
        plan.factor_sound(&solver.on, &s, &mut ws)?;
        let mut matrices = vec![DMatrix::zeros(ports, ports); batch.len()];
        for (j, source) in readings.iter().enumerate() {
            plan.solve(&mut ws, &source.drive(), &mut x)?;
            for (lane, matrix) in matrices.iter_mut().enumerate() {
                let at = |row: u32| {
                    x.get(row as usize * lanes + lane)
                        .copied()
                        .unwrap_or_default()
                };
                for (i, reading) in readings.iter().enumerate() {
                    matrix[(i, j)] = reading.wave(&at, i == j);
                }
            }
        }
        out.extend(matrices);
    }
    Ok(Some(out))
}

/// Least K and mu over a sweep of a block with exactly two ports.
///
/// # Errors
/// What factorisation reports.
pub fn two_port_factors(
    solver: &Solver,
    circuit: &Circuit,
    grid_hz: &[f64],
) -> Result<Option<TwoPort>, NumericError> {
    if circuit.ports.len() != 2 {
        return Ok(None);
    }
    let Some(matrices) = scattering(solver, circuit, grid_hz)? else {
        return Ok(None);
    };
    let mut mu_min = (f64::INFINITY, 0.0);
    let mut k_min: Option<(f64, f64)> = None;
    let mut unilateral = true;
    for (hz, matrix) in grid_hz.iter().zip(&matrices) {
        let found = factors(matrix);
        if found.mu < mu_min.0 {
            mu_min = (found.mu, *hz);
        }
        if found.k.is_finite() {
            unilateral = false;
            if k_min.is_none_or(|(k, _)| found.k < k) {
                k_min = Some((found.k, *hz));
            }
        }
    }
    if !mu_min.0.is_finite() {
        return Ok(None);
    }
    Ok(Some(TwoPort {
        mu_min: mu_min.0,
        mu_min_hz: mu_min.1,
        k_min: k_min.map(|(k, _)| k),
        k_min_hz: k_min.map(|(_, hz)| hz),
        unilateral,
    }))
}
