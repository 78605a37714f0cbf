//! What each part adds to A(s) = G + s C + sum of D exp(-s tau), in normalised units (volts, and currents times
//! 50 ohm; s over 2 pi 1 GHz), once as doubles and once exactly in a prime field.
//!
//! Signs: rows of nodes say that the currents leaving the node add to zero; a branch current is
//! counted from the first to the second terminal inside the part. (C.-W. Ho, A. Ruehli,
//! P. Brennan, "The modified nodal approach to network analysis", IEEE Trans. Circuits and
//! Systems, 1975, from memory.)

use super::unknowns::Unknowns;
use crate::circuit::{Circuit, NodeRef, PartId, PartKind};
use crate::linalg::exact::Field61;
use std::collections::HashMap;

/// Impedance that currents are scaled by, ohms.
pub const REFERENCE_OHM: f64 = 50.0;
/// Angular frequency that s is scaled by, rad/s.
pub const REFERENCE_RAD_PER_S: f64 = 2.0 * std::f64::consts::PI * 1e9;

/// One entry that a part adds.
#[derive(Clone, Copy, Debug)]
pub struct Stamp {
    /// The part.
    pub part: PartId,
    /// Row (equation).
    pub row: u32,
    /// Column (unknown).
    pub column: u32,
    /// Whether it is multiplied by s.
    pub with_s: bool,
    /// The entry, normalised.
    pub value: f64,
    /// The entry without rounding; `None` when a value is not finite.
    pub exact: Option<Field61>,
    /// Delay that multiplies it by exp(-s delay), normalised; zero for none.
    pub delay: f64,
    /// d ln|entry| / d ln(value of the part): +1 (grows with the value), -1 (a resistor's
    /// conductance) or 0 (an incidence).
    pub power: i8,
}

/// A number with its exact twin.
#[derive(Clone, Copy)]
struct Pair {
    float: f64,
    exact: Option<Field61>,
}

impl Pair {
    fn new(value: f64) -> Self {
        Self {
            float: value,
            exact: Field61::from_f64(value),
        }
    }

    fn times(self, other: Pair) -> Pair {
        Pair {
            float: self.float * other.float,
            exact: self.exact.zip(other.exact).map(|(a, b)| a * b),
        }
    }

    fn inverse(self) -> Pair {
        Pair {
            float: 1.0 / self.float,
            exact: self.exact.map(Field61::inverse),
        }
    }

    fn negative(self) -> Pair {
        self.times(Pair::new(-1.0))
    }
}

/// All stamps of a circuit.
pub fn stamps(circuit: &Circuit, unknowns: &Unknowns) -> Vec<Stamp> {
    let mut builder = Builder {
        circuit,
        unknowns,
        out: Vec::with_capacity(circuit.parts.len() * 4),
        part: PartId(0),
        roots: coupled_roots(circuit),
    };
    for (id, part) in circuit.numbered_parts() {
        builder.part = id;
        builder.part(&part.kind);
    }
    builder.out
}

/// Square roots of the inductances that are coupled: with L = root * root and M = k root root
/// in exact arithmetic too, a coupling of exactly 1 is exactly singular.
fn coupled_roots(circuit: &Circuit) -> HashMap<PartId, f64> {
    let mut roots = HashMap::new();
    for part in &circuit.parts {
        if let PartKind::Coupling { inductors, .. } = &part.kind {
            for id in inductors {
                if let Some(PartKind::Inductor { henry, .. }) =
                    circuit.part(*id).map(|part| &part.kind)
                    && *henry > 0.0
                {
                    roots.insert(*id, henry.sqrt());
                }
            }
        }
    }
    roots
}

struct Builder<'a> {
    circuit: &'a Circuit,
    unknowns: &'a Unknowns,
    out: Vec<Stamp>,
    part: PartId,
    roots: HashMap<PartId, f64>,
}

impl Builder<'_> {
    fn put(&mut self, row: Option<u32>, column: Option<u32>, with_s: bool, value: Pair, power: i8) {
        self.put_delayed(row, column, with_s, value, power, 0.0);
    }

    fn put_delayed(
        &mut self,
        row: Option<u32>,
        column: Option<u32>,
        with_s: bool,
        value: Pair,
        power: i8,
        delay: f64,
    ) {
        if let (Some(row), Some(column)) = (row, column) {
            self.out.push(Stamp {
                part: self.part,
                row,
                column,
                with_s,
                value: value.float,
                exact: value.exact,
                delay,
                power,
            });
        }
    }

    fn node(&self, node: NodeRef) -> Option<u32> {
        self.unknowns.node(node)
    }

    /// An admittance between two nodes.
    fn admittance(&mut self, nodes: [NodeRef; 2], with_s: bool, value: Pair, power: i8) {
        let [a, b] = nodes.map(|node| self.node(node));
        self.put(a, a, with_s, value, power);
        self.put(b, b, with_s, value, power);
        self.put(a, b, with_s, value.negative(), power);
        self.put(b, a, with_s, value.negative(), power);
    }

    /// The branch current in the current laws of its nodes, and the voltage across them in the
    /// branch's own law.
    fn branch(&mut self, nodes: [NodeRef; 2]) -> Option<u32> {
        let row = self.unknowns.branch(self.part);
        let [a, b] = nodes.map(|node| self.node(node));
        let (one, minus) = (Pair::new(1.0), Pair::new(-1.0));
        self.put(a, row, false, one, 0);
        self.put(b, row, false, minus, 0);
        self.put(row, a, false, one, 0);
        self.put(row, b, false, minus, 0);
        row
    }

    fn part(&mut self, kind: &PartKind) {
        let ohm = Pair::new(REFERENCE_OHM);
        let rad = Pair::new(REFERENCE_RAD_PER_S);
        match kind {
            PartKind::Resistor { nodes, ohm: r } => {
                if *r == 0.0 {
                    self.branch(*nodes);
                } else {
                    let value = ohm.times(Pair::new(*r).inverse());
                    self.admittance(*nodes, false, value, -1);
                }
            }
            PartKind::Capacitor { nodes, farad } => {
                let value = ohm.times(Pair::new(*farad)).times(rad);
                self.admittance(*nodes, true, value, 1);
            }
            PartKind::Inductor { nodes, henry } => self.inductor(*nodes, *henry),
            PartKind::Coupling { inductors, factor } => self.coupling(*inductors, *factor),
            PartKind::VoltageSource {
                nodes,
                series_ohm,
                series_henry,
            } => {
                let row = self.branch(*nodes);
                if *series_ohm != 0.0 {
                    let value = Pair::new(*series_ohm).times(ohm.inverse()).negative();
                    self.put(row, row, false, value, 1);
                }
                if *series_henry != 0.0 {
                    let value = Pair::new(*series_henry).times(rad).times(ohm.inverse());
                    self.put(row, row, true, value.negative(), 1);
                }
            }
            PartKind::CurrentSource { .. } | PartKind::NotComputed { .. } => {}
            PartKind::Vcvs {
                nodes,
                control,
                gain,
            } => {
                let row = self.branch(*nodes);
                let [cp, cn] = control.map(|node| self.node(node));
                self.put(row, cp, false, Pair::new(-gain), 1);
                self.put(row, cn, false, Pair::new(*gain), 1);
            }
            PartKind::Vccs {
                nodes,
                control,
                siemens,
                delay_s,
            } => {
                let value = ohm.times(Pair::new(*siemens));
                let delay = delay_s * REFERENCE_RAD_PER_S;
                let [p, n] = nodes.map(|node| self.node(node));
                let [cp, cn] = control.map(|node| self.node(node));
                self.put_delayed(p, cp, false, value, 1, delay);
                self.put_delayed(p, cn, false, value.negative(), 1, delay);
                self.put_delayed(n, cp, false, value.negative(), 1, delay);
                self.put_delayed(n, cn, false, value, 1, delay);
            }
            PartKind::Line {
                nodes,
                ohm: z0,
                delay_s,
            } => self.line(*nodes, *z0, delay_s * REFERENCE_RAD_PER_S),
            PartKind::Cccs { nodes, sense, gain } => {
                let column = self.unknowns.branch(sense.0);
                let [p, n] = nodes.map(|node| self.node(node));
                self.put(p, column, false, Pair::new(*gain), 1);
                self.put(n, column, false, Pair::new(-gain), 1);
            }
            PartKind::Ccvs {
                nodes,
                sense,
                ohm: r,
            } => {
                let row = self.branch(*nodes);
                let column = self.unknowns.branch(sense.0);
                let value = Pair::new(*r).times(ohm.inverse()).negative();
                self.put(row, column, false, value, 1);
            }
        }
    }

    /// A line in wave form, v1 - Z i1 = exp(-s T) (v2 + Z i2) and its mirror image, with both
    /// currents into the line: entire in s and regular at s = 0, where the immittance form has poles.
    fn line(&mut self, nodes: [NodeRef; 4], ohm: f64, delay: f64) {
        let (one, minus) = (Pair::new(1.0), Pair::new(-1.0));
        let impedance = Pair::new(ohm).times(Pair::new(REFERENCE_OHM).inverse());
        let [a, b, c, d] = nodes.map(|node| self.node(node));
        let first = self.unknowns.branch(self.part);
        let second = first.map(|row| row + 1);
        for (own, [plus, reference], other, [far, far_reference]) in [
            (first, [a, b], second, [c, d]),
            (second, [c, d], first, [a, b]),
        ] {
            self.put(plus, own, false, one, 0);
            self.put(reference, own, false, minus, 0);
            self.put(own, plus, false, one, 0);
            self.put(own, reference, false, minus, 0);
            self.put(own, own, false, impedance.negative(), 1);
            self.put_delayed(own, far, false, minus, 0, delay);
            self.put_delayed(own, far_reference, false, one, 0, delay);
            self.put_delayed(own, other, false, impedance.negative(), 1, delay);
        }
    }

    fn inductor(&mut self, nodes: [NodeRef; 2], henry: f64) {
        let row = self.branch(nodes);
        let own = match self.roots.get(&self.part) {
            Some(root) => Pair {
                float: henry,
                exact: Field61::from_f64(*root).map(|r| r * r),
            },
            None => Pair::new(henry),
        };
        self.put(row, row, true, scaled_henry(own).negative(), 1);
    }

    fn coupling(&mut self, inductors: [PartId; 2], factor: f64) {
        let [first, second] = inductors;
        let rows = (self.unknowns.branch(first), self.unknowns.branch(second));
        let root = |id| self.roots.get(&id).copied();
        let mutual = match (root(first), root(second)) {
            (Some(a), Some(b)) => {
                let product = Pair::new(a).times(Pair::new(b));
                let henry = |id| match self.circuit.part(id).map(|p| &p.kind) {
                    Some(PartKind::Inductor { henry, .. }) => *henry,
                    _ => 0.0,
                };
                let float = (henry(first) * henry(second)).sqrt();
                Pair {
                    float,
                    exact: product.exact,
                }
            }
            // A coupling to an inductor that is not positive has no meaning; it is left out and
            // reported by its rule.
            _ => return,
        };
        let value = scaled_henry(mutual.times(Pair::new(factor))).negative();
        self.put(rows.0, rows.1, true, value, 1);
        self.put(rows.1, rows.0, true, value, 1);
    }
}

fn scaled_henry(value: Pair) -> Pair {
    value
        .times(Pair::new(REFERENCE_RAD_PER_S))
        .times(Pair::new(REFERENCE_OHM).inverse())
}
