//! Slow dense oracle: the reference that every sparse path is checked against.
//!
//! Gaussian elimination with complete pivoting on a full matrix in about 31
//! digits, O(n^3); deliberately simple and independent of all sparse code.
//! Plain double precision would not do: on matrices whose entries span many
//! decades dense elimination loses small entries of the inverse altogether.

use crate::linalg::det::ScaledDet;
use crate::linalg::twofold::TwofoldComplex as Wide;
use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

/// Complete-pivoting factorisation of a square complex matrix.
#[derive(Debug, Clone)]
pub struct DenseLu {
    n: usize,
    /// L below, U on and above the diagonal, row-major, in pivot order.
    lu: Vec<Wide>,
    rows: Vec<usize>,
    columns: Vec<usize>,
    sign: f64,
    singular: bool,
    /// Powers of two that multiplied the rows and columns before elimination.
    row_scale: Vec<i32>,
    column_scale: Vec<i32>,
}

/// Sweeps of the equilibration; each halves the spread in decades.
const SWEEPS: usize = 8;

/// Powers of two that bring the largest entry of every row and column near one
/// (D. Ruiz, "A scaling algorithm to equilibrate both rows and columns norms in
/// matrices", RAL-TR-2001-034; from memory).
fn equilibrate(a: &mut DMatrix<Complex64>) -> (Vec<i32>, Vec<i32>) {
    let n = a.nrows();
    let (mut row, mut column) = (vec![0i32; n], vec![0i32; n]);
    let half_exponent = |x: f64| {
        if x > 0.0 {
            (-x.log2() / 2.0).round() as i32
        } else {
            0
        }
    };
    for _ in 0..SWEEPS {
        for (k, sum) in row.iter_mut().enumerate() {
            let e = half_exponent(a.row(k).iter().fold(0.0, |m, v| v.norm().max(m)));
            a.row_mut(k).iter_mut().for_each(|v| *v *= 2f64.powi(e));
            *sum += e;
        }
        for (k, sum) in column.iter_mut().enumerate() {
            let e = half_exponent(a.column(k).iter().fold(0.0, |m, v| v.norm().max(m)));
            a.column_mut(k).iter_mut().for_each(|v| *v *= 2f64.powi(e));
            *sum += e;
        }
    }
    (row, column)
}

impl DenseLu {
    /// Factors `a` (N. J. Higham, "Accuracy and Stability of Numerical
    /// Algorithms", 2nd ed., SIAM 2002, ch. 9; from memory: complete pivoting
    /// keeps the growth factor small for every matrix).
    ///
    /// # Panics
    /// When `a` is not square.
    pub fn new(a: &DMatrix<Complex64>) -> Self {
        assert!(a.is_square(), "the oracle factors square matrices");
        let n = a.nrows();
        let mut a = a.clone();
        let (row_scale, column_scale) = equilibrate(&mut a);
        let lu = (0..n * n).map(|k| Wide::from(a[(k / n, k % n)])).collect();
        let mut this = Self {
            n,
            lu,
            rows: (0..n).collect(),
            columns: (0..n).collect(),
            sign: 1.0,
            singular: false,
            row_scale,
            column_scale,
        };
        for k in 0..n {
            this.step(k);
        }
        this
    }

    fn at(&self, i: usize, j: usize) -> Wide {
        self.lu[i * self.n + j]
    }

    fn step(&mut self, k: usize) {
        let n = self.n;
        let (mut best, mut at) = (0.0, (k, k));
        for i in k..n {
            for j in k..n {
                let size = self.at(i, j).to_complex().norm();
                if size > best {
                    (best, at) = (size, (i, j));
                }
            }
        }
        if best == 0.0 {
            self.singular = true;
            return;
        }
        if at.0 != k {
            self.rows.swap(k, at.0);
            (0..n).for_each(|j| self.lu.swap(k * n + j, at.0 * n + j));
            self.sign = -self.sign;
        }
        if at.1 != k {
            self.columns.swap(k, at.1);
            (0..n).for_each(|i| self.lu.swap(i * n + k, i * n + at.1));
            self.sign = -self.sign;
        }
        for i in k + 1..n {
            let f = self.at(i, k).over(self.at(k, k));
            self.lu[i * n + k] = f;
            for j in k + 1..n {
                self.lu[i * n + j] = self.at(i, j).minus(f.times(self.at(k, j)));
            }
        }
    }

    /// Determinant as mantissa and power of two.
    pub fn det(&self) -> ScaledDet {
        let mut det = ScaledDet::new(Complex64::new(self.sign, 0.0), 0);
        for k in 0..self.n {
            det = det.multiply(&ScaledDet::new(self.at(k, k).to_complex(), 0));
        }
        let scale: i32 = self.row_scale.iter().chain(&self.column_scale).sum();
        det.exponent -= i64::from(scale);
        det
    }

    /// Inverse, or `None` when a pivot is exactly zero.
    pub fn inverse(&self) -> Option<DMatrix<Complex64>> {
        let mut inverse = DMatrix::from_element(self.n, self.n, Complex64::new(0.0, 0.0));
        for j in 0..self.n {
            let mut unit = DVector::from_element(self.n, Complex64::new(0.0, 0.0));
            unit[j] = Complex64::new(1.0, 0.0);
            inverse.set_column(j, &self.solve(&unit)?);
        }
        Some(inverse)
    }

    /// Solution of A x = b, or `None` when a pivot is exactly zero.
    pub fn solve(&self, b: &DVector<Complex64>) -> Option<DVector<Complex64>> {
        if self.singular {
            return None;
        }
        let mut y: Vec<Wide> = self
            .rows
            .iter()
            .map(|&row| Wide::from(b[row] * 2f64.powi(self.row_scale[row])))
            .collect();
        for i in 0..self.n {
            for j in 0..i {
                y[i] = y[i].minus(self.at(i, j).times(y[j]));
            }
        }
        for i in (0..self.n).rev() {
            for j in i + 1..self.n {
                y[i] = y[i].minus(self.at(i, j).times(y[j]));
            }
            y[i] = y[i].over(self.at(i, i));
        }
        let mut x = DVector::from_element(self.n, Complex64::new(0.0, 0.0));
        for (k, &column) in self.columns.iter().enumerate() {
            x[column] = y[k].to_complex() * 2f64.powi(self.column_scale[column]);
        }
        Some(x)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Closed form: det of the 2x2 and 3x3 matrices by hand expansion.
    #[test]
    fn small_determinants_by_hand() {
        let c = Complex64::new;
        let a =
            DMatrix::from_row_slice(2, 2, &[c(0.0, 0.0), c(2.0, 1.0), c(3.0, 0.0), c(5.0, 0.0)]);
        let det = DenseLu::new(&a).det().to_complex();
        assert!((det - c(-6.0, -3.0)).norm() < 1e-15, "0*5 - (2+j)*3");
        let b = [1.0, 2.0, 3.0, 0.0, 1.0, 4.0, 5.0, 6.0, 0.0].map(|x| c(x, 0.0));
        let b = DMatrix::from_row_slice(3, 3, &b);
        let lu = DenseLu::new(&b);
        assert!(
            (lu.det().to_complex() - 1.0).norm() < 1e-15,
            "known unit determinant"
        );
        let inverse = lu.inverse().expect("regular");
        assert!(
            (b * inverse - DMatrix::identity(3, 3)).norm() < 1e-14,
            "inverse"
        );
        let singular = DMatrix::from_element(2, 2, c(1.0, 0.0));
        assert!(DenseLu::new(&singular).inverse().is_none(), "rank one");
    }
}
