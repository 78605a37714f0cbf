//! Dense matrices over the exact field and the count of nonzero eigenvalues.
//!
//! Used on the reduced matrix of the pencil; everything is exact.

use crate::linalg::field61::Field61;

/// A dense row-major matrix over the field.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct FieldMatrix {
    pub(crate) rows: usize,
    pub(crate) columns: usize,
    data: Vec<Field61>,
}

impl FieldMatrix {
    pub(crate) fn zero(rows: usize, columns: usize) -> Self {
        Self {
            rows,
            columns,
            data: vec![Field61::ZERO; rows * columns],
        }
    }

    pub(crate) fn get(&self, i: usize, j: usize) -> Field61 {
        self.data[i * self.columns + j]
    }

    pub(crate) fn set(&mut self, i: usize, j: usize, v: Field61) {
        self.data[i * self.columns + j] = v;
    }

    pub(crate) fn row(&self, i: usize) -> &[Field61] {
        &self.data[i * self.columns..(i + 1) * self.columns]
    }

    /// I - s A.
    pub(crate) fn one_minus(&self, s: Field61) -> Self {
        let mut out = Self::zero(self.rows, self.columns);
        for i in 0..self.rows {
            for j in 0..self.columns {
                let one = if i == j { Field61::ONE } else { Field61::ZERO };
                out.set(i, j, one - s * self.get(i, j));
            }
        }
        out
    }

    /// A B.
    pub(crate) fn times(&self, b: &Self) -> Self {
        let mut out = Self::zero(self.rows, b.columns);
        for i in 0..self.rows {
            for k in 0..self.columns {
                let a = self.get(i, k);
                if a != Field61::ZERO {
                    let target = &mut out.data[i * b.columns..(i + 1) * b.columns];
                    for (t, &v) in target.iter_mut().zip(b.row(k)) {
                        *t = *t + a * v;
                    }
                }
            }
        }
        out
    }

    /// Rank factors A = E F with rank(A) columns in E and rows in F.
    pub(crate) fn rank_factors(mut self) -> (Self, Self) {
        let (m, n) = (self.rows, self.columns);
        let mut order: Vec<usize> = (0..m).collect();
        let mut multipliers: Vec<Vec<(usize, Field61)>> = Vec::new();
        let mut kept = 0;
        for j in 0..n {
            let Some(at) = (kept..m).find(|&k| self.get(order[k], j) != Field61::ZERO) else {
                continue;
            };
            order.swap(kept, at);
            let pivot = order[kept];
            let inverse = self.get(pivot, j).inverse();
            let pivot_row: Vec<Field61> = self.row(pivot)[j..].to_vec();
            let mut column = vec![(pivot, Field61::ONE)];
            for &i in &order[kept + 1..] {
                let v = self.get(i, j);
                if v == Field61::ZERO {
                    continue;
                }
                let f = v * inverse;
                column.push((i, f));
                let row = &mut self.data[i * n + j..(i + 1) * n];
                for (t, &u) in row.iter_mut().zip(&pivot_row) {
                    *t = *t - f * u;
                }
            }
            multipliers.push(column);
            kept += 1;
        }
        let (mut e, mut f) = (Self::zero(m, kept), Self::zero(kept, n));
        for (k, column) in multipliers.iter().enumerate() {
            for &(i, v) in column {
                e.set(i, k, v);
            }
            f.data[k * n..(k + 1) * n].copy_from_slice(self.row(order[k]));
        }
        (e, f)
    }
}

/// Number of nonzero eigenvalues with multiplicity, by A = E F -> F E until
/// regular (the nonzero eigenvalues of E F and F E agree), with the last matrix.
pub(crate) fn regular_part(mut a: FieldMatrix) -> FieldMatrix {
    loop {
        let order = a.rows;
        let (e, f) = a.clone().rank_factors();
        if e.columns == order {
            return a;
        }
        a = f.times(&e);
    }
}

/// (finite modes, modes at the origin) from the reduced matrix at shift `s0`.
///
/// Eigenvalues mu of T give s = s0 - 1/mu: mu = 0 is a mode at infinity and
/// mu = 1/s0 one at the origin.
pub(crate) fn nonzero_modes(t: FieldMatrix, s0: Field61) -> (usize, usize) {
    let t = regular_part(t);
    let finite = t.rows;
    let nonzero = regular_part(t.one_minus(s0)).rows;
    (finite, finite - nonzero)
}
