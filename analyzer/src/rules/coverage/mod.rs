//! What the screen could not see.

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[];
