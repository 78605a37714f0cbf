//! The netlist line of a finding with a marker under the word at fault, for a terminal.

use super::places::Place;

/// Characters shown in front of the word, and in all.
const BEFORE: usize = 40;
const SHOWN: usize = 100;

/// Two lines, indented, each with its line break. A word that goes on in the next line is
/// marked to the end of its first one; of a long line the part around the word is shown.
pub fn excerpt(line: &str, place: Place<'_>) -> String {
    let from = place.start.column.saturating_sub(1) as usize;
    let length = line.chars().count();
    let to = if place.end.line == place.start.line {
        place.end.column.saturating_sub(1) as usize
    } else {
        length
    };
    let first = if length > SHOWN {
        from.saturating_sub(BEFORE)
    } else {
        0
    };
    let last = length.min(first + SHOWN);
    let shown: String = line
        .chars()
        .skip(first)
        .take(last - first.min(last))
        .map(printable)
        .collect();
    let cut_front = if first > 0 { "..." } else { "" };
    let cut_back = if last < length { "..." } else { "" };
    let blanks = cut_front.len() + from - first;
    let carets = to.min(last).saturating_sub(from).max(1);
    format!(
        "    {cut_front}{}{cut_back}\n    {}{}\n",
        shown.trim_end(),
        " ".repeat(blanks),
        "^".repeat(carets)
    )
}

/// One column for each character, so that the marker stands under its word.
fn printable(character: char) -> char {
    match character {
        '\t' => ' ',
        '\u{FEFF}' => ' ',
        c if c.is_control() => '\u{FFFD}',
        c => c,
    }
}

#[cfg(test)]
mod tests {
    use super::super::places::Point;
    use super::*;

    fn at(start: u32, end: (u32, u32)) -> Place<'static> {
        Place {
            file: "a.cir",
            start: Point {
                line: 1,
                column: start,
            },
            end: Point {
                line: end.0,
                column: end.1,
            },
        }
    }

    #[test]
    fn the_marker_stands_under_the_word() {
        let text = excerpt("R1\ta \u{3A9} 10M", at(8, (1, 11)));
        assert_eq!(text, "    R1 a \u{3A9} 10M\n           ^^^\n");
        let text = excerpt("R1 a 0", at(1, (2, 4)));
        assert_eq!(text, "    R1 a 0\n    ^^^^^^\n");
        let text = excerpt("", at(1, (1, 1)));
        assert_eq!(text, "    \n    ^\n");
        // A place that does not fit the line, as after an edit elsewhere, is no reason to fall.
        let text = excerpt("ab", at(9, (1, 4)));
        assert_eq!(text, "    ab\n            ^\n");
    }

    #[test]
    fn of_a_long_line_only_the_part_around_the_word() {
        let line = format!("{}WORD{}", "x".repeat(1000), "y".repeat(1000));
        let text = excerpt(&line, at(1001, (1, 1005)));
        let lines: Vec<&str> = text.lines().collect();
        let (Some(shown), Some(marker)) = (lines.first(), lines.get(1)) else {
            unreachable!("an excerpt has two lines");
        };
        assert!(shown.chars().count() < 120, "{shown}");
        assert_eq!(shown.find("WORD"), marker.find('^'));
        assert_eq!(marker.trim(), "^^^^");
    }
}
