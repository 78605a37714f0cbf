//! Marked text for rule tests: a line of carets under the words at fault, with the rule's name.

use crate::finding::Finding;
use crate::host::{FileRole, Host, Include, Prepared, SourceText};
use crate::text::{FileId, LineIndex, TextRange};
use std::time::Duration;

/// Checks the findings of the text (step one; no numerics) against caret lines: `^^^ rule-id`
/// under the word at fault in the line above. Information is only compared where a test names it.
#[track_caller]
pub fn check(marked: &str) {
    check_files(marked, &[]);
}

/// As [`check`], with files that can be included, each with caret lines of its own. Every other
/// include is refused.
#[track_caller]
pub fn check_files(marked: &str, included: &[(&str, &str)]) {
    let mut wanted: Vec<(FileId, TextRange, String)> = Vec::new();
    let mut texts = Vec::new();
    for (number, (_, marked)) in std::iter::once(&("", marked)).chain(included).enumerate() {
        let (text, carets) = split(marked);
        let file = FileId(number as u32);
        wanted.extend(carets.into_iter().map(|(range, rule)| (file, range, rule)));
        texts.push(text);
    }
    let names: Vec<&str> = included.iter().map(|(name, _)| *name).collect();
    let mut found: Vec<(FileId, TextRange, String)> = prepare(&texts, &names)
        .findings()
        .iter()
        .map(|f| (f.span.file, f.span.range, f.rule.as_str().to_owned()))
        .filter(|(_, _, rule)| {
            let named = wanted.iter().any(|(_, _, w)| w == rule);
            named || !is_info(rule)
        })
        .collect();
    found.sort();
    found.dedup();
    wanted.sort();
    assert_eq!(found, wanted, "findings of\n{}", texts.join("\n----\n"));
}

/// The findings of one rule in a text without includes, by file and place.
pub fn findings(text: &str, rule: &str) -> Vec<Finding> {
    prepare(&[text.to_owned()], &[])
        .findings()
        .iter()
        .filter(|finding| finding.rule.as_str() == rule)
        .cloned()
        .collect()
}

/// The text as each fix of a finding leaves it.
pub fn fixed(text: &str, finding: &Finding) -> Vec<String> {
    let apply = |edits: &[crate::finding::Edit]| {
        let mut edits: Vec<_> = edits.iter().collect();
        edits.sort_by_key(|edit| std::cmp::Reverse(edit.span.range));
        edits.iter().fold(text.to_owned(), |mut text, edit| {
            let range = edit.span.range.start as usize..edit.span.range.end as usize;
            text.replace_range(range, &edit.text);
            text
        })
    };
    finding.fixes.iter().map(|fix| apply(&fix.edits)).collect()
}

/// Prepares the first text; the others answer to the names of `included`.
fn prepare(texts: &[String], included: &[&str]) -> Prepared {
    let mut host = Host::new(|| Duration::ZERO);
    let mut files = Vec::new();
    for (number, text) in texts.iter().enumerate() {
        let role = match number {
            0 => FileRole::Top,
            _ => FileRole::Included,
        };
        files.push(host.add_file(SourceText::new(text.as_str()), role));
    }
    loop {
        let prepared = host.prepare(files[0]);
        if prepared.missing().is_empty() {
            return prepared;
        }
        for request in prepared.missing() {
            let at = included.iter().position(|name| *name == request.path);
            let answer = match at {
                Some(at) => Include::File(files[at + 1]),
                None => Include::Refused("no such file".to_owned()),
            };
            host.set_include(request.from, &request.path, answer);
        }
    }
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
