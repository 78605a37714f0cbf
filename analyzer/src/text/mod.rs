//! Text as bytes, lines and columns. Knows nothing of netlists.

mod buffer;
mod file;
mod line_index;
mod range;

pub use buffer::{BadPosition, TextBuffer};
pub use file::{FileId, Span};
pub use line_index::{ColumnUnit, LineColumn, LineIndex};
pub use range::TextRange;
