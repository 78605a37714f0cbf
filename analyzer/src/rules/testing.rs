//! Marked text for rule tests: a line of carets under the words at fault, with the rule's name.

use crate::host::{FileRole, Host, SourceText};
use crate::text::{LineIndex, TextRange};
use std::time::Duration;

/// Checks the findings of the text (step one; no numerics) against caret lines: `^^^ rule-id`
/// under the word at fault in the line above. Information is only compared where a test names it.
#[track_caller]
pub fn check(marked: &str) {
    let (text, wanted) = split(marked);
    let mut host = Host::new(|| Duration::ZERO);
    let file = host.add_file(SourceText::new(text.as_str()), FileRole::Top);
    let prepared = host.prepare(file);
    let mut found: Vec<(TextRange, String)> = prepared
        .findings()
        .iter()
        .map(|f| (f.span.range, f.rule.as_str().to_owned()))
        .filter(|(_, rule)| {
            let named = wanted.iter().any(|(_, w)| w == rule);
            named || !is_info(rule)
        })
        .collect();
    found.sort();
    found.dedup();
    let mut wanted = wanted;
    wanted.sort();
    assert_eq!(found, wanted, "findings of\n{text}");
}

fn is_info(rule: &str) -> bool {
    use crate::finding::Severity;
    crate::rules::find_rule(rule).is_some_and(|rule| rule.severity == Severity::Info)
}

/// Takes the caret lines out of the text.
pub fn split(marked: &str) -> (String, Vec<(TextRange, String)>) {
    let mut text = String::new();
    let mut wanted = Vec::new();
    let mut previous_start = 0;
    for line in marked.split_inclusive('\n') {
        let trimmed = line.trim_start();
        if trimmed.starts_with('^') {
            let indent = line.len() - trimmed.len();
            let carets = trimmed.len() - trimmed.trim_start_matches('^').len();
            let rule = trimmed.trim_start_matches('^').trim().to_owned();
            let start = previous_start + indent;
            wanted.push((TextRange::new(start as u32, (start + carets) as u32), rule));
        } else {
            previous_start = text.len();
            text.push_str(line);
        }
    }
    // The index is only made to be sure that the text has lines.
    assert!(LineIndex::new(&text).lines() > 0, "a text has lines");
    (text, wanted)
}
