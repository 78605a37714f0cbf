//! `coupling-over-unity`: a coupling factor above one.

use crate::circuit::PartKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::{circuits, coupled_groups};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
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
Reports a single coupling of two inductors with |k| above 1.

## Why it matters
No pair of coils has it; the circuit gains a growing mode s = R/(L(|k| - 1)) from the data alone.

## Method and source
Energy of two coupled inductors is not negative for |k| up to 1 only.

## Limits
Groups of several couplings are judged as a whole by `coupling-not-passive`.

## Example
```
K1 L1 L2 1.1
```

## Fix
Correct the factor.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        for group in coupled_groups(circuit) {
            let [only] = group.couplings.as_slice() else {
                continue;
            };
            let factor = match circuit.part(*only).map(|part| &part.kind) {
                Some(PartKind::Coupling { factor, .. }) => *factor,
                _ => continue,
            };
            let Some(origin) = map.part(*only) else {
                continue;
            };
            let span = Span::new(origin.file, origin.value);
            if factor.abs() > 1.0 && told.insert(span) {
                let message =
                    format!("{factor} is a coupling factor above one: no two coils have it");
                let mut finding = RULE.finding(span, message);
                finding.values = vec![("factor", factor)];
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
L1 a 0 1n
L2 b 0 1n
R1 a b 1
R3 b 0 1
K1 L1 L2 1.1
         ^^^ coupling-over-unity
"#,
        );
        check(
            r#"title
L1 a 0 1n
L2 b 0 1n
R1 a b 1
R3 b 0 1
K1 L1 L2 -1.02
         ^^^^^ coupling-over-unity
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
L1 a 0 1n
L2 b 0 1n
R1 a b 1
R3 b 0 1
K1 L1 L2 1
"#,
        );
        check(
            r#"title
L1 a 0 1n
L2 b 0 1n
R1 a b 1
R3 b 0 1
K1 L1 L2 -0.99
"#,
        );
    }
}
