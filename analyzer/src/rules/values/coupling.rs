//! Groups of inductors that couplings join, and their coupling matrix. Knows no texts beyond
//! the places of the K cards.

use crate::circuit::{Circuit, PartId, PartKind};
use crate::rules::views::View;
use crate::text::Span;
use nalgebra::{Cholesky, DMatrix, SymmetricEigen};
use std::collections::HashMap;

/// A factor counts as above one from here: 1 within the rounding of an expression is 1.
pub(super) const LEAST_OVER_UNITY: f64 = 1.0 + 1e-12;

/// Groups beyond this are not looked at: the work grows with the third power.
const MOST_INDUCTORS: usize = 300;

/// Inductors that couplings join, directly or through others.
pub(super) struct Group {
    /// The inductors, in the order of the circuit.
    pub(super) inductors: Vec<PartId>,
    /// The couplings: part, places in `inductors`, factor.
    pub(super) couplings: Vec<(PartId, [usize; 2], f64)>,
}

/// Places of the factor and of the name of the K card behind a coupling.
pub(super) fn factor_spans(view: &View<'_>, coupling: PartId) -> Option<(Span, Span)> {
    Some((view.value_span(coupling)?, view.part_span(coupling)?))
}

/// All groups of a circuit, by their first inductor.
pub(super) fn groups(circuit: &Circuit) -> Vec<Group> {
    let mut leader: HashMap<PartId, PartId> = HashMap::new();
    let mut couplings = Vec::new();
    for (id, part) in circuit.numbered_parts() {
        if let PartKind::Coupling { inductors, factor } = part.kind {
            let [a, b] = inductors.map(|part| find(&mut leader, part));
            leader.insert(a.max(b), a.min(b));
            couplings.push((id, inductors, factor));
        }
    }
    let mut members: Vec<PartId> = leader.keys().copied().collect();
    members.sort();
    let mut groups: Vec<Group> = Vec::new();
    let mut place: HashMap<PartId, (usize, usize)> = HashMap::new();
    for member in members {
        let first = find(&mut leader, member);
        let number = place.get(&first).map_or(groups.len(), |(group, _)| *group);
        if number == groups.len() {
            groups.push(Group {
                inductors: Vec::new(),
                couplings: Vec::new(),
            });
        }
        if let Some(group) = groups.get_mut(number) {
            place.insert(member, (number, group.inductors.len()));
            group.inductors.push(member);
        }
    }
    for (id, [a, b], factor) in couplings {
        if let (Some((number, a)), Some((_, b))) = (place.get(&a), place.get(&b))
            && let Some(group) = groups.get_mut(*number)
        {
            group.couplings.push((id, [*a, *b], factor));
        }
    }
    groups
}

/// The first inductor of the group that `part` belongs to so far; halves the way there.
fn find(leader: &mut HashMap<PartId, PartId>, part: PartId) -> PartId {
    let mut at = part;
    loop {
        let next = *leader.entry(at).or_insert(at);
        if next == at {
            return at;
        }
        let after = leader.get(&next).copied().unwrap_or(next);
        leader.insert(at, after);
        at = after;
    }
}

impl Group {
    /// Whether a factor is impossible by itself.
    pub(super) fn has_factor_over_unity(&self) -> bool {
        let mut factors = self.couplings.iter().map(|(_, _, factor)| *factor);
        factors.any(|factor| factor.abs() > LEAST_OVER_UNITY)
    }

    /// The smallest eigenvalue of the matrix of factors, when it is below zero by more than
    /// rounding. Couplings of one pair add.
    pub(super) fn negative_eigenvalue(&self) -> Option<f64> {
        let size = self.inductors.len();
        if size > MOST_INDUCTORS {
            return None;
        }
        let mut matrix = DMatrix::<f64>::identity(size, size);
        for (_, [a, b], factor) in &self.couplings {
            if a != b {
                matrix[(*a, *b)] += factor;
                matrix[(*b, *a)] += factor;
            }
        }
        if Cholesky::new(matrix.clone()).is_some() {
            return None;
        }
        let rounding = 1e-12 * size as f64;
        let eigenvalues = SymmetricEigen::new(matrix).eigenvalues;
        let least = eigenvalues.iter().copied().fold(f64::INFINITY, f64::min);
        (least < -rounding).then_some(least)
    }
}
