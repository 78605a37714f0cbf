//! What the screen found.

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[];
