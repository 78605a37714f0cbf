//! `unused-model`: a model that nothing uses.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::Uses;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unused-model"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a model that nothing uses",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a model of the file that is checked which nothing names.

## Why it matters
It may be left over, or the name that should use it is misspelt.

## Method and source
All cards, expressions and marks are searched.

## Limits
Only definitions in a file with cards of its own at the top are looked at, so that libraries stay quiet.

## Example
```
.model spare npn
```

## Fix
Remove it, or use it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let uses = Uses::new(context.program);
    for (name, span) in uses.unused_models(context.program) {
        out.push(RULE.finding(span, format!("model `{name}` is not used")));
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
.model spare npn
       ^^^^^ unused-model
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
*~ device Q1 gm=1m
Q1 a a 0 spare
R2 a 0 1
.model spare npn
"#,
        );
        check(
            r#".model spare npn
"#,
        );
    }
}
