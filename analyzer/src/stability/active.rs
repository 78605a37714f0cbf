//! Which sources are active, so that switching them off leaves a network to compare with.
//!
//! A controlled source is active when its control is not its own terminal pair or branch, or when
//! it is a negative conductance or resistance by itself; a set of sources that absorbs power for
//! every voltage and current (ideal transformer, gyrator: B. D. H. Tellegen, Philips Research
//! Reports, 1948, from memory) is passive and stays on.

use crate::circuit::{Circuit, NodeRef, PartId, PartKind};
use nalgebra::DMatrix;
use std::collections::HashMap;

/// The active sources of a circuit, and claims of passivity that failed.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct ActiveSet {
    /// Sources that the normalized determinant switches off.
    pub sources: Vec<PartId>,
    /// Claims (by index) that are false, or cannot be shown.
    pub failed_claims: Vec<usize>,
}

/// Sorts the controlled sources of a circuit. `claims` are sets said to model passive parts.
pub fn active_sources(circuit: &Circuit, claims: &[Vec<PartId>]) -> ActiveSet {
    let mut candidates: Vec<PartId> = circuit
        .numbered_parts()
        .filter(|(id, part)| own_port(circuit, *id, &part.kind) == Own::No)
        .map(|(id, _)| id)
        .collect();
    let negative: Vec<PartId> = circuit
        .numbered_parts()
        .filter(|(id, part)| own_port(circuit, *id, &part.kind) == Own::Negative)
        .map(|(id, _)| id)
        .collect();
    let mut failed_claims = Vec::new();
    for (index, claim) in claims.iter().enumerate() {
        if is_passive_set(circuit, claim) {
            candidates.retain(|id| !claim.contains(id));
        } else {
            failed_claims.push(index);
        }
    }
    let passive = passive_pairs(circuit, &candidates);
    candidates.retain(|id| !passive.contains(id));
    candidates.extend(negative);
    candidates.sort();
    ActiveSet {
        sources: candidates,
        failed_claims,
    }
}

/// Whether a source controls itself.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Own {
    /// No controlled source, or one without effect.
    None,
    /// Controlled from elsewhere.
    No,
    /// A positive conductance or resistance.
    Positive,
    /// A negative one.
    Negative,
}

fn own_port(circuit: &Circuit, id: PartId, kind: &PartKind) -> Own {
    let by_sign = |value: f64| {
        if value > 0.0 {
            Own::Positive
        } else {
            Own::Negative
        }
    };
    match kind {
        PartKind::Vccs {
            nodes,
            control,
            siemens,
            delay_s,
        } => {
            if *siemens == 0.0 || nodes[0] == nodes[1] || control[0] == control[1] {
                Own::None
            } else if *delay_s > 0.0 {
                Own::No
            } else if nodes == control {
                by_sign(*siemens)
            } else if nodes[0] == control[1] && nodes[1] == control[0] {
                by_sign(-siemens)
            } else {
                Own::No
            }
        }
        PartKind::Vcvs {
            nodes,
            control,
            gain,
        } => {
            let same = nodes == control || (nodes[0] == control[1] && nodes[1] == control[0]);
            if *gain == 0.0 || control[0] == control[1] || same {
                // Its own control pair: a short, for any gain but one.
                Own::None
            } else {
                Own::No
            }
        }
        PartKind::Cccs { gain, nodes, .. } => {
            if *gain == 0.0 || nodes[0] == nodes[1] {
                Own::None
            } else {
                Own::No
            }
        }
        PartKind::Ccvs { ohm, sense, .. } => {
            if *ohm == 0.0 {
                Own::None
            } else {
                match series_sign(circuit, id, sense.0) {
                    Some(sign) => by_sign(sign * ohm),
                    None => Own::No,
                }
            }
        }
        _ => Own::None,
    }
}

/// +1 or -1 when two branches carry the same current because they alone meet at a node: the sign
/// of the second's current when the first's is positive.
fn series_sign(circuit: &Circuit, first: PartId, second: PartId) -> Option<f64> {
    let a = circuit.part(first)?.kind.terminals();
    let b = circuit.part(second)?.kind.terminals();
    for (i, node) in a.iter().enumerate() {
        let Some(j) = b.iter().position(|other| other == node) else {
            continue;
        };
        if node.node().is_some() && carriers(circuit, *node) == 2 {
            // Out of the first's end i into the second's end j.
            let leaves_first = if i == 1 { 1.0 } else { -1.0 };
            let enters_second = if j == 0 { 1.0 } else { -1.0 };
            return Some(leaves_first * enters_second);
        }
    }
    None
}

/// Number of terminals that carry current at a node.
fn carriers(circuit: &Circuit, node: NodeRef) -> usize {
    circuit
        .parts
        .iter()
        .map(|part| part.kind.terminals().iter().filter(|n| **n == node).count())
        .sum()
}

/// Sources that form a passive pair with another one.
fn passive_pairs(circuit: &Circuit, candidates: &[PartId]) -> Vec<PartId> {
    const MOST: usize = 400;
    let mut passive = Vec::new();
    if candidates.len() > MOST {
        // Pairs are looked for among neighbours only, so that the cost stays linear.
        return neighbour_pairs(circuit, candidates);
    }
    for (k, first) in candidates.iter().enumerate() {
        for second in candidates.iter().skip(k + 1) {
            let taken = passive.contains(first) || passive.contains(second);
            if !taken && is_passive_set(circuit, &[*first, *second]) {
                passive.extend([*first, *second]);
            }
        }
    }
    passive
}

fn neighbour_pairs(circuit: &Circuit, candidates: &[PartId]) -> Vec<PartId> {
    let mut passive = Vec::new();
    for pair in candidates.windows(2) {
        let taken = pair.iter().any(|id| passive.contains(id));
        if !taken && is_passive_set(circuit, pair) {
            passive.extend_from_slice(pair);
        }
    }
    passive
}

/// A variable of the power of a set: a node's voltage or a branch's current.
#[derive(Clone, Copy, PartialEq, Eq, Hash)]
enum Variable {
    Voltage(NodeRef),
    Current(PartId),
}

/// Whether a set of controlled sources absorbs power for all voltages and currents: the
/// symmetric matrix of its power, sum of v * i over its outputs, has no negative eigenvalue.
/// The current of an E or H output must be tied to a sensed branch in series with it; where it is
/// not, the set cannot be shown to be passive.
pub fn is_passive_set(circuit: &Circuit, set: &[PartId]) -> bool {
    let mut form: HashMap<(Variable, Variable), f64> = HashMap::new();
    let senses: Vec<PartId> = set
        .iter()
        .filter_map(|id| match circuit.part(*id).map(|part| &part.kind) {
            Some(PartKind::Cccs { sense, .. } | PartKind::Ccvs { sense, .. }) => Some(sense.0),
            _ => None,
        })
        .collect();
    for id in set {
        let Some(part) = circuit.part(*id) else {
            return false;
        };
        let Some((voltage, current)) = output_terms(circuit, *id, &part.kind, &senses) else {
            return false;
        };
        for (v, a) in &voltage {
            for (i, b) in &current {
                *form.entry((*v, *i)).or_insert(0.0) += a * b;
            }
        }
    }
    is_positive_form(&form)
}

type Terms = Vec<(Variable, f64)>;

/// A source's output voltage and current as sums of variables.
fn output_terms(
    circuit: &Circuit,
    id: PartId,
    kind: &PartKind,
    senses: &[PartId],
) -> Option<(Terms, Terms)> {
    let across = |nodes: &[NodeRef; 2], gain: f64| -> Terms {
        [(nodes[0], gain), (nodes[1], -gain)]
            .into_iter()
            .filter(|(node, _)| *node != NodeRef::Ground)
            .map(|(node, gain)| (Variable::Voltage(node), gain))
            .collect()
    };
    let linked = || {
        senses.iter().find_map(|sense| {
            series_sign(circuit, id, *sense).map(|sign| vec![(Variable::Current(*sense), sign)])
        })
    };
    match kind {
        PartKind::Vccs {
            nodes,
            control,
            siemens,
            delay_s,
        } => (*delay_s == 0.0).then(|| (across(nodes, 1.0), across(control, *siemens))),
        PartKind::Cccs { nodes, sense, gain } => Some((
            across(nodes, 1.0),
            vec![(Variable::Current(sense.0), *gain)],
        )),
        PartKind::Vcvs { control, gain, .. } => Some((across(control, *gain), linked()?)),
        PartKind::Ccvs { sense, ohm, .. } => {
            Some((vec![(Variable::Current(sense.0), *ohm)], linked()?))
        }
        _ => None,
    }
}

fn is_positive_form(form: &HashMap<(Variable, Variable), f64>) -> bool {
    let mut variables: Vec<Variable> = Vec::new();
    let mut entries: Vec<(usize, usize, f64)> = Vec::new();
    let mut index = |variable: Variable| match variables.iter().position(|v| *v == variable) {
        Some(at) => at,
        None => {
            variables.push(variable);
            variables.len() - 1
        }
    };
    #[allow(clippy::iter_over_hash_type)] // the sum below does not depend on the order
    for ((a, b), value) in form {
        let pair = (index(*a), index(*b));
        entries.push((pair.0, pair.1, *value));
    }
    let n = variables.len();
    let mut matrix = DMatrix::<f64>::zeros(n, n);
    for (i, j, value) in entries {
        matrix[(i, j)] += 0.5 * value;
        matrix[(j, i)] += 0.5 * value;
    }
    let largest = form.values().fold(0.0f64, |m, v| m.max(v.abs()));
    if largest == 0.0 {
        return true;
    }
    let least = matrix
        .symmetric_eigenvalues()
        .iter()
        .copied()
        .fold(f64::INFINITY, f64::min);
    least >= -1e-12 * largest
}
