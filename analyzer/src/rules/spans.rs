//! Places that do not overlap, to ask quickly whether one of them covers or meets another.
//! Knows nothing of what stands there.

use crate::text::{FileId, Span};
use std::collections::BTreeMap;

/// Places with something kept for each; of two that start together the last one counts.
#[derive(Clone, Debug)]
pub(super) struct SpanMap<T> {
    places: BTreeMap<(FileId, u32), (u32, T)>,
}

impl<T> SpanMap<T> {
    /// No places.
    pub(super) fn new() -> Self {
        Self {
            places: BTreeMap::new(),
        }
    }

    /// Keeps `value` at `span`.
    pub(super) fn insert(&mut self, span: Span, value: T) {
        let key = (span.file, span.range.start);
        self.places.insert(key, (span.range.end, value));
    }

    /// What is kept at the place that covers `span`.
    pub(super) fn around(&self, span: Span) -> Option<&T> {
        let (start, end, value) = self.last_before(span, span.range.start)?;
        (start <= span.range.start && span.range.end <= end).then_some(value)
    }

    /// What is kept at the first place inside `span`, and that place's start and end.
    pub(super) fn inside(&self, span: Span) -> Option<(u32, u32, &T)> {
        let from = (span.file, span.range.start);
        let (key, (end, value)) = self.places.range(from..).next()?;
        let within = key.0 == span.file && *end <= span.range.end;
        within.then_some((key.1, *end, value))
    }

    /// Whether a place shares a byte with `span` or touches it.
    pub(super) fn meets(&self, span: Span) -> bool {
        self.last_before(span, span.range.end)
            .is_some_and(|(_, end, _)| end >= span.range.start)
    }

    fn last_before(&self, span: Span, at: u32) -> Option<(u32, u32, &T)> {
        let (key, (end, value)) = self.places.range(..=(span.file, at)).next_back()?;
        (key.0 == span.file).then_some((key.1, *end, value))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::text::TextRange;

    fn span(file: u32, start: u32, end: u32) -> Span {
        Span::new(FileId(file), TextRange::new(start, end))
    }

    #[test]
    fn covering_and_meeting() {
        let mut map = SpanMap::new();
        map.insert(span(1, 10, 20), 'a');
        map.insert(span(1, 30, 31), 'b');
        assert_eq!(map.around(span(1, 12, 20)), Some(&'a'));
        assert_eq!(map.around(span(1, 12, 21)), None);
        assert_eq!(map.around(span(0, 12, 20)), None);
        assert_eq!(map.around(span(2, 12, 20)), None);
        assert_eq!(map.inside(span(1, 21, 40)), Some((30, 31, &'b')));
        assert_eq!(map.inside(span(1, 21, 29)), None);
        assert!(map.meets(span(1, 20, 22)), "it touches");
        assert!(!map.meets(span(1, 21, 22)));
        assert!(!map.meets(span(2, 10, 20)));
    }
}
