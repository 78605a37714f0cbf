//! Values of parts.

mod milli_or_mega;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[&milli_or_mega::RULE];
