//! A plan: one pivot order and all operation lists of a topology.
//!
//! Made once per topology by [`Plan::new`], then used for any number of
//! frequencies and value changes through [`Plan::factor`] and friends, several
//! frequencies a call. Numbers live in a [`Workspace`].

use crate::linalg::dispatch::Level;
use crate::linalg::elimination::Step;
use crate::linalg::error::{NumericError, PlanError};
use crate::linalg::kernel::Pass;
use crate::linalg::markowitz::{self, BAND_THRESHOLD, POINT_THRESHOLD};
use crate::linalg::pattern::Pattern;
use crate::linalg::program::{FactorEntry, NONE, Program};
use crate::linalg::selected::Selected;
use crate::linalg::symmetric;
use crate::linalg::values::Values;
use crate::linalg::workspace::Workspace;
use num_complex::Complex64;
use std::sync::{Arc, Mutex};

/// Factor entries above which 16 lanes leave the second-level cache (1 MiB at
/// 128 bytes an entry and 8 lanes), so that 8 lanes are faster.
const WIDE_LIMIT: usize = 8000;

/// Order above which the diagonal order is tried beside the search, and the cheaper one taken.
const MEDIUM: usize = 700;

/// Order above which the search takes seconds, so that a sound diagonal order is taken unseen.
const LARGE: usize = 2000;

/// The immutable content of a plan, shared with its workspaces.
#[derive(Debug)]
pub(crate) struct Core {
    pub(crate) pattern: Arc<Pattern>,
    pub(crate) level: Level,
    pub(crate) lanes: usize,
    pub(crate) program: Program,
    pub(crate) selected: Selected,
    pub(crate) forward: Pass,
    pub(crate) backward: Pass,
    pub(crate) forward_transposed: Pass,
    pub(crate) backward_transposed: Pass,
    /// Delayed part of each slot, or `NONE`.
    pub(crate) delay_of: Vec<u32>,
    pub(crate) delayed_parts: usize,
    /// Whether a slot may carry a part proportional to s.
    pub(crate) sloped: Vec<bool>,
    /// (inverse entry, slot) of the sloped slots.
    pub(crate) slope_terms: Vec<(u32, u32)>,
    /// (inverse entry, delayed part) of the delayed slots.
    pub(crate) delay_terms: Vec<[u32; 2]>,
    /// Sorted (row, column, inverse entry) of everything in the selected inverse.
    pub(crate) lookup: Vec<(u32, u32, u32)>,
    /// Row and column of each inverse entry.
    pub(crate) position_of: Vec<(u32, u32)>,
    pub(crate) wanted: Vec<(u32, u32)>,
    pub(crate) references: Vec<Complex64>,
    /// Plans made for single points where this one failed, the one used last first.
    pub(crate) spares: Mutex<Vec<Plan>>,
}

/// Pivot order and operation lists for one sparsity pattern.
#[derive(Debug, Clone)]
pub struct Plan {
    pub(crate) core: Arc<Core>,
}

impl Plan {
    /// Chooses a pivot order that is sound for all `samples` at all
    /// `s = j * reference_rad` and lists all operations.
    ///
    /// `samples` holds every kind of values the plan will serve (for instance
    /// sources on and sources off); entries that are zero in all of them may
    /// take other constant values later, but a part proportional to s or a delay
    /// is only allowed where some sample has one. `wanted` lists `(row, column)`
    /// entries of the inverse (row: unknown, column: equation) that
    /// [`Plan::invert_selected`] must give; those that the derivative of the
    /// determinant needs are added.
    ///
    /// # Errors
    /// [`NumericError::Singular`] names rows and columns left without pivot;
    /// [`NumericError::Mismatch`] when the samples have different patterns;
    /// [`NumericError::NotFinite`] for NaN or infinite coefficients. Exact
    /// singularity that rounding hides is not found here, see
    /// [`exact::structure`](crate::linalg::exact::structure).
    pub fn new(
        pattern: Arc<Pattern>,
        samples: &[&Values],
        reference_rad: &[f64],
        wanted: &[(u32, u32)],
    ) -> Result<Self, PlanError> {
        let references: Vec<Complex64> = reference_rad
            .iter()
            .map(|&w| Complex64::new(0.0, w))
            .collect();
        Self::with_references(pattern, samples, &references, wanted)
    }

    /// As [`Plan::new`] with complex reference points.
    ///
    /// # Errors
    /// As [`Plan::new`].
    pub fn with_references(
        pattern: Arc<Pattern>,
        samples: &[&Values],
        references: &[Complex64],
        wanted: &[(u32, u32)],
    ) -> Result<Self, PlanError> {
        let level = Level::detect();
        Self::build(
            pattern,
            samples,
            references,
            wanted,
            BAND_THRESHOLD,
            (level, None),
        )
    }

    /// A plan for a given instruction set and lane count (8 or 16); for checks
    /// that all paths agree.
    ///
    /// # Errors
    /// As [`Plan::new`].
    pub fn with_level(
        pattern: Arc<Pattern>,
        samples: &[&Values],
        references: &[Complex64],
        wanted: &[(u32, u32)],
        level: (Level, usize),
    ) -> Result<Self, PlanError> {
        let lanes = if level.1 >= 16 { 16 } else { 8 };
        Self::build(
            pattern,
            samples,
            references,
            wanted,
            BAND_THRESHOLD,
            (level.0, Some(lanes)),
        )
    }

    /// A plan for one point only, with strict pivoting.
    pub(crate) fn for_point(
        values: &Values,
        s: Complex64,
        wanted: &[(u32, u32)],
    ) -> Result<Self, PlanError> {
        let level = (Level::detect(), Some(8));
        Self::build(
            values.pattern.clone(),
            &[values],
            &[s],
            wanted,
            POINT_THRESHOLD,
            level,
        )
    }

    /// A new plan that is also sound at `extra`, for when
    /// [`Workspace::is_sound`] failed there. `samples` as in [`Plan::new`].
    ///
    /// # Errors
    /// As [`Plan::new`].
    pub fn replan_with(&self, samples: &[&Values], extra: &[Complex64]) -> Result<Self, PlanError> {
        let mut references = self.core.references.clone();
        references.extend_from_slice(extra);
        Self::with_references(
            self.core.pattern.clone(),
            samples,
            &references,
            &self.core.wanted,
        )
    }

    fn build(
        pattern: Arc<Pattern>,
        samples: &[&Values],
        references: &[Complex64],
        wanted: &[(u32, u32)],
        threshold: f64,
        (level, lanes): (Level, Option<usize>),
    ) -> Result<Self, PlanError> {
        check(&pattern, samples, references, wanted)?;
        if threshold == BAND_THRESHOLD
            && pattern.n() > MEDIUM
            && let Some(steps) = symmetric::order(&pattern, samples, references)
        {
            let plan = Self::from_steps(
                &pattern,
                samples,
                references,
                wanted,
                &steps,
                (level, lanes),
            );
            let sound = plan.is_sound_for(samples, references);
            if sound && pattern.n() > LARGE {
                return Ok(plan);
            }
            if sound {
                let steps = markowitz::search(samples, references, threshold)?;
                let other = Self::from_steps(
                    &pattern,
                    samples,
                    references,
                    wanted,
                    &steps,
                    (level, lanes),
                );
                let cheaper = plan.multiply_adds() < other.multiply_adds();
                return Ok(if cheaper { plan } else { other });
            }
        }
        let steps = markowitz::search(samples, references, threshold)?;
        Ok(Self::from_steps(
            &pattern,
            samples,
            references,
            wanted,
            &steps,
            (level, lanes),
        ))
    }

    /// Whether every sample is sound at every reference.
    fn is_sound_for(&self, samples: &[&Values], references: &[Complex64]) -> bool {
        let mut ws = self.workspace();
        references.chunks(self.lanes()).all(|s| {
            samples.iter().all(|values| {
                let factored = self.factor(values, s, &mut ws).is_ok();
                factored && (0..s.len()).all(|lane| ws.is_sound(lane))
            })
        })
    }

    /// All operation lists for a pivot order.
    fn from_steps(
        pattern: &Arc<Pattern>,
        samples: &[&Values],
        references: &[Complex64],
        wanted: &[(u32, u32)],
        steps: &[Step],
        (level, lanes): (Level, Option<usize>),
    ) -> Self {
        let (delay_of, delayed_parts, sloped) = survey(pattern, samples);
        let program = Program::new(pattern, steps, &delay_of);
        let all = wanted_positions(pattern, &program, wanted, &sloped, &delay_of);
        let selected = Selected::new(&program, &all);
        let lanes = lanes.unwrap_or_else(|| {
            if program.targets.len() > WIDE_LIMIT {
                8
            } else {
                level.widest_lanes()
            }
        });
        let mut core = Core {
            level,
            lanes,
            forward: ascending(&program.lower_rows),
            backward: descending(&program.upper_rows),
            forward_transposed: ascending(&program.upper_columns),
            backward_transposed: descending(&program.lower_columns),
            delay_of,
            delayed_parts,
            sloped,
            slope_terms: Vec::new(),
            delay_terms: Vec::new(),
            lookup: Vec::new(),
            position_of: Vec::new(),
            wanted: wanted.to_vec(),
            references: references.to_vec(),
            spares: Mutex::default(),
            program,
            selected,
            pattern: Arc::clone(pattern),
        };
        core.index();
        Self {
            core: Arc::new(core),
        }
    }

    /// Order of the matrix.
    pub fn n(&self) -> usize {
        self.core.program.n
    }

    /// Frequencies treated by one call.
    pub fn lanes(&self) -> usize {
        self.core.lanes
    }

    /// The pattern this plan was made for.
    pub fn pattern(&self) -> &Arc<Pattern> {
        &self.core.pattern
    }

    /// Entries of L and U together.
    pub fn factor_entries(&self) -> usize {
        self.core.program.targets.len()
    }

    /// Complex multiply-adds of one factorisation and of one selected inverse.
    pub fn multiply_adds(&self) -> (usize, usize) {
        (
            self.core.program.pairs.len(),
            self.core.selected.pairs.len(),
        )
    }

    /// Number of the inverse entry `(row, column)` for
    /// [`Workspace::inverse_at`]; `None` when it is not computed.
    pub fn inverse_index(&self, row: u32, column: u32) -> Option<usize> {
        self.core.inverse_index(row, column)
    }

    /// Memory for the numbers of one call; make one per thread.
    pub fn workspace(&self) -> Workspace {
        Workspace::new(self.core.clone())
    }
}

impl Core {
    /// Fills the lookup table and the terms of the trace.
    fn index(&mut self) {
        for i in 0..self.program.n {
            for &(j, index) in self.selected.row(i) {
                // Z = A'^-1 maps equations (columns of Z) to unknowns (rows of Z).
                let unknown = self.program.column_of[i];
                let equation = self.program.row_of[j as usize];
                self.lookup.push((unknown, equation, index));
            }
        }
        self.lookup.sort_unstable();
        self.position_of = vec![(NONE, NONE); self.selected.targets.len()];
        for &(row, column, index) in &self.lookup {
            self.position_of[index as usize] = (row, column);
        }
        for (slot, row, column) in self.pattern.entries() {
            let Some(index) = self.inverse_index(column, row) else {
                continue;
            };
            if self.sloped[slot] {
                self.slope_terms.push((index as u32, slot as u32));
            }
            if self.delay_of[slot] != NONE {
                self.delay_terms.push([index as u32, self.delay_of[slot]]);
            }
        }
    }

    pub(crate) fn inverse_index(&self, row: u32, column: u32) -> Option<usize> {
        let k = self
            .lookup
            .binary_search_by_key(&(row, column), |e| (e.0, e.1))
            .ok()?;
        Some(self.lookup[k].2 as usize)
    }
}

fn check(
    pattern: &Arc<Pattern>,
    samples: &[&Values],
    references: &[Complex64],
    wanted: &[(u32, u32)],
) -> Result<(), PlanError> {
    if samples.is_empty() || references.is_empty() {
        return Err(NumericError::Shape {
            least: 1,
            most: usize::MAX,
            given: 0,
        });
    }
    for values in samples {
        if values.pattern.fingerprint() != pattern.fingerprint() {
            let found = values.pattern.fingerprint();
            return Err(NumericError::Mismatch {
                expected: pattern.fingerprint(),
                found,
            });
        }
        values.check()?;
    }
    let n = pattern.n() as u32;
    for &(row, column) in wanted {
        if row >= n || column >= n {
            return Err(NumericError::OutOfPattern { row, column });
        }
    }
    Ok(())
}

/// Which slots carry delays and parts proportional to s in any sample.
fn survey(pattern: &Pattern, samples: &[&Values]) -> (Vec<u32>, usize, Vec<bool>) {
    let mut delay_of = vec![NONE; pattern.slots()];
    let mut parts = 0u32;
    let mut sloped = vec![false; pattern.slots()];
    for values in samples {
        for d in &values.delays {
            let part = &mut delay_of[d.slot as usize];
            if *part == NONE {
                *part = parts;
                parts += 1;
            }
        }
        for (sloped, &c) in sloped.iter_mut().zip(&values.c) {
            *sloped |= c != 0.0;
        }
    }
    (delay_of, parts as usize, sloped)
}

/// Wanted entries of the inverse as pivot positions, with those of the trace.
fn wanted_positions(
    pattern: &Pattern,
    program: &Program,
    wanted: &[(u32, u32)],
    sloped: &[bool],
    delay_of: &[u32],
) -> Vec<(u32, u32)> {
    let n = program.n;
    let (mut row_at, mut column_at) = (vec![0u32; n], vec![0u32; n]);
    for k in 0..n {
        row_at[program.row_of[k] as usize] = k as u32;
        column_at[program.column_of[k] as usize] = k as u32;
    }
    let place =
        |unknown: u32, equation: u32| (column_at[unknown as usize], row_at[equation as usize]);
    let mut all: Vec<(u32, u32)> = wanted
        .iter()
        .map(|&(unknown, equation)| place(unknown, equation))
        .collect();
    for (slot, row, column) in pattern.entries() {
        if sloped[slot] || delay_of[slot] != NONE {
            all.push(place(column, row));
        }
    }
    all
}

/// Pass over rows 0, 1, ...: positions count from 0.
fn ascending(rows: &[Vec<FactorEntry>]) -> Pass {
    let mut pass = Pass::default();
    for row in rows {
        pass.pairs.extend(row.iter().map(|e| [e.index, e.other]));
        pass.ends.push(pass.pairs.len() as u32);
    }
    pass
}

/// Pass over rows n-1, n-2, ...: positions count from the row after.
fn descending(rows: &[Vec<FactorEntry>]) -> Pass {
    let mut pass = Pass::default();
    for (i, row) in rows.iter().enumerate().rev() {
        pass.pairs
            .extend(row.iter().map(|e| [e.index, e.other - (i as u32 + 1)]));
        pass.ends.push(pass.pairs.len() as u32);
    }
    pass
}
