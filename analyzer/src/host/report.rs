//! What a screen tells of a block, with names and places: the input of every renderer.

use crate::text::Span;

pub use crate::stability::{Sight, Verdict};

/// A share of a node or part in a mode.
#[derive(Clone, PartialEq, Debug)]
pub struct Share {
    /// Node or part, full name.
    pub name: String,
    /// 0..1.
    pub share: f64,
}

/// A natural mode s = growth + j 2 pi hz (one of each conjugate pair).
#[derive(Clone, PartialEq, Debug)]
pub struct ModeReport {
    /// Hertz, not negative.
    pub hz: f64,
    /// 1/s; above zero: it grows.
    pub growth_per_s: f64,
    /// -growth/|s|.
    pub damping: f64,
    /// Nodes that take part, falling.
    pub nodes: Vec<Share>,
    /// Parts that take part, falling.
    pub parts: Vec<Share>,
}

/// What the normalized determinant tells.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct DeterminantReport {
    /// Clockwise encirclements of the origin over the whole axis.
    pub encirclements: Option<i64>,
    /// Right-half-plane modes with the sources off.
    pub off_network_unstable: Option<usize>,
    /// Frequencies at which it was evaluated.
    pub evaluations: usize,
    /// Whether every interval passed; `None` when it was not counted.
    pub certified: Option<bool>,
    /// The interval that failed, Hz.
    pub failed_hz: Option<[f64; 2]>,
}

/// A node whose driving-point conductance is negative somewhere.
#[derive(Clone, PartialEq, Debug)]
pub struct DrivingPointReport {
    /// Full name.
    pub node: String,
    /// Most negative conductance, siemens.
    pub worst_siemens: f64,
    /// Where, Hz.
    pub worst_hz: f64,
    /// Ranges, Hz; open ends are the sweep's ends.
    pub ranges_hz: Vec<[f64; 2]>,
    /// Start-up frequencies, Hz.
    pub startup_hz: Vec<f64>,
}

/// Two-port factors over the sweep, for blocks of two ports.
#[derive(Clone, PartialEq, Debug)]
pub struct TwoPortReport {
    /// Least mu.
    pub mu_min: f64,
    /// Where, Hz.
    pub mu_min_hz: f64,
    /// Least K; `None` where it has no finite value.
    pub k_min: Option<f64>,
    /// Where, Hz.
    pub k_min_hz: Option<f64>,
    /// No reverse (or no forward) transmission at all.
    pub unilateral: bool,
    /// No right-half-plane mode with the reference terminations.
    pub proviso: Option<bool>,
}

/// Everything told of one block.
#[derive(Clone, PartialEq, Debug)]
pub struct BlockReport {
    /// Its name.
    pub name: String,
    /// The place of its name in the mark.
    pub span: Span,
    /// The verdict.
    pub verdict: Verdict,
    /// How far it sees.
    pub sight: Sight,
    /// Reasons and assumptions; `None` when there is nothing to be said.
    pub why: Option<String>,
    /// Unknowns of the system.
    pub unknowns: usize,
    /// The sweep, Hz.
    pub sweep_hz: [f64; 2],
    /// Time the screen took, milliseconds.
    pub elapsed_ms: f64,
    /// Right-half-plane modes in the whole plane; `None`: not known.
    pub unstable_modes: Option<usize>,
    /// Modes on the axis, s = 0 not counted; `None`: not known.
    pub axis_modes: Option<usize>,
    /// Modes of damping below 0.5, and the one of largest growth; growth falling.
    pub modes: Vec<ModeReport>,
    /// The normalized determinant.
    pub determinant: DeterminantReport,
    /// Nodes with a negative range.
    pub driving_point: Vec<DrivingPointReport>,
    /// Two-port factors.
    pub two_port: Option<TwoPortReport>,
}
