//! A circuit of `tests/race` as normalised matrices, stamped as `tests/reference/engineer.py` does.
//!
//! Unknowns are volts and 50 ohm times amperes, s counts in units of 2 pi 1 GHz. Node 0 is ground,
//! node k is unknown k - 1; branch currents follow in the order of the parts.

mod json;

use json::Json;
use num_complex::Complex64;
use squeg_analyzer::linalg::error::NumericError;
use squeg_analyzer::linalg::pattern::Pattern;
use squeg_analyzer::linalg::plan::Plan;
use squeg_analyzer::linalg::values::Values;
use std::f64::consts::PI;
use std::sync::Arc;

/// Impedance unit.
pub const R0_OHM: f64 = 50.0;
/// Frequency unit.
pub const W0_RAD: f64 = 2.0 * PI * 1e9;
/// Where the pivot order must hold.
const REFERENCE_HZ: [f64; 4] = [1e3, 5e5, 2.5e8, 1e11];

/// s/W0 on the axis.
pub fn axis(hz: f64) -> Complex64 {
    Complex64::new(0.0, 2.0 * PI * hz / W0_RAD)
}

/// `count` frequencies from `low` to `high`, evenly spaced in the logarithm.
pub fn grid_hz(low: f64, high: f64, count: usize) -> Vec<f64> {
    let step = (high / low).log10() / (count.max(2) - 1) as f64;
    (0..count)
        .map(|k| low * 10f64.powf(step * k as f64))
        .collect()
}

/// Which part of A(s) an entry belongs to.
#[derive(Debug, Clone, Copy)]
enum Term {
    Constant,
    Slope,
    /// Delay in seconds.
    Delay(f64),
}

/// One normalised contribution to A(s).
#[derive(Debug, Clone, Copy)]
struct Stamp {
    row: u32,
    column: u32,
    value: f64,
    term: Term,
    /// Whether it vanishes with the sources off.
    source: bool,
}

/// The circuit as a list of stamps.
#[derive(Debug, Clone)]
pub struct Circuit {
    /// Name given in the file.
    pub name: String,
    /// Nodes without ground.
    pub nodes: usize,
    /// Node voltages and branch currents.
    pub unknowns: usize,
    /// (node, resistance in ohm) of each port; the resistor is part of the circuit.
    pub ports: Vec<(u32, f64)>,
    stamps: Vec<Stamp>,
}

/// Matrices and plan of a circuit.
pub struct Prepared {
    /// With sources.
    pub on: Values,
    /// Sources off.
    pub off: Values,
    /// Pivot order for both.
    pub plan: Plan,
}

impl Circuit {
    /// Reads the text of one file.
    pub fn read(text: &str) -> Result<Self, String> {
        let data = Json::read(text)?;
        let nodes = data.get("nodes")?.number()? as usize;
        let mut circuit = Self {
            name: data.get("name")?.text()?.to_owned(),
            nodes,
            unknowns: nodes,
            ports: Vec::new(),
            stamps: Vec::new(),
        };
        for port in data.get("ports")?.list()? {
            let (node, ohm) = (&port.list()?[0], &port.list()?[1]);
            circuit.ports.push((node.number()? as u32, ohm.number()?));
        }
        for part in data.get("stamps")?.list()? {
            let [kind, fields @ ..] = part.list()? else {
                return Err("a part without a kind".to_owned());
            };
            let fields: Result<Vec<f64>, String> = fields.iter().map(Json::number).collect();
            circuit.part(kind.text()?, &fields?)?;
        }
        Ok(circuit)
    }

    fn part(&mut self, kind: &str, fields: &[f64]) -> Result<(), String> {
        match (kind, fields) {
            ("R", &[a, b, ohm]) => self.two_pole(a, b, R0_OHM / ohm, Term::Constant),
            ("C", &[a, b, farad]) => self.two_pole(a, b, R0_OHM * farad * W0_RAD, Term::Slope),
            ("L", &[a, b, henry]) => self.inductor(a, b, henry),
            ("VCCS", &[p, q, cp, cn, siemens, tau]) => self.source([p, q, cp, cn], siemens, tau),
            ("TL", &[a, b, ohm, tau, neper]) => self.line(a, b, ohm / R0_OHM, (tau, neper)),
            _ => return Err(format!("part {kind} with {} fields", fields.len())),
        }
        Ok(())
    }

    /// Adds one contribution unless it belongs to ground; numbering from 1.
    fn put(&mut self, row: usize, column: usize, value: f64, term: Term) {
        if row > 0 && column > 0 {
            self.stamps.push(Stamp {
                row: row as u32 - 1,
                column: column as u32 - 1,
                value,
                term,
                source: false,
            });
        }
    }

    fn two_pole(&mut self, a: f64, b: f64, y: f64, term: Term) {
        let (a, b) = (a as usize, b as usize);
        self.put(a, a, y, term);
        self.put(b, b, y, term);
        self.put(a, b, -y, term);
        self.put(b, a, -y, term);
    }

    fn branch(&mut self) -> usize {
        self.unknowns += 1;
        self.unknowns
    }

    fn inductor(&mut self, a: f64, b: f64, henry: f64) {
        let i = self.branch();
        for (node, sign) in [(a as usize, 1.0), (b as usize, -1.0)] {
            self.put(node, i, sign, Term::Constant);
            self.put(i, node, sign, Term::Constant);
        }
        self.put(i, i, -henry * W0_RAD / R0_OHM, Term::Slope);
    }

    fn source(&mut self, pins: [f64; 4], siemens: f64, tau: f64) {
        let [p, q, cp, cn] = pins.map(|pin| pin as usize);
        let term = if tau == 0.0 {
            Term::Constant
        } else {
            Term::Delay(tau)
        };
        let first = self.stamps.len();
        let gm = siemens * R0_OHM;
        self.put(p, cp, gm, term);
        self.put(p, cn, -gm, term);
        self.put(q, cp, -gm, term);
        self.put(q, cn, gm, term);
        for stamp in &mut self.stamps[first..] {
            stamp.source = true;
        }
    }

    /// Wave form: v1 - z i1 = exp(-s tau - neper) (v2 + z i2), and its mirror image.
    fn line(&mut self, a: f64, b: f64, z: f64, (tau, neper): (f64, f64)) {
        let (a, b) = (a as usize, b as usize);
        let (i1, i2) = (self.branch(), self.branch());
        let loss = (-neper).exp();
        self.put(a, i1, 1.0, Term::Constant);
        self.put(b, i2, 1.0, Term::Constant);
        for (i, node, far_i, far_node) in [(i1, a, i2, b), (i2, b, i1, a)] {
            self.put(i, node, 1.0, Term::Constant);
            self.put(i, i, -z, Term::Constant);
            self.put(i, far_node, -loss, Term::Delay(tau));
            self.put(i, far_i, -z * loss, Term::Delay(tau));
        }
    }

    fn values(&self, pattern: &Arc<Pattern>, sources: bool) -> Result<Values, NumericError> {
        let mut values = Values::new(pattern.clone());
        for stamp in self.stamps.iter().filter(|s| sources || !s.source) {
            let (row, column, v) = (stamp.row, stamp.column, stamp.value);
            match stamp.term {
                Term::Constant => values.add_g(row, column, v)?,
                Term::Slope => values.add_c(row, column, v)?,
                Term::Delay(tau) => values.add_delay(row, column, v, tau * W0_RAD)?,
            }
        }
        Ok(values)
    }

    /// Entries of the inverse that the job reads: all driving points and the ports.
    pub fn wanted(&self) -> Vec<(u32, u32)> {
        let mut wanted: Vec<(u32, u32)> = (0..self.nodes as u32).map(|k| (k, k)).collect();
        for &(to, _) in &self.ports {
            wanted.extend(self.ports.iter().map(|&(from, _)| (to - 1, from - 1)));
        }
        wanted
    }

    /// Matrices with and without sources, and one plan for both.
    pub fn prepare(&self) -> Result<Prepared, NumericError> {
        let places: Vec<(u32, u32)> = self.stamps.iter().map(|s| (s.row, s.column)).collect();
        let pattern = Pattern::new(self.unknowns, &places);
        let (on, off) = (self.values(&pattern, true)?, self.values(&pattern, false)?);
        let references = REFERENCE_HZ.map(|hz| axis(hz).im);
        let plan = Plan::new(pattern, &[&on, &off], &references, &self.wanted())?;
        Ok(Prepared { on, off, plan })
    }
}
