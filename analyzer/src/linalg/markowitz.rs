//! Pivot order that is sparse and sound at several sample points at once.
//!
//! H. M. Markowitz, "The elimination form of the inverse and its application to
//! linear programming", Management Science 3 (1957) (from memory): take the
//! pivot with the least (row count - 1)(column count - 1). A candidate must
//! reach `threshold` times the largest entry of its column in *every* sample,
//! so that one order serves the whole band and every set of values sampled.

use crate::linalg::elimination::{Cell, Elimination, Step};
use crate::linalg::error::NumericError;
use crate::linalg::values::Values;
use num_complex::Complex64;

/// Columns of least count that are searched at each step (a wider search
/// lowered the fill by under 2 % on amplifier-like matrices).
const COLUMNS_SEARCHED: usize = 12;

/// Relative pivot size asked for at the reference points: multipliers stay
/// below 1e3 there, and between references growth is watched per point.
pub(crate) const BAND_THRESHOLD: f64 = 1e-3;

/// Relative pivot size for a plan made for a single point.
pub(crate) const POINT_THRESHOLD: f64 = 0.1;

#[derive(Clone, Copy)]
struct Candidate {
    row: u32,
    column: u32,
    cost: u64,
    ratio: f64,
}

/// Finds a pivot order for all `samples` at all points `s`.
pub(crate) fn search(
    samples: &[&Values],
    s: &[Complex64],
    threshold: f64,
) -> Result<Vec<Step>, NumericError> {
    let Some(first) = samples.first() else {
        return Err(NumericError::Shape {
            least: 1,
            most: usize::MAX,
            given: 0,
        });
    };
    let pattern = &first.pattern;
    let n = pattern.n();
    let evaluated: Vec<Vec<Complex64>> = samples
        .iter()
        .flat_map(|values| s.iter().map(|&s| values.eval(s)))
        .collect();
    let stride = evaluated.len();
    let mut active = Elimination::new(n, stride);
    active.arena.reserve(2 * stride * pattern.slots());
    let mut entry = vec![Complex64::new(0.0, 0.0); stride];
    for (slot, row, column) in pattern.entries() {
        for (q, a) in evaluated.iter().enumerate() {
            entry[q] = a[slot];
        }
        // A position without any value takes no part in the search; it joins the
        // factors only when fill reaches it or when the caller asks for it.
        if entry.iter().any(|v| v.re != 0.0 || v.im != 0.0) {
            active.push(row, column, &entry);
        }
    }
    let mut queue = Buckets::new(&active);
    let mut steps = Vec::with_capacity(n);
    for _ in 0..n {
        let pick = choose(&mut active, &mut queue, threshold * threshold);
        let step = pick.and_then(|p| active.eliminate(p.row, p.column));
        let Some(step) = step else {
            let (rows, columns) = active.alive();
            return Err(NumericError::Singular { rows, columns });
        };
        for cell in &step.upper {
            queue.note(cell.index, active.columns[cell.index as usize].len());
        }
        steps.push(step);
    }
    Ok(steps)
}

/// Best pivot by cost, diagonal position, then relative size.
fn choose(
    active: &mut Elimination<Complex64>,
    queue: &mut Buckets,
    threshold2: f64,
) -> Option<Candidate> {
    let mut best: Option<Candidate> = None;
    let mut fallback: Option<Candidate> = None;
    let mut searched = 0;
    let mut count = 1;
    while count < queue.lists.len() {
        let mut k = 0;
        while k < queue.lists[count].len() {
            let column = queue.lists[count][k];
            if !active.column_alive[column as usize] || queue.level[column as usize] != count {
                queue.lists[count].swap_remove(k);
                continue;
            }
            k += 1;
            // Beyond the usual width only the absence of any nonzero pivot counts.
            scan_column(active, column, threshold2, &mut best, &mut fallback);
            searched += 1;
            let free = best.is_some_and(|b| b.cost == 0 && b.row == b.column);
            if free || (searched >= COLUMNS_SEARCHED && (best.is_some() || fallback.is_some())) {
                return best.or(fallback);
            }
        }
        if best.is_some_and(|b| b.cost == 0) {
            return best;
        }
        count += 1;
    }
    best.or(fallback)
}

/// Offers every entry of a column as a pivot.
fn scan_column(
    active: &Elimination<Complex64>,
    column: u32,
    threshold2: f64,
    best: &mut Option<Candidate>,
    fallback: &mut Option<Candidate>,
) {
    let cells = &active.columns[column as usize];
    let width = cells.len() as u64 - 1;
    for &cell in cells {
        let cost = (active.rows[cell.index as usize].len() as u64 - 1) * width;
        if best.is_some_and(|b| cost > b.cost) {
            continue;
        }
        let ratio = ratio(active, cells, cell);
        let candidate = Candidate {
            row: cell.index,
            column,
            cost,
            ratio,
        };
        if ratio >= threshold2 {
            if best.is_none_or(|b| better(&candidate, &b)) {
                *best = Some(candidate);
            }
        } else if ratio > 0.0 && fallback.is_none_or(|f| ratio > f.ratio) {
            *fallback = Some(candidate);
        }
    }
}

/// Least squared relative modulus of an entry within its column over all samples.
fn ratio(active: &Elimination<Complex64>, cells: &[Cell], cell: Cell) -> f64 {
    let own = active.samples(cell);
    let mut least = f64::INFINITY;
    for (q, v) in own.iter().enumerate() {
        let own = v.norm_sqr();
        let mut largest = own;
        for other in cells {
            let other = active.arena[other.value as usize + q].norm_sqr();
            if other > largest {
                largest = other;
            }
        }
        let ratio = if own > 0.0 && own.is_finite() {
            own / largest
        } else {
            0.0
        };
        if ratio < least {
            least = ratio;
        }
    }
    least
}

fn better(a: &Candidate, b: &Candidate) -> bool {
    let key = |c: &Candidate| (c.cost, c.row != c.column);
    key(a) < key(b) || (key(a) == key(b) && a.ratio > b.ratio)
}

/// Columns by entry count; stale copies are skipped when met.
struct Buckets {
    lists: Vec<Vec<u32>>,
    level: Vec<usize>,
}

impl Buckets {
    fn new(active: &Elimination<Complex64>) -> Self {
        let n = active.columns.len();
        let mut buckets = Self {
            lists: vec![Vec::new(); n + 2],
            level: vec![usize::MAX; n],
        };
        for column in 0..n {
            buckets.note(column as u32, active.columns[column].len());
        }
        buckets
    }

    fn note(&mut self, column: u32, count: usize) {
        if self.level[column as usize] != count {
            self.level[column as usize] = count;
            self.lists[count].push(column);
        }
    }
}
