//! `farad-or-femto`: an upper-case `F` on a capacitor (femto) or `A` on a current (atto).

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, StatementKind};
use crate::text::Span;
use crate::units::{engineering, parse_number};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("farad-or-femto"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "an upper-case `F` on a capacitor (femto) or `A` on a current (atto)",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a capacitor whose value ends in an upper-case `F`, and a current source whose value ends in an upper-case `A`, directly behind the number.

## Why it matters
Both letters are scale factors: `1F` is one femtofarad and `1A` one attoampere, though the unit was most likely meant.

## Method and source
Scale factors of IBIS-ISS 1.0 (IBIS Open Forum, 2011) have no case; `a` is common practice.

## Limits
Lower-case letters are never reported, nor letters behind another factor (`10pF`).

## Example
```
C1 out 0 1F
```

## Fix
Leave the unit out: `C1 out 0 1`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            let (value, letter, unit) = match (&card.kind, card.letter) {
                (CardKind::TwoTerminal { value, .. }, 'c') => (*value, 'F', "F"),
                (CardKind::Source { value, .. }, 'i') => (*value, 'A', "A"),
                _ => continue,
            };
            let Some(value) = value else { continue };
            let text = parse.tree.slice(value.range);
            let Ok(number) = parse_number(text) else {
                continue;
            };
            let at = number.scale_at.map_or(text.len(), |at| at as usize);
            if text
                .get(at..)
                .is_some_and(|scale| scale.starts_with(letter))
            {
                let span = Span::new(*file, value.range);
                let message = format!(
                    "`{text}` reads as {}: `{letter}` is a scale factor here, not the unit",
                    engineering(number.value, unit)
                );
                let plain = text.get(..at).unwrap_or(text).to_owned();
                let title = format!(
                    "write `{plain}` (the value becomes {} times larger)",
                    if unit == "F" { "1e15" } else { "1e18" }
                );
                out.push(RULE.finding(span, message).fix(title, span, plain));
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
C1 a 0 1F
       ^^ farad-or-femto
R1 a 0 1
"#,
        );
        check(
            r#"title
I1 a 0 2A
       ^^ farad-or-femto
R1 a 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
C1 a 0 1f
R1 a 0 1
"#,
        );
        check(
            r#"title
C1 a 0 10pF
I1 a 0 2mA
R1 a 0 1
"#,
        );
    }
}
