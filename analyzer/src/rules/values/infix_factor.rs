//! `infix-factor`: a scale factor in place of the decimal point.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{Card, CardKind, StatementKind, Value};
use crate::text::Span;
use crate::units::parse_number;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("infix-factor"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "a scale factor in place of the decimal point, as in `4k7`",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a value such as `4k7`, which is read as 4.7k.

## Why it matters
Other programs take what follows the scale factor for a unit and read 4k: the same netlist is then another
circuit.

## Method and source
The word of the value. Letters after a scale factor are a unit (IBIS-ISS 1.0); digits after it are common
practice on drawings only.

## Limits
Values inside expressions are not looked at.

## Example
```
R1 out 0 4k7
```

## Fix
Write `4.7k`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            if let Some(value) = value_of(card) {
                let span = Span::new(*file, value.range);
                out.extend(look(span, parse.tree.slice(value.range)));
            }
        }
    }
}

fn value_of(card: &Card) -> Option<Value> {
    match &card.kind {
        CardKind::TwoTerminal { value, .. } | CardKind::Source { value, .. } => *value,
        CardKind::VoltageControlled { gain, .. } | CardKind::CurrentControlled { gain, .. } => {
            Some(*gain)
        }
        _ => None,
    }
}

fn look(span: Span, text: &str) -> Option<Finding> {
    let number = parse_number(text).ok().filter(|number| number.infix)?;
    let at = number.scale_at? as usize;
    let (digits, rest) = (text.get(..at)?, text.get(at..)?);
    let fraction_at = rest.find(|c: char| c.is_ascii_digit())?;
    let (scale, rest) = (rest.get(..fraction_at)?, rest.get(fraction_at..)?);
    let fraction_end = rest
        .find(|c: char| !c.is_ascii_digit())
        .unwrap_or(rest.len());
    let (fraction, unit) = (rest.get(..fraction_end)?, rest.get(fraction_end..)?);
    let plain = format!("{digits}.{fraction}{scale}{unit}");
    let message = format!("`{text}` reads as `{plain}` here and as `{digits}{scale}` elsewhere");
    Some(
        RULE.finding(span, message)
            .fix(format!("write `{plain}`"), span, plain),
    )
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings, fixed};

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a 0 4k7
       ^^^ infix-factor
C1 a 0 2p2F
       ^^^^ infix-factor
",
        );
        check(
            "\
title
L1 a 0 1u5
       ^^^ infix-factor
R1 a 0 1
",
        );
    }

    #[test]
    fn the_fix_writes_a_point() {
        let text = "title\nR1 a 0 4k7\nC1 a 0 1p\n";
        let found = findings(text, "infix-factor");
        assert_eq!(fixed(text, &found[0]), [text.replace("4k7", "4.7k")]);
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 4.7k\nC1 a 0 2.2pF\n");
        check("title\nR1 a 0 4e3\nC1 a 0 1n\n");
    }
}
