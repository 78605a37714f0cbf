//! Numbers as netlists write them, and quantities as people read them.

mod format;
mod number;

pub use format::{engineering, hertz, hertz_range, percent, seconds};
pub use number::{Number, NumberFault, parse_number, parse_number_prefix};
