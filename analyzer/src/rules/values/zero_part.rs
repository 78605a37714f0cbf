//! `zero-part`: a resistor, capacitor or inductor of value zero.

use crate::circuit::{PartKind, PartRole};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::circuits;
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("zero-part"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "a resistor, capacitor or inductor of value zero",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports R, L and C cards whose value is exactly zero.

## Why it matters
A zero resistor or inductor is a short and a zero capacitor is nothing; a parameter that should have a value is often the cause.

## Method and source
The value after parameters are put in.

## Limits
A card in a subcircuit is told once.

## Example
```
R1 a b 0
```

## Fix
Give the value, or remove the part.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        for (id, part) in circuit.numbered_parts() {
            let (value, unit) = match &part.kind {
                PartKind::Resistor { ohm, .. } => (*ohm, "ohm"),
                PartKind::Capacitor { farad, .. } => (*farad, "F"),
                PartKind::Inductor { henry, .. } => (*henry, "H"),
                _ => continue,
            };
            let Some(origin) = map.part(id) else {
                continue;
            };
            if value != 0.0 || part.role != PartRole::Card {
                continue;
            }
            let span = Span::new(origin.file, origin.value);
            if told.insert(span) {
                let effect = if unit == "F" {
                    "does nothing"
                } else {
                    "is a short"
                };
                let message = format!("the value is zero: `{}` {effect}", part.name);
                out.push(RULE.finding(span, message));
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
R1 a b 0
       ^ zero-part
R2 a 0 10
R3 b 0 1
"#,
        );
        check(
            r#"title
C1 a 0 0p
       ^^ zero-part
R2 a 0 10
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 50
R2 a 0 1f
"#,
        );
        check(
            r#"title
V1 a 0 0
R2 a 0 10
"#,
        );
    }
}
