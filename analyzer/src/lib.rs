//! Netlist understanding and small-signal stability numerics.
#![doc = ""]

pub mod syntax;
pub mod text;
pub mod units;
