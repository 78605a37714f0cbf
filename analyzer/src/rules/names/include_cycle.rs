//! `include-cycle`: a file that includes itself.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("include-cycle"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a file that includes itself, directly or through others",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `.include` or `.lib` line that leads back to a file which is being read.

## Why it matters
The netlist would have no end. The line is left out, so what stands in the file is read once.

## Method and source
The chain of files that are open is followed (depth-first search).

## Limits
A `.lib` line that names another section of its own file is fine.

## Example
```
* parts.inc
.include parts.inc
```

## Fix
Take the line out, or move what both files need into a third one.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    context.issues(&RULE, out, |issue| match &issue.kind {
        IssueKind::IncludeCycle { path } => Some(format!(
            "`{path}` is being read already: it includes itself, directly or through others"
        )),
        _ => None,
    });
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check_files;

    #[test]
    fn triggers() {
        check_files(
            "title\n.include a.inc\nR1 a 0 1k\nC1 a 0 1p\n",
            &[(
                "a.inc",
                "\
* a
.include a.inc
         ^^^^^ include-cycle
",
            )],
        );
        check_files(
            "title\n.include a.inc\nR1 a 0 1k\nC1 a 0 1p\n",
            &[
                ("a.inc", "* a\n.include b.inc\n"),
                (
                    "b.inc",
                    "\
* b
.include 'a.inc'
          ^^^^^ include-cycle
",
                ),
            ],
        );
    }

    #[test]
    fn near_misses() {
        check_files(
            "title\n.include a.inc\n.include b.inc\nR1 a 0 1k\nC1 a 0 1p\n",
            &[("a.inc", ".include b.inc\n"), ("b.inc", "* b\n")],
        );
        check_files(
            "title\n.lib a.lib fast\nR1 a 0 1k\n",
            &[(
                "a.lib",
                ".lib fast\n.lib a.lib common\n.endl\n.lib common\nC1 a 0 1p\n.endl\n",
            )],
        );
    }
}
