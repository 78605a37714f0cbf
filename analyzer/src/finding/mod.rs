//! Findings as data: rule, severity, words, places, figures and fixes. Renderers are pure
//! functions over these.

mod types;

pub use types::{Edit, Finding, Fix, Related, RuleId, Severity};
