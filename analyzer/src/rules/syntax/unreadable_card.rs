//! `unreadable-card`: a card that cannot be read.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::SyntaxErrorKind;
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unreadable-card"),
    family: Family::Syntax,
    severity: Severity::Error,
    summary: "a card that cannot be read",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a card whose fields are missing, whose number or expression cannot be read, or whose first
letter names no element; also quotes, subcircuits and library sections that are not closed.

## Why it matters
The part is missing from the circuit, so no clean verdict is given for a block that should hold it.

## Method and source
Card layouts of IBIS-ISS 1.0 (IBIS Open Forum, 2011); device cards as is common practice.

## Limits
Every other line is read as if the bad one were not there.

## Example
```
R1 in gate
```
A resistor needs a value behind its two nodes.

## Fix
Complete the card: `R1 in gate 4.7`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for error in &parse.errors {
            if error.kind == SyntaxErrorKind::StrayContinuation {
                continue;
            }
            let span = Span::new(*file, error.range);
            let other = error.other.map(|range| Span::new(*file, range));
            out.push(
                RULE.finding(span, error.kind.to_string())
                    .also_maybe(other, "opened here"),
            );
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a 0
^^ unreadable-card
C1 a 0 1p
R2 a 0 1k
",
        );
        check(
            "\
title
R1 a 0 4k7x9
       ^^^^^ unreadable-card
C1 a 0 1p
R2 a 0 1k
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 4.7kOhm\nC1 a 0 1p\n");
        check("title\nR1 a 0 1k 2 3\nC1 a 0 1p\n");
    }
}
