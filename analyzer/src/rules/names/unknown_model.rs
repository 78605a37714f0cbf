//! `unknown-model`: a device whose model is not defined.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-model"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a device whose model is not defined",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `D Q J M Z` card, or a resistor, capacitor or inductor with a model, whose model's name leads to
no `.model` card that is visible where the card stands.

## Why it matters
What is not defined cannot be computed, and most simulators refuse the whole netlist.

## Method and source
Models are looked up in the scope of the card and outward (IBIS-ISS 1.0, IBIS Open Forum, 2011, for
subcircuits; for models common practice).

## Limits
A device for which `*~ device` gives the small-signal values needs no model. Models of switches and lines
are not looked up.

## Example
```
Q1 c b e npm
.model npn npn
```

## Fix
Correct the name, or include the file that defines the model.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownModel { name, nearest } = &issue.kind else {
            continue;
        };
        let message = format!("no model `{name}` is defined{}", did_you_mean(nearest));
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
Q1 c b 0 swich
         ^^^^^ unknown-model
R1 c b 1k
.model switch npn
",
        );
        check(
            "\
title
R1 a 0 thinfilm 1k
       ^^^^^^^^ unknown-model
C1 a 0 1p
.subckt other a
.model thinfilm r
R1 a 0 1k
.ends
",
        );
    }

    #[test]
    fn the_fix_writes_the_nearest_name() {
        let text = "title\nQ1 c b 0 swich\nR1 c b 1k\n.model switch npn\n";
        let found = findings(text, "unknown-model");
        assert_eq!(fixed(text, &found[0]), [text.replace("swich", "switch")]);
    }

    #[test]
    fn near_misses() {
        check("title\nQ1 c b 0 SWITCH\nR1 c b 1k\n.model switch npn\n");
        check("title\n*~ device Q1 gm=10m rpi=1k\nQ1 c b 0 none\nR1 c b 1k\nR2 c 0 1k\n");
        check("title\nX1 a inner\nR1 a 0 1k\n.subckt inner a\nD1 0 a dx\n.ends\n.model dx d\n");
    }
}
