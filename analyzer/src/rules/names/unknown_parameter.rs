//! `unknown-parameter`: a name that has no value.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::{bad_marks, did_you_mean};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-parameter"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a name in a value that is no parameter, or an instance parameter that the subcircuit lacks",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a name in a value or expression that no `.param` line and no subcircuit header defines, and a
`name=value` on an `X` card whose subcircuit has no such parameter.

## Why it matters
The value is not known, so the part is missing from the circuit and no clean verdict is given for a block
that holds it. An instance parameter that nobody reads leaves the subcircuit at its default.

## Method and source
Names are looked up in the instance's own values, the defaults of its subcircuit and outward (IBIS-ISS 1.0,
IBIS Open Forum, 2011). `pi` is known everywhere.

## Limits
Definitions that nothing uses are not followed. A name in a mark's value is told by `unknown-mark`.

## Example
```
.param rload=50
R1 out 0 '2*rlod'
```

## Fix
Correct the name, or define it: `.param rlod=50`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let marks = bad_marks(context);
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownParameter { name, nearest } = &issue.kind else {
            continue;
        };
        if marks.around(issue.span).is_some() {
            continue;
        }
        let near = did_you_mean(nearest);
        let message = match issue.other.map(|place| context.text(place)) {
            Some(owner) => format!("subcircuit `{owner}` has no parameter `{name}`{near}"),
            None => format!("no parameter `{name}` is defined here{near}"),
        };
        let mut finding = RULE
            .finding(issue.span, message)
            .also_maybe(issue.other, "the subcircuit");
        if let Some(nearest) = nearest {
            finding = finding.fix(format!("write `{nearest}`"), issue.span, nearest.clone());
        }
        out.push(finding);
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings, fixed};

    #[test]
    fn triggers() {
        check(
            "\
title
.param rload=50
R1 a 0 '2*rlod + 1'
          ^^^^ unknown-parameter
C1 a 0 1p
",
        );
        check(
            "\
title
X1 a cell size=3 sise=4
                 ^^^^ unknown-parameter
R1 a 0 1k
.subckt cell a size=1
C1 a 0 'size*1p'
.ends
",
        );
    }

    #[test]
    fn the_owner_is_named_and_the_fix_replaces_the_word() {
        let text =
            "title\nX1 a cell sise=4\nR1 a 0 1k\n.subckt cell a size=1\nC1 a 0 'size*1p'\n.ends\n";
        let found = findings(text, "unknown-parameter");
        assert_eq!(
            found[0].message,
            "subcircuit `cell` has no parameter `sise`; the nearest name is `size`"
        );
        assert_eq!(fixed(text, &found[0]), [text.replace("sise", "size")]);
    }

    #[test]
    fn near_misses() {
        check("title\n.param Rload=50\nR1 a 0 '2*rLOAD*pi'\nC1 a 0 1p\n");
        check(
            "title\nX1 a cell m=2\nR1 a 0 1k\n.subckt cell a size=1\nC1 a 0 'size*1p*k'\n.ends\n.param k=2\n",
        );
    }
}
