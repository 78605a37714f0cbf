//! Netlist understanding and small-signal stability numerics behind squeg.
//!
//! Texts go into a [`host::Host`], findings and block reports come out. The library does no
//! I/O and knows no protocol.

pub mod assembly;
pub mod cancel;
pub mod circuit;
pub mod config;
pub mod elaborate;
pub mod explain;
pub mod finding;
pub mod host;
pub mod linalg;
pub mod rules;
pub mod stability;
pub mod sweep;
pub mod syntax;
pub mod text;
pub mod units;
