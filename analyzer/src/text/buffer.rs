//! The text of an open document as a rope: edits cost the length of the edit,
//! a snapshot costs nothing. Positions come in as line and column.

use super::line_index::{ColumnUnit, LineColumn};
use ropey::Rope;

/// An edit that could not be placed.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
#[non_exhaustive]
pub enum BadPosition {
    /// The start of the edited range lies behind its end.
    Reversed,
}

impl std::fmt::Display for BadPosition {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Reversed => f.write_str("the start of the edited range lies behind its end"),
        }
    }
}

impl std::error::Error for BadPosition {}

/// A text under edit.
#[derive(Clone, Debug)]
pub struct TextBuffer {
    rope: Rope,
}

impl TextBuffer {
    /// A buffer that holds `text`.
    pub fn new(text: &str) -> Self {
        Self {
            rope: Rope::from_str(text),
        }
    }

    /// The whole text.
    pub fn text(&self) -> String {
        self.rope.to_string()
    }

    /// Length in bytes.
    pub fn len(&self) -> usize {
        self.rope.len_bytes()
    }

    /// Whether the text is empty.
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// Replaces what lies between two places by `text`, and returns the byte range that was
    /// replaced. Places past the end of a line or of the text mean that end.
    ///
    /// # Errors
    /// [`BadPosition::Reversed`] when `from` lies behind `to`; nothing is changed then.
    pub fn replace(
        &mut self,
        from: LineColumn,
        to: LineColumn,
        unit: ColumnUnit,
        text: &str,
    ) -> Result<std::ops::Range<usize>, BadPosition> {
        let start = self.char_at(from, unit);
        let end = self.char_at(to, unit);
        if start > end {
            return Err(BadPosition::Reversed);
        }
        let bytes = self.rope.char_to_byte(start)..self.rope.char_to_byte(end);
        self.rope.remove(start..end);
        self.rope.insert(start, text);
        Ok(bytes)
    }

    /// Character index of a place, clamped so that it always exists.
    fn char_at(&self, at: LineColumn, unit: ColumnUnit) -> usize {
        let line = at.line as usize;
        if line >= self.rope.len_lines() {
            return self.rope.len_chars();
        }
        let start = self.rope.line_to_char(line);
        let mut column = 0;
        let mut index = start;
        for character in self.rope.line(line).chars() {
            let width = match unit {
                ColumnUnit::Utf8 => character.len_utf8(),
                ColumnUnit::Utf16 => character.len_utf16(),
                ColumnUnit::Scalar => 1,
            } as u32;
            if character == '\n' || character == '\r' || column + width > at.column {
                break;
            }
            column += width;
            index += 1;
        }
        index
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(line: u32, column: u32) -> LineColumn {
        LineColumn { line, column }
    }

    #[test]
    fn edits_in_utf16_columns() -> Result<(), BadPosition> {
        let mut buffer = TextBuffer::new("R1 \u{1F30A} 0 1k\r\nC1 a 0 1p\r\n");
        buffer.replace(at(0, 8), at(0, 10), ColumnUnit::Utf16, "47")?;
        assert_eq!(buffer.text(), "R1 \u{1F30A} 0 47\r\nC1 a 0 1p\r\n");
        buffer.replace(at(1, 3), at(1, 4), ColumnUnit::Utf16, "out")?;
        assert_eq!(buffer.text(), "R1 \u{1F30A} 0 47\r\nC1 out 0 1p\r\n");
        Ok(())
    }

    #[test]
    fn places_outside_never_panic() -> Result<(), BadPosition> {
        let mut buffer = TextBuffer::new("ab\ncd");
        buffer.replace(at(7, 7), at(9, 9), ColumnUnit::Utf16, "!")?;
        assert_eq!(buffer.text(), "ab\ncd!");
        buffer.replace(at(0, 99), at(0, 99), ColumnUnit::Utf16, "#")?;
        assert_eq!(buffer.text(), "ab#\ncd!");
        let reversed = buffer.replace(at(1, 1), at(0, 0), ColumnUnit::Utf16, "x");
        assert_eq!(reversed, Err(BadPosition::Reversed));
        assert_eq!(buffer.text(), "ab#\ncd!");
        Ok(())
    }
}
