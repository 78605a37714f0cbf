//! Cuts a byte stream into protocol frames, leniently: header names in any case, LF or CRLF, noise
//! before a header, lengths that are wrong or absurd. It knows bytes only, nothing of JSON.
//!
//! Base protocol: Language Server Protocol 3.17, "Base Protocol" (Content-Length, Content-Type).

use std::io::{self, BufRead, Read};

/// Largest body accepted, in bytes. The largest netlist file is 64 MiB; JSON escapes at most
/// double ordinary text, and the rest is room for a client that escapes more than it must.
pub const MAX_BODY_BYTES: u64 = 256 * 1024 * 1024;

/// Longest part of one header line that is kept. Longer lines are noise (a body whose header was
/// unusable), of which only the tail can still hold the next header.
const MAX_LINE_BYTES: usize = 4096;

/// Tail kept of an overlong line: room for `Content-Length: ` and twenty digits, and to spare.
const LINE_TAIL_BYTES: usize = 128;

const LENGTH_NAME: &[u8] = b"content-length";

/// Reads frames from a byte stream.
pub struct FrameReader<R> {
    input: R,
    /// Bytes given back by [`FrameReader::unread`], read before `input`.
    pending: io::Cursor<Vec<u8>>,
}

impl<R: BufRead> FrameReader<R> {
    /// Wraps a byte stream.
    pub fn new(input: R) -> Self {
        FrameReader {
            input,
            pending: io::Cursor::new(Vec::new()),
        }
    }

    /// Returns the next body, or `None` at the end of the stream. A body cut off by the end of the
    /// stream is dropped with a log line.
    ///
    /// # Errors
    /// An I/O error of the stream, except interruption, which is retried.
    pub fn next_body(&mut self) -> io::Result<Option<Vec<u8>>> {
        let Some(length) = self.read_header()? else {
            return Ok(None);
        };
        // `take` and `read_to_end` grow the buffer with what really arrives, so a wrong length
        // costs no memory in advance.
        let mut body = Vec::new();
        let rest =
            length.saturating_sub((&mut self.pending).take(length).read_to_end(&mut body)? as u64);
        (&mut self.input).take(rest).read_to_end(&mut body)?;
        if (body.len() as u64) < length {
            log::warn!(
                "input ended after {} of {length} bytes of a message",
                body.len()
            );
            return Ok(None);
        }
        Ok(Some(body))
    }

    /// Gives bytes back, to be read again before the rest of the stream.
    pub fn unread(&mut self, mut bytes: Vec<u8>) {
        let position = usize::try_from(self.pending.position()).unwrap_or(usize::MAX);
        bytes.extend_from_slice(self.pending.get_ref().get(position..).unwrap_or_default());
        self.pending = io::Cursor::new(bytes);
    }

    /// Reads lines until a blank line that follows a usable length; `None` at the end of input.
    fn read_header(&mut self) -> io::Result<Option<u64>> {
        let mut length = None;
        let mut noise_bytes = 0_usize;
        let mut line = Vec::new();
        loop {
            let (line_bytes, complete) = self.read_line(&mut line)?;
            if !complete {
                if line_bytes + noise_bytes > 0 {
                    log::warn!("input ended inside a message header");
                }
                return Ok(None);
            }
            let text = line.trim_ascii();
            if text.is_empty() {
                match length {
                    Some(length) => {
                        if noise_bytes > 0 {
                            log::warn!("skipped {noise_bytes} bytes before a message header");
                        }
                        return Ok(Some(length));
                    }
                    None => continue,
                }
            }
            match find_length(text) {
                Some(Ok(found)) if found <= MAX_BODY_BYTES => length = Some(found),
                Some(Ok(found)) => {
                    log::error!("message of {found} bytes refused, the limit is {MAX_BODY_BYTES}");
                    (length, noise_bytes) = (None, noise_bytes + line_bytes);
                }
                Some(Err(())) => {
                    log::warn!("unusable Content-Length header skipped");
                    (length, noise_bytes) = (None, noise_bytes + line_bytes);
                }
                None if is_other_header(text) => {}
                None => noise_bytes += line_bytes,
            }
        }
    }

    /// Reads one line without its LF into `line`, at most its tail if it is overlong. Returns the
    /// number of bytes consumed and whether the line was ended by LF.
    fn read_line(&mut self, line: &mut Vec<u8>) -> io::Result<(usize, bool)> {
        line.clear();
        let (from_pending, complete) = read_line_from(&mut self.pending, line)?;
        if complete {
            return Ok((from_pending, true));
        }
        let (from_input, complete) = read_line_from(&mut self.input, line)?;
        Ok((from_pending + from_input, complete))
    }
}

fn read_line_from(source: &mut impl BufRead, line: &mut Vec<u8>) -> io::Result<(usize, bool)> {
    let mut consumed = 0;
    loop {
        let chunk = match source.fill_buf() {
            Ok(chunk) => chunk,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => continue,
            Err(error) => return Err(error),
        };
        if chunk.is_empty() {
            return Ok((consumed, false));
        }
        let end = chunk.iter().position(|&byte| byte == b'\n');
        let (text, used) = match end {
            Some(end) => (chunk.get(..end).unwrap_or_default(), end + 1),
            None => (chunk, chunk.len()),
        };
        line.extend_from_slice(text);
        if line.len() > MAX_LINE_BYTES {
            line.drain(..line.len() - LINE_TAIL_BYTES);
        }
        source.consume(used);
        consumed += used;
        if end.is_some() {
            return Ok((consumed, true));
        }
    }
}

/// Finds the last `content-length: N` in a line. It may follow noise on the same line: the rest of
/// a body that was longer than its header said has no line end of its own.
fn find_length(line: &[u8]) -> Option<Result<u64, ()>> {
    let start = line
        .windows(LENGTH_NAME.len())
        .rposition(|window| window.eq_ignore_ascii_case(LENGTH_NAME))?;
    length_after_name(line.get(start + LENGTH_NAME.len()..)?)
}

/// Reads `: N` to the end of the line.
fn length_after_name(rest: &[u8]) -> Option<Result<u64, ()>> {
    let digits = rest.trim_ascii_start().strip_prefix(b":")?.trim_ascii();
    let value = std::str::from_utf8(digits)
        .ok()
        .and_then(|text| text.parse().ok());
    Some(value.ok_or(()))
}

/// Whether a line looks like a header that needs no attention: `Name: value`, name a token.
fn is_other_header(line: &[u8]) -> bool {
    let name = line.split(|&byte| byte == b':').next().unwrap_or_default();
    name.len() < line.len()
        && !name.is_empty()
        && name
            .iter()
            .all(|byte| byte.is_ascii_alphanumeric() || *byte == b'-')
}

/// Finds where the next header starts inside a body that could not be parsed: the stated length was
/// too great and swallowed the beginning of the next frame. Returns its offset.
///
/// A raw line end cannot stand inside a JSON string, and nothing follows its last brace, so text
/// that merely quotes a header never matches.
pub fn swallowed_header(body: &[u8]) -> Option<usize> {
    whole_header(body).or_else(|| cut_header(body))
}

/// Offset of a complete length line.
fn whole_header(body: &[u8]) -> Option<usize> {
    let mut from = 0;
    loop {
        let rest = body.get(from..)?;
        let at = rest
            .windows(LENGTH_NAME.len())
            .position(|window| window.eq_ignore_ascii_case(LENGTH_NAME))?;
        let start = from + at;
        from = start + LENGTH_NAME.len();
        let rest = body.get(from..)?;
        let end = rest
            .iter()
            .take(LINE_TAIL_BYTES)
            .position(|&byte| byte == b'\n');
        if let Some(end) = end
            && matches!(length_after_name(rest.get(..end)?), Some(Ok(_)))
        {
            return Some(start);
        }
    }
}

/// Offset of the beginning of a length line that the end of the body cuts off.
fn cut_header(body: &[u8]) -> Option<usize> {
    let brace = body.iter().rposition(|&byte| byte == b'}')?;
    let tail = body.get(brace + 1..)?.trim_ascii_start();
    let name = tail.get(..LENGTH_NAME.len().min(tail.len()))?;
    let rest = tail.get(name.len()..)?;
    let cut = !name.is_empty()
        && name.eq_ignore_ascii_case(LENGTH_NAME.get(..name.len())?)
        && rest
            .iter()
            .all(|byte| matches!(byte, b':' | b' ' | b'\r' | b'0'..=b'9'));
    cut.then_some(body.len() - tail.len())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[track_caller]
    fn bodies(input: &[u8]) -> Vec<String> {
        let mut reader = FrameReader::new(io::Cursor::new(input.to_vec()));
        let mut found = Vec::new();
        while let Some(body) = reader.next_body().expect("a cursor cannot fail") {
            found.push(String::from_utf8_lossy(&body).into_owned());
        }
        found
    }

    #[test]
    fn reads_what_the_base_protocol_allows() {
        assert_eq!(
            bodies(b"Content-Length: 2\r\n\r\n{}Content-Length: 4\r\n\r\nnull"),
            ["{}", "null"]
        );
        let typed = b"Content-Type: application/vscode-jsonrpc; charset=utf-8\r\nContent-Length: 2\r\n\r\n{}";
        assert_eq!(bodies(typed), ["{}"]);
        assert_eq!(
            bodies(b"Content-Length: 0\r\n\r\nContent-Length: 2\r\n\r\n{}"),
            ["", "{}"]
        );
        assert_eq!(bodies(b""), Vec::<String>::new());
    }

    #[test]
    fn accepts_any_case_bare_lf_and_spaces() {
        assert_eq!(bodies(b"content-length: 2\r\n\r\n{}"), ["{}"]);
        assert_eq!(bodies(b"CONTENT-LENGTH :2\n\n{}"), ["{}"]);
        assert_eq!(
            bodies(b"\r\n\r\ncontent-Length:   2  \r\nX-Other: 1\r\nA: b\r\nC: d\r\n\r\n{}"),
            ["{}"]
        );
    }

    #[test]
    fn resynchronises_after_a_bad_header() {
        let after = |bad: &str| bodies(format!("{bad}Content-Length: 2\r\n\r\n{{}}").as_bytes());
        assert_eq!(after("Content-Length: x\r\n\r\n{\"a\":1}"), ["{}"]);
        assert_eq!(after("Content-Length: -5\r\n\r\n{\"a\":1}"), ["{}"]);
        assert_eq!(
            after("Content-Length: 99999999999999999999999\r\n\r\nabc"),
            ["{}"]
        );
        assert_eq!(after("Content-Length: 999999999999\r\n\r\nabc"), ["{}"]);
        assert_eq!(after("Length: 7\r\n\r\n{\"a\":1}"), ["{}"]);
        assert_eq!(after("noise on the line without an end "), ["{}"]);
        assert_eq!(after("more\nnoise: \u{fc}\n\n\n"), ["{}"]);
    }

    #[test]
    fn a_length_too_short_loses_one_frame_only() {
        let input =
            b"Content-Length: 3\r\n\r\n{\"a\":\"Content-Length: 5\"}Content-Length: 2\r\n\r\n{}";
        assert_eq!(bodies(input), ["{\"a", "{}"]);
    }

    #[test]
    fn an_overlong_noise_line_is_not_kept() {
        let mut input = vec![b'x'; 3_000_000];
        input.extend_from_slice(b"Content-Length: 2\r\n\r\n{}");
        assert_eq!(bodies(&input), ["{}"]);
        let mut reader = FrameReader::new(io::Cursor::new(vec![b'x'; 3_000_000]));
        let mut line = Vec::new();
        let (bytes, complete) = reader.read_line(&mut line).expect("a cursor cannot fail");
        assert!((bytes, complete) == (3_000_000, false) && line.len() <= MAX_LINE_BYTES);
    }

    #[test]
    fn input_that_ends_inside_a_frame_is_the_end() {
        assert_eq!(bodies(b"Content-Length: 5\r\n\r\n{}"), Vec::<String>::new());
        assert_eq!(bodies(b"Content-Length: 5\r\n"), Vec::<String>::new());
        assert_eq!(bodies(b"Content-Length: 2\r\n\r\n{}Content-Le"), ["{}"]);
    }

    #[test]
    fn bytes_given_back_are_read_first() {
        let mut reader = FrameReader::new(io::Cursor::new(b"th: 4\r\n\r\nnull".to_vec()));
        reader.unread(b"Content-Leng".to_vec());
        reader.unread(b"Content-Length: 3\r\n\r\n\"7\"".to_vec());
        let mut next = || reader.next_body().expect("a cursor cannot fail");
        assert_eq!(next().as_deref(), Some(b"\"7\"".as_slice()));
        assert_eq!(next().as_deref(), Some(b"null".as_slice()));
        assert_eq!(next(), None);

        let mut reader = FrameReader::new(io::Cursor::new(b"ll".to_vec()));
        reader.unread(b"Content-Length: 4\r\n\r\nnu".to_vec());
        assert_eq!(
            reader.next_body().expect("a cursor cannot fail").as_deref(),
            Some(b"null".as_slice())
        );
    }

    #[test]
    fn finds_a_swallowed_header_but_no_quoted_one() {
        let body = b"{\"a\":1}Content-Length: 52\r\n\r\n{\"jso";
        assert_eq!(swallowed_header(body), Some(7));
        assert_eq!(
            swallowed_header(b"{\"a\":\"Content-Length: 52\\r\\n\"}"),
            None
        );
        assert_eq!(
            swallowed_header(b"{\"a\":\"content-length\"}content-length: 1\n\n"),
            Some(22)
        );
        assert_eq!(swallowed_header(b""), None);
        assert_eq!(swallowed_header(b"{}C"), Some(2));
        assert_eq!(swallowed_header(b"{} \r\nContent-Length: 1"), Some(5));
        assert_eq!(swallowed_header(b"{}Continue"), None);
        assert_eq!(swallowed_header(b"{\"a\":\"}Content-Length\"}"), None);
    }
}
