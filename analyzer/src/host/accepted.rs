//! `*~ quiet` marks: findings that are accepted with a reason, and marks that match nothing.

use super::fingerprint::statement_at;
use super::prepared::Prepared;
use crate::elaborate::{MarkData, MarkUse, QuietMark};
use crate::finding::Finding;
use crate::rules::find_rule;
use crate::text::Span;

/// Takes accepted findings out of the list. Returns for each `quiet` mark which of its rules
/// matched.
pub(super) fn accept(prepared: &Prepared, findings: &mut Vec<Finding>) -> Vec<Vec<bool>> {
    let marks = quiet_marks(prepared);
    let mut used: Vec<Vec<bool>> = marks
        .iter()
        .map(|(_, quiet)| vec![false; quiet.rules.len()])
        .collect();
    if marks.is_empty() {
        return used;
    }
    findings.retain(|finding| {
        let mut accepted = false;
        for ((mark, quiet), used) in marks.iter().zip(&mut used) {
            for (rule, used) in quiet.rules.iter().zip(used) {
                let named = rule.name.eq_ignore_ascii_case(finding.rule.as_str());
                if named && applies(prepared, mark, quiet, finding) {
                    *used = true;
                    accepted = true;
                }
            }
        }
        !accepted
    });
    used
}

/// `unused-quiet` for rules that matched nothing.
pub(super) fn unused(prepared: &Prepared, used: &[Vec<bool>]) -> Vec<Finding> {
    let Some(rule) = find_rule("unused-quiet") else {
        return Vec::new();
    };
    let mut found = Vec::new();
    for ((_, quiet), used) in quiet_marks(prepared).iter().zip(used) {
        for (name, used) in quiet.rules.iter().zip(used) {
            if !used {
                let known = find_rule(&name.name.to_ascii_lowercase()).is_some();
                let message = if known {
                    format!("`{}` is accepted here but was not found", name.name)
                } else {
                    format!("there is no rule `{}`", name.name)
                };
                found.push(rule.finding(name.span, message));
            }
        }
    }
    found
}

fn quiet_marks(prepared: &Prepared) -> Vec<(&MarkUse, &QuietMark)> {
    prepared
        .elaborated
        .marks
        .iter()
        .filter_map(|mark| match &mark.data {
            MarkData::Quiet(quiet) => Some((mark, quiet)),
            _ => None,
        })
        .collect()
}

/// With `on=`: the finding speaks of that node or part. Otherwise: it stands on the next card.
fn applies(prepared: &Prepared, mark: &MarkUse, quiet: &QuietMark, finding: &Finding) -> bool {
    if let Some(on) = &quiet.on {
        let word = prepared.program.text(finding.span.file, finding.span.range);
        let node = finding.node.as_deref().unwrap_or("");
        return word.eq_ignore_ascii_case(on) || node.eq_ignore_ascii_case(on);
    }
    let next = next_statement(prepared, mark.span);
    let here = statement_at(&prepared.program, finding.span).map(|s| s.range);
    finding.span.file == mark.span.file && next.is_some() && next == here
}

fn next_statement(prepared: &Prepared, span: Span) -> Option<crate::text::TextRange> {
    use crate::syntax::StatementKind;
    let parse = prepared.program.file(span.file)?;
    let after = parse
        .statements
        .iter()
        .filter(|s| s.range.start > span.range.start);
    // Other `quiet` marks may stand between the mark and what it speaks of.
    after
        .filter(|s| match &s.kind {
            StatementKind::Mark(mark) => !parse
                .tree
                .slice(mark.word.range)
                .eq_ignore_ascii_case("quiet"),
            _ => true,
        })
        .map(|s| s.range)
        .next()
}
