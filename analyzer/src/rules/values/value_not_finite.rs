//! `value-not-finite`: a value that is no finite number.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::bad_marks;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("value-not-finite"),
    family: Family::Values,
    severity: Severity::Error,
    summary: "a value that is no finite number",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a value whose expression gives infinity or no number at all.

## Why it matters
The part is missing from the circuit, so no clean verdict is given for a block that holds it.

## Method and source
Expressions are computed in double precision (IEEE 754): a division by zero gives infinity, zero by zero, the
root of a negative number and the like give no number.

## Limits
Told where the value is used, which may be far from the parameter at fault. A value in a mark is
told by `unknown-mark`.

## Example
```
.param n=0
R1 a 0 '1k/n'
```

## Fix
Correct the expression or the parameter it depends on.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let marks = bad_marks(context);
    for issue in &context.elaborated.issues {
        let IssueKind::ValueNotFinite { text } = &issue.kind else {
            continue;
        };
        if marks.around(issue.span).is_none() {
            let inner = text.trim_matches(['\'', '{', '}', '"']);
            out.push(RULE.finding(issue.span, format!("`{inner}` gives no finite number")));
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
.param n=0
R1 a 0 '1k/n'
       ^^^^^^ value-not-finite
R2 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
X1 a cell w='sqrt(-1)'
            ^^^^^^^^^^ value-not-finite
R2 a 0 1k
.subckt cell a w=1
R1 a 0 w
.ends
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\n.param n=0 big='1/n'\nR1 a 0 'n ? big : 1k'\nC1 a 0 1p\n");
        check("title\nR1 a 0 1e300\nC1 a 0 '1e-300/1e10'\n");
    }
}
