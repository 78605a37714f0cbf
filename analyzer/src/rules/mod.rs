//! The rules: each turns a fact of the text, of the circuit or of a screen into findings.
//! One rule a file, its explanation beside it.

mod context;
mod coverage;
mod names;
mod registry;
mod spans;
mod stability;
mod syntax;
#[cfg(test)]
pub(crate) mod testing;
mod values;
mod views;
mod wiring;
mod words;

pub use context::{BlockContext, TextContext};
pub use registry::{Family, Rule, find_rule, nearest_rule, rules, screen_findings, text_findings};
