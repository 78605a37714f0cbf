//! `title-swallows-card`: the title line looks like a card.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("title-swallows-card"),
    family: Family::Syntax,
    severity: Severity::Warning,
    summary: "the title line looks like a card",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a first line that reads as an element card connected to the rest.

## Why it matters
The first line of a netlist is its title: the card is not in the circuit.

## Method and source
Common practice: the first line is the title unless it starts with `*` or `.`.

## Limits
The line must read as a card with a number and share a node with another card, or with ground.

## Example
```
R1 in 0 50
```

## Fix
Put a title above it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        if let Some(range) = parse.title_card {
            let span = Span::new(*file, range);
            let message =
                "the first line is the title, but it reads as a card: it is not in the circuit";
            let text = format!("title\n{}", context.text(span));
            out.push(RULE.finding(span, message.to_owned()).fix(
                "put a title line above (the card joins the circuit)",
                span,
                text,
            ));
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"R1 a 0 50
^^^^^^^^^ title-swallows-card
R2 a 0 1
C1 a 0 1p
"#,
        );
        check(
            r#"C1 a b 50p
^^^^^^^^^^ title-swallows-card
R2 a 0 1
R3 a 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"Receiver input stage 2
R2 a 0 1
C1 a 0 1p
"#,
        );
        check(
            r#"* R1 a 0 50
R2 a 0 1
C1 a 0 1p
"#,
        );
    }
}
