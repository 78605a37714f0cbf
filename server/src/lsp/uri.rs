//! Keeps the client's own spelling of document URIs. The library's URI type normalises what it
//! reads and refuses what it cannot read; clients compare byte for byte. Incoming spellings that
//! are refused are wrapped, and outgoing ones are put back as the client wrote them.

use std::collections::HashMap;

use serde_json::Value;
use tower_lsp::lsp_types::Url;

/// Scheme of the stand-in for a spelling that is no URI. Documents under it are not on disk.
pub const WRAPPED_SCHEME: &str = "unreadable-uri";

/// Members that hold a document URI in the messages a server sends.
const URI_MEMBERS: [&str; 6] = ["uri", "targetUri", "oldUri", "newUri", "baseUri", "target"];

/// Spellings of the client, by what the library makes of them. Only those that differ are kept.
#[derive(Debug, Default)]
pub struct UriSpellings {
    as_sent: HashMap<String, String>,
}

impl UriSpellings {
    /// Wraps the document URI of an incoming message if the library would refuse it, and, when the
    /// message opens the document, remembers the spelling to be echoed.
    pub fn take_in(&mut self, method: &str, params: &mut Value) {
        let Some(Value::String(uri)) = params.pointer_mut("/textDocument/uri") else {
            return;
        };
        let opens = method == "textDocument/didOpen";
        match Url::parse(uri) {
            Ok(url) if url.as_str() == uri => {
                if opens {
                    self.as_sent.remove(uri.as_str());
                }
            }
            Ok(url) => {
                if opens {
                    self.as_sent.insert(url.into(), uri.clone());
                }
            }
            Err(_) => {
                let wrapped = wrap(uri);
                let sent = std::mem::replace(uri, wrapped.clone());
                self.as_sent.insert(wrapped, sent);
            }
        }
    }

    /// Puts the client's spellings back into an outgoing message.
    pub fn put_back(&self, message: &mut Value) {
        if self.as_sent.is_empty() {
            return;
        }
        match message {
            Value::Array(items) => items.iter_mut().for_each(|item| self.put_back(item)),
            Value::Object(members) => {
                for (name, value) in members.iter_mut() {
                    match value {
                        Value::String(uri) if URI_MEMBERS.contains(&name.as_str()) => {
                            if let Some(sent) = self.as_sent.get(uri.as_str()) {
                                uri.clone_from(sent);
                            }
                        }
                        Value::Object(edits) if name == "changes" => self.put_back_names(edits),
                        _ => {}
                    }
                    self.put_back(value);
                }
            }
            _ => {}
        }
    }

    /// A workspace edit keys its changes by URI.
    fn put_back_names(&self, edits: &mut serde_json::Map<String, Value>) {
        let odd: Vec<String> = edits
            .keys()
            .filter(|uri| self.as_sent.contains_key(*uri))
            .cloned()
            .collect();
        for uri in odd {
            if let (Some(edit), Some(sent)) = (edits.remove(&uri), self.as_sent.get(&uri)) {
                edits.insert(sent.clone(), edit);
            }
        }
    }
}

/// A URI that carries any text: letters, digits, dots, dashes and slashes as they are, the rest in
/// percent form (RFC 3986, section 2.1).
fn wrap(text: &str) -> String {
    let mut wrapped = format!("{WRAPPED_SCHEME}:");
    for byte in text.bytes() {
        match byte {
            b'a'..=b'z' | b'A'..=b'Z' | b'0'..=b'9' | b'.' | b'-' | b'_' => {
                wrapped.push(char::from(byte))
            }
            _ => wrapped.push_str(&format!("%{byte:02X}")),
        }
    }
    wrapped
}

#[cfg(test)]
mod tests {
    use super::*;
    use serde_json::json;

    /// Opens a document under `sent` and returns what the client gets to see in a publication.
    #[track_caller]
    fn echoed(sent: &str) -> String {
        let mut spellings = UriSpellings::default();
        let mut params = json!({"textDocument": {"uri": sent, "text": ""}});
        spellings.take_in("textDocument/didOpen", &mut params);
        let inner = params
            .pointer("/textDocument/uri")
            .and_then(Value::as_str)
            .unwrap_or_default();
        let url = Url::parse(inner).expect("what passes the fence is a URI");
        let mut message = json!({"uri": url, "diagnostics": []});
        spellings.put_back(&mut message);
        message
            .get("uri")
            .and_then(Value::as_str)
            .unwrap_or_default()
            .to_owned()
    }

    #[test]
    fn every_spelling_comes_back() {
        for uri in [
            "file:///a/b.cir",
            "file:///c%3A/x.cir",
            "file:///C:/x.cir",
            "FILE:///tmp/A b.cir",
            "file://localhost/tmp/x.cir",
            "file:///tmp/ü.cir",
            "file:///a/../b/./c.cir",
            "untitled:Untitled-1",
            "git:/a.cir?ref=HEAD#x",
            "Untitled-1",
            "//host/share/x.cir",
            "http://a:b:c/",
            "",
            "file:///tmp/%ff%FF.cir",
            "vscode-notebook-cell:/a#W0sZ",
        ] {
            assert_eq!(echoed(uri), uri);
        }
    }

    #[test]
    fn later_messages_meet_the_opened_document() {
        let mut spellings = UriSpellings::default();
        let mut open = json!({"textDocument": {"uri": "no scheme"}});
        let mut change = open.clone();
        spellings.take_in("textDocument/didOpen", &mut open);
        spellings.take_in("textDocument/didChange", &mut change);
        assert_eq!(open, change);
        assert_ne!(open.pointer("/textDocument/uri"), Some(&json!("no scheme")));
    }

    #[test]
    fn edits_and_links_are_put_back_text_is_not() {
        let mut spellings = UriSpellings::default();
        spellings.take_in(
            "textDocument/didOpen",
            &mut json!({"textDocument": {"uri": "file:///a b"}}),
        );
        let mut message = json!({"changes": {"file:///a%20b": [{"newText": "file:///a%20b"}]},
            "links": [{"targetUri": "file:///a%20b"}, {"uri": "file:///other"}]});
        spellings.put_back(&mut message);
        assert_eq!(
            message,
            json!({"changes": {"file:///a b": [{"newText": "file:///a%20b"}]},
            "links": [{"targetUri": "file:///a b"}, {"uri": "file:///other"}]})
        );
    }

    #[test]
    fn reopening_with_the_plain_spelling_forgets_the_odd_one() {
        let mut spellings = UriSpellings::default();
        spellings.take_in(
            "textDocument/didOpen",
            &mut json!({"textDocument": {"uri": "file:///a b"}}),
        );
        spellings.take_in(
            "textDocument/didOpen",
            &mut json!({"textDocument": {"uri": "file:///a%20b"}}),
        );
        let mut message = json!({"uri": "file:///a%20b"});
        spellings.put_back(&mut message);
        assert_eq!(message, json!({"uri": "file:///a%20b"}));
    }
}
