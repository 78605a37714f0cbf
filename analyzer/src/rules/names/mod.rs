//! Names that lead nowhere, or to two things.

mod unknown_subcircuit;
mod unused_quiet;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[&unknown_subcircuit::RULE, &unused_quiet::RULE];
