//! Numeric operations of a plan: factor, selected inverse, solves, repair.

use crate::linalg::dispatch;
use crate::linalg::error::NumericError;
use crate::linalg::kernel::{Lane, Lanes};
use crate::linalg::plan::{Core, Plan};
use crate::linalg::program::NONE;
use crate::linalg::values::Values;
use crate::linalg::workspace::{
    GROWTH_LIMIT, Patch, ROUGH_GROWTH_LIMIT, Stage, Workspace, on_lanes,
};
use num_complex::Complex64;
use std::sync::{Arc, MutexGuard, PoisonError};

/// Plans for single points that are kept.
const SPARES: usize = 6;

/// Which system a solve treats.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Side {
    Plain,
    Transposed,
}

impl Plan {
    /// Factors A(s) for one to [`Plan::lanes`] points, any complex s.
    ///
    /// Every lane must then be asked [`Workspace::is_sound`]; unsound ones read
    /// as NaN. [`Plan::factor_sound`] repairs them instead.
    ///
    /// # Errors
    /// [`NumericError::Mismatch`] for values or a workspace of another plan,
    /// [`NumericError::Shape`] for a wrong number of points,
    /// [`NumericError::NotPlanned`] when an entry has a delay or a part
    /// proportional to s that no sample of the plan had.
    pub fn factor(
        &self,
        values: &Values,
        s: &[Complex64],
        ws: &mut Workspace,
    ) -> Result<(), NumericError> {
        let core = &self.core;
        self.own(ws)?;
        let expected = core.pattern.fingerprint();
        let found = values.pattern.fingerprint();
        if !Arc::ptr_eq(&core.pattern, &values.pattern) && expected != found {
            return Err(NumericError::Mismatch { expected, found });
        }
        if s.is_empty() || s.len() > core.lanes {
            return Err(NumericError::Shape {
                least: 1,
                most: core.lanes,
                given: s.len(),
            });
        }
        planned(core, values)?;
        ws.stage = Stage::Empty;
        ws.used = s.len();
        ws.patches.fill_with(|| None);
        for (term, &(_, slot)) in ws.slopes.iter_mut().zip(&core.slope_terms) {
            term.1 = values.c[slot as usize];
        }
        on_lanes!(&mut ws.store, w => run_factor(core, values, s, w));
        ws.stage = Stage::Factored;
        ws.judge(GROWTH_LIMIT);
        Ok(())
    }

    /// Whether this plan, made for other values, is as good as a new one for `samples`: same
    /// pattern, same wanted entries, nothing that it does not hold, and small multipliers at every
    /// `s = j * reference_rad`.
    pub fn serves(
        &self,
        samples: &[&Values],
        reference_rad: &[f64],
        wanted: &[(u32, u32)],
    ) -> bool {
        /// A new plan keeps multipliers below 1e3 at the references.
        const SMALL: f64 = 1e4;
        if self.core.wanted != wanted {
            return false;
        }
        let mut ws = self.workspace();
        reference_rad.chunks(self.lanes()).all(|batch| {
            let s: Vec<Complex64> = batch.iter().map(|&w| Complex64::new(0.0, w)).collect();
            samples.iter().all(|values| {
                let factored = values.check().is_ok() && self.factor(values, &s, &mut ws).is_ok();
                factored && (0..s.len()).all(|lane| ws.growth(lane) < SMALL)
            })
        })
    }

    /// As [`Plan::factor`], then repairs every unsound lane with a strict pivot
    /// order for its own point, so that all lanes are sound on success.
    ///
    /// # Errors
    /// As [`Plan::factor`]; [`NumericError::SingularPoint`] when A(s) has no
    /// further pivot at a point, [`NumericError::Unsound`] when even its own
    /// order fails (values out of range).
    pub fn factor_sound(
        &self,
        values: &Values,
        s: &[Complex64],
        ws: &mut Workspace,
    ) -> Result<(), NumericError> {
        self.factor(values, s, ws)?;
        self.repair(values, s, ws)
    }

    /// As [`Plan::factor_sound`] for a step of an iteration that corrects itself: lanes up to
    /// [`ROUGH_GROWTH_LIMIT`] are not repaired.
    ///
    /// # Errors
    /// As [`Plan::factor_sound`].
    pub fn factor_rough(
        &self,
        values: &Values,
        s: &[Complex64],
        ws: &mut Workspace,
    ) -> Result<(), NumericError> {
        self.factor(values, s, ws)?;
        ws.judge(ROUGH_GROWTH_LIMIT);
        self.repair(values, s, ws)
    }

    fn repair(
        &self,
        values: &Values,
        s: &[Complex64],
        ws: &mut Workspace,
    ) -> Result<(), NumericError> {
        for (lane, &s) in s.iter().enumerate() {
            if !ws.is_raw_sound(lane) {
                ws.patches[lane] = Some(Box::new(self.patch(values, s)?));
            }
        }
        Ok(())
    }

    fn patch(&self, values: &Values, s: Complex64) -> Result<Patch, NumericError> {
        if !(s.re.is_finite() && s.im.is_finite()) {
            return Err(NumericError::Unsound {
                s,
                growth: f64::NAN,
            });
        }
        if let Some(patch) = self.spare_patch(values, s) {
            return Ok(patch);
        }
        let plan = match Self::for_point(values, s, &self.core.wanted) {
            Err(NumericError::Singular { .. }) => return Err(NumericError::SingularPoint { s }),
            other => other?,
        };
        let mut workspace = plan.workspace();
        plan.factor(values, &[s], &mut workspace)?;
        if !workspace.is_sound(0) {
            return Err(NumericError::Unsound {
                s,
                growth: workspace.growth(0),
            });
        }
        let mut spares = self.spares();
        spares.insert(0, plan.clone());
        spares.truncate(SPARES);
        drop(spares);
        Ok(Patch { plan, workspace })
    }

    /// The point by a plan that was made for another one, if one serves: that costs a factorisation
    /// and no search.
    fn spare_patch(&self, values: &Values, s: Complex64) -> Option<Patch> {
        let tried = self.spares().clone();
        for (k, plan) in tried.into_iter().enumerate() {
            let mut workspace = plan.workspace();
            let factored = plan.factor(values, &[s], &mut workspace);
            if factored.is_ok() && workspace.is_sound(0) {
                let mut spares = self.spares();
                if k < spares.len() {
                    spares[..=k].rotate_right(1);
                }
                drop(spares);
                return Some(Patch { plan, workspace });
            }
        }
        None
    }

    fn spares(&self) -> MutexGuard<'_, Vec<Plan>> {
        // The list is whole whatever happened to another thread.
        self.core
            .spares
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
    }

    /// Computes the selected entries of the inverse and d ln det / ds from the
    /// last factorisation.
    ///
    /// # Errors
    /// [`NumericError::Mismatch`] for a workspace of another plan,
    /// [`NumericError::Shape`] before any factorisation.
    pub fn invert_selected(&self, ws: &mut Workspace) -> Result<(), NumericError> {
        self.own(ws)?;
        self.factored(ws)?;
        let core = &self.core;
        let slopes = &ws.slopes;
        on_lanes!(&mut ws.store, w => {
            dispatch::invert(core.level, &core.selected, w);
            dispatch::trace(core.level, slopes, &core.delay_terms, w);
        });
        for patch in ws.patches.iter_mut().flatten() {
            patch.plan.invert_selected(&mut patch.workspace)?;
        }
        ws.stage = Stage::Inverted;
        Ok(())
    }

    /// Solves A x = b for all lanes with one sparse right-hand side.
    ///
    /// `rhs` lists (equation, value), repeats add; `out` has
    /// `n * lanes` places, unknown `i` of lane `l` at `i * lanes + l`. Lanes
    /// that are not sound or not in use receive NaN.
    ///
    /// # Errors
    /// [`NumericError::Mismatch`], [`NumericError::Shape`] for a wrong `out` or
    /// an equation out of range.
    pub fn solve(
        &self,
        ws: &mut Workspace,
        rhs: &[(u32, Complex64)],
        out: &mut [Complex64],
    ) -> Result<(), NumericError> {
        self.solve_side(Side::Plain, ws, rhs, out)
    }

    /// Solves transpose(A) x = b; as [`Plan::solve`] with `rhs` listing
    /// (column of A, value) and `out` indexed by rows of A.
    ///
    /// # Errors
    /// As [`Plan::solve`].
    pub fn solve_transposed(
        &self,
        ws: &mut Workspace,
        rhs: &[(u32, Complex64)],
        out: &mut [Complex64],
    ) -> Result<(), NumericError> {
        self.solve_side(Side::Transposed, ws, rhs, out)
    }

    /// Solves A x = b with a right-hand side per lane, in place: equation `i`
    /// of lane `l` at `i * lanes + l` on entry, unknowns likewise on return.
    ///
    /// # Errors
    /// As [`Plan::solve`].
    pub fn solve_full(&self, ws: &mut Workspace, x: &mut [Complex64]) -> Result<(), NumericError> {
        self.solve_full_side(Side::Plain, ws, x)
    }

    /// As [`Plan::solve_full`] for transpose(A).
    ///
    /// # Errors
    /// As [`Plan::solve`].
    pub fn solve_full_transposed(
        &self,
        ws: &mut Workspace,
        x: &mut [Complex64],
    ) -> Result<(), NumericError> {
        self.solve_full_side(Side::Transposed, ws, x)
    }

    fn solve_side(
        &self,
        side: Side,
        ws: &mut Workspace,
        rhs: &[(u32, Complex64)],
        out: &mut [Complex64],
    ) -> Result<(), NumericError> {
        let n = self.n();
        if let Some(&(given, _)) = rhs.iter().find(|&&(row, _)| row as usize >= n) {
            return Err(NumericError::Shape {
                least: 0,
                most: n,
                given: given as usize,
            });
        }
        self.room(ws, out.len())?;
        out.fill(Complex64::new(0.0, 0.0));
        let lanes = self.lanes();
        for &(row, v) in rhs {
            for x in &mut out[row as usize * lanes..][..lanes] {
                *x += v;
            }
        }
        self.solve_full_side(side, ws, out)
    }

    fn solve_full_side(
        &self,
        side: Side,
        ws: &mut Workspace,
        x: &mut [Complex64],
    ) -> Result<(), NumericError> {
        self.room(ws, x.len())?;
        let core = &self.core;
        // Repaired lanes first: the right-hand side is overwritten below.
        for lane in 0..core.lanes {
            if let Some(patch) = ws.patches[lane].as_mut() {
                solve_patch(side, patch, x, lane, core.lanes)?;
            }
        }
        let keep: [bool; 16] = std::array::from_fn(|lane| ws.is_raw_sound(lane));
        let patched: [bool; 16] =
            std::array::from_fn(|lane| ws.patches.get(lane).is_some_and(Option::is_some));
        on_lanes!(&mut ws.store, w => run_solve(core, side, w, x, &keep, &patched));
        Ok(())
    }

    fn own(&self, ws: &Workspace) -> Result<(), NumericError> {
        if Arc::ptr_eq(&self.core, &ws.core) {
            return Ok(());
        }
        let expected = self.core.pattern.fingerprint();
        Err(NumericError::Mismatch {
            expected,
            found: ws.core.pattern.fingerprint(),
        })
    }

    fn factored(&self, ws: &Workspace) -> Result<(), NumericError> {
        if ws.stage == Stage::Empty {
            return Err(NumericError::Shape {
                least: 1,
                most: self.core.lanes,
                given: 0,
            });
        }
        Ok(())
    }

    fn room(&self, ws: &Workspace, given: usize) -> Result<(), NumericError> {
        self.own(ws)?;
        self.factored(ws)?;
        let size = self.n() * self.lanes();
        if given == size {
            return Ok(());
        }
        Err(NumericError::Shape {
            least: size,
            most: size,
            given,
        })
    }
}

/// Refuses frequency dependence that the lists do not hold.
fn planned(core: &Core, values: &Values) -> Result<(), NumericError> {
    let refuse = |slot: usize| {
        let (row, column) = core.pattern.position(slot);
        Err(NumericError::NotPlanned { row, column })
    };
    let slots = core.pattern.slots();
    if values.g.len() != slots || values.c.len() != slots {
        return Err(NumericError::Shape {
            least: slots,
            most: slots,
            given: values.c.len(),
        });
    }
    for (slot, (&c, &sloped)) in values.c.iter().zip(&core.sloped).enumerate() {
        if c != 0.0 && !sloped {
            return refuse(slot);
        }
    }
    for d in &values.delays {
        match core.delay_of.get(d.slot as usize) {
            None => {
                let given = d.slot as usize;
                return Err(NumericError::Shape {
                    least: 0,
                    most: slots,
                    given,
                });
            }
            Some(&NONE) => return refuse(d.slot as usize),
            Some(_) => {}
        }
    }
    Ok(())
}

fn run_factor<const L: usize>(core: &Core, values: &Values, s: &[Complex64], w: &mut Lanes<L>) {
    for l in 0..L {
        // Idle lanes repeat the last point, so they stay harmless.
        let s = s[l.min(s.len() - 1)];
        w.s.re[l] = s.re;
        w.s.im[l] = s.im;
    }
    dispatch::delays(core.level, values, &core.delay_of, w);
    dispatch::factor(core.level, &core.program, values, w);
}

fn run_solve<const L: usize>(
    core: &Core,
    side: Side,
    w: &mut Lanes<L>,
    x: &mut [Complex64],
    keep: &[bool; 16],
    patched: &[bool; 16],
) {
    let program = &core.program;
    let (from, to) = match side {
        Side::Plain => (&program.row_of, &program.column_of),
        Side::Transposed => (&program.column_of, &program.row_of),
    };
    for (position, &row) in w.x.iter_mut().zip(from) {
        let given = &x[row as usize * L..][..L];
        *position = Lane {
            re: std::array::from_fn(|l| given[l].re),
            im: std::array::from_fn(|l| given[l].im),
        };
    }
    match side {
        Side::Plain => {
            dispatch::forward(core.level, &core.forward, false, w);
            dispatch::backward(core.level, &core.backward, true, w);
        }
        Side::Transposed => {
            dispatch::forward(core.level, &core.forward_transposed, true, w);
            dispatch::backward(core.level, &core.backward_transposed, false, w);
        }
    }
    for (position, &column) in w.x.iter().zip(to) {
        for (l, out) in x[column as usize * L..][..L].iter_mut().enumerate() {
            if !patched[l] {
                let nan = f64::NAN;
                *out = if keep[l] {
                    Complex64::new(position.re[l], position.im[l])
                } else {
                    Complex64::new(nan, nan)
                };
            }
        }
    }
}

/// Solves one repaired lane with its own plan and writes the result back.
fn solve_patch(
    side: Side,
    patch: &mut Patch,
    x: &mut [Complex64],
    lane: usize,
    lanes: usize,
) -> Result<(), NumericError> {
    let (n, own) = (patch.plan.n(), patch.plan.lanes());
    let mut local = vec![Complex64::new(0.0, 0.0); n * own];
    for i in 0..n {
        local[i * own..][..own].fill(x[i * lanes + lane]);
    }
    patch
        .plan
        .solve_full_side(side, &mut patch.workspace, &mut local)?;
    for i in 0..n {
        x[i * lanes + lane] = local[i * own];
    }
    Ok(())
}
