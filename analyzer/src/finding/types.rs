//! The types a finding is made of.

use crate::text::Span;

/// How serious a finding is. It is carried by the finding, not looked up by its rule.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Severity {
    /// Refuses a commit by default.
    Error,
    /// Deserves a look.
    Warning,
    /// Good to know.
    Info,
}

impl Severity {
    /// `error`, `warning` or `info`.
    pub fn as_str(self) -> &'static str {
        match self {
            Self::Error => "error",
            Self::Warning => "warning",
            Self::Info => "info",
        }
    }
}

/// A rule's name, such as `unstable-mode`.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct RuleId(pub &'static str);

impl RuleId {
    /// The name.
    pub fn as_str(self) -> &'static str {
        self.0
    }
}

/// A second place that belongs to a finding.
#[derive(Clone, PartialEq, Debug)]
pub struct Related {
    /// The place.
    pub span: Span,
    /// What it has to do with the finding.
    pub message: String,
}

/// A replacement of one range of text.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Edit {
    /// What is replaced.
    pub span: Span,
    /// By what.
    pub text: String,
}

/// A way to cure a finding.
#[derive(Clone, PartialEq, Debug)]
pub struct Fix {
    /// What it does, in words.
    pub title: String,
    /// The edits, not overlapping.
    pub edits: Vec<Edit>,
}

/// One finding.
#[derive(Clone, PartialEq, Debug)]
pub struct Finding {
    /// Its rule.
    pub rule: RuleId,
    /// How serious.
    pub severity: Severity,
    /// One line that stands alone: numbers first, plain words, engineering units.
    pub message: String,
    /// The word at fault.
    pub span: Span,
    /// The block it was found in.
    pub block: Option<String>,
    /// The node it speaks of.
    pub node: Option<String>,
    /// Frequency ranges, Hz.
    pub ranges_hz: Vec<[f64; 2]>,
    /// Figures by name, SI units.
    pub values: Vec<(&'static str, f64)>,
    /// Other places.
    pub related: Vec<Related>,
    /// Cures.
    pub fixes: Vec<Fix>,
    /// Stable against moves of lines and edits elsewhere: a hash of rule, block, node and the
    /// normalised text of the card.
    pub fingerprint: u64,
}

impl Finding {
    /// A finding with words and place; the rest is added by the caller.
    pub fn new(rule: RuleId, severity: Severity, span: Span, message: String) -> Self {
        Self {
            rule,
            severity,
            message,
            span,
            block: None,
            node: None,
            ranges_hz: Vec::new(),
            values: Vec::new(),
            related: Vec::new(),
            fixes: Vec::new(),
            fingerprint: 0,
        }
    }

    /// Adds a second place.
    pub fn also(mut self, span: Span, message: impl Into<String>) -> Self {
        self.related.push(Related {
            span,
            message: message.into(),
        });
        self
    }

    /// Adds a second place when there is one.
    pub fn also_maybe(self, span: Option<Span>, message: &str) -> Self {
        match span {
            Some(span) => self.also(span, message),
            None => self,
        }
    }

    /// Adds a cure of one edit.
    pub fn fix(mut self, title: impl Into<String>, span: Span, text: impl Into<String>) -> Self {
        self.fixes.push(Fix {
            title: title.into(),
            edits: vec![Edit {
                span,
                text: text.into(),
            }],
        });
        self
    }
}
