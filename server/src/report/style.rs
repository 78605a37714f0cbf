//! Colours of text on a terminal (ECMA-48 graphic renditions), and text that cannot harm one.

use squeg_analyzer::finding::Severity;
use std::borrow::Cow;

/// Paints words, or leaves them plain.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Paint {
    /// No control sequences at all.
    Plain,
    /// In colour.
    Color,
}

impl Paint {
    /// Whether the text goes to a person at a terminal.
    pub fn is_color(self) -> bool {
        self == Self::Color
    }

    /// A place or a name that begins a line.
    pub fn strong(self, text: &str) -> Cow<'_, str> {
        self.wrap("1", text)
    }

    /// A word of second rank.
    pub fn faint(self, text: &str) -> Cow<'_, str> {
        self.wrap("2", text)
    }

    /// A word in the colour of a severity: red, yellow or cyan.
    pub fn severity(self, severity: Severity, text: &str) -> Cow<'_, str> {
        let code = match severity {
            Severity::Error => "1;31",
            Severity::Warning => "1;33",
            Severity::Info => "1;36",
        };
        self.wrap(code, text)
    }

    /// A word that is as it should be, in green.
    pub fn good(self, text: &str) -> Cow<'_, str> {
        self.wrap("1;32", text)
    }

    fn wrap<'a>(self, code: &str, text: &'a str) -> Cow<'a, str> {
        match self {
            Self::Plain => Cow::Borrowed(text),
            Self::Color => Cow::Owned(format!("\x1b[{code}m{text}\x1b[0m")),
        }
    }
}

/// Text on one line, in which control characters that a netlist may hold are written out, so
/// that they cannot steer a terminal.
pub fn one_line(text: &str) -> Cow<'_, str> {
    if !text.contains(char::is_control) {
        return Cow::Borrowed(text);
    }
    let mut out = String::with_capacity(text.len() + 8);
    for character in text.chars() {
        if character == '\t' || !character.is_control() {
            out.push(if character == '\t' { ' ' } else { character });
        } else {
            out.extend(character.escape_default());
        }
    }
    Cow::Owned(out)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn control_characters_are_written_out() {
        assert_eq!(one_line("R1 \u{3A9}"), "R1 \u{3A9}");
        assert_eq!(one_line("a\tb\x1b[2J\nc"), "a b\\u{1b}[2J\\nc");
    }

    #[test]
    fn plain_is_plain() {
        assert_eq!(Paint::Plain.severity(Severity::Error, "error"), "error");
        assert_eq!(Paint::Color.strong("x"), "\x1b[1mx\x1b[0m");
    }
}
