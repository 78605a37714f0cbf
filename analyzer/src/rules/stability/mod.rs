//! What the screen found.

mod methods_disagree;
mod negative_conductance;
mod startup_condition;
mod unstable_mode;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &methods_disagree::RULE,
    &negative_conductance::RULE,
    &startup_condition::RULE,
    &unstable_mode::RULE,
];
