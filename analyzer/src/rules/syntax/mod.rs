//! Lines that cannot be read as they stand.

mod unreadable_card;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[&unreadable_card::RULE];
