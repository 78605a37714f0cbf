//! `negative-part`: a resistor, capacitor or inductor of negative value.

use crate::circuit::{PartKind, PartRole};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::circuits;
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use crate::units::engineering;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("negative-part"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "a resistor, capacitor or inductor of negative value",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports R, L and C cards whose value is negative.

## Why it matters
A negative part is a source of power: it stays in the network with the sources off and can make it unstable by itself.

## Method and source
The value after parameters are put in.

## Limits
A card in a subcircuit is told once.

## Example
```
R1 a 0 -50
```

## Fix
Correct the sign, or accept it by `*~ quiet` when an active part is meant.
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
            if value >= 0.0 || part.role != PartRole::Card {
                continue;
            }
            let span = Span::new(origin.file, origin.value);
            if told.insert(span) {
                let message = format!(
                    "{} is negative: `{}` delivers power",
                    engineering(value, unit),
                    part.name
                );
                let mut finding = RULE.finding(span, message);
                finding.values = vec![("value", value)];
                out.push(finding);
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
R1 a 0 -50
       ^^^ negative-part
R2 a 0 10
"#,
        );
        check(
            r#"title
.param c=1p
C1 a 0 '0-c'
       ^^^^^ negative-part
R2 a 0 10
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 a 0 50
R2 a 0 10
"#,
        );
        check(
            r#"title
V1 a 0 -5
R2 a 0 10
"#,
        );
    }
}
