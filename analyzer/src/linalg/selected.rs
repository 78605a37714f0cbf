//! Operation lists of the selected inverse.
//!
//! A. M. Erisman and W. F. Tinney, "On computing certain elements of the
//! inverse of a sparse matrix", Comm. ACM 18 (1975), after K. Takahashi et al.
//! (1973), for unsymmetric factors (from memory). With A' = L U in pivot order,
//! Z = A'^-1 obeys, for i < j, z_ij = -(1/u_ii) sum_{k>i} u_ik z_kj; for i > j,
//! z_ij = -sum_{k>j} z_ik l_kj; and z_ii = (1/u_ii)(1 - sum_{k>i} u_ik z_ki).
//! Only entries that some wanted entry depends on are listed.

use crate::linalg::program::{NONE, Program};

/// How the sum of an entry becomes its value.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Finish {
    /// `-(1/pivot) * sum`
    Upper,
    /// `-sum`
    Lower,
    /// `(1/pivot) * (1 - sum)`
    Diagonal,
}

/// One entry of the inverse, in the order of computation.
#[derive(Debug, Clone, Copy)]
pub(crate) struct InverseTarget {
    pub(crate) finish: Finish,
    /// Pivot position whose reciprocal is used.
    pub(crate) pivot: u32,
    /// End of the (factor entry, inverse entry) pairs.
    pub(crate) pairs_end: u32,
}

/// The selected inverse as lists.
#[derive(Debug, Clone, Default)]
pub(crate) struct Selected {
    pub(crate) targets: Vec<InverseTarget>,
    pub(crate) pairs: Vec<[u32; 2]>,
    /// `(column position, index)` of the stored entries of each row position.
    rows: Vec<Vec<(u32, u32)>>,
}

impl Selected {
    /// Lists for the wanted pivot positions `(i, j)` of the inverse.
    pub(crate) fn new(program: &Program, wanted: &[(u32, u32)]) -> Self {
        let needed = close(program, wanted);
        let mut selected = Self {
            targets: Vec::new(),
            pairs: Vec::new(),
            rows: vec![Vec::new(); program.n],
        };
        // Index of (i, j) by the smaller position; larger ones come first.
        for m in (0..program.n).rev() {
            let group = &needed[m];
            for &(i, j) in group.iter().filter(|(i, j)| i != j) {
                selected.list(program, i, j);
            }
            if group.contains(&(m as u32, m as u32)) {
                selected.list(program, m as u32, m as u32);
            }
        }
        selected
    }

    /// `(column position, index)` of the entries in row position `i`.
    pub(crate) fn row(&self, i: usize) -> &[(u32, u32)] {
        self.rows.get(i).map_or(&[], Vec::as_slice)
    }

    /// Index of the inverse entry at pivot positions `(i, j)`.
    pub(crate) fn index(&self, i: u32, j: u32) -> Option<u32> {
        let row = self.rows.get(i as usize)?;
        row.iter().find(|entry| entry.0 == j).map(|entry| entry.1)
    }

    fn list(&mut self, program: &Program, i: u32, j: u32) {
        let finish = match i.cmp(&j) {
            std::cmp::Ordering::Less => Finish::Upper,
            std::cmp::Ordering::Greater => Finish::Lower,
            std::cmp::Ordering::Equal => Finish::Diagonal,
        };
        if finish == Finish::Lower {
            for e in &program.lower_columns[j as usize] {
                let z = self.index(i, e.other).unwrap_or(NONE);
                self.pairs.push([e.index, z]);
            }
        } else {
            for e in &program.upper_rows[i as usize] {
                let z = self.index(e.other, j).unwrap_or(NONE);
                self.pairs.push([e.index, z]);
            }
        }
        let index = self.targets.len() as u32;
        self.targets.push(InverseTarget {
            finish,
            pivot: i.min(j),
            pairs_end: self.pairs.len() as u32,
        });
        self.rows[i as usize].push((j, index));
    }
}

/// All entries that the wanted ones depend on, grouped by smaller position.
fn close(program: &Program, wanted: &[(u32, u32)]) -> Vec<Vec<(u32, u32)>> {
    let mut needed: Vec<Vec<(u32, u32)>> = vec![Vec::new(); program.n];
    for &(i, j) in wanted {
        needed[i.min(j) as usize].push((i, j));
    }
    for m in 0..program.n {
        let mut group = std::mem::take(&mut needed[m]);
        group.sort_unstable();
        group.dedup();
        // A diagonal entry needs entries of its own group.
        if group.binary_search(&(m as u32, m as u32)).is_ok() {
            group.extend(program.upper_rows[m].iter().map(|e| (e.other, m as u32)));
            group.sort_unstable();
            group.dedup();
        }
        for &(i, j) in group.iter().filter(|(i, j)| i != j) {
            if i < j {
                for e in &program.upper_rows[m] {
                    needed[e.other.min(j) as usize].push((e.other, j));
                }
            } else {
                for e in &program.lower_columns[m] {
                    needed[e.other.min(i) as usize].push((i, e.other));
                }
            }
        }
        needed[m] = group;
    }
    needed
}
