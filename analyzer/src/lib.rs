//! Netlist understanding and small-signal stability numerics.
#![doc = ""]

pub mod circuit;
pub mod elaborate;
pub mod syntax;
pub mod text;
pub mod units;
