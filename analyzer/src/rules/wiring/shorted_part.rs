//! `shorted-part`: a part with both ends on one node.

use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, StatementKind};
use crate::text::Span;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("shorted-part"),
    family: Family::Wiring,
    severity: Severity::Warning,
    summary: "a part with both ends on one node",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports an R, L, C or source card whose two terminals are on one node.

## Why it matters
The part does nothing; a node name is most often wrong.

## Method and source
The words of the card.

## Limits
Ground has several names; they count as one. An ideal voltage source with both ends on one node is
`source-loop`, an error.

## Example
```
R1 out out 50
```

## Fix
Correct one of the nodes, or remove the part.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    for (file, parse) in &context.program.files {
        for statement in &parse.statements {
            let StatementKind::Card(card) = &statement.kind else {
                continue;
            };
            let two = match &card.kind {
                CardKind::TwoTerminal { nodes, .. }
                | CardKind::Source { nodes, .. }
                | CardKind::CurrentControlled { nodes, .. } => [nodes[0], nodes[1]],
                CardKind::VoltageControlled { nodes, .. } => [nodes[0], nodes[1]],
                _ => continue,
            };
            if is_voltage_branch(parse.tree.slice(card.name.range)) {
                continue;
            }
            let [a, b] = two.map(|word| parse.tree.slice(word.range));
            let ground = crate::circuit::is_ground(a) && crate::circuit::is_ground(b);
            if a.eq_ignore_ascii_case(b) || ground {
                let name = parse.tree.slice(card.name.range);
                let message = format!("both ends of `{name}` are on node `{a}`");
                out.push(RULE.finding(Span::new(*file, card.name.range), message));
            }
        }
    }
}

/// Whether the card fixes a voltage: with both ends on one node it is a loop of its own, which
/// `source-loop` reports.
fn is_voltage_branch(name: &str) -> bool {
    name.starts_with(['V', 'v', 'E', 'e', 'H', 'h'])
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 out OUT 50
^^ shorted-part
R2 out 0 50
"#,
        );
        check(
            r#"title
C1 0 gnd 50p
^^ shorted-part
R2 out 0 50
R3 out 0 50
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
R1 out in 50
R2 out in 50
R3 in 0 1
"#,
        );
        check(
            r#"title
R1 out 0 50
R2 out 0 50
"#,
        );
    }
}
