//! `pin-count`: an instance with another number of nodes than its subcircuit has pins.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("pin-count"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "an instance with another number of nodes than its subcircuit has pins",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `X` card that gives more or fewer nodes than its subcircuit has pins.

## Why it matters
From the first node that is missing on, every pin is connected to something else than was meant.

## Method and source
Nodes belong to pins by their order (IBIS-ISS 1.0, IBIS Open Forum, 2011).

## Limits
Two nodes that change places cannot be seen.

## Example
```
X1 in out amp
.subckt amp a y vdd
```

## Fix
Give a node for each pin, in the order of the `.subckt` line.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::PinCount {
            given,
            wanted,
            name,
        } = &issue.kind
        else {
            continue;
        };
        let nodes = plural(*given, "node");
        let pins = plural(*wanted, "pin");
        let message = format!("{nodes} for {pins} of subcircuit `{name}`");
        let finding = RULE.finding(issue.span, message);
        out.push(finding.also_maybe(issue.other, "the pins"));
    }
}

fn plural(count: usize, what: &str) -> String {
    let ending = if count == 1 { "" } else { "s" };
    format!("{count} {what}{ending}")
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
X1 a cell
^^ pin-count
R1 a 0 1k
.subckt cell a b
R1 a b 1k
R2 b 0 1k
.ends
",
        );
        check(
            "\
title
Xlong a b 0 cell
^^^^^ pin-count
R1 a b 1k
R2 b 0 1k
.subckt cell a b
R1 a b 1k
.ends
",
        );
    }

    #[test]
    fn numbers_come_first() {
        let text = "title\nX1 a cell\nR1 a 0 1k\n.subckt cell a b\nR1 a b 1k\n.ends\n";
        let found = findings(text, "pin-count");
        assert_eq!(found[0].message, "1 node for 2 pins of subcircuit `cell`");
        assert_eq!(found[0].related.len(), 1);
    }

    #[test]
    fn near_misses() {
        check(
            "title\nX1 a 0 cell size=2\nR1 a 0 1k\n.subckt cell a b size=1\nR1 a b size\n.ends\n",
        );
        check(
            "title\nX1 a 0 cell params: size=2\nR1 a 0 1k\n.subckt cell a b params: size=1\nR1 a b size\n.ends\n",
        );
    }
}
