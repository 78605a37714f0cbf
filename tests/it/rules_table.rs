//! Every rule has a whole explanation, and the README's table is the registry's.

use squeg_analyzer::rules::rules;
use std::path::Path;

const HEADINGS: [&str; 6] = [
    "## What it does",
    "## Why it matters",
    "## Method and source",
    "## Limits",
    "## Example",
    "## Fix",
];

#[test]
fn every_rule_explains_itself() {
    let mut before = (squeg_analyzer::rules::Family::Syntax, "");
    for rule in rules() {
        let id = rule.id.as_str();
        let kebab = id
            .chars()
            .all(|c| c.is_ascii_lowercase() || c == '-' || c.is_ascii_digit());
        assert!(kebab, "{id} is kebab-case");
        let mut at = 0;
        for heading in HEADINGS {
            let found = rule.explanation[at..].find(heading);
            at += found.unwrap_or_else(|| panic!("{id} lacks `{heading}` in its place"));
        }
        assert!(!rule.summary.contains('\n'), "{id}: one line");
        assert!(before < (rule.family, id), "{id} stands in order");
        before = (rule.family, id);
    }
}

/// The table as the README has it.
fn table() -> String {
    let mut text = String::from("| rule | severity | what it reports |\n| --- | --- | --- |\n");
    for rule in rules() {
        let severity = rule.severity.as_str();
        text += &format!(
            "| `{}` | {severity} | {} |\n",
            rule.id.as_str(),
            rule.summary
        );
    }
    text
}

#[test]
fn the_readme_lists_the_rules() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("../README.md");
    let readme = std::fs::read_to_string(&path).expect("the README can be read");
    let (begin, end) = ("<!-- rules: begin -->\n", "<!-- rules: end -->");
    let from = readme.find(begin).expect("the table begins") + begin.len();
    let to = readme.find(end).expect("the table ends");
    if std::env::var_os("UPDATE_EXPECT").is_some() {
        let new = format!("{}{}{}", &readme[..from], table(), &readme[to..]);
        std::fs::write(&path, new).expect("the README can be written");
        return;
    }
    assert_eq!(
        &readme[from..to],
        table(),
        "UPDATE_EXPECT=1 cargo test rewrites it"
    );
}
