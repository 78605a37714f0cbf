//! Physical lines to items: titles, comments, marks, cards and what continues them.

use super::{FileRole, SyntaxError, SyntaxErrorKind, fault};
use crate::syntax::lexer::{LineLexer, TokenKind};
use crate::syntax::tree::{Item, ItemKind, Tree};
use crate::text::TextRange;
use std::sync::Arc;

/// Where reading stands between two lines.
struct Reader {
    items: Vec<Item>,
    errors: Vec<SyntaxError>,
    /// The card or dot line that a `+` line would continue.
    card: Option<usize>,
    /// The mark that a `*~+` line would continue.
    mark: Option<usize>,
    /// A blank, comment or mark line stands between `card` and here.
    gap: bool,
    /// Inside an encrypted section, or behind `.end`.
    opaque: bool,
    ended: bool,
}

/// Reads all lines into a tree.
pub(super) fn read_lines(text: Arc<str>, role: FileRole) -> (Tree, Vec<SyntaxError>) {
    let mut lexer = LineLexer::new(&text);
    let mut reader = Reader {
        items: Vec::new(),
        errors: Vec::new(),
        card: None,
        mark: None,
        gap: false,
        opaque: false,
        ended: false,
    };
    let mut first = true;
    while !lexer.done() {
        let is_title = std::mem::take(&mut first) && role == FileRole::Top;
        reader.read_line(&mut lexer, is_title);
    }
    let tokens = std::mem::take(&mut lexer.tokens);
    let Reader { items, errors, .. } = reader;
    (Tree::new(text, tokens, items), errors)
}

impl Reader {
    fn read_line(&mut self, lexer: &mut LineLexer<'_>, is_title: bool) {
        let from = lexer.tokens.len() as u32;
        let line = lexer.peek_line();
        let content = line.trim_start_matches(|c: char| c.is_whitespace() || c == '\u{FEFF}');
        let kind = self.kind_of(content, is_title);
        match kind {
            ItemKind::Comment => lexer.take_line(TokenKind::Comment),
            ItemKind::Title | ItemKind::Opaque => lexer.take_line(TokenKind::Opaque),
            _ => lexer.lex_line(),
        }
        let lines = from..lexer.tokens.len() as u32;
        let start = lexer
            .tokens
            .get(from as usize..)
            .unwrap_or_default()
            .iter()
            .find(|token| token.kind != TokenKind::Space)
            .map_or(0, |token| token.start);
        self.place(kind, content, lines, start);
    }

    fn kind_of(&mut self, content: &str, is_title: bool) -> ItemKind {
        if self.ended {
            return ItemKind::Opaque;
        }
        let word = content.split_whitespace().next().unwrap_or("");
        let is = |names: &[&str]| names.iter().any(|name| word.eq_ignore_ascii_case(name));
        if self.opaque {
            self.opaque = !is(&[".unprotect", ".unprot"]);
            return ItemKind::Opaque;
        }
        if is(&[".protect", ".prot"]) {
            self.opaque = true;
            return ItemKind::Opaque;
        }
        match content.chars().next() {
            Some('*') if is_mark(content) => ItemKind::Mark,
            Some('*') => ItemKind::Comment,
            Some('.') => {
                self.ended = is(&[".end"]);
                ItemKind::Dot
            }
            _ if is_title => ItemKind::Title,
            None => ItemKind::Blank,
            Some('$' | ';') => ItemKind::Comment,
            Some(_) => ItemKind::Card,
        }
    }

    fn place(&mut self, kind: ItemKind, content: &str, line: std::ops::Range<u32>, start: u32) {
        let continues_card = kind == ItemKind::Card && content.starts_with('+');
        let continues_mark = kind == ItemKind::Mark && content.starts_with("*~+");
        let target = match (continues_card, continues_mark) {
            (true, _) => self.card,
            (_, true) => self.mark,
            _ => None,
        };
        if let Some(index) = target {
            if continues_card && self.gap {
                self.fault(SyntaxErrorKind::StrayContinuation, start, 1);
                self.gap = false;
            }
            if let Some(item) = self.items.get_mut(index) {
                item.lines.push(line);
                return;
            }
        }
        let kind = if continues_card {
            self.fault(SyntaxErrorKind::NothingToContinue, start, 1);
            ItemKind::Opaque
        } else if continues_mark {
            self.fault(SyntaxErrorKind::NoMarkToContinue, start, 3);
            ItemKind::Opaque
        } else {
            kind
        };
        self.remember(kind);
        self.items.push(Item {
            kind,
            lines: vec![line],
        });
    }

    fn remember(&mut self, kind: ItemKind) {
        let index = self.items.len();
        match kind {
            ItemKind::Card | ItemKind::Dot => {
                self.card = Some(index);
                self.mark = None;
                self.gap = false;
            }
            ItemKind::Mark => {
                self.mark = Some(index);
                self.gap = true;
            }
            ItemKind::Comment => self.gap = true,
            ItemKind::Blank => {
                self.gap = true;
                self.mark = None;
            }
            ItemKind::Title | ItemKind::Opaque => {}
        }
    }

    fn fault(&mut self, kind: SyntaxErrorKind, start: u32, length: u32) {
        let range = TextRange::new(start, start + length);
        self.errors.push(fault(kind, range));
    }
}

/// A line of signs only (`*~~~~`) is a divider, not a mark.
fn is_mark(content: &str) -> bool {
    content.starts_with("*~+")
        || (content.starts_with("*~") && content.contains(|c: char| c.is_alphanumeric()))
}
