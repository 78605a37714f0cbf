//! The parser: physical lines to items, items to statements. Recovery point is the end
//! of the card: a fault never reaches past it.

mod card;
mod dot;
mod fields;
mod lines;

use super::ast::{Dot, Mark, Statement, StatementKind, Word};
use super::error::{SyntaxError, SyntaxErrorKind};
use super::tree::{Item, ItemKind, Tree};
use crate::text::TextRange;
use fields::{Field, read_fields};
use std::sync::Arc;

/// Whether a file's first line is a title.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum FileRole {
    /// A netlist of its own: the first line is the title unless it starts with `*` or `.`.
    Top,
    /// Included by another file, or a library: no title line.
    Included,
}

/// The result of parsing one file.
#[derive(Clone, Debug)]
pub struct Parse {
    /// The lossless tree.
    pub tree: Tree,
    /// All statements in order of the text.
    pub statements: Vec<Statement>,
    /// All faults in order of the text.
    pub errors: Vec<SyntaxError>,
    /// Faults of marks; the cards are not touched by them.
    pub mark_errors: Vec<SyntaxError>,
    /// The title line read as a card, when it looks like one.
    pub title_card: Option<TextRange>,
}

/// Parses a file. Always returns a tree; what could not be read is in `errors`.
pub fn parse(text: Arc<str>, role: FileRole) -> Parse {
    let (tree, mut errors) = lines::read_lines(text, role);
    let mut mark_errors = Vec::new();
    let mut statements = Vec::with_capacity(tree.items().len());
    for (index, item) in tree.items().iter().enumerate() {
        let place = if item.kind == ItemKind::Mark {
            &mut mark_errors
        } else {
            &mut errors
        };
        let kind = match read_item(&tree, item, place) {
            Some(kind) => kind,
            None => continue,
        };
        statements.push(Statement {
            item: index as u32,
            range: tree.item_range(item),
            kind,
        });
    }
    errors.extend(pairing_errors(&tree, &mut statements));
    let title_card = card_in_title(&tree, &statements);
    errors.sort_by_key(|error| (error.range.start, error.range.end));
    Parse {
        tree,
        statements,
        errors,
        mark_errors,
        title_card,
    }
}

fn read_item(tree: &Tree, item: &Item, errors: &mut Vec<SyntaxError>) -> Option<StatementKind> {
    match item.kind {
        ItemKind::Card => {
            let before = errors.len();
            let fields = read_fields(tree, item, errors);
            let card = card::read_card(tree, &fields, errors)?;
            // A card with a fault is left out whole: half a card would change the circuit.
            let faults = errors.get(before..).unwrap_or_default();
            let whole = faults
                .iter()
                .all(|error| matches!(error.kind, SyntaxErrorKind::UnexpectedWord(_)));
            whole.then(|| StatementKind::Card(Box::new(card)))
        }
        ItemKind::Dot => {
            let fields = read_fields(tree, item, errors);
            dot::read_dot(tree, &fields, errors).map(|dot| StatementKind::Dot(Box::new(dot)))
        }
        ItemKind::Mark => {
            let fields = read_fields(tree, item, errors);
            Some(StatementKind::Mark(Box::new(read_mark(
                tree, item, &fields,
            ))))
        }
        ItemKind::Title => Some(StatementKind::Title),
        ItemKind::Comment | ItemKind::Blank | ItemKind::Opaque => None,
    }
}

fn read_mark(tree: &Tree, item: &Item, fields: &[Field]) -> Mark {
    let mut words = Vec::new();
    let mut params = Vec::new();
    for field in fields {
        match field {
            Field::Word(word) => words.push(*word),
            Field::Quoted(range) => words.push(Word { range: *range }),
            Field::Param(param) => params.push(*param),
            Field::Call { .. } | Field::Sign(_) => {}
        }
    }
    let word = if words.is_empty() {
        Word {
            range: TextRange::empty(tree.item_range(item).start),
        }
    } else {
        words.remove(0)
    };
    Mark {
        word,
        words,
        params,
    }
}

/// The title's extent when it reads as an element card without a fault and one of its nodes
/// is ground or a node of another card: a sign that a card stands where the title is expected.
fn card_in_title(tree: &Tree, statements: &[Statement]) -> Option<TextRange> {
    let item = tree.items().iter().find(|i| i.kind == ItemKind::Title)?;
    let title = tree.item_range(item);
    let text: Arc<str> = Arc::from(tree.slice(title));
    let (inner, mut errors) = lines::read_lines(text, FileRole::Included);
    let first = inner.items().first()?;
    if first.kind != ItemKind::Card {
        return None;
    }
    let fields = read_fields(&inner, first, &mut errors);
    let card = card::read_card(&inner, &fields, &mut errors)?;
    let sound = errors.is_empty() && card::has_number_or_model(&inner, &card);
    let known = |name: &str| {
        let same = |word: &Word| tree.slice(word.range).eq_ignore_ascii_case(name);
        statements.iter().any(|statement| match &statement.kind {
            StatementKind::Card(other) => other.kind.nodes().iter().any(same),
            _ => false,
        })
    };
    let connected = card.kind.nodes().iter().any(|node| {
        let name = inner.slice(node.range);
        name == "0" || known(name)
    });
    (sound && connected).then_some(title)
}

/// `.subckt` and `.ends`, `.lib` and `.endl` must pair. A `.subckt` line that nothing closes is
/// taken out of the statements: the cards after it stay where they would be without it.
fn pairing_errors(tree: &Tree, statements: &mut Vec<Statement>) -> Vec<SyntaxError> {
    let mut errors = Vec::new();
    let mut open: Vec<Word> = Vec::new();
    let mut unclosed: Vec<Word> = Vec::new();
    let mut section: Option<TextRange> = None;
    for statement in statements.iter() {
        let StatementKind::Dot(dot) = &statement.kind else {
            continue;
        };
        match dot.as_ref() {
            Dot::Subckt { name, .. } => open.push(*name),
            Dot::Ends { name } => match close(tree, &mut open, &mut unclosed, *name) {
                None => errors.push(fault(SyntaxErrorKind::StrayEnds, statement.range)),
                Some(opened) => errors.extend(ends_mismatch(tree, opened, *name)),
            },
            Dot::Section(_) => section = Some(statement.range),
            Dot::EndSection if section.take().is_none() => {
                errors.push(fault(SyntaxErrorKind::UnpairedSection, statement.range));
            }
            _ => {}
        }
    }
    unclosed.extend(open);
    statements.retain(|statement| match &statement.kind {
        StatementKind::Dot(dot) => {
            !matches!(dot.as_ref(), Dot::Subckt { name, .. } if unclosed.contains(name))
        }
        _ => true,
    });
    for name in unclosed {
        let kind = SyntaxErrorKind::UnclosedSubcircuit(tree.slice(name.range).to_owned());
        errors.push(fault(kind, name.range));
    }
    if let Some(range) = section {
        errors.push(fault(SyntaxErrorKind::UnpairedSection, range));
    }
    errors
}

/// The subcircuit that an `.ends` line closes: by its name where one of that name is open, so that
/// those opened after it are the ones left unclosed; otherwise the innermost.
fn close(
    tree: &Tree,
    open: &mut Vec<Word>,
    unclosed: &mut Vec<Word>,
    name: Option<Word>,
) -> Option<Word> {
    let named = name.and_then(|name| {
        let wanted = tree.slice(name.range);
        open.iter()
            .rposition(|word| tree.slice(word.range).eq_ignore_ascii_case(wanted))
    });
    if let Some(at) = named {
        unclosed.extend(open.drain(at + 1..));
    }
    open.pop()
}

fn ends_mismatch(tree: &Tree, open: Word, name: Option<Word>) -> Option<SyntaxError> {
    let name = name?;
    let (given, wanted) = (tree.slice(name.range), tree.slice(open.range));
    (!given.eq_ignore_ascii_case(wanted)).then(|| SyntaxError {
        kind: SyntaxErrorKind::EndsMismatch {
            given: given.to_owned(),
            open: wanted.to_owned(),
        },
        range: name.range,
        other: Some(open.range),
    })
}

fn fault(kind: SyntaxErrorKind, range: TextRange) -> SyntaxError {
    SyntaxError {
        kind,
        range,
        other: None,
    }
}

#[cfg(test)]
mod tests;
