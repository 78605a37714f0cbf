//! Reads what can still be read from a body that is not JSON: the id to answer to, the method, the
//! document. A tolerant scan of members, not a parser; it must not fail and must not guess.

use serde_json::Value;

/// What could be recovered from an unreadable message.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Salvage {
    /// The top-level `id`, when it is a whole number or a string.
    pub id: Option<Value>,
    /// The top-level `method`.
    pub method: Option<String>,
    /// The first `uri` member at any depth.
    pub uri: Option<String>,
}

/// Scans `body` for complete `"name": scalar` members.
pub fn salvage(body: &[u8]) -> Salvage {
    let mut found = Salvage::default();
    let mut depth = 0_usize;
    let mut at = 0;
    while let Some(&byte) = body.get(at) {
        match byte {
            b'{' | b'[' => depth += 1,
            b'}' | b']' => depth = depth.saturating_sub(1),
            b'"' => {
                let Some(end) = string_end(body, at) else {
                    return found;
                };
                at = member(body, (at, end), depth, &mut found);
                continue;
            }
            _ => {}
        }
        at += 1;
    }
    found
}

/// Notes the member whose name stands at `name`; returns where to go on.
fn member(body: &[u8], name: (usize, usize), depth: usize, found: &mut Salvage) -> usize {
    let (start, end) = name;
    let colon = skip_space(body, end);
    if body.get(colon) != Some(&b':') {
        return end;
    }
    let value_start = skip_space(body, colon + 1);
    let Some(value_end) = scalar_end(body, value_start) else {
        return value_start;
    };
    let value = body.get(value_start..value_end).unwrap_or_default();
    let value = serde_json::from_slice::<Value>(value).ok();
    match (body.get(start..end), value) {
        (Some(b"\"id\""), Some(id @ (Value::String(_) | Value::Number(_))))
            if depth == 1 && found.id.is_none() && !id.is_f64() =>
        {
            found.id = Some(id);
        }
        (Some(b"\"method\""), Some(Value::String(method))) if depth == 1 => {
            found.method.get_or_insert(method);
        }
        (Some(b"\"uri\""), Some(Value::String(uri))) => {
            found.uri.get_or_insert(uri);
        }
        _ => {}
    }
    value_end
}

fn skip_space(body: &[u8], mut at: usize) -> usize {
    while body.get(at).is_some_and(u8::is_ascii_whitespace) {
        at += 1;
    }
    at
}

/// End of a string or number whose end is certain, so that a cut-off `12` is not read as `1`.
fn scalar_end(body: &[u8], start: usize) -> Option<usize> {
    if body.get(start) == Some(&b'"') {
        return string_end(body, start);
    }
    let mut end = start;
    while matches!(
        body.get(end),
        Some(b'0'..=b'9' | b'-' | b'+' | b'.' | b'e' | b'E')
    ) {
        end += 1;
    }
    (end > start && matches!(body.get(skip_space(body, end)), Some(b',' | b'}'))).then_some(end)
}

/// Index after the closing quote of the string that opens at `start`.
fn string_end(body: &[u8], start: usize) -> Option<usize> {
    let mut at = start + 1;
    loop {
        match body.get(at)? {
            b'\\' => at += 2,
            b'"' => return Some(at + 1),
            _ => at += 1,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    #[test]
    fn finds_id_method_and_document_in_a_broken_body() {
        let body = br#"{"jsonrpc":"2.0", "id" : 12, "method":"textDocument/didChange","params":{"textDocument":{"uri":"file:///a\u0041.cir","version":3},"contentChanges":[{"text":"x"#;
        let expected = Salvage {
            id: Some(json!(12)),
            method: Some("textDocument/didChange".to_owned()),
            uri: Some("file:///aA.cir".to_owned()),
        };
        assert_eq!(salvage(body), expected);
    }

    #[test]
    fn takes_no_inner_id_and_no_text() {
        assert_eq!(
            salvage(br#"{"params":{"id":3,"method":"x"}, oops"#),
            Salvage::default()
        );
        assert_eq!(salvage(br#"{"text":"\"id\":5", oops"#), Salvage::default());
        assert_eq!(salvage(br#"["id", 5 oops"#), Salvage::default());
        assert_eq!(salvage(br#"{"id":{"a":1}, oops"#).id, None);
        assert_eq!(salvage(br#"{"id":1.5, oops"#).id, None);
    }

    #[test]
    fn a_number_cut_off_is_not_an_id() {
        assert_eq!(salvage(br#"{"method":"m","id":1"#).id, None);
        assert_eq!(salvage(br#"{"method":"m","id":"a"#).id, None);
        assert_eq!(salvage(br#"{"method":"m","id":"a""#).id, Some(json!("a")));
        assert_eq!(salvage(b"").id, None);
        assert_eq!(salvage(b"\"\\").id, None);
    }
}
