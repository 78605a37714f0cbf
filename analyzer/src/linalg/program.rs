//! Operation lists of one factorisation in dot-product (Crout) order.
//!
//! Built once from a pivot order; read by the kernels. Entries of L and U are
//! numbered in the order in which they are computed, so the kernel writes its
//! results one after the other. L has a unit diagonal, U holds the pivots.

use crate::linalg::elimination::Step;
use crate::linalg::pattern::Pattern;

/// "Nothing here" in index lists.
pub(crate) const NONE: u32 = u32::MAX;

/// One entry of L or U: where its A value comes from and where its list ends.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Target {
    /// Slot of A, or [`NONE`] for fill.
    pub(crate) slot: u32,
    /// Index into the delayed parts, or [`NONE`].
    pub(crate) delay: u32,
    /// End of the (l, u) pairs of this entry.
    pub(crate) pairs_end: u32,
}

/// One stored entry of a row or column of a factor.
#[derive(Debug, Clone, Copy)]
pub(crate) struct FactorEntry {
    /// Position of the other index in pivot order.
    pub(crate) other: u32,
    /// Index into the factor values.
    pub(crate) index: u32,
}

/// Everything the factorisation kernel and the solves read.
#[derive(Debug, Clone)]
pub(crate) struct Program {
    pub(crate) n: usize,
    /// Row of A at each pivot position.
    pub(crate) row_of: Vec<u32>,
    /// Column of A at each pivot position.
    pub(crate) column_of: Vec<u32>,
    /// +1 or -1: sign of the row and column permutations together.
    pub(crate) sign: f64,
    pub(crate) targets: Vec<Target>,
    pub(crate) pairs: Vec<[u32; 2]>,
    /// Per step: end of the pivot-and-upper targets, end of the lower targets.
    pub(crate) ends: Vec<[u32; 2]>,
    /// Per pivot position: entries of row k of L, entries of row k of U.
    pub(crate) lower_rows: Vec<Vec<FactorEntry>>,
    pub(crate) upper_rows: Vec<Vec<FactorEntry>>,
    /// Per pivot position: entries of column k of L, entries of column k of U.
    pub(crate) lower_columns: Vec<Vec<FactorEntry>>,
    pub(crate) upper_columns: Vec<Vec<FactorEntry>>,
}

impl Program {
    /// Lists for the pivot order `steps`; `delay_of` maps slots to delayed parts.
    pub(crate) fn new(pattern: &Pattern, steps: &[Step], delay_of: &[u32]) -> Self {
        let n = pattern.n();
        let row_of: Vec<u32> = steps.iter().map(|step| step.row).collect();
        let column_of: Vec<u32> = steps.iter().map(|step| step.column).collect();
        let (row_at, column_at) = (inverse(&row_of), inverse(&column_of));
        let sign = parity(&row_of) * parity(&column_of);
        let mut program = Self {
            n,
            row_of,
            column_of,
            sign,
            targets: Vec::new(),
            pairs: Vec::new(),
            ends: Vec::with_capacity(n),
            lower_rows: vec![Vec::new(); n],
            upper_rows: vec![Vec::new(); n],
            lower_columns: vec![Vec::new(); n],
            upper_columns: vec![Vec::new(); n],
        };
        let (upper, lower) = fill(pattern, steps, &row_at, &column_at);
        program.number(&upper, &lower);
        program.attach(pattern, &row_at, &column_at, delay_of);
        program.pair();
        program
    }

    /// Index of the pivot of step `k`.
    pub(crate) fn pivot(&self, k: usize) -> u32 {
        if k == 0 { 0 } else { self.ends[k - 1][1] }
    }

    /// Numbers all entries in Crout order and fills the row and column lists.
    fn number(&mut self, upper: &[Vec<u32>], lower: &[Vec<u32>]) {
        let mut next = 0u32;
        for k in 0..self.n {
            next += 1;
            for &j in &upper[k] {
                self.upper_rows[k].push(FactorEntry {
                    other: j,
                    index: next,
                });
                self.upper_columns[j as usize].push(FactorEntry {
                    other: k as u32,
                    index: next,
                });
                next += 1;
            }
            let upper_end = next;
            for &i in &lower[k] {
                self.lower_columns[k].push(FactorEntry {
                    other: i,
                    index: next,
                });
                self.lower_rows[i as usize].push(FactorEntry {
                    other: k as u32,
                    index: next,
                });
                next += 1;
            }
            self.ends.push([upper_end, next]);
        }
        self.targets = vec![
            Target {
                slot: NONE,
                delay: NONE,
                pairs_end: 0
            };
            next as usize
        ];
    }

    /// Index of the factor entry at pivot positions `(i, j)`.
    pub(crate) fn entry(&self, i: usize, j: usize) -> Option<u32> {
        let list = match i.cmp(&j) {
            std::cmp::Ordering::Equal => return Some(self.pivot(i)),
            std::cmp::Ordering::Less => &self.upper_rows[i],
            std::cmp::Ordering::Greater => &self.lower_rows[i],
        };
        let k = list.binary_search_by_key(&(j as u32), |e| e.other).ok()?;
        Some(list[k].index)
    }

    /// Connects the entries with the slots of A.
    fn attach(&mut self, pattern: &Pattern, row_at: &[u32], column_at: &[u32], delay_of: &[u32]) {
        for (slot, row, column) in pattern.entries() {
            let (i, j) = (
                row_at[row as usize] as usize,
                column_at[column as usize] as usize,
            );
            if let Some(index) = self.entry(i, j) {
                self.targets[index as usize].slot = slot as u32;
                self.targets[index as usize].delay = delay_of[slot];
            }
        }
    }

    /// Lists the products that each entry needs, row by row of the matrix.
    fn pair(&mut self) {
        let mut count = vec![0u32; self.targets.len() + 1];
        self.products(|target, _, _| count[target as usize + 1] += 1);
        for k in 1..count.len() {
            count[k] += count[k - 1];
        }
        for (target, &end) in self.targets.iter_mut().zip(&count[1..]) {
            target.pairs_end = end;
        }
        let total = count[self.targets.len()] as usize;
        let mut pairs = vec![[0u32; 2]; total];
        self.products(|target, l, u| {
            let at = &mut count[target as usize];
            pairs[*at as usize] = [l, u];
            *at += 1;
        });
        self.pairs = pairs;
    }

    /// Visits (target, l, u) of every multiply-add; per target in pivot order.
    fn products(&self, mut visit: impl FnMut(u32, u32, u32)) {
        let mut place = vec![NONE; self.n];
        for i in 0..self.n {
            place[i] = self.pivot(i);
            for e in self.lower_rows[i].iter().chain(&self.upper_rows[i]) {
                place[e.other as usize] = e.index;
            }
            for l in &self.lower_rows[i] {
                for u in &self.upper_rows[l.other as usize] {
                    visit(place[u.other as usize], l.index, u.index);
                }
            }
        }
    }
}

/// Symbolic elimination of the full pattern in the given order: the search may
/// have skipped positions that were zero in its samples.
fn fill(
    pattern: &Pattern,
    steps: &[Step],
    row_at: &[u32],
    column_at: &[u32],
) -> (Vec<Vec<u32>>, Vec<Vec<u32>>) {
    let n = pattern.n();
    let mut rows: Vec<Vec<u32>> = vec![Vec::new(); n];
    for (_, row, column) in pattern.entries() {
        rows[row_at[row as usize] as usize].push(column_at[column as usize]);
    }
    for (k, step) in steps.iter().enumerate() {
        // Entries met in the search are part of the factors by construction.
        for cell in &step.upper {
            rows[k].push(column_at[cell.index as usize]);
        }
        for cell in &step.lower {
            rows[row_at[cell.index as usize] as usize].push(k as u32);
        }
        rows[k].push(k as u32);
    }
    let mut upper: Vec<Vec<u32>> = vec![Vec::new(); n];
    let mut lower: Vec<Vec<u32>> = vec![Vec::new(); n];
    let mut mark = vec![NONE; n];
    let mut below: Vec<u32> = Vec::new();
    for i in 0..n {
        below.clear();
        let mut heap = std::collections::BinaryHeap::new();
        for &j in &rows[i] {
            if mark[j as usize] != i as u32 {
                mark[j as usize] = i as u32;
                if (j as usize) < i {
                    heap.push(std::cmp::Reverse(j));
                } else if j as usize > i {
                    upper[i].push(j);
                }
            }
        }
        while let Some(std::cmp::Reverse(k)) = heap.pop() {
            below.push(k);
            let (head, tail) = upper.split_at_mut(i);
            for &j in &head[k as usize] {
                if mark[j as usize] != i as u32 {
                    mark[j as usize] = i as u32;
                    if (j as usize) < i {
                        heap.push(std::cmp::Reverse(j));
                    } else if j as usize > i {
                        tail[0].push(j);
                    }
                }
            }
        }
        upper[i].sort_unstable();
        for &k in &below {
            lower[k as usize].push(i as u32);
        }
    }
    (upper, lower)
}

fn inverse(order: &[u32]) -> Vec<u32> {
    let mut at = vec![0u32; order.len()];
    for (k, &row) in order.iter().enumerate() {
        at[row as usize] = k as u32;
    }
    at
}

/// Sign of a permutation.
fn parity(order: &[u32]) -> f64 {
    let mut seen = vec![false; order.len()];
    let mut sign = 1.0;
    for start in 0..order.len() {
        let mut length = 0;
        let mut k = start;
        while !seen[k] {
            seen[k] = true;
            k = order[k] as usize;
            length += 1;
        }
        if length > 0 && length % 2 == 0 {
            sign = -sign;
        }
    }
    sign
}
