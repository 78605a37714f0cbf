//! Exact structure of det(G + s C): singularity, degree, roots at the origin.
//!
//! Doubles are rationals with power-of-two denominators, so they map exactly
//! into a prime field; elimination there decides "zero or not" without any
//! tolerance. A wrong answer needs the random point to hit a root of a fixed
//! nonzero polynomial, or the prime to divide a fixed nonzero integer: for
//! order n the first has probability at most about 2 n / 2^61 per decision
//! (J. T. Schwartz, J. ACM 27 (1980); R. Zippel, EUROSAM 1979; from memory),
//! below 1e-14 for n = 5000; the second is of the same order for inputs not
//! made to defeat the prime. The point is drawn from a fixed seed, so that
//! results repeat.

use crate::linalg::elimination::{Elimination, Scalar, Step};
use crate::linalg::exact_dense::{FieldMatrix, nonzero_modes};
pub use crate::linalg::field61::Field61;

/// What exact arithmetic says about the pencil G + s C.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Structure {
    /// det(G + s C) vanishes for every s.
    pub singular: bool,
    /// Unknowns that take part in the null vectors (x with A x = 0), ascending;
    /// empty unless `singular`.
    pub null_columns: Vec<u32>,
    /// Equations that take part in the left null vectors, ascending; empty
    /// unless `singular`.
    pub null_rows: Vec<u32>,
    /// Degree of det(G + s C) in s; zero when `singular`.
    pub finite_modes: usize,
    /// Multiplicity of the root s = 0, part of `finite_modes`.
    pub zero_modes: usize,
}

/// Entry of an exact matrix: row, column, value; repeats add.
pub type ExactEntry = (u32, u32, Field61);

impl Scalar for Field61 {
    fn zero() -> Self {
        Field61::ZERO
    }
    fn minus_product(self, f: Self, u: Self) -> Self {
        self - f * u
    }
    /// The inverse: it costs as much as a hundred products.
    type Divisor = Self;
    fn divisor(self) -> Self {
        self.inverse()
    }
    fn over(self, inverse: Self) -> Self {
        self * inverse
    }
    fn is_droppable(&self) -> bool {
        *self == Field61::ZERO
    }
}

/// Seed of the evaluation point.
const POINT: u64 = 0x0b5e_55ed_c0ff_ee11;

/// Structure of the pencil with the given entries, order `n`.
///
/// Entries out of range are ignored by design of the callers' patterns.
pub fn structure(n: usize, g: &[ExactEntry], c: &[ExactEntry]) -> Structure {
    let s0 = Field61::from_u64(POINT);
    let factors = SparseFactors::new(n, &combine(n, g, c, s0));
    if factors.steps.len() < n {
        return Structure {
            singular: true,
            null_columns: factors.null_columns(),
            null_rows: factors.null_rows(),
            ..Structure::default()
        };
    }
    let rank = RankFactors::new(n, c);
    let at_infinity = modes_at_infinity(n, &combine(n, g, c, s0), &rank);
    let at_zero = modes_at_zero(n, g, c);
    let (finite_modes, zero_modes) = match (at_infinity, at_zero) {
        (Some(infinite), Some(zero)) => (rank.e.len() - infinite, zero),
        // Chains: only the dense reduction tells how long they are.
        _ => nonzero_modes(transfer(&factors, &rank), s0),
    };
    Structure {
        finite_modes,
        zero_modes,
        ..Structure::default()
    }
}

/// How often T = F^T (G + s0 C)^-1 E has the eigenvalue zero, each a mode at infinity; `None` when
/// that eigenvalue has chains. The bordered matrix [G + s0 C, E; F^T, 0] has the nullity of T, and
/// the tails of its null vectors are those of T; without chains the products of left and right ones
/// form a regular matrix.
fn modes_at_infinity(n: usize, at_shift: &[ExactEntry], rank: &RankFactors) -> Option<usize> {
    let r = rank.e.len();
    let mut bordered = at_shift.to_vec();
    for (k, (e, f)) in rank.e.iter().zip(&rank.f).enumerate() {
        let border = (n + k) as u32;
        bordered.extend(e.iter().map(|&(row, v)| (row, border, v)));
        bordered.extend(f.iter().map(|&(column, v)| (border, column, v)));
    }
    let factors = SparseFactors::new(n + r, &bordered);
    let right = factors.null_vectors();
    let left = factors.left_null_vectors();
    let d = right.len();
    let mut product = FieldMatrix::zero(d, d);
    for (i, y) in left.iter().enumerate() {
        for (j, x) in right.iter().enumerate() {
            let tails = y[n..].iter().zip(&x[n..]);
            product.set(i, j, tails.fold(Field61::ZERO, |sum, (y, x)| sum + *y * *x));
        }
    }
    (product.rank_factors().0.columns == d).then_some(d)
}

/// Multiplicity of the mode s = 0; `None` when it has chains. Without chains the null vectors of G
/// make y^T C x regular.
fn modes_at_zero(n: usize, g: &[ExactEntry], c: &[ExactEntry]) -> Option<usize> {
    let factors = SparseFactors::new(n, &merge(n, g.to_vec()));
    let right = factors.null_vectors();
    let left = factors.left_null_vectors();
    let d = right.len();
    let mut product = FieldMatrix::zero(d, d);
    for (i, y) in left.iter().enumerate() {
        for (j, x) in right.iter().enumerate() {
            let terms = c
                .iter()
                .map(|&(row, column, v)| y[row as usize] * v * x[column as usize]);
            product.set(i, j, terms.fold(Field61::ZERO, |sum, term| sum + term));
        }
    }
    (product.rank_factors().0.columns == d).then_some(d)
}

/// G + s C as one list, repeats summed, zeros dropped.
pub(crate) fn combine(n: usize, g: &[ExactEntry], c: &[ExactEntry], s: Field61) -> Vec<ExactEntry> {
    let mut all: Vec<ExactEntry> = g.to_vec();
    all.extend(c.iter().map(|&(row, column, v)| (row, column, v * s)));
    merge(n, all)
}

/// Sums repeats and drops zeros and entries out of range.
fn merge(n: usize, mut all: Vec<ExactEntry>) -> Vec<ExactEntry> {
    all.retain(|e| (e.0 as usize) < n && (e.1 as usize) < n);
    all.sort_unstable_by_key(|e| (e.0, e.1));
    let mut merged: Vec<ExactEntry> = Vec::with_capacity(all.len());
    for e in all {
        match merged.last_mut() {
            Some(last) if (last.0, last.1) == (e.0, e.1) => last.2 = last.2 + e.2,
            _ => merged.push(e),
        }
    }
    merged.retain(|e| e.2 != Field61::ZERO);
    merged
}

/// Sparse triangular factors over the field; fewer steps than `n` when singular.
pub(crate) struct SparseFactors {
    n: usize,
    pub(crate) steps: Vec<Step>,
    /// One over the pivot of each step.
    inverses: Vec<Field61>,
    arena: Vec<Field61>,
}

impl SparseFactors {
    /// Eliminates with least Markowitz cost; every nonzero is a fine pivot.
    pub(crate) fn new(n: usize, entries: &[ExactEntry]) -> Self {
        let mut active = Elimination::new(n, 1);
        for &(row, column, v) in entries {
            active.push(row, column, &[v]);
        }
        let mut steps = Vec::with_capacity(n);
        while let Some((row, column)) = sparsest(&active) {
            match active.eliminate(row, column) {
                Some(step) => steps.push(step),
                None => break,
            }
        }
        let pivots = steps.iter().map(|step| active.arena[step.pivot as usize]);
        let inverses = Field61::inverses(pivots.collect());
        Self {
            n,
            steps,
            inverses,
            arena: active.arena,
        }
    }

    fn value(&self, at: u32) -> Field61 {
        self.arena[at as usize]
    }

    /// Solves A x = b in place (b by rows, result by columns).
    pub(crate) fn solve(&self, b: &mut [Field61], x: &mut [Field61]) {
        for step in &self.steps {
            let y = b[step.row as usize];
            if y != Field61::ZERO {
                for l in &step.lower {
                    let i = l.index as usize;
                    b[i] = b[i] - self.value(l.value) * y;
                }
            }
        }
        for (step, inverse) in self.steps.iter().zip(&self.inverses).rev() {
            let mut sum = b[step.row as usize];
            for u in &step.upper {
                sum = sum - self.value(u.value) * x[u.index as usize];
            }
            x[step.column as usize] = sum * *inverse;
        }
    }

    /// Columns in the span of the right null vectors.
    fn null_columns(&self) -> Vec<u32> {
        self.support(&self.free(|step| step.column), |x| self.complete_right(x))
    }

    /// Rows in the span of the left null vectors.
    fn null_rows(&self) -> Vec<u32> {
        self.support(&self.free(|step| step.row), |y| self.complete_left(y))
    }

    /// A basis of the right null space, one vector per column without a pivot.
    fn null_vectors(&self) -> Vec<Vec<Field61>> {
        self.basis(&self.free(|step| step.column), |x| self.complete_right(x))
    }

    /// A basis of the left null space, one vector per row without a pivot.
    fn left_null_vectors(&self) -> Vec<Vec<Field61>> {
        self.basis(&self.free(|step| step.row), |y| self.complete_left(y))
    }

    /// Which rows or columns no step has used.
    fn free(&self, used: impl Fn(&Step) -> u32) -> Vec<bool> {
        let mut free = vec![true; self.n];
        for step in &self.steps {
            free[used(step) as usize] = false;
        }
        free
    }

    /// Completes the free places of x so that A x = 0.
    fn complete_right(&self, x: &mut [Field61]) {
        for (step, inverse) in self.steps.iter().zip(&self.inverses).rev() {
            let mut sum = Field61::ZERO;
            for u in &step.upper {
                sum = sum - self.value(u.value) * x[u.index as usize];
            }
            x[step.column as usize] = sum * *inverse;
        }
    }

    /// Completes the free places of y so that y^T A = 0.
    fn complete_left(&self, y: &mut [Field61]) {
        for step in self.steps.iter().rev() {
            let mut sum = Field61::ZERO;
            for l in &step.lower {
                sum = sum - self.value(l.value) * y[l.index as usize];
            }
            y[step.row as usize] = sum;
        }
    }

    fn basis(&self, free: &[bool], complete: impl Fn(&mut [Field61])) -> Vec<Vec<Field61>> {
        (0..self.n)
            .filter(|&k| free[k])
            .map(|k| {
                let mut vector = vec![Field61::ZERO; self.n];
                vector[k] = Field61::ONE;
                complete(&mut vector);
                vector
            })
            .collect()
    }

    /// Fills the free places with random numbers, completes the vector and lists
    /// its nonzero places: a random member of the null space is nonzero
    /// wherever any member is, with the error probability of the file head.
    fn support(&self, free: &[bool], complete: impl Fn(&mut [Field61])) -> Vec<u32> {
        let mut state = POINT;
        let mut x: Vec<Field61> = free
            .iter()
            .map(|&free| {
                state = state
                    .wrapping_mul(6_364_136_223_846_793_005)
                    .wrapping_add(1_442_695_040_888_963_407);
                if free {
                    Field61::from_u64(state >> 4)
                } else {
                    Field61::ZERO
                }
            })
            .collect();
        complete(&mut x);
        (0..self.n as u32)
            .filter(|&k| x[k as usize] != Field61::ZERO)
            .collect()
    }
}

/// The entry of least Markowitz cost among the sparsest columns.
fn sparsest<S: Scalar>(active: &Elimination<S>) -> Option<(u32, u32)> {
    let mut best: Option<(u64, u32, u32)> = None;
    let mut least = usize::MAX;
    for (column, cells) in active.columns.iter().enumerate() {
        if !active.column_alive[column] || cells.is_empty() || cells.len() > least {
            continue;
        }
        least = cells.len();
        for cell in cells {
            let width = active.rows[cell.index as usize].len() as u64 - 1;
            let cost = width * (cells.len() as u64 - 1);
            if best.is_none_or(|b| cost < b.0) {
                best = Some((cost, cell.index, column as u32));
            }
        }
        if best.is_some_and(|b| b.0 == 0) {
            break;
        }
    }
    best.map(|(_, row, column)| (row, column))
}

/// C = E F^T with `rank` columns each, as sparse lists (index, value).
pub(crate) struct RankFactors {
    pub(crate) e: Vec<Vec<(u32, Field61)>>,
    pub(crate) f: Vec<Vec<(u32, Field61)>>,
}

impl RankFactors {
    fn new(n: usize, c: &[ExactEntry]) -> Self {
        let factors = SparseFactors::new(n, &merge(n, c.to_vec()));
        let (mut e, mut f) = (Vec::new(), Vec::new());
        for step in &factors.steps {
            let mut column = vec![(step.row, Field61::ONE)];
            column.extend(step.lower.iter().map(|l| (l.index, factors.value(l.value))));
            let mut row = vec![(step.column, factors.value(step.pivot))];
            row.extend(step.upper.iter().map(|u| (u.index, factors.value(u.value))));
            e.push(column);
            f.push(row);
        }
        Self { e, f }
    }
}

/// T = F^T (G + s0 C)^-1 E, dense of order rank(C).
pub(crate) fn transfer(factors: &SparseFactors, rank: &RankFactors) -> FieldMatrix {
    let r = rank.e.len();
    let mut t = FieldMatrix::zero(r, r);
    let mut b = vec![Field61::ZERO; factors.n];
    let mut x = vec![Field61::ZERO; factors.n];
    for (j, column) in rank.e.iter().enumerate() {
        b.fill(Field61::ZERO);
        x.fill(Field61::ZERO);
        for &(row, v) in column {
            b[row as usize] = v;
        }
        factors.solve(&mut b, &mut x);
        for (i, row) in rank.f.iter().enumerate() {
            let mut sum = Field61::ZERO;
            for &(column, v) in row {
                sum = sum + v * x[column as usize];
            }
            t.set(i, j, sum);
        }
    }
    t
}
