//! Coefficients of A(s) = G + s C + sum of coef exp(-s tau) on one pattern.
//!
//! Real coefficients, already normalised by the caller; s is complex. Entry
//! point [`Values::new`]. Knows nothing of elimination.

use crate::linalg::error::NumericError;
use crate::linalg::pattern::Pattern;
use nalgebra::DMatrix;
use num_complex::Complex64;
use std::sync::Arc;

/// One delayed entry: `coef * exp(-s * tau)` added at a slot.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Delay {
    /// Slot of the pattern.
    pub slot: u32,
    /// Real factor (fold a constant loss `exp(-alpha)` into it).
    pub coef: f64,
    /// Delay in units of 1/s, not negative.
    pub tau: f64,
}

/// Numbers for one pattern: constant part, part proportional to s, delays.
#[derive(Debug, Clone, PartialEq)]
pub struct Values {
    /// Where the numbers sit.
    pub pattern: Arc<Pattern>,
    /// Constant part, one number per slot.
    pub g: Vec<f64>,
    /// Part proportional to s, one number per slot.
    pub c: Vec<f64>,
    /// Delayed entries, any number per slot.
    pub delays: Vec<Delay>,
}

impl Values {
    /// All-zero values on `pattern`.
    pub fn new(pattern: Arc<Pattern>) -> Self {
        let slots = pattern.slots();
        Self {
            pattern,
            g: vec![0.0; slots],
            c: vec![0.0; slots],
            delays: Vec::new(),
        }
    }

    fn slot(&self, row: u32, column: u32) -> Result<usize, NumericError> {
        self.pattern
            .slot(row, column)
            .ok_or(NumericError::OutOfPattern { row, column })
    }

    /// Adds `v` to the constant part.
    ///
    /// # Errors
    /// [`NumericError::OutOfPattern`] when the position is not stored.
    pub fn add_g(&mut self, row: u32, column: u32, v: f64) -> Result<(), NumericError> {
        let slot = self.slot(row, column)?;
        self.g[slot] += v;
        Ok(())
    }

    /// Adds `v` to the part proportional to s.
    ///
    /// # Errors
    /// [`NumericError::OutOfPattern`] when the position is not stored.
    pub fn add_c(&mut self, row: u32, column: u32, v: f64) -> Result<(), NumericError> {
        let slot = self.slot(row, column)?;
        self.c[slot] += v;
        Ok(())
    }

    /// Adds `coef * exp(-s * tau)`.
    ///
    /// # Errors
    /// [`NumericError::OutOfPattern`] when the position is not stored.
    pub fn add_delay(
        &mut self,
        row: u32,
        column: u32,
        coef: f64,
        tau: f64,
    ) -> Result<(), NumericError> {
        let slot = self.slot(row, column)? as u32;
        self.delays.push(Delay { slot, coef, tau });
        Ok(())
    }

    /// Whether every coefficient is finite and every delay fits the pattern.
    ///
    /// # Errors
    /// The first offending position.
    pub fn check(&self) -> Result<(), NumericError> {
        let slots = self.pattern.slots();
        for given in [self.g.len(), self.c.len()] {
            if given != slots {
                return Err(NumericError::Shape {
                    least: slots,
                    most: slots,
                    given,
                });
            }
        }
        let bad_slot = (0..slots).find(|&k| !(self.g[k].is_finite() && self.c[k].is_finite()));
        let bad_delay = self.delays.iter().find(|d| {
            d.slot as usize >= slots || !(d.coef.is_finite() && d.tau.is_finite() && d.tau >= 0.0)
        });
        let slot = match (bad_slot, bad_delay) {
            (Some(slot), _) => slot,
            (None, Some(delay)) => delay.slot as usize,
            (None, None) => return Ok(()),
        };
        if slot >= slots {
            return Err(NumericError::Shape {
                least: 0,
                most: slots,
                given: slot,
            });
        }
        let (row, column) = self.pattern.position(slot);
        Err(NumericError::NotFinite { row, column })
    }

    /// A(s), one complex number per slot.
    pub fn eval(&self, s: Complex64) -> Vec<Complex64> {
        let mut a: Vec<Complex64> = self
            .g
            .iter()
            .zip(&self.c)
            .map(|(&g, &c)| g + s * c)
            .collect();
        for d in &self.delays {
            a[d.slot as usize] += d.coef * (-s * d.tau).exp();
        }
        a
    }

    /// dA/ds, one complex number per slot.
    pub fn eval_derivative(&self, s: Complex64) -> Vec<Complex64> {
        let mut a: Vec<Complex64> = self.c.iter().map(|&c| Complex64::new(c, 0.0)).collect();
        for d in &self.delays {
            a[d.slot as usize] -= d.tau * d.coef * (-s * d.tau).exp();
        }
        a
    }

    /// A(s) as a dense matrix (slow; for checks and small systems).
    pub fn eval_dense(&self, s: Complex64) -> DMatrix<Complex64> {
        self.spread(&self.eval(s))
    }

    /// dA/ds as a dense matrix (slow; for checks and small systems).
    pub fn eval_derivative_dense(&self, s: Complex64) -> DMatrix<Complex64> {
        self.spread(&self.eval_derivative(s))
    }

    fn spread(&self, slots: &[Complex64]) -> DMatrix<Complex64> {
        let n = self.pattern.n();
        let mut dense = DMatrix::from_element(n, n, Complex64::new(0.0, 0.0));
        for (slot, row, column) in self.pattern.entries() {
            dense[(row as usize, column as usize)] += slots[slot];
        }
        dense
    }
}
