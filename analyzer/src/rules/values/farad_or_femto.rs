//! `farad-or-femto`: an upper-case `F` on a capacitor or `A` on a current source.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{Card, CardKind, StatementKind, Value};
use crate::text::Span;
use crate::units::{engineering, parse_number};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("farad-or-femto"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "an upper-case `F` on a capacitor, which reads as femto, or `A` on a current source, which reads as atto",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a capacitor's value whose scale factor is an upper-case `F`, and a current source's value whose
scale factor is an upper-case `A`.

## Why it matters
Scale factors have no case: `10F` is ten femtofarads and `2A` two attoamperes, though most likely the unit
was meant.

## Method and source
Scale factors of IBIS-ISS 1.0 (IBIS Open Forum, 2011): `f` is femto in either case; that `a` is atto is
common practice.

## Limits
A lower-case letter is never reported, nor is a unit behind another factor, as in `10pF` and `2mA`.

## Example
```
Chold store 0 0.1F
```

## Fix
Leave the unit away: `0.1`. Write `0.1f` where femto is meant.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            if let Some((value, units)) = value_of(card) {
                let span = Span::new(*file, value.range);
                out.extend(look(span, parse.tree.slice(value.range), units));
            }
        }
    }
}

/// The letter that is both a unit and a scale factor, and the words for it.
struct Units {
    letter: char,
    symbol: &'static str,
    factor: &'static str,
    whole: &'static str,
}

fn value_of(card: &Card) -> Option<(Value, Units)> {
    match (&card.kind, card.letter) {
        (CardKind::TwoTerminal { value, .. }, 'c') => {
            let units = Units {
                letter: 'F',
                symbol: "F",
                factor: "femto",
                whole: "farads",
            };
            Some(((*value)?, units))
        }
        (CardKind::Source { value, .. }, 'i') => {
            let units = Units {
                letter: 'A',
                symbol: "A",
                factor: "atto",
                whole: "amperes",
            };
            Some(((*value)?, units))
        }
        _ => None,
    }
}

fn look(span: Span, text: &str, units: Units) -> Option<Finding> {
    let number = parse_number(text).ok()?;
    let at = number.scale_at? as usize;
    let (digits, scale) = (text.get(..at)?, text.get(at..)?);
    let rest = scale.strip_prefix(units.letter)?;
    let Units {
        letter,
        symbol,
        factor,
        whole,
    } = units;
    let message = format!(
        "`{text}` reads as {}; `{letter}` is {factor}, {whole} are written without a letter",
        engineering(number.value, symbol)
    );
    let small = format!("{digits}{}{rest}", letter.to_ascii_lowercase());
    let large = if number.infix {
        let fraction = rest.trim_end_matches(|c: char| !c.is_ascii_digit());
        format!("{digits}.{fraction}")
    } else {
        digits.to_owned()
    };
    Some(
        RULE.finding(span, message)
            .fix(format!("write `{large}` ({whole})"), span, large.clone())
            .fix(
                format!("write `{small}` (the value stays as it reads)"),
                span,
                small.clone(),
            ),
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
R1 a 0 10
C1 a 0 0.1F
       ^^^^ farad-or-femto
",
        );
        check(
            "\
title
R1 a 0 10
I1 a 0 DC 2A
          ^^ farad-or-femto
C1 a 0 C=1Farad
         ^^^^^^ farad-or-femto
",
        );
    }

    #[test]
    fn both_readings_are_offered() {
        let text = "title\nR1 a 0 10\nC1 a 0 4F7\n";
        let found = findings(text, "farad-or-femto");
        assert_eq!(
            found[0].message,
            "`4F7` reads as 4.70 fF; `F` is femto, farads are written without a letter"
        );
        assert_eq!(
            fixed(text, &found[0]),
            [text.replace("4F7", "4.7"), text.replace("4F7", "4f7")]
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 10\nC1 a 0 10f\nC2 a 0 10pF\nI1 a 0 2a\nI2 a 0 2mA\n");
        check("title\nR1 a 0 10F\nV1 a 0 2A\nL1 a 0 1F\n");
    }
}
