//! One result from the results of all netlists of a run: what several of them tell of a file
//! that they share is told once.

use crate::report::LintResult;
use squeg_analyzer::finding::{Finding, RuleId};
use squeg_analyzer::host::{BlockReport, Screening};
use squeg_analyzer::text::{FileId, Span};
use std::collections::HashMap;

/// What was found in one netlist.
#[derive(Clone, PartialEq, Debug, Default)]
pub struct NetlistResult {
    /// The files that take part in it.
    pub files: Vec<FileId>,
    /// What was found.
    pub screening: Screening,
}

/// Merges and sorts. `names` are the shown names by file number; they decide the order.
pub fn merge(results: Vec<NetlistResult>, names: &[String]) -> LintResult {
    let unused = UnusedEverywhere::new(&results);
    let mut merged = LintResult::default();
    for result in results {
        let findings = result.screening.findings.into_iter();
        merged.findings.extend(findings.filter(|f| unused.keeps(f)));
        merged.blocks.extend(result.screening.blocks);
    }
    sort(&mut merged, names);
    merged.findings.dedup_by(|a, b| same_finding(a, b));
    merged.blocks.dedup_by(|a, b| same_block(a, b));
    merged
}

/// Sorts by what is shown: names, not numbers.
fn sort(result: &mut LintResult, names: &[String]) {
    let name = |file: FileId| names.get(file.0 as usize).map_or("", String::as_str);
    result.findings.sort_by(|a, b| {
        let key = |f: &Finding| (f.span.range.start, f.rule, f.span.range.end, f.severity);
        name(a.span.file)
            .cmp(name(b.span.file))
            .then_with(|| a.span.file.cmp(&b.span.file))
            .then_with(|| key(a).cmp(&key(b)))
            .then_with(|| a.block.cmp(&b.block))
            .then_with(|| a.message.cmp(&b.message))
    });
    result.blocks.sort_by(|a, b| {
        name(a.span.file)
            .cmp(name(b.span.file))
            .then_with(|| a.span.cmp(&b.span))
            .then_with(|| a.name.cmp(&b.name))
            .then_with(|| a.verdict.cmp(&b.verdict))
            .then_with(|| a.why.cmp(&b.why))
    });
}

fn same_finding(a: &Finding, b: &Finding) -> bool {
    a.span == b.span
        && a.rule == b.rule
        && a.severity == b.severity
        && a.block == b.block
        && a.message == b.message
}

/// Equal but for the time it took. A block that fares differently in two netlists stays twice.
fn same_block(a: &BlockReport, b: &BlockReport) -> bool {
    let timeless = |block: &BlockReport| BlockReport {
        elapsed_ms: 0.0,
        ..block.clone()
    };
    a.span == b.span && timeless(a) == timeless(b)
}

/// A definition in a shared file is unused only if no netlist that includes the file uses it.
#[derive(Default)]
struct UnusedEverywhere {
    /// Netlists in which a file takes part.
    netlists: HashMap<FileId, usize>,
    /// Netlists that report a thing as unused.
    reports: HashMap<(Span, RuleId, String), usize>,
}

impl UnusedEverywhere {
    fn new(results: &[NetlistResult]) -> Self {
        let mut counts = Self::default();
        for result in results {
            for file in &result.files {
                *counts.netlists.entry(*file).or_default() += 1;
            }
            let findings = result.screening.findings.iter();
            for finding in findings.filter(|f| is_on_unused(f)) {
                *counts.reports.entry(key(finding)).or_default() += 1;
            }
        }
        counts
    }

    fn keeps(&self, finding: &Finding) -> bool {
        !is_on_unused(finding)
            || self.reports.get(&key(finding)) >= self.netlists.get(&finding.span.file)
    }
}

fn key(finding: &Finding) -> (Span, RuleId, String) {
    (finding.span, finding.rule, finding.message.clone())
}

fn is_on_unused(finding: &Finding) -> bool {
    finding.rule.as_str().starts_with("unused-")
}

#[cfg(test)]
mod tests {
    use super::*;
    use squeg_analyzer::finding::Severity;
    use squeg_analyzer::text::TextRange;

    fn finding(file: u32, at: u32, rule: &'static str) -> Finding {
        let span = Span::new(FileId(file), TextRange::new(at, at + 2));
        Finding::new(RuleId(rule), Severity::Info, span, rule.to_owned())
    }

    fn netlist(files: &[u32], findings: &[Finding]) -> NetlistResult {
        NetlistResult {
            files: files.iter().map(|file| FileId(*file)).collect(),
            screening: Screening {
                findings: findings.to_vec(),
                blocks: Vec::new(),
            },
        }
    }

    fn told(results: Vec<NetlistResult>) -> Vec<(u32, u32, &'static str)> {
        let names = ["b.cir", "a.cir", "c.lib"].map(str::to_owned);
        let merged = merge(results, &names);
        let told = |f: &Finding| (f.span.file.0, f.span.range.start, f.rule.as_str());
        merged.findings.iter().map(told).collect()
    }

    #[test]
    fn sorted_by_shown_name_and_told_once() {
        let shared = finding(2, 4, "pin-count");
        let results = vec![
            netlist(
                &[0, 2],
                &[finding(0, 9, "b"), finding(0, 9, "a"), shared.clone()],
            ),
            netlist(&[1, 2], &[finding(1, 1, "z"), shared]),
        ];
        let expected = [(1, 1, "z"), (0, 9, "a"), (0, 9, "b"), (2, 4, "pin-count")];
        assert_eq!(told(results), expected);
    }

    #[test]
    fn unused_only_where_nobody_uses_it() {
        let shared = finding(2, 4, "unused-subcircuit");
        let own = finding(0, 1, "unused-model");
        let used_by_one = vec![
            netlist(&[0, 2], &[own.clone(), shared.clone()]),
            netlist(&[1, 2], &[]),
        ];
        assert_eq!(told(used_by_one), [(0, 1, "unused-model")]);
        let used_by_none = vec![
            netlist(&[0, 2], std::slice::from_ref(&shared)),
            netlist(&[1, 2], &[shared]),
        ];
        assert_eq!(told(used_by_none), [(2, 4, "unused-subcircuit")]);
    }
}
