//! `source-loop`: a loop of voltage sources.

use crate::circuit::voltage_loops;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::circuits;
use crate::rules::{Family, Rule, TextContext};
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("source-loop"),
    family: Family::Wiring,
    severity: Severity::Error,
    summary: "a loop of voltage sources",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports the V, E or H card that closes a loop of ideal voltage sources.

## Why it matters
The current around the loop is not determined, so the circuit has no solution.

## Method and source
The graph of the ideal voltage branches; a V source with a port or rail impedance in series is none.

## Limits
None.

## Example
```
V1 a 0 5
V2 a 0 5
```

## Fix
Put a resistance in series, or remove one source.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = HashSet::new();
    for (circuit, map) in circuits(context) {
        for part in voltage_loops(circuit) {
            let Some(origin) = map.part(part) else {
                continue;
            };
            if told.insert(origin.span()) {
                let name = circuit.part(part).map_or("?", |part| &part.name);
                let message = format!("`{name}` closes a loop of ideal voltage sources");
                out.push(RULE.finding(origin.span(), message));
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
V1 a 0 5
V2 a 0 5
^^ source-loop
R1 a 0 1
"#,
        );
        check(
            r#"title
V1 a 0 5
E1 a 0 b 0 2
^^ source-loop
R1 a b 1
R2 b 0 1
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
V1 a 0 5
V2 b a 5
R1 b 0 1
"#,
        );
        check(
            r#"title
*~ block amp in=V2
V1 a 0 5
V2 a 0 0
R1 a 0 1
"#,
        );
    }
}
