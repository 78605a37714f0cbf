//! `not-utf8`: bytes that are not UTF-8.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::text::{Span, TextRange};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("not-utf8"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "a file with bytes that are not UTF-8",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports the first place of a file whose bytes are not UTF-8.

## Why it matters
Each such place is read as a replacement sign. In a comment that does no harm; in a name or a unit two
names that differ may become one.

## Method and source
UTF-8 as in The Unicode Standard, chapter 3, conformance (from memory).

## Limits
Only the first place of each file is told.

## Example
A micro sign written in an eight-bit code page, as many older editors do: `C1 in 0 10?F`.

## Fix
Save the file as UTF-8, or write `u` for micro.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, at) in context.not_utf8 {
        let end = at + char::REPLACEMENT_CHARACTER.len_utf8() as u32;
        let span = Span::new(*file, TextRange::new(*at, end));
        let message = "not UTF-8 from here on: what cannot be read is taken as `U+FFFD`";
        out.push(RULE.finding(span, message.to_owned()));
    }
}

#[cfg(test)]
mod tests {
    use crate::host::{FileRole, Host, SourceText};
    use crate::text::TextRange;
    use std::time::Duration;

    fn places(bytes: &[u8]) -> Vec<TextRange> {
        let mut host = Host::new(|| Duration::ZERO);
        let file = host.add_file(SourceText::from_bytes(bytes), FileRole::Top);
        let prepared = host.prepare(file);
        let found = prepared.findings().iter();
        found
            .filter(|f| f.rule.as_str() == "not-utf8")
            .map(|f| f.span.range)
            .collect()
    }

    #[test]
    fn triggers() {
        // 0xB5 is the micro sign of ISO 8859-1; a lone 0xC3 opens a sequence that never comes.
        let text = b"title\nR1 a 0 1k\nC1 a 0 10\xB5F\n* \xB5\n";
        assert_eq!(places(text), [TextRange::new(25, 28)]);
        assert_eq!(places(b"title \xC3\nR1 a 0 1\n"), [TextRange::new(6, 9)]);
    }

    #[test]
    fn near_misses() {
        assert_eq!(places("title\nC1 a 0 10\u{B5}F\n".as_bytes()), []);
        assert_eq!(places("title \u{FFFD}\nR1 a 0 1\n".as_bytes()), []);
    }
}
