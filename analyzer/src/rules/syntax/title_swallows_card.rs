//! `title-swallows-card`: a card on the first line, which is read as the title.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::text::{Span, TextRange};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("title-swallows-card"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "a card on the first line, which is read as the title",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a first line that reads as an element card without a fault, and one of whose nodes is ground or
a node of another card.

## Why it matters
The first line of a netlist is its title, whatever it says: the part is missing from the circuit, and
nothing else tells so.

## Method and source
The first line is the title unless it starts with `*` or `.` (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
Only cards that end in a number are recognised, so that a title in plain words is left in peace. Files
that others include have no title line.

## Example
```
R1 in 0 50
C1 in 0 1p
```

## Fix
Put a title line above the card.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        let Some(range) = parse.title_card else {
            continue;
        };
        let text = parse.tree.slice(range);
        let mark = |c: char| c.is_whitespace() || c == '\u{FEFF}';
        let card = text.trim_start_matches(mark);
        let start = range.start + (text.len() - card.len()) as u32;
        let card = card.trim_end();
        let span = Span::new(*file, TextRange::new(start, start + card.len() as u32));
        let message = format!("`{card}` stands on the title line and is not read as a card");
        let before = Span::new(*file, TextRange::empty(start));
        out.push(
            RULE.finding(span, message)
                .fix("put a title line above", before, "* netlist\n"),
        );
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings, fixed};

    #[test]
    fn triggers() {
        check(
            "\
R1 a 0 50
^^^^^^^^^ title-swallows-card
C1 a 0 1p
R2 a 0 1k
",
        );
        check(
            "  L7 feed a 10n
  ^^^^^^^^^^^^^ title-swallows-card
C1 a 0 1p
R2 a 0 1k
",
        );
    }

    #[test]
    fn behind_a_byte_order_mark_the_title_goes_after_it() {
        let text = "\u{FEFF}R1 a 0 50\r\nC1 a 0 1p\r\nR2 a 0 1k\r\n";
        let found = findings(text, "title-swallows-card");
        assert_eq!(found.len(), 1);
        let wanted = text.replace("R1", "* netlist\nR1");
        assert_eq!(fixed(text, &found[0]), std::slice::from_ref(&wanted));
        assert!(findings(&wanted, "title-swallows-card").is_empty());
    }

    #[test]
    fn near_misses() {
        check("Receiver for band 50\nR1 a 0 1k\nC1 a 0 1p\n");
        check("*R1 a 0 50\nR1 a 0 1k\nC1 a 0 1p\n");
        check("Gain stage at node b\nR1 a 0 1k\nC1 a 0 1p\n");
    }
}
