//! The lossless tree: text, tokens, and the items (cards, marks, comments) that the
//! tokens make up. An item owns whole physical lines; a card with continuation lines
//! owns several, which need not be neighbours.

use super::lexer::{Token, TokenKind};
use crate::text::TextRange;
use std::ops::Range;
use std::sync::Arc;

/// What a physical line belongs to.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum ItemKind {
    /// First line of a top-level file.
    Title,
    /// An element card.
    Card,
    /// A line that starts with a dot.
    Dot,
    /// A `*~` line.
    Mark,
    /// A comment line.
    Comment,
    /// Nothing but white space.
    Blank,
    /// A line inside an encrypted section or behind `.end`.
    Opaque,
}

/// One item of the file.
#[derive(Clone, PartialEq, Debug)]
pub struct Item {
    /// What it is.
    pub kind: ItemKind,
    /// Token ranges of its lines, in order.
    pub lines: Vec<Range<u32>>,
}

/// A file as tokens and items. Two trees are equal when their texts are.
#[derive(Clone, Debug)]
pub struct Tree {
    text: Arc<str>,
    tokens: Vec<Token>,
    items: Vec<Item>,
}

impl Tree {
    pub(super) fn new(text: Arc<str>, tokens: Vec<Token>, items: Vec<Item>) -> Self {
        Self {
            text,
            tokens,
            items,
        }
    }

    /// The whole text.
    pub fn text(&self) -> &Arc<str> {
        &self.text
    }

    /// All tokens, covering every byte in order.
    pub fn tokens(&self) -> &[Token] {
        &self.tokens
    }

    /// All items in order of their first line.
    pub fn items(&self) -> &[Item] {
        &self.items
    }

    /// The text of a range.
    pub fn slice(&self, range: TextRange) -> &str {
        range.slice(&self.text)
    }

    /// The tokens of an item that carry meaning.
    pub fn significant<'a>(&'a self, item: &'a Item) -> impl Iterator<Item = Token> + 'a {
        item.lines
            .iter()
            .flat_map(|line| {
                self.tokens
                    .get(line.start as usize..line.end as usize)
                    .unwrap_or_default()
            })
            .copied()
            .filter(|token| {
                !matches!(
                    token.kind,
                    TokenKind::Space
                        | TokenKind::Newline
                        | TokenKind::Comment
                        | TokenKind::Continue
                        | TokenKind::MarkIntro
                        | TokenKind::MarkContinue
                )
            })
    }

    /// The bytes from an item's first to its last meaningful token; empty at the item's start
    /// when it has none.
    pub fn item_range(&self, item: &Item) -> TextRange {
        let mut tokens = self.significant(item);
        match tokens.next() {
            Some(first) => {
                let last = tokens.last().unwrap_or(first);
                TextRange::new(first.start, last.end)
            }
            None => TextRange::empty(self.line_start(item)),
        }
    }

    fn line_start(&self, item: &Item) -> u32 {
        item.lines
            .first()
            .and_then(|line| self.tokens.get(line.start as usize))
            .map_or(0, |token| token.start)
    }
}
