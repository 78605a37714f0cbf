//! Names that lead nowhere, or to two things.

mod duplicate_name;
mod include_cycle;
mod missing_include;
mod parameter_cycle;
mod pin_count;
mod recursive_subcircuit;
mod unknown_model;
mod unknown_node_in_mark;
mod unknown_parameter;
mod unknown_part;
mod unknown_subcircuit;
mod unused_model;
mod unused_parameter;
mod unused_quiet;
mod unused_subcircuit;
mod usage;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &duplicate_name::RULE,
    &include_cycle::RULE,
    &missing_include::RULE,
    &parameter_cycle::RULE,
    &pin_count::RULE,
    &recursive_subcircuit::RULE,
    &unknown_model::RULE,
    &unknown_node_in_mark::RULE,
    &unknown_parameter::RULE,
    &unknown_part::RULE,
    &unknown_subcircuit::RULE,
    &unused_model::RULE,
    &unused_parameter::RULE,
    &unused_quiet::RULE,
    &unused_subcircuit::RULE,
];
