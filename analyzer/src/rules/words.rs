//! Words of the text by the part they play: names that a value looks up, and words of lines that
//! could not be read. Looks nothing up itself.

use super::context::TextContext;
use crate::elaborate::{CardRef, Program};
use crate::syntax::{CardKind, Dot, ItemKind, Parse, StatementKind, Token, TokenKind, expr};
use crate::text::TextRange;
use std::collections::HashSet;

/// The names that a text (a value, an expression, or a piece of one) looks up, in lower case.
pub(super) fn names_in(text: &str) -> Vec<String> {
    let inner = unquoted(text);
    match expr::compile(inner) {
        Ok(compiled) => compiled
            .names()
            .iter()
            .map(|(name, _)| name.to_ascii_lowercase())
            .collect(),
        Err(_) => identifiers(inner),
    }
}

/// The text inside quotes or braces.
fn unquoted(text: &str) -> &str {
    if text.len() >= 2 && text.starts_with(['\'', '{', '"']) {
        text.get(1..text.len() - 1).unwrap_or("")
    } else {
        text
    }
}

/// Everything that could be a name in a text that is no whole expression.
fn identifiers(text: &str) -> Vec<String> {
    text.split(|c: char| !(c.is_alphanumeric() || matches!(c, '_' | '.' | '!' | '#')))
        .filter(|word| word.starts_with(|c: char| c.is_alphabetic() || c == '_'))
        .map(str::to_ascii_lowercase)
        .collect()
}

fn range_of(token: Token) -> TextRange {
    TextRange::new(token.start, token.end)
}

/// The names that a card's or mark's values look up, in lower case. Names of nodes, parts,
/// models and keys are left out.
pub(super) fn value_names(context: &TextContext<'_>, card: CardRef) -> Vec<String> {
    let Some(parse) = context.program.file(card.file) else {
        return Vec::new();
    };
    let Some(statement) = parse.statements.get(card.statement as usize) else {
        return Vec::new();
    };
    let skip = match &statement.kind {
        StatementKind::Card(card) => card_names(card),
        StatementKind::Mark(mark) => mark_names(parse, mark),
        _ => Vec::new(),
    };
    token_names(parse, statement.item, &skip)
}

/// The names in an item's words, those in `skip` left out.
fn token_names(parse: &Parse, item: u32, skip: &[TextRange]) -> Vec<String> {
    let Some(item) = parse.tree.items().get(item as usize) else {
        return Vec::new();
    };
    parse
        .tree
        .significant(item)
        .filter(|token| is_word(token.kind) && !skip.contains(&range_of(*token)))
        .flat_map(|token| names_in(parse.tree.slice(range_of(token))))
        .collect()
}

fn is_word(kind: TokenKind) -> bool {
    matches!(
        kind,
        TokenKind::Word | TokenKind::Quoted | TokenKind::Text | TokenKind::Unclosed
    )
}

/// The words of a card that are names and not values.
fn card_names(card: &crate::syntax::Card) -> Vec<TextRange> {
    let mut names = vec![card.name.range];
    names.extend(card.kind.nodes().iter().map(|word| word.range));
    names.extend(card.params.iter().map(|param| param.key.range));
    match &card.kind {
        CardKind::TwoTerminal { model, .. } => names.extend(model.map(|word| word.range)),
        CardKind::Coupling { inductors, .. } => {
            names.extend(inductors.iter().map(|word| word.range));
        }
        CardKind::CurrentControlled { sense, .. } => names.push(sense.range),
        CardKind::Instance { subcircuit, .. } => names.push(subcircuit.range),
        CardKind::Device { model, .. } => names.push(model.range),
        _ => {}
    }
    names
}

/// The words of a mark that are names and not values.
fn mark_names(parse: &Parse, mark: &crate::syntax::Mark) -> Vec<TextRange> {
    const NAMING: [&str; 10] = [
        "in", "out", "ports", "of", "on", "at", "why", "pins", "data", "common",
    ];
    let mut names = vec![mark.word.range];
    names.extend(mark.words.iter().map(|word| word.range));
    for param in &mark.params {
        names.push(param.key.range);
        let key = parse.tree.slice(param.key.range);
        if NAMING.iter().any(|name| key.eq_ignore_ascii_case(name)) {
            names.push(param.value.range);
        }
    }
    names
}

/// Names, in lower case, in lines whose scope is not known or does not matter: cards that could
/// not be read, library sections that are not asked for, model cards, and dot lines of simulators.
pub(super) fn loose_names(context: &TextContext<'_>) -> HashSet<String> {
    let mut placed: HashSet<CardRef> = HashSet::new();
    for scope in &context.program.scopes {
        placed.extend(scope.cards.iter().chain(&scope.marks).copied());
    }
    let mut names = unread_words(context.program);
    for (file, parse) in &context.program.files {
        for (index, statement) in parse.statements.iter().enumerate() {
            let card = CardRef {
                file: *file,
                statement: index as u32,
            };
            match &statement.kind {
                StatementKind::Card(_) | StatementKind::Mark(_) if !placed.contains(&card) => {
                    names.extend(token_names(parse, statement.item, &[]));
                }
                StatementKind::Dot(dot) => match dot.as_ref() {
                    Dot::Model {
                        name, kind, params, ..
                    } => {
                        let mut skip = vec![name.range, kind.range];
                        skip.extend(params.iter().map(|param| param.key.range));
                        names.extend(token_names(parse, statement.item, &skip));
                    }
                    Dot::Other | Dot::Temp(_) => {
                        names.extend(token_names(parse, statement.item, &[]));
                    }
                    _ => {}
                },
                _ => {}
            }
        }
    }
    names
}

/// The words, in lower case, of cards that could not be read.
pub(super) fn unread_words(program: &Program) -> HashSet<String> {
    let mut words = HashSet::new();
    for parse in program.files.values() {
        if parse.errors.is_empty() {
            continue;
        }
        let mut statements = parse.statements.iter().peekable();
        for (index, item) in parse.tree.items().iter().enumerate() {
            while statements.next_if(|s| (s.item as usize) < index).is_some() {}
            let read = statements.peek().is_some_and(|s| s.item as usize == index);
            if item.kind == ItemKind::Card && !read {
                words.extend(item_words(parse, index));
            }
        }
    }
    words
}

/// All words of one item, in lower case, with the pieces of expressions.
pub(super) fn item_words(parse: &Parse, item: usize) -> Vec<String> {
    words_beside(parse, item, &[])
}

/// The words of one item but those in `skip`, in lower case, with the pieces of expressions.
pub(super) fn words_beside(parse: &Parse, item: usize, skip: &[TextRange]) -> Vec<String> {
    let Some(item) = parse.tree.items().get(item) else {
        return Vec::new();
    };
    let mut words = Vec::new();
    for token in parse.tree.significant(item) {
        if is_word(token.kind) && !skip.contains(&range_of(token)) {
            let text = parse.tree.slice(range_of(token));
            words.push(text.to_ascii_lowercase());
            words.extend(identifiers(text));
        }
    }
    words
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_of_whole_and_broken_expressions() {
        assert_eq!(names_in("'2*Rload + w1/2'"), ["rload", "w1"]);
        assert_eq!(names_in("10k"), Vec::<String>::new());
        assert_eq!(names_in("max(a"), ["max", "a"]);
        assert_eq!(names_in("foo*"), ["foo"]);
        assert_eq!(names_in("{x}"), ["x"]);
    }
}
