//! Modified nodal analysis: a flat circuit to the matrices of its small-signal system.
//! V sources are shorts, I sources are open; ports are terminated as the block says.

mod stamps;
mod system;
mod unknowns;

pub use stamps::{REFERENCE_OHM, REFERENCE_RAD_PER_S};
pub use stamps::{Stamp, stamps};
pub use system::{Switch, System, ohms, rad_per_s};
pub use unknowns::{Unknown, Unknowns};
