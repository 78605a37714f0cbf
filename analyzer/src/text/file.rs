//! Names of files by number, and places in them. Paths and URIs are the
//! caller's business; the analyzer only ever sees these numbers.

use super::range::TextRange;

/// A file known to the host.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct FileId(pub u32);

/// A place: a byte range in a file.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct Span {
    /// The file.
    pub file: FileId,
    /// The bytes.
    pub range: TextRange,
}

impl Span {
    /// The span of `range` in `file`.
    pub fn new(file: FileId, range: TextRange) -> Self {
        Self { file, range }
    }
}
