//! `squeg rules`: the table of all rules.

use super::args::{RulesArgs, RulesFormat};
use super::{Exit, deliver, deliver_json};
use serde::Serialize;
use squeg_analyzer::rules::{Rule, rules};
use std::fmt::Write;

#[derive(Serialize)]
struct Document {
    schema: &'static str,
    version: &'static str,
    rules: Vec<Entry>,
}

#[derive(Serialize)]
struct Entry {
    id: &'static str,
    severity: &'static str,
    family: &'static str,
    summary: &'static str,
}

impl From<&'static Rule> for Entry {
    fn from(rule: &'static Rule) -> Self {
        Self {
            id: rule.id.as_str(),
            severity: rule.severity.as_str(),
            family: rule.family.as_str(),
            summary: rule.summary,
        }
    }
}

/// Prints the table.
pub fn run(args: &RulesArgs) -> Exit {
    let rules: Vec<Entry> = rules().map(Entry::from).collect();
    match args.format {
        RulesFormat::Text => deliver(table(&rules).as_bytes(), Exit::Clean),
        RulesFormat::Json => {
            let document = Document {
                schema: "squeg-rules-1",
                version: env!("CARGO_PKG_VERSION"),
                rules,
            };
            deliver_json(&document, Exit::Clean)
        }
    }
}

fn table(rules: &[Entry]) -> String {
    let width = rules.iter().map(|rule| rule.id.len()).max().unwrap_or(0);
    let mut out = String::new();
    for rule in rules {
        let Entry {
            id,
            severity,
            family,
            summary,
        } = rule;
        let _ = writeln!(out, "{id:width$}  {severity:7}  {family:9}  {summary}");
    }
    out
}
