//! All finite natural frequencies of G + s C: numbers s with det(G + s C) = 0.
//!
//! Method: C = E F^T with rank(C) columns, then the matrix T = F^T (G + s0 C)^-1 E, whose
//! eigenvalues mu give s = s0 - 1/mu. Eigenvalues of T that are exactly zero stand for modes at
//! infinity, and those that are exactly 1/s0 for modes at the origin. How many there are is decided
//! in exact arithmetic (see `exact`). Where so many eigenvalues stand far apart from the rest, they
//! are the ones; otherwise they are removed by rank factorisations (A = E F has the nonzero
//! eigenvalues of F E) in which every entry that is exactly zero is set to zero in floating point
//! too. So the number of artefacts of rounding is never judged by their size.

use super::apart;
use super::elimination::{Elimination, Scalar, Step};
use super::error::NumericError;
use super::exact::{ExactEntry, Field61, SparseFactors, Structure, combine};
use super::exact_dense::FieldMatrix;
use super::plan::Plan;
use super::values::Values;
use nalgebra::DMatrix;
use num_complex::Complex64;

/// The shift s0, in the caller's units of s: far from no mode in particular.
const SHIFT: f64 = 1.0;

/// Finite nonzero modes and the number of modes at the origin.
#[derive(Debug, Clone, PartialEq)]
pub struct Modes {
    /// Every finite nonzero mode, conjugates included, in no order.
    pub nonzero: Vec<Complex64>,
    /// Modes exactly at s = 0.
    pub at_zero: usize,
}

/// All finite modes of the pencil. Delayed parts of `values` are not seen here: the caller must
/// not have any. `plan` must serve `values`; `g` and `c` are the same numbers exactly, and
/// `structure` is theirs.
///
/// # Errors
/// [`NumericError::SingularPoint`] when the shift is a mode, [`NumericError::NoConvergence`] when
/// the eigenvalue iteration does not settle, [`NumericError::Stopped`] when `stop` says so, and what factorisation reports.
pub fn finite_modes(
    plan: &Plan,
    values: &Values,
    g: &[ExactEntry],
    c: &[ExactEntry],
    structure: &Structure,
    stop: &dyn Fn() -> bool,
) -> Result<Modes, NumericError> {
    let rank = RankPair::new(plan.n(), c, values);
    let size = rank.columns.len();
    if size == 0 {
        return Ok(Modes {
            nonzero: Vec::new(),
            at_zero: 0,
        });
    }
    let float = rank.transfer(plan, values)?;
    match by_size(&float, structure, stop)? {
        Some(modes) => Ok(modes),
        None => by_twins(float, rank.exact_transfer(plan.n(), g, c)?, stop),
    }
}

/// Least ratio between the eigenvalues that are kept and those that stand for an exact zero.
const GAP: f64 = 1e6;

/// The modes when what is exactly zero stands far from the rest: how many there are of either kind
/// is known exactly, so only the gap is asked of the doubles. `None` without such a gap.
fn by_size(
    float: &DMatrix<f64>,
    structure: &Structure,
    stop: &dyn Fn() -> bool,
) -> Result<Option<Modes>, NumericError> {
    let (finite, at_zero) = (structure.finite_modes, structure.zero_modes);
    let Some(infinite) = float.nrows().checked_sub(finite) else {
        return Ok(None);
    };
    let mut mu = eigenvalues(float.clone(), stop)?;
    mu.sort_by(|a, b| a.norm_sqr().total_cmp(&b.norm_sqr()));
    if !has_gap(&mu, infinite) {
        return Ok(None);
    }
    let mut s: Vec<Complex64> = mu[infinite..].iter().map(|mu| SHIFT - mu.inv()).collect();
    s.sort_by(|a, b| a.norm_sqr().total_cmp(&b.norm_sqr()));
    if !has_gap(&s, at_zero) {
        return Ok(None);
    }
    let nonzero = s.split_off(at_zero);
    Ok(Some(Modes { nonzero, at_zero }))
}

/// Whether the `zeros` smallest of a rising list lie far below the others.
fn has_gap(rising: &[Complex64], zeros: usize) -> bool {
    match (zeros.checked_sub(1).map(|k| rising[k]), rising.get(zeros)) {
        (Some(zero), Some(kept)) => zero.norm() * GAP < kept.norm(),
        _ => true,
    }
}

/// The modes by removing exact zeros with rank factorisations, in doubles and in the field at once.
fn by_twins(
    float: DMatrix<f64>,
    exact: FieldMatrix,
    stop: &dyn Fn() -> bool,
) -> Result<Modes, NumericError> {
    let (float, exact) = regular_part(float, exact);
    let shift = Field61::from_f64(SHIFT).unwrap_or(Field61::ONE);
    let from_infinity = exact.rows;
    let rest_exact = exact.one_minus(shift);
    let rest = DMatrix::identity(from_infinity, from_infinity) - &float * SHIFT;
    let (rest, rest_exact) = regular_part(rest, rest_exact);
    let at_zero = from_infinity - rest_exact.rows;
    let nonzero = if at_zero == 0 {
        eigenvalues(float, stop)?
            .into_iter()
            .map(|mu| SHIFT - mu.inv())
            .collect()
    } else {
        // nu = 1 - s0 mu, so s = s0 - 1/mu = -s0 nu / (1 - nu).
        eigenvalues(rest, stop)?
            .into_iter()
            .map(|nu| -SHIFT * nu / (1.0 - nu))
            .collect()
    };
    Ok(Modes { nonzero, at_zero })
}

/// Orders from which the eigenvalues are computed on a thread of their own, so that a stop is obeyed
/// at once although the iteration itself cannot be interrupted (below it takes milliseconds).
const APART: usize = 200;

fn eigenvalues(
    matrix: DMatrix<f64>,
    stop: &dyn Fn() -> bool,
) -> Result<Vec<Complex64>, NumericError> {
    if matrix.nrows() < APART {
        schur(&matrix)
    } else {
        apart::run(move || schur(&matrix), stop).unwrap_or(Err(NumericError::Stopped))
    }
}

fn schur(matrix: &DMatrix<f64>) -> Result<Vec<Complex64>, NumericError> {
    let order = matrix.nrows();
    if order == 0 {
        return Ok(Vec::new());
    }
    // With repeated eigenvalues the iteration can stall a few units in the last place away from
    // its criterion; a transposed start and a slightly wider criterion are tried before giving up.
    let limit = 200 * order + 1000;
    for widening in [1.0, 4.0, 16.0, 64.0] {
        for start in [matrix.clone(), matrix.transpose()] {
            let width = widening * f64::EPSILON;
            if let Some(schur) = nalgebra::linalg::Schur::try_new(start, width, limit) {
                return Ok(schur.complex_eigenvalues().iter().copied().collect());
            }
        }
    }
    Err(NumericError::NoConvergence { order })
}

/// A double and the same number exactly; they are zero together.
#[derive(Debug, Clone, Copy)]
struct Twin {
    float: f64,
    exact: Field61,
}

impl Scalar for Twin {
    fn zero() -> Self {
        Self {
            float: 0.0,
            exact: Field61::ZERO,
        }
    }
    fn minus_product(self, f: Self, u: Self) -> Self {
        let exact = self.exact - f.exact * u.exact;
        let float = if exact == Field61::ZERO {
            0.0
        } else {
            self.float - f.float * u.float
        };
        Self { float, exact }
    }
    /// The pivot, and its inverse in the field.
    type Divisor = Self;
    fn divisor(self) -> Self {
        Self {
            float: self.float,
            exact: self.exact.inverse(),
        }
    }
    fn over(self, pivot: Self) -> Self {
        Self {
            float: self.float / pivot.float,
            exact: self.exact * pivot.exact,
        }
    }
    fn is_droppable(&self) -> bool {
        self.exact == Field61::ZERO
    }
}

/// One column of E and of F, balanced in floating point, plain in exact arithmetic.
#[derive(Debug)]
struct Column {
    e: Vec<(u32, Twin)>,
    f: Vec<(u32, Twin)>,
}

/// C = E F^T.
#[derive(Debug)]
struct RankPair {
    columns: Vec<Column>,
}

impl RankPair {
    fn new(n: usize, c: &[ExactEntry], values: &Values) -> Self {
        let mut active: Elimination<Twin> = Elimination::new(n, 1);
        for (row, column, exact) in combine(n, &[], c, Field61::ONE) {
            let slot = values.pattern.slot(row, column);
            let float = slot.map_or(0.0, |slot| values.c[slot]);
            active.push(row, column, &[Twin { float, exact }]);
        }
        let mut columns = Vec::new();
        while let Some((row, column)) = steadiest(&active) {
            let Some(step) = active.eliminate(row, column) else {
                break;
            };
            columns.push(Column::new(&step, &active.arena));
        }
        Self { columns }
    }

    /// T in exact arithmetic, without the balancing (a diagonal similarity).
    fn exact_transfer(
        &self,
        n: usize,
        g: &[ExactEntry],
        c: &[ExactEntry],
    ) -> Result<FieldMatrix, NumericError> {
        let s0 = Field61::from_f64(SHIFT).unwrap_or(Field61::ONE);
        let factors = SparseFactors::new(n, &combine(n, g, c, s0));
        if factors.steps.len() < n {
            return Err(NumericError::SingularPoint {
                s: Complex64::new(SHIFT, 0.0),
            });
        }
        let size = self.columns.len();
        let mut t = FieldMatrix::zero(size, size);
        let mut b = vec![Field61::ZERO; n];
        let mut x = vec![Field61::ZERO; n];
        for (j, column) in self.columns.iter().enumerate() {
            b.fill(Field61::ZERO);
            x.fill(Field61::ZERO);
            for (row, v) in &column.e {
                b[*row as usize] = v.exact;
            }
            factors.solve(&mut b, &mut x);
            for (i, other) in self.columns.iter().enumerate() {
                let sum = other
                    .f
                    .iter()
                    .fold(Field61::ZERO, |sum, (k, v)| sum + v.exact * x[*k as usize]);
                t.set(i, j, sum);
            }
        }
        Ok(t)
    }

    /// T in floating point; one right-hand side a lane.
    fn transfer(&self, plan: &Plan, values: &Values) -> Result<DMatrix<f64>, NumericError> {
        let (n, lanes, size) = (plan.n(), plan.lanes(), self.columns.len());
        let mut ws = plan.workspace();
        plan.factor_sound(values, &vec![Complex64::new(SHIFT, 0.0); lanes], &mut ws)?;
        let mut t = DMatrix::zeros(size, size);
        let mut x = vec![Complex64::new(0.0, 0.0); n * lanes];
        for (batch, columns) in self.columns.chunks(lanes).enumerate() {
            x.fill(Complex64::new(0.0, 0.0));
            for (lane, column) in columns.iter().enumerate() {
                for (row, v) in &column.e {
                    x[*row as usize * lanes + lane].re = v.float;
                }
            }
            plan.solve_full(&mut ws, &mut x)?;
            for (lane, _) in columns.iter().enumerate() {
                for (i, other) in self.columns.iter().enumerate() {
                    let sum: f64 = other
                        .f
                        .iter()
                        .map(|(k, v)| v.float * x[*k as usize * lanes + lane].re)
                        .sum();
                    t[(i, batch * lanes + lane)] = sum;
                }
            }
        }
        Ok(t)
    }
}

impl Column {
    fn new(step: &Step, arena: &[Twin]) -> Self {
        let pivot = arena[step.pivot as usize];
        let root = pivot.float.abs().sqrt();
        let root = if root > 0.0 && root.is_finite() {
            root
        } else {
            1.0
        };
        let one = Twin {
            float: root,
            exact: Field61::ONE,
        };
        let mut e = vec![(step.row, one)];
        e.extend(step.lower.iter().map(|cell| {
            let v = arena[cell.value as usize];
            (
                cell.index,
                Twin {
                    float: v.float * root,
                    exact: v.exact,
                },
            )
        }));
        let scaled = |v: Twin| Twin {
            float: v.float / root,
            exact: v.exact,
        };
        let mut f = vec![(step.column, scaled(pivot))];
        f.extend(
            step.upper
                .iter()
                .map(|cell| (cell.index, scaled(arena[cell.value as usize]))),
        );
        Self { e, f }
    }
}

/// The cheapest entry (Markowitz) among those not much smaller than the largest of their
/// column and row.
fn steadiest(active: &Elimination<Twin>) -> Option<(u32, u32)> {
    const SHARE: f64 = 0.1;
    let size = |value: u32| active.arena[value as usize].float.abs();
    let mut best: Option<(u64, f64, u32, u32)> = None;
    for (column, cells) in active.columns.iter().enumerate() {
        if !active.column_alive[column] || cells.is_empty() {
            continue;
        }
        let largest = cells.iter().map(|c| size(c.value)).fold(0.0, f64::max);
        for cell in cells {
            let row = &active.rows[cell.index as usize];
            let row_largest = row.iter().map(|c| size(c.value)).fold(0.0, f64::max);
            let own = size(cell.value);
            if own < SHARE * largest.max(row_largest) {
                continue;
            }
            let cost = (row.len() as u64 - 1) * (cells.len() as u64 - 1);
            let better = best.is_none_or(|b| cost < b.0 || (cost == b.0 && own > b.1));
            if better {
                best = Some((cost, own, cell.index, column as u32));
            }
        }
        if best.is_some_and(|b| b.0 == 0) {
            break;
        }
    }
    // No entry passes: the largest of all is the least bad.
    best.map(|b| (b.2, b.3)).or_else(|| {
        let all = active
            .columns
            .iter()
            .enumerate()
            .flat_map(|(column, cells)| {
                let alive = active.column_alive[column];
                cells
                    .iter()
                    .filter(move |_| alive)
                    .map(move |c| (column, c))
            });
        all.max_by(|a, b| size(a.1.value).total_cmp(&size(b.1.value)))
            .map(|(column, cell)| (cell.index, column as u32))
    })
}

/// The part of a matrix with its nonzero eigenvalues: A = E F -> F E until regular, the rank
/// taken from the exact twin.
fn regular_part(mut float: DMatrix<f64>, mut exact: FieldMatrix) -> (DMatrix<f64>, FieldMatrix) {
    loop {
        let order = exact.rows;
        if exact.clone().rank_factors().0.columns == order {
            return (float, exact);
        }
        let (e, f, exact_e, exact_f) = twin_rank_factors(float, exact);
        float = &f * &e;
        exact = exact_f.times(&exact_e);
    }
}

/// Rank factors by elimination with complete pivoting on the doubles, where only entries that
/// are exactly nonzero may be pivots.
fn twin_rank_factors(
    mut a: DMatrix<f64>,
    mut x: FieldMatrix,
) -> (DMatrix<f64>, DMatrix<f64>, FieldMatrix, FieldMatrix) {
    let n = x.rows;
    let mut rows: Vec<usize> = (0..n).collect();
    let mut free_columns: Vec<usize> = (0..n).collect();
    let mut e_columns: Vec<Vec<(usize, f64, Field61)>> = Vec::new();
    let mut f_rows: Vec<Vec<(usize, f64, Field61)>> = Vec::new();
    while let Some((row, column)) = largest(&a, &x, &rows, &free_columns) {
        let (pivot, exact_pivot) = (a[(row, column)], x.get(row, column).inverse());
        f_rows.push(
            free_columns
                .iter()
                .map(|&j| (j, a[(row, j)], x.get(row, j)))
                .collect(),
        );
        rows.retain(|&i| i != row);
        let mut lower = vec![(row, 1.0, Field61::ONE)];
        for &i in &rows {
            let exact = x.get(i, column);
            if exact == Field61::ZERO {
                continue;
            }
            let (f, exact_f) = (a[(i, column)] / pivot, exact * exact_pivot);
            lower.push((i, f, exact_f));
            for &j in &free_columns {
                let left = x.get(i, j) - exact_f * x.get(row, j);
                x.set(i, j, left);
                a[(i, j)] = if left == Field61::ZERO {
                    0.0
                } else {
                    a[(i, j)] - f * a[(row, j)]
                };
            }
        }
        e_columns.push(lower);
        free_columns.retain(|&j| j != column);
    }
    let rank = e_columns.len();
    let (mut e, mut f) = (DMatrix::zeros(n, rank), DMatrix::zeros(rank, n));
    let (mut xe, mut xf) = (FieldMatrix::zero(n, rank), FieldMatrix::zero(rank, n));
    for (k, (lower, upper)) in e_columns.into_iter().zip(f_rows).enumerate() {
        for (i, value, exact) in lower {
            e[(i, k)] = value;
            xe.set(i, k, exact);
        }
        for (j, value, exact) in upper {
            f[(k, j)] = value;
            xf.set(k, j, exact);
        }
    }
    (e, f, xe, xf)
}

fn largest(
    a: &DMatrix<f64>,
    x: &FieldMatrix,
    rows: &[usize],
    columns: &[usize],
) -> Option<(usize, usize)> {
    let mut best: Option<(f64, usize, usize)> = None;
    for &j in columns {
        for &i in rows {
            if x.get(i, j) != Field61::ZERO && best.is_none_or(|b| a[(i, j)].abs() > b.0) {
                best = Some((a[(i, j)].abs(), i, j));
            }
        }
    }
    best.map(|b| (b.1, b.2))
}
