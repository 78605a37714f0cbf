//! Values of parts.

mod coupling;
mod coupling_not_passive;
mod coupling_over_unity;
mod farad_or_femto;
mod infix_factor;
mod milli_or_mega;
mod negative_part;
mod value_not_finite;
mod zero_part;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &coupling_not_passive::RULE,
    &coupling_over_unity::RULE,
    &farad_or_femto::RULE,
    &infix_factor::RULE,
    &milli_or_mega::RULE,
    &negative_part::RULE,
    &value_not_finite::RULE,
    &zero_part::RULE,
];
