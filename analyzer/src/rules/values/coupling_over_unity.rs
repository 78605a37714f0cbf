//! `coupling-over-unity`: a coupling factor above one.

use super::coupling::{LEAST_OVER_UNITY, factor_spans};
use crate::circuit::PartKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::views::views;
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, StatementKind};
use crate::text::Span;
use crate::units::parse_number;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("coupling-over-unity"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "a coupling factor above one",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `K` card whose factor is above 1 or below -1.

## Why it matters
Two inductors cannot share more flux than there is: the pair stores negative energy for some currents. It
delivers energy though it is no source, and can make the network unstable by itself.

## Method and source
The energy (L1 i1^2 + 2 M i1 i2 + L2 i2^2)/2 with M = k sqrt(L1 L2) is never negative if and only if |k| <= 1
(Desoer and Kuh, *Basic Circuit Theory*, 1969, from memory).

## Limits
A factor of exactly 1 (a perfect transformer) is not reported. Where a factor above 1 stands in a group of
inductors, it is the one cause that is told: `coupling-not-passive` looks at groups in which every
factor is possible by itself. An expression in a subcircuit that no circuit holds has no value to look at.

## Example
```
K1 Lp Ls 1.02
```

## Fix
Write a factor of 1 at most, such as 0.98.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told: HashSet<Span> = HashSet::new();
    let mut report = |place: Span, name: &str, factor: f64| {
        if factor.abs() > LEAST_OVER_UNITY && told.insert(place) {
            let message =
                format!("coupling factor {factor} in `{name}`: magnitudes above 1 are not passive");
            let mut finding = RULE.finding(place, message);
            finding.values.push(("factor", factor));
            out.push(finding);
        }
    };
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            let CardKind::Coupling {
                factor: Some(value),
                ..
            } = &card.kind
            else {
                continue;
            };
            if let Ok(number) = parse_number(parse.tree.slice(value.range)) {
                let name = parse.tree.slice(card.name.range);
                report(Span::new(*file, value.range), name, number.value);
            }
        }
    }
    for view in views(context) {
        for (id, part) in view.circuit.numbered_parts() {
            if let PartKind::Coupling { factor, .. } = part.kind
                && let Some((place, name)) = factor_spans(&view, id)
            {
                report(place, context.text(name), factor);
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
L1 a 0 1n
L2 b 0 1n
K1 L1 L2 1.02
         ^^^^ coupling-over-unity
R1 a 0 1k
R2 b 0 1k
",
        );
        check(
            "\
title
.param k=0.7
L1 a 0 1n
L2 b 0 1n
L3 c 0 1n
K1 L1 L2 L3 '-2*k'
            ^^^^^^ coupling-over-unity
R1 a b 1k
R2 b c 1k
.subckt cell a b
L1 a 0 1n
L2 b 0 1n
K9 L1 L2 k=3
           ^ coupling-over-unity
.ends
",
        );
    }

    #[test]
    fn the_factor_is_told_as_a_number() {
        let text = "title\nL1 a 0 1n\nL2 b 0 1n\nK1 L1 L2 -1.02\nR1 a b 1k\n";
        let found = findings(text, "coupling-over-unity");
        assert_eq!(
            found[0].message,
            "coupling factor -1.02 in `K1`: magnitudes above 1 are not passive"
        );
        assert_eq!(found[0].values, [("factor", -1.02)]);
    }

    #[test]
    fn near_misses() {
        check("title\nL1 a 0 1n\nL2 b 0 1n\nK1 L1 L2 1\nR1 a b 1k\n");
        check("title\nL1 a 0 1n\nL2 b 0 1n\nK1 L1 L2 -1.0\nR1 a b 1k\n");
        check("title\nL1 a 0 1n\nL2 b 0 1n\nK1 L1 L2 '0.1*10'\nR1 a b 1k\n");
    }
}
