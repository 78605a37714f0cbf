//! A half-open range of byte offsets in one text. Offsets are `u32`: a file is
//! at most 64 MiB by the limits of the product, so they cannot overflow.

/// Half-open byte range `start..end` in a text.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug, Default)]
pub struct TextRange {
    /// First byte.
    pub start: u32,
    /// One past the last byte.
    pub end: u32,
}

impl TextRange {
    /// The range `start..end`; a reversed pair is put in order.
    pub fn new(start: u32, end: u32) -> Self {
        Self {
            start: start.min(end),
            end: start.max(end),
        }
    }

    /// The empty range at `at`.
    pub fn empty(at: u32) -> Self {
        Self { start: at, end: at }
    }

    /// Length in bytes.
    pub fn len(self) -> u32 {
        self.end - self.start
    }

    /// Whether no byte is covered.
    pub fn is_empty(self) -> bool {
        self.start == self.end
    }

    /// Whether `offset` lies in the range or at its end (where a cursor sits).
    pub fn touches(self, offset: u32) -> bool {
        self.start <= offset && offset <= self.end
    }

    /// Whether the two ranges share a byte or touch.
    pub fn meets(self, other: TextRange) -> bool {
        self.start <= other.end && other.start <= self.end
    }

    /// The smallest range that covers both.
    pub fn cover(self, other: TextRange) -> TextRange {
        TextRange {
            start: self.start.min(other.start),
            end: self.end.max(other.end),
        }
    }

    /// The bytes of `text` in this range; empty when the range does not fit the text.
    pub fn slice(self, text: &str) -> &str {
        text.get(self.start as usize..self.end as usize)
            .unwrap_or("")
    }
}
