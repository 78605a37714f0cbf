//! The symbols of a text, for outlines: subcircuits with what is in them, marked blocks, parts,
//! models and parameters.

use crate::syntax::{Dot, FileRole, Parse, StatementKind, Word, parse};
use crate::text::TextRange;
use std::sync::Arc;

/// What a symbol is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum SymbolKind {
    /// `.subckt`
    Subcircuit,
    /// `*~ block`
    Block,
    /// An element card.
    Part,
    /// `.model`
    Model,
    /// One name of a `.param` line.
    Parameter,
}

/// A symbol and those inside it.
#[derive(Clone, PartialEq, Debug)]
pub struct Symbol {
    /// Its name as written.
    pub name: String,
    /// What it is.
    pub kind: SymbolKind,
    /// Everything that belongs to it.
    pub range: TextRange,
    /// Its name's place.
    pub name_range: TextRange,
    /// Symbols inside.
    pub children: Vec<Symbol>,
}

/// The outline of a text.
pub fn outline(text: &str, role: FileRole) -> Vec<Symbol> {
    let parsed = parse(Arc::from(text), role);
    let mut open: Vec<Symbol> = Vec::new();
    let mut top: Vec<Symbol> = Vec::new();
    for statement in &parsed.statements {
        if let StatementKind::Dot(dot) = &statement.kind {
            match dot.as_ref() {
                Dot::Subckt { name, .. } => {
                    let kind = SymbolKind::Subcircuit;
                    open.push(symbol(&parsed, *name, kind, statement.range));
                    continue;
                }
                Dot::Ends { .. } => {
                    close(&mut open, &mut top, statement.range.end);
                    continue;
                }
                _ => {}
            }
        }
        let list = match open.last_mut() {
            Some(subcircuit) => &mut subcircuit.children,
            None => &mut top,
        };
        list.extend(symbols_of(&parsed, &statement.kind, statement.range));
    }
    let end = text.len() as u32;
    while !open.is_empty() {
        close(&mut open, &mut top, end);
    }
    top
}

fn close(open: &mut Vec<Symbol>, top: &mut Vec<Symbol>, end: u32) {
    let Some(mut done) = open.pop() else { return };
    done.range.end = end.max(done.range.end);
    match open.last_mut() {
        Some(outer) => outer.children.push(done),
        None => top.push(done),
    }
}

fn symbols_of(parsed: &Parse, kind: &StatementKind, range: TextRange) -> Vec<Symbol> {
    match kind {
        StatementKind::Card(card) => vec![symbol(parsed, card.name, SymbolKind::Part, range)],
        StatementKind::Mark(mark) => {
            let is_block = parsed
                .tree
                .slice(mark.word.range)
                .eq_ignore_ascii_case("block");
            let name = mark.words.first().filter(|_| is_block);
            name.map(|name| symbol(parsed, *name, SymbolKind::Block, range))
                .into_iter()
                .collect()
        }
        StatementKind::Dot(dot) => match dot.as_ref() {
            Dot::Model { name, .. } => vec![symbol(parsed, *name, SymbolKind::Model, range)],
            Dot::Param(defs) => defs
                .iter()
                .map(|def| {
                    let whole = def.name.range.cover(def.value.range);
                    symbol(parsed, def.name, SymbolKind::Parameter, whole)
                })
                .collect(),
            _ => Vec::new(),
        },
        StatementKind::Title => Vec::new(),
    }
}

fn symbol(parsed: &Parse, name: Word, kind: SymbolKind, range: TextRange) -> Symbol {
    Symbol {
        name: parsed.tree.slice(name.range).to_owned(),
        kind,
        range: range.cover(name.range),
        name_range: name.range,
        children: Vec::new(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn subcircuits_hold_their_parts() {
        let text =
            "t\n*~ block amp in=a\n.param x=1 y=2\nR1 a 0 1\n.subckt s a\nC1 a 0 1p\n.ends\n";
        let found = outline(text, FileRole::Top);
        let names: Vec<&str> = found.iter().map(|s| s.name.as_str()).collect();
        assert_eq!(names, ["amp", "x", "y", "R1", "s"]);
        let inside = found.last().map(|s| s.children.len());
        assert_eq!(inside, Some(1));
        let end = found.last().map(|s| s.range.end as usize);
        assert_eq!(
            end,
            Some(text.len() - 1),
            "the subcircuit ends behind .ends"
        );
    }
}
