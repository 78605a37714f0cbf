//! `single-connection`: a node that only one terminal touches.

use crate::circuit::is_ground;
use crate::elaborate::{Folded, Program, Scope};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::StatementKind;
use crate::text::Span;
use std::collections::{HashMap, HashSet};

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("single-connection"),
    family: Family::Wiring,
    severity: Severity::Warning,
    summary: "a node that only one terminal touches",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Reports a node word that stands on one terminal only in its scope.

## Why it matters
It is most often a misspelt name: two nodes where one was meant.

## Method and source
Terminals are counted per scope; sensing terminals count.

## Limits
Pins, global nodes, ground and nodes that a mark names are not reported.

## Example
```
R1 in gaet 10
C1 gate 0 1p
```

## Fix
Correct the name, or name the node in a mark when it is a port.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let program = context.program;
    for scope in &program.scopes {
        let named = words_of_marks(program, scope);
        let pins: Vec<Folded> = scope
            .pins
            .iter()
            .map(|(name, _)| Folded::new(name))
            .collect();
        let mut count: HashMap<Folded, (usize, Span)> = HashMap::new();
        let mut order: Vec<Folded> = Vec::new();
        for card in &scope.cards {
            let Some(parse) = program.file(card.file) else {
                continue;
            };
            let statement = parse.statements.get(card.statement as usize);
            let Some(StatementKind::Card(element)) = statement.map(|s| &s.kind) else {
                continue;
            };
            for word in element.kind.nodes() {
                let name = Folded::new(parse.tree.slice(word.range));
                let span = Span::new(card.file, word.range);
                let entry = count.entry(name.clone()).or_insert_with(|| {
                    order.push(name);
                    (0, span)
                });
                entry.0 += 1;
            }
        }
        for name in order {
            let Some((1, span)) = count.get(&name) else {
                continue;
            };
            let known = is_ground(name.as_str())
                || pins.contains(&name)
                || program.globals.contains_key(&name)
                || named.contains(&name);
            if !known {
                let written = context.text(*span).to_owned();
                let message = format!("node `{written}` is touched by this terminal only");
                let mut finding = RULE.finding(*span, message);
                finding.node = Some(written);
                out.push(finding);
            }
        }
    }
}

/// All words and values of a scope's marks, taken apart at commas and colons.
fn words_of_marks(program: &Program, scope: &Scope) -> HashSet<Folded> {
    let mut words = HashSet::new();
    for card in &scope.marks {
        let Some(parse) = program.file(card.file) else {
            continue;
        };
        let statement = parse.statements.get(card.statement as usize);
        let Some(StatementKind::Mark(mark)) = statement.map(|s| &s.kind) else {
            continue;
        };
        let ranges = mark.words.iter().map(|word| word.range);
        let values = mark
            .params
            .iter()
            .flat_map(|p| [p.key.range, p.value.range]);
        for range in ranges.chain(values) {
            let pieces = parse.tree.slice(range).split([',', ':']);
            words.extend(pieces.map(Folded::new));
        }
    }
    words
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::check;

    #[test]
    fn triggers() {
        check(
            r#"title
R1 in gaet 10
      ^^^^ single-connection
R2 in 0 10
C1 gate 0 1p
   ^^^^ single-connection
   ^^^^ no-dc-path
"#,
        );
        check(
            r#"title
R1 a 0 1
X1 a s
.subckt s p
R1 p q 1
     ^ single-connection
.ends
"#,
        );
    }

    #[test]
    fn near_misses() {
        check(
            r#"title
*~ block amp in=a out=b:75
R1 a b 1
"#,
        );
        check(
            r#"title
R1 a 0 1
X1 a 0 s
.global q
.subckt s p u
R1 p q 1
.ends
"#,
        );
    }
}
