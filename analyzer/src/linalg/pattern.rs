//! Sparsity pattern shared by every matrix of one topology.
//!
//! Holds positions only, never values; entry point [`Pattern::new`]. Slots are
//! numbered column by column, rows ascending (compressed sparse column order).

use std::sync::Arc;

/// A square sparsity pattern that always contains its diagonal.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Pattern {
    n: usize,
    column_start: Vec<u32>,
    row_index: Vec<u32>,
    fingerprint: u64,
}

impl Pattern {
    /// Builds the pattern of order `n` from (row, column) pairs in any order,
    /// repeats allowed; the diagonal is added.
    ///
    /// # Panics
    /// When a row or column is not below `n`.
    pub fn new(n: usize, entries: &[(u32, u32)]) -> Arc<Self> {
        let mut keys: Vec<(u32, u32)> = Vec::with_capacity(entries.len() + n);
        for &(row, column) in entries {
            assert!(
                (row as usize) < n && (column as usize) < n,
                "entry outside a pattern of this order"
            );
            keys.push((column, row));
        }
        keys.extend((0..n as u32).map(|k| (k, k)));
        keys.sort_unstable();
        keys.dedup();
        let mut column_start = vec![0u32; n + 1];
        for &(column, _) in &keys {
            column_start[column as usize + 1] += 1;
        }
        for k in 0..n {
            column_start[k + 1] += column_start[k];
        }
        let row_index: Vec<u32> = keys.iter().map(|&(_, row)| row).collect();
        let fingerprint = fingerprint(n, &keys);
        Arc::new(Self {
            n,
            column_start,
            row_index,
            fingerprint,
        })
    }

    /// Order of the matrix.
    pub fn n(&self) -> usize {
        self.n
    }

    /// Number of stored positions.
    pub fn slots(&self) -> usize {
        self.row_index.len()
    }

    /// A 64-bit hash of order and positions (FNV-1a), equal for equal patterns.
    pub fn fingerprint(&self) -> u64 {
        self.fingerprint
    }

    /// Slot of `(row, column)`, or `None` when the position is not stored.
    pub fn slot(&self, row: u32, column: u32) -> Option<usize> {
        let start = *self.column_start.get(column as usize)? as usize;
        let end = *self.column_start.get(column as usize + 1)? as usize;
        let rows = &self.row_index[start..end];
        rows.binary_search(&row).ok().map(|k| start + k)
    }

    /// All positions in slot order as `(slot, row, column)`.
    pub fn entries(&self) -> impl Iterator<Item = (usize, u32, u32)> + '_ {
        (0..self.n).flat_map(move |column| {
            let start = self.column_start[column] as usize;
            let end = self.column_start[column + 1] as usize;
            (start..end).map(move |slot| (slot, self.row_index[slot], column as u32))
        })
    }

    /// `(row, column)` of a slot.
    ///
    /// # Panics
    /// When `slot` is not below [`Pattern::slots`].
    pub fn position(&self, slot: usize) -> (u32, u32) {
        let row = self.row_index[slot];
        let column = self
            .column_start
            .partition_point(|&start| start as usize <= slot)
            - 1;
        (row, column as u32)
    }
}

/// FNV-1a over the order and the sorted positions.
fn fingerprint(n: usize, keys: &[(u32, u32)]) -> u64 {
    let mut hash = 0xcbf2_9ce4_8422_2325u64;
    let mut feed = |word: u64| {
        for byte in word.to_le_bytes() {
            hash = (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3);
        }
    };
    feed(n as u64);
    for &(column, row) in keys {
        feed((u64::from(column) << 32) | u64::from(row));
    }
    hash
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn slots_and_positions_are_inverse() {
        let pattern = Pattern::new(4, &[(3, 0), (0, 2), (3, 0), (1, 3)]);
        assert_eq!(
            pattern.slots(),
            7,
            "four diagonal and three other positions"
        );
        for (slot, row, column) in pattern.entries() {
            assert_eq!(
                pattern.slot(row, column),
                Some(slot),
                "slot of ({row}, {column})"
            );
            assert_eq!(
                pattern.position(slot),
                (row, column),
                "position of slot {slot}"
            );
        }
        assert_eq!(pattern.slot(2, 0), None, "absent position");
        assert_eq!(pattern.slot(0, 9), None, "column out of range");
    }

    #[test]
    fn fingerprint_ignores_order_and_sees_positions() {
        let a = Pattern::new(3, &[(0, 1), (2, 0)]);
        let b = Pattern::new(3, &[(2, 0), (0, 1), (1, 1)]);
        let c = Pattern::new(3, &[(1, 0), (2, 0)]);
        assert_eq!(a.fingerprint(), b.fingerprint(), "same positions");
        assert_ne!(a.fingerprint(), c.fingerprint(), "transposed position");
    }
}
