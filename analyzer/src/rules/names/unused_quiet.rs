//! `unused-quiet`: a `quiet` mark that matches nothing.

use crate::finding::{RuleId, Severity};
use crate::rules::{Family, Rule};

/// The rule. Its findings are made where accepted findings are taken out.
pub static RULE: Rule = Rule {
    id: RuleId("unused-quiet"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a `quiet` mark that matches nothing",
    explanation: EXPLANATION,
    text: None,
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a rule named by a `*~ quiet` mark that has no finding to accept.

## Why it matters
The problem is gone, or the mark stands in the wrong place; either way it would hide a later finding that
nobody has looked at.

## Method and source
Every `quiet` mark is matched with the findings on the next card, or with those of the node or part that
`on=` names.

## Limits
Blocks that were not screened give no findings to match.

## Example
```
*~ quiet negative-part why=\"models the active load\"
R1 a 0 50
```

## Fix
Remove the mark, or move it to the card before which it belongs.
";

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            "\
title
*~ quiet milli-or-mega why=\"trimmed\"
         ^^^^^^^^^^^^^ unused-quiet
R1 a 0 10
C1 a 0 1p
",
        );
        check(
            "\
title
*~ quiet no-such-rule why=\"x\"
         ^^^^^^^^^^^^ unused-quiet
R1 a 0 10
C1 a 0 1p
",
        );
    }

    #[test]
    fn near_misses() {
        check("title\n*~ quiet milli-or-mega why=\"shunt\"\nR1 a 0 10M\nC1 a 0 1p\n");
        check("title\n*~ quiet milli-or-mega on=10M why=\"shunt\"\nC1 a 0 1p\nR1 a 0 10M\n");
    }
}
