//! `not-utf8`: bytes that are not UTF-8.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use crate::text::TextRange;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("not-utf8"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "bytes that are not UTF-8",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports the first byte of a file that is not UTF-8.

## Why it matters
Each such byte is read as a replacement sign; a name that holds one may not be the name that was meant.

## Method and source
Text is UTF-8 (RFC 3629, F. Yergeau, 2003).

## Limits
The first place of each file is told.

## Example
```
R1 a\\xE9 0 50
```

## Fix
Save the file as UTF-8.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, at) in context.not_utf8 {
        let length = '\u{FFFD}'.len_utf8() as u32;
        let span = Span::new(*file, TextRange::new(*at, *at + length));
        let message =
            "the file is not UTF-8 from here on: such bytes are read as replacement signs";
        out.push(RULE.finding(span, message.to_owned()));
    }
}

#[cfg(test)]
mod tests {

    use crate::host::{FileRole, Host, SourceText};

    fn rules(bytes: &[u8]) -> Vec<(&'static str, u32)> {
        let mut host = Host::new(|| std::time::Duration::ZERO);
        let root = host.add_file(SourceText::from_bytes(bytes), FileRole::Top);
        let prepared = host.prepare(root);
        prepared
            .findings()
            .iter()
            .map(|f| (f.rule.as_str(), f.span.range.start))
            .collect()
    }

    #[test]
    fn first_bad_byte() {
        assert_eq!(
            rules(b"title \xE9\nR1 a 0 1\nR2 a 0 1\n"),
            [("not-utf8", 6)]
        );
        assert_eq!(
            rules(b"title\nR1 a\xFF 0 1\nR2 a\xFF 0 1\n"),
            [("not-utf8", 10)]
        );
        assert_eq!(rules("title \u{E9}\nR1 a 0 1\nR2 a 0 1\n".as_bytes()), []);
        assert_eq!(rules(b"title\nR1 a 0 1\nR2 a 0 1\n"), []);
    }
}
