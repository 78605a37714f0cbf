//! `unknown-part`: a coupling or controlled source that names a part which is not there.

use crate::elaborate::{Folded, IssueKind, Scope, nearest};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::{Family, Rule, TextContext};
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-part"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a coupling or current-controlled source that names a part which is not there",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a `K` card that names something else than an inductor, and an `F` or `H` card whose sensing
part is no V source.

## Why it matters
The coupling or the source is missing from the circuit, so no clean verdict is given for a block that
holds it.

## Method and source
The name is looked up among the cards of the same scope, and as an instance path from there (IBIS-ISS 1.0,
IBIS Open Forum, 2011).

## Limits
Parts outside of the scope cannot be named.

## Example
```
Vsns a b 0
F1 0 out Vsense 4
```

## Fix
Correct the name, or put a V source of 0 V into the branch whose current is meant.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::UnknownPart { name, expected } = &issue.kind else {
            continue;
        };
        let letter = if *expected == "an inductor" { 'l' } else { 'v' };
        let near = near_part(context, issue.span, name, letter);
        let words = did_you_mean(&near);
        let message = format!("`{name}` is not {expected} of this scope{words}");
        let mut finding = RULE.finding(issue.span, message);
        if let Some(near) = near {
            finding = finding.fix(format!("write `{near}`"), issue.span, near);
        }
        out.push(finding);
    }
}

/// The nearest name of a part with `letter` in the scope whose card holds `span`.
fn near_part(context: &TextContext<'_>, span: Span, name: &str, letter: char) -> Option<String> {
    let parse = context.program.file(span.file)?;
    let at = span.range.start;
    let after = parse.statements.partition_point(|s| s.range.start <= at);
    let statement = after.checked_sub(1)? as u32;
    let here = |scope: &&Scope| {
        let same = |card: &crate::elaborate::CardRef| {
            card.file == span.file && card.statement == statement
        };
        scope.cards.iter().any(same)
    };
    let scope = context.program.scopes.iter().find(here)?;
    let names = scope.cards.iter().filter_map(|card_ref| {
        let card = context.card(*card_ref)?;
        let name = context.program.text(card_ref.file, card.name.range);
        (card.letter == letter).then_some(name)
    });
    let wanted = Folded::new(name);
    nearest(wanted.as_str(), names).map(str::to_owned)
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings, fixed};

    #[test]
    fn triggers() {
        check(
            "\
title
L1 a 0 1n
L2 b 0 1n
K1 L1 L3 0.5
      ^^ unknown-part
R1 a 0 1k
R2 b 0 1k
",
        );
        check(
            "\
title
Vsns a b 0
F1 b 0 Vsnse 4
       ^^^^^ unknown-part
R1 a 0 1k
R2 b 0 1k
",
        );
        check(
            "\
title
R1 a b 10
H1 c 0 R1 4
       ^^ unknown-part
R2 b 0 1k
C1 a 0 1p
R3 c 0 1k
",
        );
    }

    #[test]
    fn the_fix_names_the_nearest_part_of_the_right_kind() {
        let text = "title\nVsns a b 0\nF1 b 0 vsnse 4\nR1 a 0 1k\nR2 b 0 1k\nRsnse a 0 1\n";
        let found = findings(text, "unknown-part");
        assert_eq!(fixed(text, &found[0]), [text.replace("vsnse", "Vsns")]);
    }

    #[test]
    fn near_misses() {
        check("title\nL1 a 0 1n\nL2 b 0 1n\nK1 l1 l2 0.5\nR1 a 0 1k\nR2 b 0 1k\n");
        check(
            "title\nF1 b 0 X1.VSNS 4\nX1 a b cell\nR1 a 0 1k\nR2 b 0 1k\n.subckt cell a b\nVsns a b\n.ends\n",
        );
    }
}
