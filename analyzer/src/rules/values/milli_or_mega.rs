//! `milli-or-mega`: an upper-case `M` on a resistor or frequency.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, StatementKind};
use crate::text::{Span, TextRange};
use crate::units::{engineering, parse_number};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("milli-or-mega"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "an upper-case `M` on a resistor or frequency, which reads as milli",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a resistor's value or a frequency in a mark that is written with an upper-case `M`.

## Why it matters
Scale factors have no case: `10M` is ten milliohms, though it was most likely meant as ten megohms.
A bias resistor that becomes a short makes, or hides, an instability.

## Method and source
Scale factors of IBIS-ISS 1.0 (IBIS Open Forum, 2011): `m` is milli in either case, `meg` is mega.

## Limits
A lower-case `m` is never reported.

## Example
```
R1 gate 0 10M
```

## Fix
Write `10meg`, or `10m` where milliohms are meant.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            match &statement.kind {
                StatementKind::Card(card) if card.letter == 'r' => {
                    if let CardKind::TwoTerminal {
                        value: Some(value), ..
                    } = &card.kind
                    {
                        look(
                            Span::new(*file, value.range),
                            parse.tree.slice(value.range),
                            "ohm",
                            out,
                        );
                    }
                }
                StatementKind::Mark(mark) => {
                    for param in &mark.params {
                        let key = parse.tree.slice(param.key.range).to_ascii_lowercase();
                        if key == "band" || key == "sweep" {
                            ends(
                                Span::new(*file, param.value.range),
                                parse.tree.slice(param.value.range),
                                out,
                            );
                        }
                    }
                }
                _ => {}
            }
        }
    }
}

/// Both ends of `LO..HI`.
fn ends(span: Span, text: &str, out: &mut Vec<Finding>) {
    let Some((low, high)) = text.split_once("..") else {
        return;
    };
    let start = span.range.start;
    let middle = start + low.len() as u32;
    let place = |from, to| Span::new(span.file, TextRange::new(from, to));
    look(place(start, middle), low, "Hz", out);
    look(place(middle + 2, span.range.end), high, "Hz", out);
}

fn look(span: Span, text: &str, unit: &str, out: &mut Vec<Finding>) {
    let Ok(number) = parse_number(text) else {
        return;
    };
    let Some(at) = number.scale_at else { return };
    let scale = text.get(at as usize..).unwrap_or("");
    let mega = scale.len() >= 3 && scale[..3].eq_ignore_ascii_case("meg");
    let mil = scale.len() >= 3 && scale[..3].eq_ignore_ascii_case("mil");
    if !scale.starts_with('M') || mega || mil {
        return;
    }
    let message = format!(
        "`{text}` reads as {}; `M` is milli, mega is written `meg`",
        engineering(number.value, unit)
    );
    let mega_text = format!("{}meg{}", &text[..at as usize], &scale[1..]);
    let milli_text = format!("{}m{}", &text[..at as usize], &scale[1..]);
    out.push(
        RULE.finding(span, message)
            .fix(
                format!("write `{mega_text}` (a million times larger)"),
                span,
                mega_text.clone(),
            )
            .fix(
                format!("write `{milli_text}` (the value stays as it reads)"),
                span,
                milli_text.clone(),
            ),
    );
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a 0 10M
       ^^^ milli-or-mega
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a band=1M..2meg
                       ^^ milli-or-mega
R1 a 0 10
C1 a 0 1p
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 10m\nC1 a 0 1MF\n");
        check("title\nR1 a 0 10MEG\nC1 a 0 1p\n");
    }
}
