//! From text to a lossless tree with typed statements. Never fails: a line that
//! cannot be read becomes an error with a place, and every other line is read as if
//! the bad one were not there. Knows nothing of circuits.

mod ast;
mod error;
pub mod expr;
mod functions;
mod grammar;
mod lexer;
mod tree;

pub use ast::{
    Card, CardKind, Dot, IncludePath, LineDelay, Mark, Param, ParamDef, Statement, StatementKind,
    Value, Word,
};
pub use error::{SyntaxError, SyntaxErrorKind};
pub use grammar::{FileRole, Parse, parse};
pub use lexer::{Token, TokenKind};
pub use tree::{Item, ItemKind, Tree};
