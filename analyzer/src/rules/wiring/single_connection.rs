//! `single-connection`: a node that only one terminal touches.

use super::current_source_cut;
use crate::circuit::is_ground;
use crate::elaborate::{CardRef, Folded, Scope};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::spans::SpanMap;
use crate::rules::words::{unread_words, words_beside};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{Card, CardKind, Mark};
use crate::text::{Span, TextRange};
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
Reports a node name that stands on one terminal of one card of its scope and nowhere else.

## Why it matters
No current can flow into a terminal that leads nowhere. Mostly the name is misspelt, and the part it was to
be connected to hangs in the air as well.

## Method and source
Terminals are counted by name in each scope, those that sense the voltage of an E or G source included.
Common practice.

## Limits
Pins of the subcircuit, global nodes, ground, and nodes that a mark of the scope names are not reported:
a port, rail or tie connects them. A name on a card that cannot be read counts as a connection. A
node fed by nothing but a current source is `current-source-cut`.

## Example
```
R1 gate out 10
R2 oot 0 1k
```

## Fix
Correct the name. If the node is meant to be open, say so: `*~ tie NODE to=open`.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let cuts = current_source_cut::lone_nodes(context);
    for dangling in dangling(context) {
        if cuts.around(dangling.node).is_some() {
            continue;
        }
        let (name, part) = (context.text(dangling.node), context.text(dangling.part));
        let message = format!("node `{name}` is connected to one terminal only, of `{part}`");
        let mut finding = RULE.finding(dangling.node, message);
        finding.node = Some(name.to_owned());
        out.push(finding);
    }
}

/// Places of nodes that one terminal touches.
pub(super) fn places(context: &TextContext<'_>) -> SpanMap<()> {
    let mut places = SpanMap::new();
    for dangling in dangling(context) {
        places.insert(dangling.node, ());
    }
    places
}

/// A node with one terminal: its place, and that of the part's name.
struct Dangling {
    node: Span,
    part: Span,
}

/// The terminals counted so far at one node.
struct Count {
    terminals: usize,
    first: Dangling,
}

fn dangling(context: &TextContext<'_>) -> Vec<Dangling> {
    let unread = unread_words(context.program);
    let mut found = Vec::new();
    for scope in &context.program.scopes {
        let mut order = Vec::new();
        let mut counts: HashMap<String, Count> = HashMap::new();
        for card in &scope.cards {
            count(context, *card, &mut counts, &mut order);
        }
        let named = named(context, scope);
        for name in order {
            let taken = named.contains(&name) || unread.contains(&name);
            match counts.remove(&name) {
                Some(count) if count.terminals == 1 && !taken => found.push(count.first),
                _ => {}
            }
        }
    }
    found
}

/// Counts the terminals of one card; new names go to `order`.
fn count(
    context: &TextContext<'_>,
    card_ref: CardRef,
    counts: &mut HashMap<String, Count>,
    order: &mut Vec<String>,
) {
    let Some(card) = context.card(card_ref) else {
        return;
    };
    for word in card.kind.nodes() {
        let name = context.program.text(card_ref.file, word.range);
        let lower = name.to_ascii_lowercase();
        match counts.get_mut(&lower) {
            Some(count) => count.terminals += 1,
            None => {
                let first = Dangling {
                    node: Span::new(card_ref.file, word.range),
                    part: Span::new(card_ref.file, card.name.range),
                };
                order.push(lower.clone());
                counts.insert(
                    lower,
                    Count {
                        terminals: 1,
                        first,
                    },
                );
            }
        }
    }
}

/// Names, in lower case, that are connected without a card: pins, globals, ground, what a mark
/// names, and what stands in the expressions of sources that are not computed.
fn named(context: &TextContext<'_>, scope: &Scope) -> HashSet<String> {
    let program = context.program;
    let mut names: HashSet<String> = HashSet::new();
    names.extend(scope.pins.iter().map(|(pin, _)| pin.to_ascii_lowercase()));
    for mark_ref in &scope.marks {
        if let Some(mark) = context.mark(*mark_ref) {
            let text = |range| program.text(mark_ref.file, range);
            mark_names(mark, text, &mut names);
        }
    }
    for card_ref in &scope.cards {
        let Some(card) = context.card(*card_ref) else {
            continue;
        };
        for word in card.kind.nodes() {
            let name = program.text(card_ref.file, word.range);
            let global = program.globals.contains_key(&Folded::new(name));
            if global || is_ground(name) {
                names.insert(name.to_ascii_lowercase());
            }
        }
        if matches!(card.kind, CardKind::NotComputed { .. }) {
            names.extend(hidden_words(context, *card_ref, card));
        }
    }
    names
}

/// `v(n1)` in the expression of a nonlinear source: every word beside the part's own nodes.
fn hidden_words(context: &TextContext<'_>, card_ref: CardRef, card: &Card) -> Vec<String> {
    let found = context.program.file(card_ref.file).and_then(|parse| {
        let statement = parse.statements.get(card_ref.statement as usize)?;
        Some((parse, statement.item as usize))
    });
    let Some((parse, item)) = found else {
        return Vec::new();
    };
    let mut own = vec![card.name.range];
    own.extend(card.kind.nodes().iter().map(|word| word.range));
    own.extend(card.params.iter().map(|param| param.key.range));
    words_beside(parse, item, &own)
}

/// All names in a mark, ports without their ohms.
fn mark_names<'t>(mark: &Mark, text: impl Fn(TextRange) -> &'t str, names: &mut HashSet<String>) {
    names.extend(
        mark.words
            .iter()
            .map(|w| text(w.range).to_ascii_lowercase()),
    );
    for param in &mark.params {
        names.insert(text(param.key.range).to_ascii_lowercase());
        for piece in text(param.value.range).split(',') {
            let name = piece.split(':').next().unwrap_or(piece);
            names.insert(name.trim().to_ascii_lowercase());
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::rules::testing::{check, findings};

    #[test]
    fn triggers() {
        check(
            "\
title
V1 gate 0 1
R1 gate out 10
        ^^^ single-connection
R2 oot 0 1k
   ^^^ single-connection
",
        );
        check(
            "\
title
R1 a 0 10
G1 a 0 sense 0 10m
       ^^^^^ single-connection
.subckt cell p
R1 p 0 1k
R2 p inner 1k
     ^^^^^ single-connection
.ends
",
        );
    }

    #[test]
    fn the_part_is_named() {
        let text = "title\nV1 a 0 1\nRload a B 1k\n";
        let found = findings(text, "single-connection");
        assert_eq!(
            found[0].message,
            "node `B` is connected to one terminal only, of `Rload`"
        );
        assert_eq!(found[0].node.as_deref(), Some("B"));
    }

    #[test]
    fn near_misses() {
        check("title\nR1 a 0 1k\nG1 0 A a 0 10m\n");
        check("title\n*~ block amp in=A:75 ports=b,c:10\nR1 a b 1k\nR2 c 0 1k\n");
        check(
            "title\n*~ block amp in=a\n*~ tie b to=open\n*~ rail c volts=5\nR1 a b 1k\nR2 c a 1k\n",
        );
        check(
            "title\n.global vdd\nR1 a vdd 1k\nR2 a GND 1k\nX1 a cell\n.subckt cell in\nR1 in vdd 1k\n.ends\n",
        );
        check("title\nR1 a 0 1k\nR2 a b 1k\nE1 c 0 vol='2*v(b)'\nR3 c 0 1k\n");
    }

    #[test]
    fn a_source_that_is_not_computed_has_nodes_too() {
        check(
            "\
title
R1 a 0 1k
E1 open a vol='2*v(a)'
   ^^^^ single-connection
",
        );
    }

    #[test]
    fn a_card_that_cannot_be_read_connects() {
        check(
            "\
title
V1 a 0 1
R1 a b 10
R2 b 0
^^ unreadable-card
",
        );
    }
}
