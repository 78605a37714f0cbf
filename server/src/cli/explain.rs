//! `squeg explain RULE`: the rule's own text as Markdown.

use super::args::ExplainArgs;
use super::{Exit, deliver, fail};
use squeg_analyzer::rules::{Rule, find_rule, nearest_rule, rules};

/// Prints the explanation of a rule.
pub fn run(args: &ExplainArgs) -> Exit {
    let wanted = args.rule.to_ascii_lowercase();
    match find_rule(&wanted) {
        Some(rule) => deliver(markdown(rule).as_bytes(), Exit::Clean),
        None => fail(&unknown(&args.rule, near(&wanted))),
    }
}

/// The rule that was probably meant: misspelt, or only begun.
fn near(name: &str) -> Option<&'static Rule> {
    let begun = |rule: &&'static Rule| !name.is_empty() && rule.id.as_str().starts_with(name);
    nearest_rule(name).or_else(|| rules().find(begun))
}

fn unknown(name: &str, nearest: Option<&Rule>) -> String {
    match nearest {
        Some(rule) => format!(
            "there is no rule `{name}`; the nearest name is `{}`",
            rule.id.as_str()
        ),
        None => format!("there is no rule `{name}`; `squeg rules` lists all"),
    }
}

/// Title, table of properties and explanation.
fn markdown(rule: &Rule) -> String {
    format!(
        "# {}\n\n{}\n\n- severity: {}\n- family: {}\n\n{}\n",
        rule.id.as_str(),
        rule.summary,
        rule.severity.as_str(),
        rule.family.as_str(),
        rule.explanation.trim_end()
    )
}
