//! What the screen could not see.

mod block_undetermined;
mod ideal_bypass;
mod limit_reached;
mod lossless_resonance;
mod multiplier_hides_mode;
mod off_network_unstable;
mod passive_claim_fails;
mod pin_unassigned;
mod port_loaded_twice;
mod port_shorted;
mod sight_limited;
mod sweep_too_narrow;

use super::Rule;

/// The family, names in order.
pub(super) static RULES: &[&Rule] = &[
    &block_undetermined::RULE,
    &ideal_bypass::RULE,
    &limit_reached::RULE,
    &lossless_resonance::RULE,
    &multiplier_hides_mode::RULE,
    &off_network_unstable::RULE,
    &passive_claim_fails::RULE,
    &pin_unassigned::RULE,
    &port_loaded_twice::RULE,
    &port_shorted::RULE,
    &sight_limited::RULE,
    &sweep_too_narrow::RULE,
];
