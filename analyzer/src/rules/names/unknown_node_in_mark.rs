//! `unknown-node-in-mark`: a mark that names a node or part that is not there.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-node-in-mark"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a mark that names a node or part that is not there",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a node, part or instance named by a `block`, `rail`, `tie`, `passive` or `device` mark that the
scope of the mark does not have.

## Why it matters
A port, supply or stand-in that leads nowhere is not applied: the block is not the one that was meant,
so no clean verdict is given for it.

## Method and source
Names are those of the flat circuit, instance path and name joined by dots, seen from the scope in which
the mark stands. Upper and lower case are the same.

## Limits
Supplies, ties and claims are looked up where a block is marked in their scope. Names in marks that have
no effect on the small-signal screen are not looked up.

## Example
```
*~ block lna in=ant out=drian
R1 ant gate 10
R2 drain 0 1k
```

## Fix
Write the name as the cards have it: `out=drain`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownNodeInMark { name, nearest } = &issue.kind else {
            continue;
        };
        let near = did_you_mean(nearest);
        let here = nearest
            .as_ref()
            .is_some_and(|near| near.eq_ignore_ascii_case(name));
        if here {
            let message = format!("`{name}` is there, but it is not what this mark can take");
            out.push(RULE.finding(issue.span, message));
            continue;
        }
        let message = format!("no node or part `{name}` where this mark looks for it{near}");
        let mut finding = RULE.finding(issue.span, message);
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
*~ block amp in=gate out=drian:75
                         ^^^^^ unknown-node-in-mark
R1 gate drain 1k
R2 gate 0 1k
C1 drain 0 1p
",
        );
        check(
            "\
title
*~ block amp in=gate
*~ rail vdd volts=5
        ^^^ unknown-node-in-mark
*~ device Q7 gm=10m rpi=1k
          ^^ unknown-node-in-mark
R1 gate vcc 1k
R2 gate 0 1k
C1 vcc 0 1p
",
        );
    }

    #[test]
    fn the_fix_replaces_the_word() {
        let text = "title\n*~ block amp in=gaet\nR1 gate 0 1k\nC1 gate 0 1p\n";
        let found = findings(text, "unknown-node-in-mark");
        assert_eq!(fixed(text, &found[0]), [text.replace("gaet", "gate")]);
    }

    #[test]
    fn near_misses() {
        check("title\n*~ block amp in=GATE:75 out=R2\nR1 gate b 1k\nR2 b 0 50\n");
        check(
            "title\n*~ block amp in=a ports=X1.n\nX1 a cell\nR1 a 0 1k\n.subckt cell a\nR1 a n 1k\nC1 n 0 1p\n.ends\n",
        );
    }
}
