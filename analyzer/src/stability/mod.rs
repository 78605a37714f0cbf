//! What the numbers say about stability: natural modes, normalized determinant, driving-point
//! conductance, two-port factors, and the verdict that combines them. Speaks of nodes and parts
//! by number; knows no text.

mod active;
mod delayed;
mod determinant;
mod driving_point;
mod impedance;
mod modes;
mod probe;
mod refine;
mod screen;
mod two_port;
mod verdict;

pub use active::{ActiveSet, active_sources, is_passive_set};
pub use determinant::{Determinant, DeterminantFailure, count, normalized_determinant};
pub use driving_point::{
    Crossing, DrivingPoint, conductance_ranges, driving_point_admittance, driving_point_impedance,
    driving_points, startup_crossings,
};
pub use impedance::Probe;
pub use modes::{
    AXIS_TOLERANCE, LISTED_DAMPING, Mode, ModeFailure, Modes, Participation, natural_modes,
    participation,
};
pub use probe::{Solver, SolverFailure};
pub use screen::{
    Doubt, Earlier, ListedMode, Screen, ScreenRequest, screen, screen_from, solver_of,
};
pub use two_port::{Factors, Scattering, TwoPort, TwoPortWatch, factors, scattering};
pub use verdict::{Sight, Verdict};
