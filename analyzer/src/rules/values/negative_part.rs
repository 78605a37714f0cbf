//! `negative-part`: a resistor, inductor or capacitor of negative value.

use crate::circuit::{PartKind, PartRole};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::views::{View, views};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, StatementKind};
use crate::text::Span;
use crate::units::{engineering, parse_number};
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("negative-part"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "a resistor, inductor or capacitor of negative value",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an R, L or C card whose value is below zero.

## Why it matters
A negative part delivers energy though it is no source. It stays in the circuit when all sources are off,
where it can make the network unstable by itself.

## Method and source
Values are those of the flat circuits; the power into R at current i is R i^2, the energy in L and C half
of L i^2 and C v^2: below zero for a negative value. Written numbers are read from the card as well.

## Limits
Each card is told once, although many instances show it. An expression in a subcircuit that no circuit
holds has no value to look at. Values of stand-ins (`*~ device`) are not looked at.

## Example
```
R1 tank 0 -220
```

## Fix
Correct the sign. Where a negative part models an active one on purpose, accept it: `*~ quiet negative-part
why=\"...\"`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told: HashSet<Span> = HashSet::new();
    let mut report = |place: Span, name: &str, letter: char, value: f64| {
        if value < 0.0 && told.insert(place) {
            out.push(finding(place, name, letter, value));
        }
    };
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            let CardKind::TwoTerminal {
                value: Some(value), ..
            } = &card.kind
            else {
                continue;
            };
            if let Ok(number) = parse_number(parse.tree.slice(value.range)) {
                let name = parse.tree.slice(card.name.range);
                let place = Span::new(*file, value.range);
                report(place, name, card.letter, number.value);
            }
        }
    }
    for view in views(context) {
        for (place, letter, value) in computed(&view) {
            if let Some(name) = place.1 {
                report(place.0, context.text(name), letter, value);
            }
        }
    }
}

/// Places (value, name), letters and values of a circuit's own R, L and C cards.
fn computed(view: &View<'_>) -> Vec<((Span, Option<Span>), char, f64)> {
    let parts = view.circuit.numbered_parts();
    let cards = parts.filter(|(_, part)| part.role == PartRole::Card);
    cards
        .filter_map(|(id, part)| {
            let (letter, value) = match part.kind {
                PartKind::Resistor { ohm, .. } => ('r', ohm),
                PartKind::Inductor { henry, .. } => ('l', henry),
                PartKind::Capacitor { farad, .. } => ('c', farad),
                _ => return None,
            };
            let place = view.value_span(id)?;
            (value < 0.0).then(|| ((place, view.part_span(id)), letter, value))
        })
        .collect()
}

fn finding(place: Span, name: &str, letter: char, value: f64) -> Finding {
    let (what, unit) = match letter {
        'r' => ("resistor", "ohm"),
        'l' => ("inductor", "H"),
        _ => ("capacitor", "F"),
    };
    let value = engineering(value, unit);
    let message =
        format!("{value} in `{name}`: a negative {what} delivers energy with all sources off");
    RULE.finding(place, message)
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a 0 -220
       ^^^^ negative-part
C1 a 0 1p
",
        );
        check(
            "\
title
.param s=-1
X1 a cell c='2*s'
X2 a cell c=3
X3 a cell c=s
R1 a 0 1k
.subckt cell a c=1
C1 a 0 C='c*1p'
         ^^^^^^ negative-part
L1 a 0 -1n
       ^^^ negative-part
.ends
",
        );
    }

    #[test]
    fn a_card_is_told_once_with_its_value() {
        let text = "title\n*~ block one in=a\n*~ block two in=a\nR1 a 0 -0.22k\nL1 a 0 1n\n.subckt c a\nL1 a 0 -1n\n.ends\n";
        let found = findings(text, "negative-part");
        let words: Vec<&str> = found.iter().map(|f| f.message.as_str()).collect();
        assert_eq!(
            words,
            [
                "-220 ohm in `R1`: a negative resistor delivers energy with all sources off",
                "-1.00 nH in `L1`: a negative inductor delivers energy with all sources off"
            ]
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 '-2*-110'\nC1 a 0 1e-12\nG1 a 0 a 0 -1m\n");
        check("title\nR1 a-1 0 220\nC1 a-1 0 1p\nV1 a-1 0 -5\n");
    }
}
