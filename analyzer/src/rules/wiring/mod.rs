//! How parts are connected.

mod current_source_cut;
mod no_dc_path;
mod shorted_part;
mod single_connection;
mod source_loop;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &current_source_cut::RULE,
    &no_dc_path::RULE,
    &shorted_part::RULE,
    &single_connection::RULE,
    &source_loop::RULE,
];
