//! The one error type of the numerical core, with data instead of prose.
//!
//! Rows and columns are indices of the matrix as given; this file must not
//! know what they stand for. Wording for a reader is made by the caller.

use num_complex::Complex64;
use std::fmt;

/// Everything that can go wrong in the numerical core.
#[non_exhaustive]
#[derive(Debug, Clone, PartialEq)]
pub enum NumericError {
    /// No pivot was left: at one of the references the remaining rows and
    /// columns are linearly dependent on those already taken.
    Singular {
        /// Equations without a pivot, ascending.
        rows: Vec<u32>,
        /// Unknowns without a pivot, ascending.
        columns: Vec<u32>,
    },
    /// The matrix is singular at this very point (a root was hit exactly).
    SingularPoint {
        /// The point, in the units of the caller.
        s: Complex64,
    },
    /// No elimination order gave a trustworthy result at this point.
    Unsound {
        /// The point, in the units of the caller.
        s: Complex64,
        /// Largest multiplier met, or NaN when a value was not finite.
        growth: f64,
    },
    /// An entry was addressed that the pattern does not hold.
    OutOfPattern {
        /// Row index.
        row: u32,
        /// Column index.
        column: u32,
    },
    /// An entry has a frequency dependence that the plan was not made for.
    NotPlanned {
        /// Row index.
        row: u32,
        /// Column index.
        column: u32,
    },
    /// A coefficient is NaN or infinite.
    NotFinite {
        /// Row index.
        row: u32,
        /// Column index.
        column: u32,
    },
    /// Two objects were made for different patterns or plans.
    Mismatch {
        /// Fingerprint of the object asked.
        expected: u64,
        /// Fingerprint of the object given.
        found: u64,
    },
    /// A list has the wrong length.
    Shape {
        /// Smallest allowed length.
        least: usize,
        /// Largest allowed length.
        most: usize,
        /// Length given.
        given: usize,
    },
    /// The eigenvalue iteration did not settle.
    NoConvergence {
        /// Order of the dense matrix.
        order: usize,
    },
    /// Floating-point and exact arithmetic gave different numbers of modes.
    ModeCount {
        /// Number of modes by exact arithmetic.
        expected: usize,
        /// Number found.
        found: usize,
    },
    /// The evaluation budget ran out.
    Budget {
        /// Evaluations spent.
        evaluations: usize,
        /// Lower end of the interval still open.
        lo: f64,
        /// Upper end of the interval still open.
        hi: f64,
    },
    /// An interval cannot be split any further in double precision.
    NotResolved {
        /// Lower end of the interval.
        lo: f64,
        /// Upper end of the interval.
        hi: f64,
    },
    /// The determinant did not settle to a monomial at an end of the axis.
    NotClosed {
        /// Where the extension stopped.
        w: f64,
        /// Remaining slope error, log-log, of the worse determinant.
        slope_error: f64,
        /// Remaining phase error in radians of the worse determinant.
        phase_error: f64,
    },
    /// The caller asked to stop.
    Stopped,
}

/// Failure to make a [`Plan`](crate::linalg::plan::Plan).
pub type PlanError = NumericError;
/// Failure to compute eigenvalues.
pub type EigenError = NumericError;
/// Failure to count encirclements.
pub type CountError = NumericError;

impl fmt::Display for NumericError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Singular { rows, columns } => write!(
                f,
                "matrix is singular: {} rows and {} columns have no pivot",
                rows.len(),
                columns.len()
            ),
            Self::SingularPoint { s } => write!(f, "matrix is singular at s = {s}"),
            Self::Unsound { s, growth } => {
                write!(
                    f,
                    "no trustworthy elimination at s = {s}, growth {growth:e}"
                )
            }
            Self::OutOfPattern { row, column } => {
                write!(f, "entry ({row}, {column}) is outside the pattern")
            }
            Self::NotPlanned { row, column } => {
                write!(
                    f,
                    "entry ({row}, {column}) varies in a way the plan does not hold"
                )
            }
            Self::NotFinite { row, column } => {
                write!(f, "entry ({row}, {column}) is not a finite number")
            }
            Self::Mismatch { expected, found } => {
                write!(f, "made for pattern {expected:016x}, given {found:016x}")
            }
            Self::Shape { least, most, given } => {
                write!(f, "length {given} is outside {least} to {most}")
            }
            Self::NoConvergence { order } => {
                write!(f, "eigenvalue iteration of order {order} did not settle")
            }
            Self::ModeCount { expected, found } => {
                write!(
                    f,
                    "{found} modes found where exact arithmetic says {expected}"
                )
            }
            Self::Budget {
                evaluations,
                lo,
                hi,
            } => write!(
                f,
                "{evaluations} evaluations spent with {lo:e} to {hi:e} still open"
            ),
            Self::NotResolved { lo, hi } => {
                write!(f, "phase between {lo:e} and {hi:e} cannot be resolved")
            }
            Self::NotClosed {
                w,
                slope_error,
                phase_error,
            } => write!(
                f,
                "no monomial end reached at {w:e}: slope error {slope_error:e}, phase error {phase_error:e} rad"
            ),
            Self::Stopped => write!(f, "stopped on request"),
        }
    }
}

impl std::error::Error for NumericError {}
