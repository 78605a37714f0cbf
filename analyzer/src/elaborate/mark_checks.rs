//! What can be wrong with a mark besides its own keys: words too many, keys written twice, and values
//! of marks that are kept for later.

use super::marks::MarkReader;
use crate::syntax::Param;
use crate::units::parse_number;

impl MarkReader<'_> {
    pub(super) fn check_repeats(&mut self) {
        let params = self.mark.params.clone();
        for (k, param) in params.iter().enumerate() {
            let key = self.text(param.key.range).to_ascii_lowercase();
            let same = |other: &Param| self.text(other.key.range).eq_ignore_ascii_case(&key);
            if params[..k].iter().any(same) {
                let message = format!("`{key}=` is written twice; the first counts");
                self.bad(param.key.range, message, None);
            }
        }
    }

    /// Words without `=` beyond the name that the mark takes.
    pub(super) fn check_words(&mut self, word: &str) {
        let most = match word {
            "block" | "rail" | "tie" | "device" | "loop" | "bias" => 1,
            "margins" | "loads" | "spread" | "start" | "bias-sweep" => 0,
            _ => return,
        };
        if let Some(extra) = self.mark.words.get(most) {
            let text = self.text(extra.range);
            let message =
                format!("`{text}` has no meaning in `{word}`; keys are written `key=value`");
            self.bad(extra.range, message, None);
        }
    }

    /// Values of the marks that are kept for later: they must be sound all the same.
    pub(super) fn check_recorded(&mut self, word: &str) {
        for param in self.mark.params.clone() {
            let key = self.text(param.key.range).to_ascii_lowercase();
            let value = self.text(param.value.range);
            let fault = match word {
                "loads" => {
                    (!is_load(&value)).then_some("takes any, fixed or vswr:N with N of 1 or more")
                }
                "margins" => (!is_number(&value, "db")).then_some("takes a number"),
                "spread" => match key.as_str() {
                    "together" => None,
                    "trials" => {
                        let whole = value.parse::<u32>().is_ok_and(|n| n > 0);
                        (!whole).then_some("takes a whole number above zero")
                    }
                    _ => (!is_number(&value, "%")).then_some("takes a share such as 5%"),
                },
                "bias-sweep" if key == "points" => {
                    let whole = value.parse::<u32>().is_ok_and(|n| n > 1);
                    (!whole).then_some("takes a whole number of 2 or more")
                }
                "bias-sweep" => (!is_span(&value)).then_some("takes LO..HI"),
                "device" if key == "common" => {
                    let known = ["s", "e"].iter().any(|c| value.eq_ignore_ascii_case(c));
                    (!known).then_some("takes s or e")
                }
                _ => None,
            };
            if let Some(fault) = fault {
                let place = if value.is_empty() {
                    param.key.range
                } else {
                    param.value.range
                };
                self.bad(place, format!("`{key}={value}`: `{key}=` {fault}"), None);
            }
        }
        if word == "loop" && self.param("at").is_none() {
            self.bad(self.mark.word.range, "`at=` is missing".to_owned(), None);
        }
    }
}

/// `any`, `fixed` or `vswr:N`.
fn is_load(text: &str) -> bool {
    let text = text.to_ascii_lowercase();
    let ratio = text.strip_prefix("vswr:").map(parse_number);
    text == "any" || text == "fixed" || ratio.is_some_and(|n| n.is_ok_and(|n| n.value >= 1.0))
}

/// A number, with a sign or unit behind it that belongs to it.
fn is_number(text: &str, behind: &str) -> bool {
    let text = text.to_ascii_lowercase();
    let text = text.strip_suffix(behind).unwrap_or(&text);
    parse_number(text).is_ok()
}

/// `LO..HI` with any two numbers.
fn is_span(text: &str) -> bool {
    text.split_once("..")
        .is_some_and(|(low, high)| parse_number(low).is_ok() && parse_number(high).is_ok())
}
