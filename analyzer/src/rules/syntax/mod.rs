//! Lines that cannot be read as they stand.

mod not_utf8;
mod stray_continuation;
mod title_swallows_card;
mod unknown_mark;
mod unreadable_card;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &not_utf8::RULE,
    &stray_continuation::RULE,
    &title_swallows_card::RULE,
    &unknown_mark::RULE,
    &unreadable_card::RULE,
];
