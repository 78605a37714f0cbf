//! `duplicate-name`: two things of one kind with one name in one scope.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("duplicate-name"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "two things of one kind with one name in one scope",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports the second of two parts, subcircuits, models or blocks that bear the same name in the same scope.

## Why it matters
For parts, both stand in the circuit, but nothing can refer to the one or the other by name. For
subcircuits and models the later one replaces the earlier one for every card of the scope.

## Method and source
Names are compared without regard to upper and lower case (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
One name in two scopes is fine. A library that is included twice in one scope does not count as
a second definition; cards that are included twice do.

## Example
```
R1 in gate 10
R1 gate 0 1k
```

## Fix
Rename one of them, or take out the copy.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::DuplicateName { what, name } = &issue.kind else {
            continue;
        };
        let again = issue.other == Some(issue.span);
        let message = match (*what, again) {
            ("part", true) => {
                format!("part `{name}` stands in this scope twice: its file is included twice")
            }
            // A library that is read twice defines the same thing again.
            (_, true) => continue,
            ("part" | "block", false) => format!("another {what} is named `{name}` already"),
            _ => format!("another {what} is named `{name}` already; the later one counts"),
        };
        let finding = RULE.finding(issue.span, message);
        out.push(match issue.other {
            Some(first) if !again => finding.also(first, "the first one"),
            _ => finding,
        });
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, check_files};

    #[test]
    fn triggers() {
        check(
            "\
title
R1 a b 1k
r1 b 0 1k
^^ duplicate-name
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a
*~ block AMP in=a
         ^^^ duplicate-name
X1 a cell
R1 a 0 1k
.model d1 d
.model d1 d
       ^^ duplicate-name
.subckt cell a
R1 a 0 1k
.ends
.subckt cell a
        ^^^^ duplicate-name
R1 a 0 2k
.ends
",
        );
    }

    #[test]
    fn cards_included_twice_are_there_twice() {
        check_files(
            "title\n.include load.inc\n.include load.inc\nC1 a 0 1p\n",
            &[(
                "load.inc",
                "\
R1 a 0 1k
^^ duplicate-name
",
            )],
        );
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 1k\nX1 a cell\n.subckt cell a\nR1 a 0 1k\n.ends\n");
        check_files(
            "title\nX1 a cell\nD1 0 a d1\n.include parts.inc\n.include parts.inc\n",
            &[(
                "parts.inc",
                ".model d1 d\n.subckt cell a\nR1 a 0 1k\n.ends\n",
            )],
        );
    }
}
