//! The table of all rules, in families.

use super::context::{BlockContext, TextContext};
use super::{coverage, names, stability, syntax, values, wiring};
use crate::elaborate::nearest;
use crate::finding::{Finding, RuleId, Severity};
use crate::text::Span;

/// What a rule is about.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub enum Family {
    /// Lines that cannot be read as they stand.
    Syntax,
    /// Names that lead nowhere, or to two things.
    Names,
    /// How parts are connected.
    Wiring,
    /// Values of parts.
    Values,
    /// What the screen could not see.
    Coverage,
    /// What the screen found.
    Stability,
}

impl Family {
    /// The family's name.
    pub fn as_str(self) -> &'static str {
        match self {
            Self::Syntax => "syntax",
            Self::Names => "names",
            Self::Wiring => "wiring",
            Self::Values => "values",
            Self::Coverage => "coverage",
            Self::Stability => "stability",
        }
    }
}

/// A rule: its name, its default severity, its text, and what it does.
pub struct Rule {
    /// Kebab-case name of the problem.
    pub id: RuleId,
    /// Family.
    pub family: Family,
    /// Default severity; a finding may carry another where its rule says so.
    pub severity: Severity,
    /// One line for tables.
    pub summary: &'static str,
    /// Markdown with the headings What it does, Why it matters, Method and source, Limits,
    /// Example, Fix.
    pub explanation: &'static str,
    /// Findings of the text.
    pub text: Option<fn(&TextContext<'_>, &mut Vec<Finding>)>,
    /// Findings of a screened block.
    pub screen: Option<fn(&BlockContext<'_>, &mut Vec<Finding>)>,
}

impl Rule {
    /// A finding of this rule with its default severity.
    pub fn finding(&self, span: Span, message: String) -> Finding {
        Finding::new(self.id, self.severity, span, message)
    }
}

/// Every family's rules, families in order, names in order within a family.
static FAMILIES: [&[&Rule]; 6] = [
    syntax::RULES,
    names::RULES,
    wiring::RULES,
    values::RULES,
    coverage::RULES,
    stability::RULES,
];

/// Every rule, families in order, names in order within a family.
pub fn rules() -> impl Iterator<Item = &'static Rule> {
    FAMILIES.iter().flat_map(|family| family.iter().copied())
}

/// A rule by name.
pub fn find_rule(id: &str) -> Option<&'static Rule> {
    rules().find(|rule| rule.id.as_str() == id)
}

/// The rule whose name is nearest to `id`, when one is near enough to be meant.
pub fn nearest_rule(id: &str) -> Option<&'static Rule> {
    nearest(id, rules().map(|rule| rule.id.as_str())).and_then(find_rule)
}

/// All findings of the text, in the order of the rules.
pub fn text_findings(context: &TextContext<'_>) -> Vec<Finding> {
    let mut out = Vec::new();
    for rule in rules() {
        if let Some(check) = rule.text {
            check(context, &mut out);
        }
    }
    out
}

/// All findings of one screened block, in the order of the rules.
pub fn screen_findings(context: &BlockContext<'_>) -> Vec<Finding> {
    let mut out = Vec::new();
    for rule in rules() {
        if let Some(check) = rule.screen {
            check(context, &mut out);
        }
    }
    out
}
