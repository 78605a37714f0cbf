//! `missing-include`: an included file that could not be read.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("missing-include"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "an included file that could not be read",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `.include` or `.lib` line whose file could not be read, and says why.

## Why it matters
Everything the file defines is missing, so no clean verdict is given for a block in whose scope
the line stands.

## Method and source
Paths are looked up from the folder of the file that includes.

## Limits
A section that the file does not have is an empty one.

## Example
```
.include 'lib/transistors.inc'
```

## Fix
Correct the path, or add the file to the project.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    context.issues(&RULE, out, |issue| match &issue.kind {
        IssueKind::MissingInclude { path, reason } => {
            Some(format!("`{path}` is not included: {reason}"))
        }
        _ => None,
    });
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check_files;

    #[test]
    fn triggers() {
        check_files(
            "\
title
.include 'lib/none.inc'
          ^^^^^^^^^^^^ missing-include
R1 a 0 1k
C1 a 0 1p
",
            &[],
        );
        check_files(
            "title\n.include parts.inc\nR1 a 0 1k\nC1 a 0 1p\n",
            &[(
                "parts.inc",
                "\
* parts
.lib more.lib fast
     ^^^^^^^^ missing-include
",
            )],
        );
    }

    #[test]
    fn a_path_of_no_letters_is_a_missing_field() {
        check_files(
            "\
title
.include ''
^^^^^^^^ unreadable-card
R1 a 0 1k
C1 a 0 1p
",
            &[],
        );
    }

    #[test]
    fn near_misses() {
        check_files(
            "title\n.include \"parts.inc\"\nR1 a 0 1k\nC1 a 0 1p\n",
            &[("parts.inc", "* parts\n")],
        );
        check_files(
            "title\n* .include none.inc\n.lib parts.inc fast\nR1 a 0 1k\n",
            &[(
                "parts.inc",
                ".lib fast\nC1 a 0 1p\n.endl\n.lib slow\n.include none.inc\n.endl\n",
            )],
        );
    }
}
