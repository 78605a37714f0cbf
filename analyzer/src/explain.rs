//! What each rule has to say about itself, as text for people. Holds no text of its own beyond
//! the headings around it.

use crate::finding::RuleId;
pub use crate::rules::{Rule, find_rule as find, rules as all};

/// The headings of an explanation, in order.
pub const HEADINGS: [&str; 6] = [
    "What it does",
    "Why it matters",
    "Method and source",
    "Limits",
    "Example",
    "Fix",
];

/// A rule's page in Markdown: title, one-line summary, severity and family, explanation.
pub fn markdown(rule: &Rule) -> String {
    let RuleId(id) = rule.id;
    format!(
        "# `{id}`\n\n{}\n\nSeverity: {}. Family: {}.\n\n{}\n",
        rule.summary,
        rule.severity.as_str(),
        rule.family.as_str(),
        rule.explanation.trim_end()
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::HashSet;

    fn headings(text: &str) -> Vec<&str> {
        text.lines().filter_map(|l| l.strip_prefix("## ")).collect()
    }

    #[test]
    fn every_explanation_has_the_headings_and_something_below_each() {
        for rule in all() {
            let id = rule.id.as_str();
            assert_eq!(headings(rule.explanation), HEADINGS, "{id}");
            for section in rule.explanation.split("## ").skip(1) {
                let (title, body) = section.split_once('\n').unwrap_or((section, ""));
                assert!(!body.trim().is_empty(), "{id}: nothing under {title}");
            }
        }
    }

    #[test]
    fn names_are_kebab_case_and_unique() {
        let mut seen = HashSet::new();
        for rule in all() {
            let id = rule.id.as_str();
            let letters = |part: &str| {
                !part.is_empty() && part.chars().all(|c| matches!(c, 'a'..='z' | '0'..='9'))
            };
            assert!(id.split('-').all(letters), "{id} is not kebab-case");
            assert!(seen.insert(id), "{id} stands twice");
            assert!(find(id).is_some_and(|found| std::ptr::eq(found, rule)));
        }
    }

    #[test]
    fn rules_are_in_order_and_each_does_something() {
        let places: Vec<_> = all().map(|rule| (rule.family, rule.id.as_str())).collect();
        assert!(places.is_sorted(), "{places:?}");
        for rule in all() {
            let works = rule.text.is_some() || rule.screen.is_some();
            // The host makes its findings, where it takes accepted ones out.
            let by_host = rule.id.as_str() == "unused-quiet";
            assert!(works || by_host, "{} looks at nothing", rule.id.as_str());
        }
    }

    #[test]
    fn summaries_are_one_line() {
        for rule in all() {
            let id = rule.id.as_str();
            assert!(!rule.summary.trim().is_empty(), "{id}");
            assert!(!rule.summary.contains('\n'), "{id}");
            assert!(!rule.summary.ends_with('.'), "{id}");
        }
    }

    #[test]
    fn a_page_has_its_parts_in_order() {
        for rule in all() {
            let page = markdown(rule);
            let id = rule.id.as_str();
            let severity = format!("\nSeverity: {}. Family: ", rule.severity.as_str());
            let parts = [format!("# `{id}`\n"), rule.summary.to_owned(), severity];
            let mut from = 0;
            for part in parts.iter().map(String::as_str).chain(["## What it does"]) {
                let at = page[from..].find(part);
                assert!(at.is_some(), "{id}: no {part}");
                from += at.unwrap_or(0) + part.len();
            }
            assert_eq!(headings(&page), HEADINGS, "{id}");
            assert!(page.ends_with('\n') && !page.ends_with("\n\n"), "{id}");
        }
    }
}
