//! `unused-subcircuit`: a subcircuit that nothing uses.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::Uses;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unused-subcircuit"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a subcircuit that nothing uses",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a subcircuit of the file that is checked which nothing names.

## Why it matters
It may be left over, or the name that should use it is misspelt.

## Method and source
All cards, expressions and marks are searched.

## Limits
Only definitions in a file with cards of its own at the top are looked at, so that libraries stay quiet.

## Example
```
.subckt spare a
R1 a 0 1
.ends
```

## Fix
Remove it, or use it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let uses = Uses::new(context.program);
    for (name, span) in uses.unused_subcircuits(context.program) {
        out.push(RULE.finding(span, format!("subcircuit `{name}` is not used")));
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 a 0 1
R2 a 0 1
.subckt spare a
        ^^^^^ unused-subcircuit
R1 a 0 1
.ends
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
X1 a SPARE
R2 a 0 1
.subckt spare a
R1 a 0 1
.ends
"#,
        );
        check(
            r#".subckt spare a
R1 a 0 1
.ends
"#,
        );
    }
}
