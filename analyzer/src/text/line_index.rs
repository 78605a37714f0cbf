//! Byte offset to line and column and back, in UTF-8, UTF-16 or Unicode scalar
//! columns. LF, CRLF and a lone CR end a line, as in the language server protocol.

/// What a column counts.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum ColumnUnit {
    /// Bytes of UTF-8.
    Utf8,
    /// UTF-16 code units.
    Utf16,
    /// Unicode scalar values.
    Scalar,
}

/// A zero-based line and column.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
pub struct LineColumn {
    /// Zero-based line.
    pub line: u32,
    /// Zero-based column in the unit asked for.
    pub column: u32,
}

/// The starts of all lines of one text.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct LineIndex {
    starts: Vec<u32>,
    length: u32,
}

impl LineIndex {
    /// Finds the line starts of `text`.
    pub fn new(text: &str) -> Self {
        let bytes = text.as_bytes();
        let mut starts = vec![0];
        for (at, &byte) in bytes.iter().enumerate() {
            let ends = byte == b'\n' || (byte == b'\r' && bytes.get(at + 1) != Some(&b'\n'));
            if ends {
                starts.push(at as u32 + 1);
            }
        }
        Self {
            starts,
            length: bytes.len() as u32,
        }
    }

    /// Number of lines (a text that ends with a line break has an empty last line).
    pub fn lines(&self) -> u32 {
        self.starts.len() as u32
    }

    /// The zero-based line that holds byte `offset` (the last line when past the end).
    pub fn line_of(&self, offset: u32) -> u32 {
        (self.starts.partition_point(|&start| start <= offset) as u32).saturating_sub(1)
    }

    /// First byte of a line; the end of the text for a line past the last.
    pub fn line_start(&self, line: u32) -> u32 {
        self.starts
            .get(line as usize)
            .copied()
            .unwrap_or(self.length)
    }

    /// The end of a line's content, before its line break.
    pub fn line_end(&self, line: u32, text: &str) -> u32 {
        let start = self.line_start(line) as usize;
        let next = self.line_start(line + 1) as usize;
        let content = text.get(start..next).unwrap_or("");
        (start + content.trim_end_matches(['\n', '\r']).len()) as u32
    }

    /// Line and column of a byte offset of `text` (the text this index was made from).
    /// An offset inside a character counts as the character's start, one past the end as the end.
    pub fn line_column(&self, text: &str, offset: u32, unit: ColumnUnit) -> LineColumn {
        let mut at = offset.min(self.length) as usize;
        while !text.is_char_boundary(at) {
            at -= 1;
        }
        let line = self.line_of(at as u32);
        let before = text
            .get(self.line_start(line) as usize..at)
            .unwrap_or_default();
        LineColumn {
            line,
            column: width(before, unit),
        }
    }

    /// Byte offset of a line and column. A column past the end of the line means the end of
    /// the line's content, a line past the last the end of the text, a column inside a
    /// character the character's start.
    pub fn offset(&self, text: &str, at: LineColumn, unit: ColumnUnit) -> u32 {
        if at.line >= self.lines() {
            return self.length;
        }
        let start = self.line_start(at.line);
        let end = self.line_end(at.line, text);
        let content = text.get(start as usize..end as usize).unwrap_or_default();
        let mut column = 0;
        for (byte, character) in content.char_indices() {
            let next = column + char_width(character, unit);
            if next > at.column {
                return start + byte as u32;
            }
            column = next;
        }
        end
    }
}

fn width(text: &str, unit: ColumnUnit) -> u32 {
    match unit {
        ColumnUnit::Utf8 => text.len() as u32,
        _ if text.is_ascii() => text.len() as u32,
        _ => text.chars().map(|c| char_width(c, unit)).sum(),
    }
}

fn char_width(character: char, unit: ColumnUnit) -> u32 {
    match unit {
        ColumnUnit::Utf8 => character.len_utf8() as u32,
        ColumnUnit::Utf16 => character.len_utf16() as u32,
        ColumnUnit::Scalar => 1,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn all_three_line_breaks_count_once() {
        let index = LineIndex::new("a\nb\r\nc\rd");
        assert_eq!(index.lines(), 4);
        assert_eq!(
            (0..4).map(|l| index.line_start(l)).collect::<Vec<_>>(),
            [0, 2, 5, 7]
        );
    }

    #[test]
    fn columns_in_each_unit_and_back() {
        let text = "R1 \u{1F30A} b 1k\n\u{B5}x";
        let index = LineIndex::new(text);
        let b = text.find('b').unwrap_or(0) as u32;
        for (unit, column) in [
            (ColumnUnit::Utf8, 8),
            (ColumnUnit::Utf16, 6),
            (ColumnUnit::Scalar, 5),
        ] {
            let place = index.line_column(text, b, unit);
            assert_eq!(place, LineColumn { line: 0, column });
            assert_eq!(index.offset(text, place, unit), b);
        }
    }

    #[test]
    fn places_outside_are_clamped() {
        let text = "ab\r\ncd";
        let index = LineIndex::new(text);
        let far = |line, column| index.offset(text, LineColumn { line, column }, ColumnUnit::Utf16);
        assert_eq!(far(0, 99), 2);
        assert_eq!(far(9, 0), 6);
        // Inside the surrogate pair of a wide character: its start.
        let wide = "\u{1F30A}x";
        let index = LineIndex::new(wide);
        let place = LineColumn { line: 0, column: 1 };
        assert_eq!(index.offset(wide, place, ColumnUnit::Utf16), 0);
    }
}
