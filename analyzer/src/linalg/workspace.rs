//! The numbers of one group of frequencies, and their readers.
//!
//! A workspace belongs to one plan. Results of lanes that are not sound read as
//! NaN or `None`, so they cannot be used by accident. `factor_sound` repairs
//! such lanes by a pivot order of their own.

use crate::linalg::det::ScaledDet;
use crate::linalg::kernel::{Lane, Lanes};
use crate::linalg::plan::{Core, Plan};
use num_complex::Complex64;
use std::sync::Arc;

/// Largest multiplier that is still trusted: relative errors are about the
/// multiplier times 1e-16, so ten digits remain at this limit.
pub const GROWTH_LIMIT: f64 = 1e6;

/// Largest multiplier where a result is only the next step of an iteration that corrects itself
/// (Newton, inverse iteration): five digits remain.
pub const ROUGH_GROWTH_LIMIT: f64 = 1e11;

/// The lane arrays in either width.
#[derive(Debug, Clone)]
pub(crate) enum Store {
    Eight(Box<Lanes<8>>),
    Sixteen(Box<Lanes<16>>),
}

/// Runs an expression on the lane arrays of either width.
macro_rules! on_lanes {
    ($store:expr, $w:ident => $body:expr) => {
        match $store {
            $crate::linalg::workspace::Store::Eight($w) => $body,
            $crate::linalg::workspace::Store::Sixteen($w) => $body,
        }
    };
}
pub(crate) use on_lanes;

/// What the workspace holds at present.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Stage {
    Empty,
    Factored,
    Inverted,
}

/// A lane computed anew with a pivot order for its own frequency.
#[derive(Debug, Clone)]
pub(crate) struct Patch {
    pub(crate) plan: Plan,
    pub(crate) workspace: Workspace,
}

/// Memory and results of one group of frequencies.
#[derive(Debug, Clone)]
pub struct Workspace {
    pub(crate) core: Arc<Core>,
    pub(crate) store: Store,
    /// Lanes in use.
    pub(crate) used: usize,
    /// Growth below which a lane is trusted.
    pub(crate) limit: f64,
    /// Lanes that the common pivot order serves soundly.
    pub(crate) sound: [bool; 16],
    pub(crate) stage: Stage,
    pub(crate) patches: Vec<Option<Box<Patch>>>,
    /// (inverse entry, coefficient) of the part proportional to s.
    pub(crate) slopes: Vec<(u32, f64)>,
}

fn allocate<const L: usize>(core: &Core) -> Box<Lanes<L>> {
    Box::new(Lanes {
        s: Lane::ZERO,
        lu: vec![Lane::ZERO; core.program.targets.len()],
        reciprocal: vec![Lane::ZERO; core.program.n],
        delayed: vec![Lane::ZERO; core.delayed_parts],
        delayed_slope: vec![Lane::ZERO; core.delayed_parts],
        inverse: vec![Lane::ZERO; core.selected.targets.len()],
        x: vec![Lane::ZERO; core.program.n],
        det: Lane::ZERO,
        exponent: [0; L],
        growth2: [0.0; L],
        taint: [f64::NAN; L],
        trace: Lane::NAN,
    })
}

fn poison<const L: usize>(w: &mut Lanes<L>) {
    let arrays = [
        &mut w.lu,
        &mut w.reciprocal,
        &mut w.delayed,
        &mut w.delayed_slope,
        &mut w.inverse,
        &mut w.x,
    ];
    for array in arrays {
        array.fill(Lane::NAN);
    }
    w.det = Lane::NAN;
    w.trace = Lane::NAN;
    w.growth2 = [f64::NAN; L];
    w.taint = [f64::NAN; L];
    w.exponent = [i64::MIN / 2; L];
}

impl Workspace {
    pub(crate) fn new(core: Arc<Core>) -> Self {
        let store = if core.lanes == 16 {
            Store::Sixteen(allocate(&core))
        } else {
            Store::Eight(allocate(&core))
        };
        Self {
            store,
            used: 0,
            limit: GROWTH_LIMIT,
            sound: [false; 16],
            stage: Stage::Empty,
            patches: vec![None; core.lanes],
            slopes: core
                .slope_terms
                .iter()
                .map(|&(index, _)| (index, 0.0))
                .collect(),
            core,
        }
    }

    /// Fills all memory with NaN: results must not depend on what was there.
    pub fn poison(&mut self) {
        on_lanes!(&mut self.store, w => poison(w));
        self.stage = Stage::Empty;
        self.sound = [false; 16];
        self.used = 0;
        self.patches.fill(None);
    }

    /// Number of frequencies of the last factorisation.
    pub fn used(&self) -> usize {
        self.used
    }

    fn raw_growth(&self, lane: usize) -> f64 {
        on_lanes!(&self.store, w => {
            if w.taint[lane] == 0.0 { w.growth2[lane].sqrt() } else { f64::NAN }
        })
    }

    /// Soundness of the common pivot order, without regard to repairs.
    pub(crate) fn is_raw_sound(&self, lane: usize) -> bool {
        self.stage != Stage::Empty && self.sound.get(lane) == Some(&true)
    }

    /// Judges all lanes after a factorisation.
    pub(crate) fn judge(&mut self, limit: f64) {
        self.limit = limit;
        self.sound = std::array::from_fn(|lane| lane < self.used && self.raw_growth(lane) < limit);
    }

    fn patch(&self, lane: usize) -> Option<&Patch> {
        self.patches.get(lane)?.as_deref()
    }

    /// Largest multiplier met in this lane; NaN when a value was not finite or
    /// the lane is not in use. Relative errors are about this times 1e-16.
    pub fn growth(&self, lane: usize) -> f64 {
        match self.patch(lane) {
            Some(patch) => patch.workspace.growth(0),
            None if self.stage != Stage::Empty && lane < self.used => self.raw_growth(lane),
            None => f64::NAN,
        }
    }

    /// Whether the lane is finite and its growth below [`GROWTH_LIMIT`], or below
    /// [`ROUGH_GROWTH_LIMIT`] after [`Plan::factor_rough`].
    pub fn is_sound(&self, lane: usize) -> bool {
        self.growth(lane) < self.limit
    }

    /// Determinant of A(s) in this lane, with the sign of the permutations;
    /// [`ScaledDet::INVALID`] when the lane is not sound.
    pub fn det(&self, lane: usize) -> ScaledDet {
        if let Some(patch) = self.patch(lane) {
            return patch.workspace.det(0);
        }
        if !self.is_raw_sound(lane) {
            return ScaledDet::INVALID;
        }
        on_lanes!(&self.store, w => ScaledDet::new(
            Complex64::new(w.det.re[lane], w.det.im[lane]),
            w.exponent[lane],
        ))
    }

    /// Entry (unknown `row`, equation `column`) of the inverse; `None` before
    /// [`Plan::invert_selected`], when the lane is not sound, or when the entry
    /// was not asked for.
    pub fn inverse(&self, lane: usize, row: u32, column: u32) -> Option<Complex64> {
        if let Some(patch) = self.patch(lane) {
            return patch.workspace.inverse(0, row, column);
        }
        let index = self.core.inverse_index(row, column)?;
        self.inverse_at(lane, index)
    }

    /// As [`Workspace::inverse`] by the number from [`Plan::inverse_index`].
    pub fn inverse_at(&self, lane: usize, index: usize) -> Option<Complex64> {
        if let Some(patch) = self.patch(lane) {
            // The patch has its own numbering: go back to row and column.
            let &(row, column) = self.core.position_of.get(index)?;
            return patch.workspace.inverse(0, row, column);
        }
        if self.stage != Stage::Inverted || !self.is_raw_sound(lane) {
            return None;
        }
        on_lanes!(&self.store, w => {
            let z = w.inverse.get(index)?;
            Some(Complex64::new(z.re[lane], z.im[lane]))
        })
    }

    /// As [`Workspace::inverse_at`] for all lanes in use at once: `out` receives one number per
    /// point, NaN where a lane is not sound or nothing was inverted.
    pub fn inverse_lanes(&self, index: usize, out: &mut [Complex64]) {
        let nan = Complex64::new(f64::NAN, f64::NAN);
        for (lane, out) in out.iter_mut().enumerate() {
            *out = if self.patch(lane).is_some() {
                self.inverse_at(lane, index).unwrap_or(nan)
            } else {
                nan
            };
        }
        if self.stage != Stage::Inverted {
            return;
        }
        on_lanes!(&self.store, w => if let Some(z) = w.inverse.get(index) {
            for (lane, out) in out.iter_mut().enumerate().take(self.used) {
                if self.sound[lane] {
                    *out = Complex64::new(z.re[lane], z.im[lane]);
                }
            }
        });
    }

    /// d ln det A / ds = tr(A^-1 dA/ds); NaN before [`Plan::invert_selected`]
    /// or when the lane is not sound.
    pub fn log_derivative(&self, lane: usize) -> Complex64 {
        if let Some(patch) = self.patch(lane) {
            return patch.workspace.log_derivative(0);
        }
        if self.stage != Stage::Inverted || !self.is_raw_sound(lane) {
            return ScaledDet::INVALID.mantissa;
        }
        on_lanes!(&self.store, w => Complex64::new(w.trace.re[lane], w.trace.im[lane]))
    }
}

#[cfg(test)]
impl Workspace {
    /// |L| |U| of a lane in the row and column numbering of A: the size of the
    /// backward error of any elimination with these factors, in units of n times
    /// the unit roundoff (Higham 2002, theorem 9.3; from memory).
    pub(crate) fn backward_size(&self, lane: usize) -> nalgebra::DMatrix<f64> {
        if let Some(patch) = self.patch(lane) {
            return patch.workspace.backward_size(0);
        }
        let p = &self.core.program;
        let size = |index: u32| {
            on_lanes!(&self.store, w => {
                let v = &w.lu[index as usize];
                v.re[lane].hypot(v.im[lane])
            })
        };
        let mut sum = nalgebra::DMatrix::from_element(p.n, p.n, 0.0);
        for i in 0..p.n {
            let own = crate::linalg::program::FactorEntry {
                other: i as u32,
                index: u32::MAX,
            };
            for l in p.lower_rows[i].iter().chain([&own]) {
                let k = l.other as usize;
                let factor = if k == i { 1.0 } else { size(l.index) };
                let row = p.row_of[i] as usize;
                sum[(row, p.column_of[k] as usize)] += factor * size(p.pivot(k));
                for u in &p.upper_rows[k] {
                    sum[(row, p.column_of[u.other as usize] as usize)] += factor * size(u.index);
                }
            }
        }
        sum
    }
}
