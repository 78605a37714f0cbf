//! Right-looking sparse elimination over any kind of number.
//!
//! The caller chooses each pivot; this file keeps the active submatrix and
//! records what every step divided and subtracted. Used for the pivot search
//! (several complex samples per entry), for exact arithmetic (one field element)
//! and for rank factorisations (a double with its exact twin).

/// What the elimination needs of a number.
pub(crate) trait Scalar: Copy {
    /// The additive identity.
    fn zero() -> Self;
    /// `self - f * u`.
    fn minus_product(self, f: Self, u: Self) -> Self;
    /// What a division by one pivot, done many times, needs.
    type Divisor: Copy;
    /// `self` as a divisor.
    fn divisor(self) -> Self::Divisor;
    /// `self / pivot`.
    fn over(self, pivot: Self::Divisor) -> Self;
    /// Whether the entry may be dropped from the structure.
    fn is_droppable(&self) -> bool;
}

impl Scalar for num_complex::Complex64 {
    fn zero() -> Self {
        Self::new(0.0, 0.0)
    }
    #[inline]
    fn minus_product(self, f: Self, u: Self) -> Self {
        self - f * u
    }
    type Divisor = Self;
    fn divisor(self) -> Self {
        self
    }
    #[inline]
    fn over(self, pivot: Self) -> Self {
        self / pivot
    }
    /// The structure must serve all values, so nothing is dropped.
    fn is_droppable(&self) -> bool {
        false
    }
}

/// A stored entry: its other index and where its samples start.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Cell {
    pub(crate) index: u32,
    pub(crate) value: u32,
}

/// One finished elimination step.
#[derive(Debug)]
pub(crate) struct Step {
    pub(crate) row: u32,
    pub(crate) column: u32,
    /// Start of the pivot samples.
    pub(crate) pivot: u32,
    /// Rows below with their multipliers `a(i,c) / pivot`.
    pub(crate) lower: Vec<Cell>,
    /// Columns to the right with the entries of the pivot row.
    pub(crate) upper: Vec<Cell>,
}

/// The active submatrix.
pub(crate) struct Elimination<S> {
    stride: usize,
    pub(crate) rows: Vec<Vec<Cell>>,
    pub(crate) columns: Vec<Vec<Cell>>,
    pub(crate) row_alive: Vec<bool>,
    pub(crate) column_alive: Vec<bool>,
    pub(crate) arena: Vec<S>,
    place: Vec<u32>,
}

impl<S: Scalar> Elimination<S> {
    /// Empty matrix of order `n` with `stride` samples per entry.
    pub(crate) fn new(n: usize, stride: usize) -> Self {
        Self {
            stride,
            rows: vec![Vec::new(); n],
            columns: vec![Vec::new(); n],
            row_alive: vec![true; n],
            column_alive: vec![true; n],
            arena: Vec::new(),
            place: vec![0; n],
        }
    }

    /// Adds an entry that is not yet stored.
    pub(crate) fn push(&mut self, row: u32, column: u32, samples: &[S]) {
        let value = self.arena.len() as u32;
        self.arena.extend_from_slice(samples);
        self.rows[row as usize].push(Cell {
            index: column,
            value,
        });
        self.columns[column as usize].push(Cell { index: row, value });
    }

    /// Samples of an entry.
    pub(crate) fn samples(&self, cell: Cell) -> &[S] {
        &self.arena[cell.value as usize..cell.value as usize + self.stride]
    }

    /// The cell at `(row, column)` seen from its row, if stored.
    pub(crate) fn find(&self, row: u32, column: u32) -> Option<Cell> {
        self.rows[row as usize]
            .iter()
            .copied()
            .find(|cell| cell.index == column)
    }

    /// Eliminates with the stored entry `(row, column)` as pivot; `None` when it
    /// is not stored.
    pub(crate) fn eliminate(&mut self, row: u32, column: u32) -> Option<Step> {
        let pivot = self.find(row, column)?.value;
        let mut upper = std::mem::take(&mut self.rows[row as usize]);
        let mut lower = std::mem::take(&mut self.columns[column as usize]);
        upper.retain(|cell| cell.index != column);
        lower.retain(|cell| cell.index != row);
        self.row_alive[row as usize] = false;
        self.column_alive[column as usize] = false;
        for cell in &upper {
            remove(&mut self.columns[cell.index as usize], row);
        }
        let used = if lower.is_empty() { 0 } else { self.stride };
        let divisors: Vec<S::Divisor> = (0..used)
            .map(|q| self.arena[pivot as usize + q].divisor())
            .collect();
        for &cell in &lower {
            remove(&mut self.rows[cell.index as usize], column);
            for (q, divisor) in divisors.iter().enumerate() {
                let at = cell.value as usize + q;
                self.arena[at] = self.arena[at].over(*divisor);
            }
            self.update_row(cell, &upper);
        }
        Some(Step {
            row,
            column,
            pivot,
            lower,
            upper,
        })
    }

    /// Subtracts multiplier times pivot row from one row.
    fn update_row(&mut self, lower: Cell, upper: &[Cell]) {
        let i = lower.index as usize;
        let f = lower.value as usize;
        for cell in &self.rows[i] {
            self.place[cell.index as usize] = cell.value + 1;
        }
        let mut dropped = false;
        for u in upper {
            let known = self.place[u.index as usize];
            let target = if known > 0 {
                known as usize - 1
            } else {
                let target = self.arena.len();
                self.arena.resize(target + self.stride, S::zero());
                let value = target as u32;
                self.rows[i].push(Cell {
                    index: u.index,
                    value,
                });
                self.columns[u.index as usize].push(Cell {
                    index: lower.index,
                    value,
                });
                target
            };
            for q in 0..self.stride {
                let (f, u) = (self.arena[f + q], self.arena[u.value as usize + q]);
                self.arena[target + q] = self.arena[target + q].minus_product(f, u);
            }
            dropped |= self.arena[target].is_droppable();
        }
        for cell in &self.rows[i] {
            self.place[cell.index as usize] = 0;
        }
        if dropped {
            self.drop_zeros(i);
        }
    }

    /// Removes droppable entries of a row from both lists.
    fn drop_zeros(&mut self, i: usize) {
        let row = std::mem::take(&mut self.rows[i]);
        let (gone, kept): (Vec<Cell>, Vec<Cell>) = row
            .into_iter()
            .partition(|cell| self.arena[cell.value as usize].is_droppable());
        for cell in gone {
            remove(&mut self.columns[cell.index as usize], i as u32);
        }
        self.rows[i] = kept;
    }

    /// Rows and columns not yet used as pivots, ascending.
    pub(crate) fn alive(&self) -> (Vec<u32>, Vec<u32>) {
        let list = |alive: &[bool]| {
            (0..alive.len() as u32)
                .filter(|&k| alive[k as usize])
                .collect::<Vec<_>>()
        };
        (list(&self.row_alive), list(&self.column_alive))
    }
}

/// Removes the cell of `index` from an unordered list.
fn remove(list: &mut Vec<Cell>, index: u32) {
    if let Some(k) = list.iter().position(|cell| cell.index == index) {
        list.swap_remove(k);
    }
}
