//! Numbers over frequency from one block, for plots and scripts.

use super::prepared::Prepared;
use super::screening::request;
use crate::circuit::{NodeRef, PartKind};
use crate::elaborate::BlockCircuit;
use crate::stability::{
    ModeFailure, Probe, Solver, SolverFailure, active_sources, driving_point_admittance,
    driving_point_impedance, factors, natural_modes, normalized_determinant, scattering, solver_of,
};
use num_complex::Complex64;

/// A table of numbers with its column names.
#[derive(Clone, PartialEq, Debug)]
pub struct TraceTable {
    /// Column names.
    pub header: Vec<String>,
    /// Rows, each as long as the header.
    pub rows: Vec<Vec<f64>>,
}

/// Why there is no table; the text stands alone.
#[derive(Clone, PartialEq, Eq, Debug)]
#[non_exhaustive]
pub enum TraceError {
    /// No block of that name, or none at all.
    NoBlock(String),
    /// A quantity, node or port that is not there.
    Unknown(String),
    /// No system to compute with.
    NoSystem(String),
}

impl std::fmt::Display for TraceError {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::NoBlock(text) | Self::Unknown(text) | Self::NoSystem(text) => f.write_str(text),
        }
    }
}

impl std::error::Error for TraceError {}

/// The quantities that can be traced, for messages.
const QUANTITIES: &str = "ndf, y:NODE, z:NODE, s, k, mu, mu-prime, delta, modes";

impl Prepared {
    /// Values of `quantities` at the given frequencies (hertz), in one block: the named one, or
    /// the only one. `modes` stands alone and needs no frequencies.
    ///
    /// # Errors
    /// See [`TraceError`].
    pub fn trace(
        &self,
        block: Option<&str>,
        quantities: &[String],
        hz: &[f64],
    ) -> Result<TraceTable, TraceError> {
        let block = self.find_block(block)?;
        let solver = self.solver(block)?;
        let is_modes = |q: &String| q.eq_ignore_ascii_case("modes");
        if quantities.iter().any(is_modes) {
            if quantities.len() > 1 {
                let text = "`modes` stands alone: ask for it in a call of its own";
                return Err(TraceError::Unknown(text.to_owned()));
            }
            return self.modes_table(&solver);
        }
        let mut table = TraceTable {
            header: vec!["hz".to_owned()],
            rows: hz.iter().map(|hz| vec![*hz]).collect(),
        };
        for quantity in quantities {
            add_columns(&mut table, block, &solver, quantity, hz)?;
        }
        Ok(table)
    }

    fn find_block(&self, name: Option<&str>) -> Result<&BlockCircuit, TraceError> {
        let blocks = &self.elaborated.blocks;
        let names: Vec<&str> = blocks.iter().map(|block| block.name.as_str()).collect();
        match name {
            Some(name) => blocks
                .iter()
                .find(|block| block.name.eq_ignore_ascii_case(name))
                .ok_or_else(|| {
                    let text = format!("no block `{name}`; there are: {}", names.join(", "));
                    TraceError::NoBlock(text)
                }),
            None => match blocks.as_slice() {
                [only] => Ok(only),
                [] => Err(TraceError::NoBlock(
                    "no block is marked (`*~ block NAME`)".to_owned(),
                )),
                _ => {
                    let text = format!("name one block of: {}", names.join(", "));
                    Err(TraceError::NoBlock(text))
                }
            },
        }
    }

    fn solver(&self, block: &BlockCircuit) -> Result<Solver, TraceError> {
        let blocking = block
            .circuit
            .parts
            .iter()
            .find_map(|part| match &part.kind {
                PartKind::NotComputed { reason, .. } => {
                    Some(format!("`{}` is {reason}", part.name))
                }
                _ => None,
            });
        if let Some(reason) = blocking {
            return Err(TraceError::NoSystem(reason));
        }
        let request = request(self, block);
        let active = active_sources(&block.circuit, &request.claims);
        solver_of(&request, &active).map_err(|failure| {
            TraceError::NoSystem(match failure {
                SolverFailure::Empty => "the block has no nodes".to_owned(),
                SolverFailure::NotFinite => "a value is not finite".to_owned(),
                SolverFailure::Singular { .. } => {
                    "the circuit leaves nodes undetermined at every frequency (see squeg lint)"
                        .to_owned()
                }
                SolverFailure::Numeric(error) => error.to_string(),
            })
        })
    }

    fn modes_table(&self, solver: &Solver) -> Result<TraceTable, TraceError> {
        let limit = self.host.config.limits.states;
        if solver.system.has_delays() {
            let text = "the block has delays, so its modes are infinitely many; squeg lint lists those found in the sweep";
            return Err(TraceError::NoSystem(text.to_owned()));
        }
        let modes = natural_modes(solver, false, limit, None, &|| false).map_err(|failure| {
            TraceError::NoSystem(match failure {
                ModeFailure::TooMany { states } => {
                    format!("the block has {states} states, and modes are computed up to {limit}")
                }
                ModeFailure::Numeric(error) => format!("the modes are not known: {error}"),
            })
        })?;
        let mut rows: Vec<Vec<f64>> = modes
            .list
            .iter()
            .map(|mode| vec![mode.hz(), mode.growth_per_s(), mode.damping()])
            .collect();
        rows.extend((0..modes.at_zero).map(|_| vec![0.0, 0.0, 0.0]));
        Ok(TraceTable {
            header: ["hz", "growth_per_s", "damping"]
                .map(str::to_owned)
                .to_vec(),
            rows,
        })
    }
}

fn add_columns(
    table: &mut TraceTable,
    block: &BlockCircuit,
    solver: &Solver,
    quantity: &str,
    hz: &[f64],
) -> Result<(), TraceError> {
    let numeric =
        |error: crate::linalg::error::NumericError| TraceError::NoSystem(error.to_string());
    let (word, node) = match quantity.split_once(':') {
        Some((word, node)) => (word.to_ascii_lowercase(), Some(node)),
        None => (quantity.to_ascii_lowercase(), None),
    };
    match (word.as_str(), node) {
        ("ndf", None) => {
            if solver.off_structure.singular {
                let text = "the network with its sources off leaves nodes undetermined: the normalized determinant does not exist";
                return Err(TraceError::NoSystem(text.to_owned()));
            }
            let values = normalized_determinant(solver, hz).map_err(numeric)?;
            complex_columns(table, quantity, &values);
        }
        ("y" | "z", Some(name)) => {
            let Some(NodeRef::Node(node)) = block.circuit.find_node(name) else {
                let text = format!("no node `{name}` in block `{}`", block.name);
                return Err(TraceError::Unknown(text));
            };
            let probe = Probe::Node(node);
            let values = if word == "z" {
                driving_point_impedance(solver, probe, hz)
            } else {
                driving_point_admittance(solver, probe, hz)
            };
            complex_columns(table, quantity, &values.map_err(numeric)?);
        }
        ("s" | "k" | "mu" | "mu-prime" | "delta", None) => {
            port_columns(table, block, solver, &word, quantity, hz)?;
        }
        _ => {
            let text = format!("no quantity `{quantity}`; there are: {QUANTITIES}");
            return Err(TraceError::Unknown(text));
        }
    }
    Ok(())
}

fn complex_columns(table: &mut TraceTable, name: &str, values: &[Complex64]) {
    table.header.push(format!("{name}_re"));
    table.header.push(format!("{name}_im"));
    for (row, value) in table.rows.iter_mut().zip(values) {
        row.extend([value.re, value.im]);
    }
}

fn port_columns(
    table: &mut TraceTable,
    block: &BlockCircuit,
    solver: &Solver,
    word: &str,
    quantity: &str,
    hz: &[f64],
) -> Result<(), TraceError> {
    let ports = block.circuit.ports.len();
    if ports == 0 || (word != "s" && ports != 2) {
        let text = format!(
            "block `{}` has {ports} ports: `{quantity}` needs two",
            block.name
        );
        return Err(TraceError::Unknown(text));
    }
    let matrices = scattering(solver, &block.circuit, hz)
        .map_err(|error| TraceError::NoSystem(error.to_string()))?
        .ok_or_else(|| TraceError::NoSystem("a port cannot be read".to_owned()))?;
    if word == "s" {
        for i in 0..ports {
            for j in 0..ports {
                let values: Vec<Complex64> = matrices.iter().map(|m| m.s[(i, j)]).collect();
                complex_columns(table, &format!("s{}{}", i + 1, j + 1), &values);
            }
        }
        return Ok(());
    }
    if word == "delta" {
        let values: Vec<Complex64> = matrices
            .iter()
            .map(|m| m.s[(0, 0)] * m.s[(1, 1)] - m.s[(0, 1)] * m.s[(1, 0)])
            .collect();
        complex_columns(table, quantity, &values);
        return Ok(());
    }
    table.header.push(quantity.to_owned());
    for (row, scattering) in table.rows.iter_mut().zip(matrices) {
        // mu' is mu with the ports exchanged.
        let mut scattering = scattering;
        if word == "mu-prime" {
            scattering.s.swap_rows(0, 1);
            scattering.s.swap_columns(0, 1);
        }
        let found = factors(&scattering);
        row.push(if word == "k" { found.k } else { found.mu });
    }
    Ok(())
}
