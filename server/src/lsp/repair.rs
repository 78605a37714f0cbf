//! Mends message bodies that a strict JSON reader refuses although their meaning is clear: escapes
//! of half a surrogate pair, and bytes that are not UTF-8. It knows text only, no protocol.

/// Replaces every `\uXXXX` escape of a surrogate without its other half by `\ufffd`, in place.
/// Returns the number of replacements.
///
/// Both are one UTF-16 code unit, so positions counted in UTF-16 stay true. Escapes inside an
/// escaped backslash (`\\ud83d`) are text, not escapes, and stay.
pub fn lone_surrogates(body: &mut [u8]) -> usize {
    let mut replaced = 0;
    let mut at = 0;
    while let Some(&byte) = body.get(at) {
        if byte != b'\\' {
            at += 1;
            continue;
        }
        match escape_unit(body, at) {
            Some(0xD800..=0xDBFF) if matches!(escape_unit(body, at + 6), Some(0xDC00..=0xDFFF)) => {
                at += 12;
            }
            Some(0xD800..=0xDFFF) => {
                if let Some(digits) = body.get_mut(at + 2..at + 6) {
                    digits.copy_from_slice(b"fffd");
                }
                replaced += 1;
                at += 6;
            }
            Some(_) => at += 6,
            None => at += 2,
        }
    }
    replaced
}

/// The UTF-16 unit of the `\uXXXX` escape at `at`, if one stands there.
fn escape_unit(body: &[u8], at: usize) -> Option<u16> {
    let digits = body.get(at..at + 6)?.strip_prefix(b"\\u")?;
    if !digits.iter().all(u8::is_ascii_hexdigit) {
        return None;
    }
    u16::from_str_radix(std::str::from_utf8(digits).ok()?, 16).ok()
}

/// Replaces what is not UTF-8 by U+FFFD. Returns `None` when all of it was UTF-8 already.
pub fn invalid_utf8(body: &[u8]) -> Option<Vec<u8>> {
    match std::str::from_utf8(body) {
        Ok(_) => None,
        Err(_) => Some(String::from_utf8_lossy(body).into_owned().into_bytes()),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn mended(text: &str) -> (String, usize) {
        let mut body = text.as_bytes().to_vec();
        let count = lone_surrogates(&mut body);
        (
            String::from_utf8(body).expect("only ASCII is written"),
            count,
        )
    }

    #[test]
    fn pairs_and_other_escapes_stay() {
        for text in [
            r#""\ud83d\ude00""#,
            r#""\uD83D\uDE00 \u00e9 \n\\ \/""#,
            r#""\\ud83d""#,
            "",
            "\\",
            r"\u12",
            r"\ud83",
        ] {
            assert_eq!(mended(text), (text.to_owned(), 0), "{text}");
        }
    }

    #[test]
    fn lone_halves_become_one_replacement_each() {
        assert_eq!(mended(r#""a\ud83db""#), (r#""a\ufffdb""#.to_owned(), 1));
        assert_eq!(
            mended(r#""\ude00\ud83d""#),
            (r#""\ufffd\ufffd""#.to_owned(), 2)
        );
        assert_eq!(
            mended(r#""\ud83d\ud83d\ude00""#),
            (r#""\ufffd\ud83d\ude00""#.to_owned(), 1)
        );
        assert_eq!(mended(r#""\\\ud83d\n""#), (r#""\\\ufffd\n""#.to_owned(), 1));
        assert_eq!(
            mended(r#""\uDFFF\u0041""#),
            (r#""\ufffd\u0041""#.to_owned(), 1)
        );
    }

    #[test]
    fn a_mended_body_parses_and_keeps_its_utf16_length() {
        let mut body = r#""x\ud83d y""#.as_bytes().to_vec();
        assert!(
            serde_json::from_slice::<String>(&body).is_err(),
            "the strict reader refuses it"
        );
        lone_surrogates(&mut body);
        let text: String = serde_json::from_slice(&body).expect("mended");
        assert_eq!(text.encode_utf16().count(), 4);
    }

    #[test]
    fn invalid_bytes_become_replacement_characters() {
        assert_eq!(invalid_utf8("grün".as_bytes()), None);
        assert_eq!(
            invalid_utf8(b"gr\xfcn"),
            Some("gr\u{fffd}n".as_bytes().to_vec())
        );
    }
}
