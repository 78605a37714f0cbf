//! Tokens of a netlist. Every byte of the text belongs to exactly one token, so the
//! text can be put together again from them.

/// The kinds of token.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum TokenKind {
    /// Blanks and tabs.
    Space,
    /// LF, CRLF or CR.
    Newline,
    /// A comment line, or `$`/`;` behind white space to the end of the line.
    Comment,
    /// `*~` at the start of a line.
    MarkIntro,
    /// `*~+` at the start of a line.
    MarkContinue,
    /// `+` at the start of a line.
    Continue,
    /// A run of other characters.
    Word,
    /// `=`.
    Equals,
    /// `(`.
    Open,
    /// `)`.
    Close,
    /// `,`.
    Comma,
    /// `'...'` or `{...}`: an expression.
    Quoted,
    /// `"..."`.
    Text,
    /// A quote, brace or double quote that the card does not close.
    Unclosed,
    /// The title line, or a line of an opaque section.
    Opaque,
}

/// A token: its kind and where it ends (it starts where the one before it ends).
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Token {
    /// Kind.
    pub kind: TokenKind,
    /// First byte.
    pub start: u32,
    /// One past the last byte.
    pub end: u32,
}

/// Lexes one physical line (and the lines that a quoted token runs over) from `at`.
pub(super) struct LineLexer<'t> {
    text: &'t str,
    at: usize,
    pub(super) tokens: Vec<Token>,
}

impl<'t> LineLexer<'t> {
    pub(super) fn new(text: &'t str) -> Self {
        Self {
            text,
            at: 0,
            tokens: Vec::with_capacity(text.len() / 3),
        }
    }

    /// Whether the text is used up.
    pub(super) fn done(&self) -> bool {
        self.at >= self.text.len()
    }

    /// The rest of the current physical line, its break not included.
    pub(super) fn peek_line(&self) -> &'t str {
        let rest = self.rest();
        let end = rest.find(['\n', '\r']).unwrap_or(rest.len());
        &rest[..end]
    }

    /// Takes the whole line as one token of `kind`.
    pub(super) fn take_line(&mut self, kind: TokenKind) {
        let length = self.peek_line().len();
        self.push(kind, length);
        self.take_newline();
    }

    /// Takes the line as tokens. The caller has told from the line's first sign what it is.
    pub(super) fn lex_line(&mut self) {
        self.take_space();
        let rest = self.rest();
        if rest.starts_with("*~+") {
            self.push(TokenKind::MarkContinue, 3);
        } else if rest.starts_with("*~") {
            self.push(TokenKind::MarkIntro, 2);
        } else if rest.starts_with('+') {
            self.push(TokenKind::Continue, 1);
        }
        let mut after_space = true;
        while let Some(first) = self.rest().chars().next() {
            match first {
                '\n' | '\r' => break,
                c if c.is_whitespace() || c == '\u{FEFF}' => {
                    self.take_space();
                    after_space = true;
                    continue;
                }
                '$' | ';' if after_space => self.take_to_line_end(TokenKind::Comment),
                '=' => self.push(TokenKind::Equals, 1),
                '(' => self.push(TokenKind::Open, 1),
                ')' => self.push(TokenKind::Close, 1),
                ',' => self.push(TokenKind::Comma, 1),
                '\'' => self.take_quoted('\'', TokenKind::Quoted),
                '"' => self.take_quoted('"', TokenKind::Text),
                '{' => self.take_braced(),
                _ => self.take_word(),
            }
            after_space = false;
        }
        self.take_newline();
    }

    fn rest(&self) -> &'t str {
        self.text.get(self.at..).unwrap_or("")
    }

    fn push(&mut self, kind: TokenKind, length: usize) {
        if length == 0 {
            return;
        }
        let start = self.at as u32;
        self.at += length;
        self.tokens.push(Token {
            kind,
            start,
            end: self.at as u32,
        });
    }

    fn take_space(&mut self) {
        let rest = self.rest();
        let length = rest
            .find(|c: char| !(c.is_whitespace() || c == '\u{FEFF}') || c == '\n' || c == '\r')
            .unwrap_or(rest.len());
        self.push(TokenKind::Space, length);
    }

    fn take_newline(&mut self) {
        let rest = self.rest();
        let length = if rest.starts_with("\r\n") {
            2
        } else {
            usize::from(rest.starts_with(['\n', '\r']))
        };
        self.push(TokenKind::Newline, length);
    }

    fn take_to_line_end(&mut self, kind: TokenKind) {
        let length = self.peek_line().len();
        self.push(kind, length);
    }

    fn take_word(&mut self) {
        let rest = self.rest();
        let length = rest
            .char_indices()
            .skip(1)
            .find(|&(_, c)| {
                c.is_whitespace()
                    || matches!(c, '\u{FEFF}' | '=' | '(' | ')' | ',' | '\'' | '"' | '{')
            })
            .map_or(rest.len(), |(at, _)| at);
        self.push(TokenKind::Word, length);
    }

    /// A token up to the next `sign`; it may run over continuation lines.
    fn take_quoted(&mut self, sign: char, kind: TokenKind) {
        let end = self.find_end(|c, depth| {
            if c == sign && depth > 0 {
                0
            } else {
                depth.max(1)
            }
        });
        self.finish_quoted(end, kind);
    }

    fn take_braced(&mut self) {
        let end = self.find_end(|c, depth| match c {
            '{' => depth + 1,
            '}' => depth.saturating_sub(1),
            _ => depth,
        });
        self.finish_quoted(end, TokenKind::Quoted);
    }

    fn finish_quoted(&mut self, end: Option<usize>, kind: TokenKind) {
        match end {
            Some(length) => self.push(kind, length),
            None => self.take_to_line_end(TokenKind::Unclosed),
        }
    }

    /// Length of the token that starts here: `step` maps sign and depth to the new depth, and
    /// the token ends where the depth falls to zero. `None` when the card ends before.
    fn find_end(&self, step: impl Fn(char, usize) -> usize) -> Option<usize> {
        let rest = self.rest();
        let mut depth = 0;
        for (at, c) in rest.char_indices() {
            if c == '\n' || c == '\r' {
                let next = rest[at..].trim_start_matches(['\n', '\r', ' ', '\t']);
                if !next.starts_with('+') {
                    return None;
                }
            }
            depth = step(c, depth);
            if depth == 0 {
                return Some(at + c.len_utf8());
            }
        }
        None
    }
}
