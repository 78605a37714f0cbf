//! `unknown-mark`: a mark that cannot be read as it stands.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::context::did_you_mean;
use crate::rules::spans::SpanMap;
use crate::rules::{Family, Rule, TextContext};
use crate::text::{Span, TextRange};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unknown-mark"),
    family: Family::Syntax,
    severity: Severity::Error,
    summary: "a mark, or a key or value in a mark, that is not known",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a mark (`*~`) whose word is not known, a key that the mark does not have, a value that the key
cannot take, and what is missing from a mark. The nearest known word is offered.

## Why it matters
A mark that is not understood has no effect: the block is screened with the default instead of what
was asked for.

## Method and source
The known marks and their keys are those of the reference of marks. The nearest word is the one of least
edit distance (Levenshtein, Soviet Physics Doklady 10, 1966; swapped neighbours count once, Damerau,
Communications of the ACM 7, 1964; both from memory), when at most a third of the letters differ.

## Limits
One finding a word. Values of marks that have no effect on the small-signal screen are not checked.

## Example
```
*~ blok lna in=ant out=drain
```

## Fix
Write the mark's word, key or value as the reference has it: `*~ block lna in=ant out=drain`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let mut told = SpanMap::new();
    for (file, parse) in &context.program.files {
        for error in &parse.mark_errors {
            let span = Span::new(*file, error.range);
            told.insert(span, ());
            out.push(RULE.finding(span, error.kind.to_string()));
        }
    }
    let parameters = nearest_parameters(context);
    for issue in &context.elaborated.issues {
        let IssueKind::BadMark { message, nearest } = &issue.kind else {
            continue;
        };
        // A value that the text lacks, or an open quote, has been told above.
        if told.meets(issue.span) {
            continue;
        }
        let inside = parameters.inside(issue.span);
        let (place, nearest) = match (nearest, inside) {
            (None, Some((start, end, nearest))) => (
                Span::new(issue.span.file, TextRange::new(start, end)),
                nearest,
            ),
            _ => (issue.span, nearest),
        };
        let message = format!("{message}{}", did_you_mean(nearest));
        let mut finding = RULE
            .finding(issue.span, message)
            .also_maybe(issue.other, "the card it is for");
        if let Some(nearest) = nearest {
            finding = finding.fix(format!("write `{nearest}`"), place, nearest.clone());
        }
        out.push(finding);
    }
}

/// Names without a value, with the name that is nearest to each.
fn nearest_parameters(context: &TextContext<'_>) -> SpanMap<Option<String>> {
    let mut map = SpanMap::new();
    for issue in &context.elaborated.issues {
        if let IssueKind::UnknownParameter { nearest, .. } = &issue.kind {
            map.insert(issue.span, nearest.clone());
        }
    }
    map
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings, fixed};

    #[test]
    fn triggers_on_words_and_keys() {
        check(
            "\
title
*~ blok amp in=a
   ^^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a swep=1k..1g
                  ^^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
*~ z0=3
   ^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
    }

    #[test]
    fn triggers_on_values_once() {
        check(
            "\
title
*~ block amp in=a band=2g..1g
                       ^^^^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
.param ztop=50
*~ block amp in=a z0=ztip
                     ^^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a z0=1/0
                     ^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a z0=
                  ^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
        check(
            "\
title
*~ block amp in=a band=
                  ^^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
    }

    #[test]
    fn what_is_missing_is_told_where_something_stands() {
        check(
            "\
title
*~ block amp in=a ports=b,,c
                        ^^^^ unknown-mark
R1 a b 1k
R2 a c 1k
",
        );
        check(
            "\
title
*~ tie a
   ^^^ unknown-mark
R1 a 0 1k
C1 a 0 1p
",
        );
    }

    #[test]
    fn the_fix_replaces_the_word() {
        let text = "title\n*~ rial a volts=5\n*~ block b in=a z0=ztip\n.param ztop=50\nR1 a 0 1\n";
        let found = findings(text, "unknown-mark");
        let texts: Vec<String> = found.iter().flat_map(|f| fixed(text, f)).collect();
        assert_eq!(
            texts,
            [
                text.replace("rial", "rail"),
                text.replace("z0=ztip", "z0=ztop")
            ]
        );
    }

    #[test]
    fn near_misses() {
        check("title\n*~ BLOCK amp IN=a Band=1k..2meg\nR1 a 0 1k\nC1 a 0 1p\n");
        check("title\n*~~~~~~~~\n* ~ blok\nR1 a 0 1k\nC1 a 0 1p\n");
        check("title\n*~ block amp in=a z0='2*ztop'\n.param ztop=25\nR1 a 0 1k\nC1 a 0 1p\n");
    }
}
