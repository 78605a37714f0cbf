//! Names without regard to ASCII case, and the nearest known name to a misspelt one.

/// A name folded to lower case, for comparison.
#[derive(Clone, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub struct Folded(String);

impl Folded {
    /// Folds a name.
    pub fn new(name: &str) -> Self {
        Self(name.to_ascii_lowercase())
    }

    /// The folded text.
    pub fn as_str(&self) -> &str {
        &self.0
    }
}

/// The known name nearest to `name`, if one is near enough to be meant: at most a third of the
/// letters differ (edit distance of Levenshtein, 1966, with swapped neighbours counted once,
/// Damerau, 1964, both from memory; ASCII case ignored).
pub fn nearest<'a>(name: &str, known: impl IntoIterator<Item = &'a str>) -> Option<&'a str> {
    let wanted = name.to_ascii_lowercase();
    if wanted.len() > 64 {
        return None;
    }
    let limit = (wanted.chars().count() / 3).max(1);
    known
        .into_iter()
        .filter(|candidate| candidate.len() <= 64)
        .map(|candidate| {
            (
                distance(&wanted, &candidate.to_ascii_lowercase()),
                candidate,
            )
        })
        .filter(|(far, _)| *far <= limit)
        .min_by_key(|(far, candidate)| (*far, *candidate))
        .map(|(_, candidate)| candidate)
}

/// Letters to add, drop, change, or swap with their neighbour.
fn distance(a: &str, b: &str) -> usize {
    let (a, b): (Vec<char>, Vec<char>) = (a.chars().collect(), b.chars().collect());
    let mut before: Vec<usize> = Vec::new();
    let mut above: Vec<usize> = (0..=b.len()).collect();
    for (i, ca) in a.iter().enumerate() {
        let mut row = Vec::with_capacity(b.len() + 1);
        row.push(i + 1);
        for (j, cb) in b.iter().enumerate() {
            let change = above[j] + usize::from(ca != cb);
            let mut least = change.min(row[j] + 1).min(above[j + 1] + 1);
            if i > 0 && j > 0 && *ca == b[j - 1] && a[i - 1] == *cb {
                least = least.min(before[j - 1] + 1);
            }
            row.push(least);
        }
        before = std::mem::replace(&mut above, row);
    }
    above.last().copied().unwrap_or(0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nearest_name_when_near_enough() {
        let known = ["block", "rail", "device", "passive"];
        assert_eq!(nearest("blok", known), Some("block"));
        assert_eq!(nearest("DEVCE", known), Some("device"));
        assert_eq!(nearest("rial", known), Some("rail"), "a swap is one slip");
        assert_eq!(nearest("bolck", known), Some("block"));
        assert_eq!(nearest("spread", known), None);
        assert_eq!(nearest("xyz", known), None);
    }
}
