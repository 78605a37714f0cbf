//! `unused-model`: a model that nothing uses.

use super::usage::root_to_tell;
use crate::elaborate::{CardRef, Folded, Model, ScopeId};
use crate::finding::{Finding, RuleId, Severity};
use crate::rules::words::{item_words, loose_names};
use crate::rules::{Family, Rule, TextContext};
use crate::syntax::{CardKind, Word};
use crate::text::Span;
use std::collections::HashSet;

/// The rule.
pub static RULE: Rule = Rule {
    id: RuleId("unused-model"),
    family: Family::Names,
    severity: Severity::Info,
    summary: "a model that no card uses",
    explanation: EXPLANATION,
    text: Some(check),
    screen: None,
};

const EXPLANATION: &str = "\
## What it does
Points out a `.model` card whose name no card uses.

## Why it matters
Often the card that was meant to use it bears another name and takes its values from elsewhere.

## Method and source
Every card that names a model is looked up as for the flat circuit: in its own scope and outward (common
practice).

## Limits
Only models written in the netlist itself are told, not those of files it includes, and only when the
netlist has cards outside of subcircuits. Nothing is told while an included file is missing or a part of the
netlist is encrypted. A model whose name stands anywhere on a card that is not computed counts as used.

## Example
```
Q1 c b 0 npn_fast
.model npn_fast npn
.model npn_slow npn
```

## Fix
Delete it, or let the card name it.
";

fn check(context: &TextContext<'_>, out: &mut Vec<Finding>) {
    let Some(root) = root_to_tell(context) else {
        return;
    };
    let program = context.program;
    let mut models: Vec<(ScopeId, &Model)> = Vec::new();
    for (index, scope) in program.scopes.iter().enumerate() {
        let id = ScopeId(index as u32);
        let own = scope.models.values().filter(|model| model.file == root);
        models.extend(own.map(|model| (id, model)));
    }
    if models.is_empty() {
        return;
    }
    let used = used_models(context);
    let loose = loose_names(context);
    for (_, model) in models {
        let name = program.text(model.file, model.name.range);
        let span = Span::new(model.file, model.name.range);
        if !used.contains(&span) && !loose.contains(&name.to_ascii_lowercase()) {
            out.push(RULE.finding(span, format!("model `{name}` is never used")));
        }
    }
}

/// Places of the models that cards name.
fn used_models(context: &TextContext<'_>) -> HashSet<Span> {
    let mut used = HashSet::new();
    for (index, scope) in context.program.scopes.iter().enumerate() {
        let from = ScopeId(index as u32);
        for card_ref in &scope.cards {
            for name in model_names(context, *card_ref) {
                let found = context.program.find_model(from, &name);
                used.extend(found.map(|model| Span::new(model.file, model.name.range)));
            }
        }
    }
    used
}

/// The words of a card that name, or may name, a model.
fn model_names(context: &TextContext<'_>, card_ref: CardRef) -> Vec<Folded> {
    let text = |word: Word| Folded::new(context.program.text(card_ref.file, word.range));
    let Some(card) = context.card(card_ref) else {
        return Vec::new();
    };
    match &card.kind {
        CardKind::Device { model, .. } => vec![text(*model)],
        CardKind::TwoTerminal { model, value, .. } => {
            let value = value.map(|value| Word { range: value.range });
            model.iter().copied().chain(value).map(text).collect()
        }
        CardKind::NotComputed { .. } => {
            let item = context.program.file(card_ref.file).and_then(|parse| {
                let statement = parse.statements.get(card_ref.statement as usize)?;
                Some(item_words(parse, statement.item as usize))
            });
            let words = item.unwrap_or_default();
            words.iter().map(|word| Folded::new(word)).collect()
        }
        _ => Vec::new(),
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
Q1 c b 0 npn_fast
R1 c b 1k
.model npn_fast npn
.model npn_slow npn bf=50
       ^^^^^^^^ unused-model
",
        );
        check(
            "\
title
D1 a 0 dx
R1 a 0 1k
.model dx d
.subckt cell a
.model dx d
       ^^ unused-model
R1 a 0 1k
.ends
",
        );
    }

    #[test]
    fn near_misses() {
        for text in [
            "title\nD1 a 0 DX\nR1 a 0 1k\n.model dx d\n",
            "title\nS1 a 0 b 0 sw1\nR1 a b 1k\n.model sw1 sw ron=1\n",
            "title\nX1 a cell\nR1 a 0 1k\n.subckt cell a\nD1 a 0 dx\n.ends\n.model dx d\n",
            "title\nD1 a\nR1 a 0 1k\n.model dx d\n.ac dec 10 1 1g dx\n",
            "title\n.model dx d\n.subckt cell a\nR1 a 0 1\n.ends\n",
            "title\n.include gone.inc\nR1 a 0 1k\n.model dx d\n",
        ] {
            let found = findings(text, "unused-model");
            assert!(found.is_empty(), "{text}: {found:?}");
        }
    }
}
