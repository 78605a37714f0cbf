//! `coupling-not-passive`: couplings that together are not realisable.

use crate::circuit::{Circuit, PartId, PartKind};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::{circuits, coupled_groups};
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("coupling-not-passive"),
    family: Family::Values,
    severity: Severity::Warning,
    summary: "couplings that together are not realisable",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a group of coupled inductors whose matrix of coupling factors has a negative eigenvalue.

## Why it matters
Such inductors deliver energy: they make the circuit unstable by themselves, as an error of the data.

## Method and source
Smallest eigenvalue of the symmetric matrix with 1 on the diagonal and k beside it; every |k| below 1 is not enough (three coils of k12 = k23 = k, k13 = 0: 1 - k sqrt 2).

## Limits
A group of one single coupling is left to `coupling-over-unity`. Exactly 1 is allowed: it is the ideal limit.

## Example
```
K1 L1 L2 0.8
K2 L2 L3 0.8
```

## Fix
Lower the factors, or give the missing ones.
";

const NEGATIVE: f64 = -1e-12;

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        for group in coupled_groups(circuit) {
            let least = group.least_eigenvalue;
            let Some(worst) = strongest(circuit, &group.couplings) else {
                continue;
            };
            if group.couplings.len() < 2 || least >= NEGATIVE {
                continue;
            }
            let Some(origin) = map.part(worst) else {
                continue;
            };
            let span = Span::new(origin.file, origin.value);
            if !told.insert(span) {
                continue;
            }
            let message = format!(
                "{least:.4} is the smallest eigenvalue of these couplings: together they are not realisable"
            );
            let mut finding = RULE.finding(span, message);
            finding.values = vec![("least_eigenvalue", least)];
            for id in group.couplings.iter().filter(|id| **id != worst) {
                finding =
                    finding.also_maybe(map.part(*id).map(|o| o.span()), "a coupling of the group");
            }
            out.push(finding);
        }
    }
}

/// The coupling of largest factor; of equal ones the last.
fn strongest(circuit: &Circuit, couplings: &[PartId]) -> Option<PartId> {
    let size = |id: &PartId| match circuit.part(*id).map(|part| &part.kind) {
        Some(PartKind::Coupling { factor, .. }) => factor.abs(),
        _ => 0.0,
    };
    couplings
        .iter()
        .copied()
        .max_by(|a, b| size(a).total_cmp(&size(b)))
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
L3 c 0 1n
R1 a b 1
R2 b c 1
R3 c 0 1
K1 L1 L2 0.8
K2 L2 L3 0.8
         ^^^ coupling-not-passive
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
L1 a 0 1n
L2 b 0 1n
L3 c 0 1n
R1 a b 1
R2 b c 1
R3 c 0 1
K1 L1 L2 0.7
K2 L2 L3 0.7
"#,
        );
        check(
            r#"title
L1 a 0 1n
L2 b 0 1n
R1 a b 1
R3 b 0 1
K1 L1 L2 1
"#,
        );
    }
}
