//! `include-cycle`: a file includes itself.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("include-cycle"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "a file includes itself",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an include that leads back to a file that is being read.

## Why it matters
The inner include is left out; what was meant is not known.

## Method and source
The chain of includes is followed.

## Limits
A library may name a section of itself.

## Example
```
.include 'thisfile.cir'
```

## Fix
Remove the include.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::IncludeCycle { path } = &issue.kind else {
            continue;
        };
        let message = format!("`{path}` includes itself");
        out.push(RULE.finding(issue.span, message));
    }
}

#[cfg(test)]
mod tests {

    fn found(path: &str, answer: crate::host::Include) -> Vec<(String, String)> {
        use crate::host::{FileRole, Host, SourceText};
        let text = format!("title\n.include '{path}'\nR1 a 0 1\nR2 a 0 1\n");
        let mut host = Host::new(|| std::time::Duration::ZERO);
        let root = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
        host.set_include(root, path, answer);
        let prepared = host.prepare(root);
        prepared
            .findings()
            .iter()
            .map(|f| {
                (
                    f.rule.as_str().to_owned(),
                    f.span.range.slice(&text).to_owned(),
                )
            })
            .collect()
    }

    #[test]
    fn stands_on_the_path() {
        let itself = crate::host::Include::File(crate::text::FileId(0));
        let want = [("include-cycle".to_owned(), "own.cir".to_owned())];
        assert_eq!(found("own.cir", itself), want);
    }
}
