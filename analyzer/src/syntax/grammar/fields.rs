//! Tokens of one item to fields: words, quoted expressions, `key=value` pairs and
//! `name(arguments)=value` definitions.

use super::fault;
use crate::syntax::ast::{Param, Value, Word};
use crate::syntax::error::{SyntaxError, SyntaxErrorKind};
use crate::syntax::lexer::{Token, TokenKind};
use crate::syntax::tree::{Item, Tree};
use crate::text::TextRange;

/// A field of a card.
#[derive(Clone, PartialEq, Debug)]
pub(super) enum Field {
    /// A plain word.
    Word(Word),
    /// A quoted expression or text, quotes included.
    Quoted(TextRange),
    /// `key=value`.
    Param(Param),
    /// `name(a,b)=value`.
    Call {
        /// The function's name.
        name: Word,
        /// Its arguments.
        arguments: Vec<Word>,
        /// The defining value.
        value: Value,
    },
    /// A parenthesis or comma that belongs to no key.
    Sign(TextRange),
}

/// Reads the fields of an item.
pub(super) fn read_fields(tree: &Tree, item: &Item, errors: &mut Vec<SyntaxError>) -> Vec<Field> {
    let tokens: Vec<Token> = tree.significant(item).collect();
    let mut reader = FieldReader {
        tree,
        tokens: &tokens,
        at: 0,
        errors,
    };
    let mut fields = Vec::with_capacity(tokens.len());
    while let Some(field) = reader.next_field() {
        fields.push(field);
    }
    fields
}

struct FieldReader<'a> {
    tree: &'a Tree,
    tokens: &'a [Token],
    at: usize,
    errors: &'a mut Vec<SyntaxError>,
}

impl FieldReader<'_> {
    fn kind(&self, ahead: usize) -> Option<TokenKind> {
        self.tokens.get(self.at + ahead).map(|token| token.kind)
    }

    fn next_field(&mut self) -> Option<Field> {
        let token = *self.tokens.get(self.at)?;
        self.at += 1;
        let range = TextRange::new(token.start, token.end);
        let field = match token.kind {
            TokenKind::Word => {
                let name = Word { range };
                if self.kind(0) == Some(TokenKind::Equals) {
                    self.at += 1;
                    Field::Param(Param {
                        key: name,
                        value: self.value(name),
                    })
                } else {
                    self.call(name).unwrap_or(Field::Word(name))
                }
            }
            TokenKind::Quoted | TokenKind::Text => Field::Quoted(range),
            TokenKind::Unclosed => {
                self.unclosed(range);
                Field::Quoted(range)
            }
            _ => Field::Sign(range),
        };
        Some(field)
    }

    fn unclosed(&mut self, range: TextRange) {
        let sign = self.tree.slice(range).chars().next().unwrap_or('\'');
        let place = TextRange::new(range.start, range.start + sign.len_utf8() as u32);
        let kind = SyntaxErrorKind::UnclosedQuote(sign);
        self.errors.push(fault(kind, place));
    }

    /// `name(a,b)=value`, when that is what stands here.
    fn call(&mut self, name: Word) -> Option<Field> {
        if self.kind(0)? != TokenKind::Open {
            return None;
        }
        let mut arguments = Vec::new();
        let mut ahead = 1;
        loop {
            match self.kind(ahead)? {
                TokenKind::Word => {
                    let token = self.tokens.get(self.at + ahead)?;
                    arguments.push(Word {
                        range: TextRange::new(token.start, token.end),
                    });
                }
                TokenKind::Comma => {}
                TokenKind::Close => break,
                _ => return None,
            }
            ahead += 1;
        }
        if self.kind(ahead + 1)? != TokenKind::Equals {
            return None;
        }
        self.at += ahead + 2;
        let value = self.value(name);
        Some(Field::Call {
            name,
            arguments,
            value,
        })
    }

    /// The value behind `=`: one quoted token, or all tokens up to the next white space that
    /// is not inside parentheses.
    fn value(&mut self, key: Word) -> Value {
        let Some(&first) = self.tokens.get(self.at) else {
            return self.missing_value(key);
        };
        let starts_next_key = self.kind(1) == Some(TokenKind::Equals);
        if first.kind == TokenKind::Equals || (first.kind == TokenKind::Word && starts_next_key) {
            return self.missing_value(key);
        }
        let range = TextRange::new(first.start, first.end);
        if first.kind == TokenKind::Unclosed {
            self.unclosed(range);
        }
        let mut depth = depth_after(0, first.kind);
        let mut end = first.end;
        let mut count = 1;
        while let Some(token) = self.tokens.get(self.at + count) {
            let joined = token.start == end || depth > 0;
            if !joined || token.kind == TokenKind::Equals {
                break;
            }
            depth = depth_after(depth, token.kind);
            end = token.end;
            count += 1;
        }
        self.at += count;
        let quoted = count == 1
            && matches!(
                first.kind,
                TokenKind::Quoted | TokenKind::Text | TokenKind::Unclosed
            );
        Value {
            range: TextRange::new(first.start, end),
            quoted,
        }
    }

    fn missing_value(&mut self, key: Word) -> Value {
        let name = self.tree.slice(key.range).to_owned();
        self.errors
            .push(fault(SyntaxErrorKind::MissingValue(name), key.range));
        Value {
            range: TextRange::empty(key.range.end),
            quoted: false,
        }
    }
}

fn depth_after(depth: i32, kind: TokenKind) -> i32 {
    match kind {
        TokenKind::Open => depth + 1,
        TokenKind::Close => depth - 1,
        _ => depth,
    }
}
