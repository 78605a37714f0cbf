//! How parts are connected.

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[];
