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
    /// A finding with words and place; the rest is added by the caller. Text of the netlist that
    /// runs over several lines is put on one.
    pub fn new(rule: RuleId, severity: Severity, span: Span, message: String) -> Self {
        Self {
            rule,
            severity,
            message: one_line(message),
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

/// A message on one line: control characters and the white space around them become one blank.
fn one_line(message: String) -> String {
    if !message.contains(char::is_control) {
        return message;
    }
    let pieces = message.split(char::is_control).map(str::trim);
    let pieces: Vec<&str> = pieces.filter(|piece| !piece.is_empty()).collect();
    pieces.join(" ")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::text::{FileId, TextRange};

    #[test]
    fn a_message_is_one_line() {
        let span = Span::new(FileId(0), TextRange::empty(0));
        let message = |text: &str| {
            let finding = Finding::new(RuleId("x"), Severity::Info, span, text.to_owned());
            finding.message
        };
        assert_eq!(message("`1 +\r\n+\t2` is  odd"), "`1 + + 2` is  odd");
        assert_eq!(message("as it was"), "as it was");
    }
}
