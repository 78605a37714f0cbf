//! `missing-include`: an included file that cannot be read.

use crate::elaborate::IssueKind;
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("missing-include"),
    family: Family::Names,
    severity: Severity::Error,
    summary: "an included file that cannot be read",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an `.include` or `.lib` whose file could not be read, with the reason.

## Why it matters
What it defines is missing, so nothing certain is said of blocks that need it.

## Method and source
Files are looked for beside the file that includes them (common practice).

## Limits
None.

## Example
```
.include 'parts.inc'
```

## Fix
Correct the path.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for issue in &context.elaborated.issues {
        let IssueKind::MissingInclude { path, reason } = &issue.kind else {
            continue;
        };
        let message = format!("`{path}` cannot be read: {reason}");
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
        let refused = crate::host::Include::Refused("no such file".to_owned());
        let want = [("missing-include".to_owned(), "parts.inc".to_owned())];
        assert_eq!(found("parts.inc", refused), want);
        assert_eq!(found("parts.inc", crate::host::Include::Unknown), []);
    }
}
