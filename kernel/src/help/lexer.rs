//! The small lexer behind help: it never fails, so it also reads what somebody is still typing.
//!
//! It knows as much of Rust's lexical grammar (The Rust Reference, "Lexical structure") as is needed
//! to tell code from strings and comments and to match delimiters. A front matter block (RFC 3503)
//! is recognised before any Rust.

/// A piece of a cell, by its bytes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Token {
    /// What it is.
    pub kind: TokenKind,
    /// Its first byte.
    pub start: usize,
    /// The byte after its last.
    pub end: usize,
}

/// What a piece is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TokenKind {
    /// An identifier or keyword.
    Ident,
    /// `'a`
    Lifetime,
    /// A number.
    Number,
    /// A string, byte string, C string or character.
    Text {
        /// Whether its closing quote is there.
        closed: bool,
    },
    /// A comment, documentation included.
    Comment {
        /// Whether it ended; a line comment at the very end of the text has not.
        closed: bool,
    },
    /// `(`, `[` or `{`
    Open(u8),
    /// `)`, `]` or `}`
    Close(u8),
    /// `::`
    PathSeparator,
    /// Any other sign, one at a time.
    Sign(u8),
}

impl Token {
    /// Its text.
    pub fn text<'a>(&self, code: &'a str) -> &'a str {
        &code[self.start..self.end]
    }
}

/// The front matter of a cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum FrontMatter {
    /// The cell begins with Rust.
    None,
    /// The fence was opened and not closed yet; the TOML begins at this byte.
    Open {
        /// The first byte after the opening line.
        inner: usize,
    },
    /// A whole block.
    Closed {
        /// The first byte after the opening line.
        inner: usize,
        /// The first byte of the closing line.
        fence: usize,
        /// The first byte of Rust.
        rest: usize,
    },
}

/// Finds the front matter of a cell: an opening line of three or more `-` and perhaps a word, up to
/// a line of the same number of `-`.
pub fn front_matter(code: &str) -> FrontMatter {
    let mut at = 0;
    let mut opened: Option<(usize, usize)> = None;
    for line in code.split_inclusive('\n') {
        let end = at + line.len();
        let dashes = line.bytes().take_while(|byte| *byte == b'-').count();
        let after = line[dashes..].trim();
        match opened {
            None if line.trim().is_empty() => {}
            None if dashes >= 3 && is_infostring(after) => opened = Some((dashes, end)),
            None => return FrontMatter::None,
            Some((fence, inner)) if dashes == fence && after.is_empty() => {
                return FrontMatter::Closed { inner, fence: at, rest: end };
            }
            Some(_) => {}
        }
        at = end;
    }
    match opened {
        Some((_, inner)) => FrontMatter::Open { inner },
        None => FrontMatter::None,
    }
}

fn is_infostring(text: &str) -> bool {
    text.chars().all(|c| c.is_alphanumeric() || c == '_' || c == '-' || c == '.')
        && !text.starts_with(['-', '.'])
}

/// The pieces of Rust text, without white space.
pub fn tokens(code: &str) -> Vec<Token> {
    let mut cursor = Cursor { code, bytes: code.as_bytes(), at: 0 };
    let mut tokens = Vec::new();
    while let Some(byte) = cursor.peek(0) {
        let start = cursor.at;
        if let Some(kind) = cursor.next_kind(byte) {
            tokens.push(Token { kind, start, end: cursor.at });
        }
    }
    tokens
}

struct Cursor<'a> {
    code: &'a str,
    bytes: &'a [u8],
    at: usize,
}

impl Cursor<'_> {
    fn peek(&self, ahead: usize) -> Option<u8> {
        self.bytes.get(self.at + ahead).copied()
    }

    fn current(&self) -> Option<char> {
        self.code[self.at..].chars().next()
    }

    /// Moves over one piece and says what it was; `None` for white space.
    fn next_kind(&mut self, byte: u8) -> Option<TokenKind> {
        match byte {
            b'/' if self.peek(1) == Some(b'/') => Some(self.line_comment()),
            b'/' if self.peek(1) == Some(b'*') => Some(self.block_comment()),
            b'"' => Some(self.quoted()),
            b'\'' => Some(self.lifetime_or_char()),
            b'r' | b'b' | b'c' if self.literal_prefix().is_some() => Some(self.prefixed_literal()),
            b'0'..=b'9' => Some(self.number()),
            b'(' | b'[' | b'{' => self.one(TokenKind::Open(byte)),
            b')' | b']' | b'}' => self.one(TokenKind::Close(byte)),
            b':' if self.peek(1) == Some(b':') => {
                self.at += 2;
                Some(TokenKind::PathSeparator)
            }
            _ if byte.is_ascii_punctuation() && byte != b'_' => self.one(TokenKind::Sign(byte)),
            _ => {
                let first = self.current()?;
                self.at += first.len_utf8();
                if !is_ident(first) {
                    return None;
                }
                self.skip_ident();
                Some(TokenKind::Ident)
            }
        }
    }

    fn one(&mut self, kind: TokenKind) -> Option<TokenKind> {
        self.at += 1;
        Some(kind)
    }

    fn skip_ident(&mut self) {
        while let Some(next) = self.current().filter(|next| is_ident(*next)) {
            self.at += next.len_utf8();
        }
    }

    fn line_comment(&mut self) -> TokenKind {
        let rest = &self.code[self.at..];
        let length = rest.find('\n');
        self.at += length.unwrap_or(rest.len());
        TokenKind::Comment { closed: length.is_some() }
    }

    fn block_comment(&mut self) -> TokenKind {
        self.at += 2;
        let mut depth = 1;
        while depth > 0 {
            match (self.peek(0), self.peek(1)) {
                (Some(b'*'), Some(b'/')) => {
                    depth -= 1;
                    self.at += 2;
                }
                (Some(b'/'), Some(b'*')) => {
                    depth += 1;
                    self.at += 2;
                }
                (Some(_), _) => self.at += 1,
                (None, _) => return TokenKind::Comment { closed: false },
            }
        }
        TokenKind::Comment { closed: true }
    }

    /// A string from its opening quote on, with escapes.
    fn quoted(&mut self) -> TokenKind {
        self.at += 1;
        while let Some(byte) = self.peek(0) {
            match byte {
                b'\\' => self.at = (self.at + 2).min(self.bytes.len()),
                b'"' => {
                    self.at += 1;
                    return TokenKind::Text { closed: true };
                }
                _ => self.at += 1,
            }
        }
        // An escape at the very end may have jumped into a character of several bytes.
        self.at = self.bytes.len();
        TokenKind::Text { closed: false }
    }

    /// How many bytes of `r`, `b`, `c` and how many `#` stand before a quote, if they do.
    fn literal_prefix(&self) -> Option<(usize, usize)> {
        let letters =
            self.bytes[self.at..].iter().take_while(|b| matches!(**b, b'r' | b'b' | b'c'));
        let letters = letters.count();
        let prefix = &self.code[self.at..self.at + letters];
        let hashes = self.bytes[self.at + letters..].iter().take_while(|b| **b == b'#').count();
        let quote = self.peek(letters + hashes);
        let raw = matches!(prefix, "r" | "br" | "cr");
        let plain = matches!(prefix, "b" | "c") && hashes == 0;
        let is_text = quote == Some(b'"') && (raw || plain);
        let is_byte = quote == Some(b'\'') && prefix == "b" && hashes == 0;
        let is_raw_ident = prefix == "r" && hashes == 1 && quote != Some(b'"');
        (is_text || is_byte || is_raw_ident).then_some((letters, hashes))
    }

    fn prefixed_literal(&mut self) -> TokenKind {
        let (letters, hashes) = self.literal_prefix().unwrap_or_default();
        let raw = self.bytes[self.at..self.at + letters].contains(&b'r');
        self.at += letters;
        match self.peek(hashes) {
            Some(b'"') if raw => {
                self.at += hashes + 1;
                let end = format!("\"{}", "#".repeat(hashes));
                let rest = &self.code[self.at..];
                let found = rest.find(&end);
                self.at += found.map_or(rest.len(), |found| found + end.len());
                TokenKind::Text { closed: found.is_some() }
            }
            Some(b'"') => self.quoted(),
            Some(b'\'') if !raw => self.lifetime_or_char(),
            _ => {
                self.at += hashes;
                self.skip_ident();
                TokenKind::Ident
            }
        }
    }

    /// `'a'` is a character, `'a` a lifetime; an escape can only be a character.
    fn lifetime_or_char(&mut self) -> TokenKind {
        self.at += 1;
        let mut ahead = self.code[self.at..].chars();
        let first = ahead.next();
        if first.is_some_and(|first| first != '\\' && first != '\'') && ahead.next() == Some('\'') {
            self.at += first.map_or(0, char::len_utf8) + 1;
            return TokenKind::Text { closed: true };
        }
        if first.is_some_and(is_ident) {
            self.skip_ident();
            return TokenKind::Lifetime;
        }
        // Characters do not span lines, so a missing quote costs the rest of one line at most.
        let rest = &self.code[self.at..];
        let line = rest.find('\n').unwrap_or(rest.len());
        let mut escaped = false;
        for (offset, byte) in rest.bytes().take(line).enumerate() {
            match byte {
                b'\\' if !escaped => escaped = true,
                b'\'' if !escaped => {
                    self.at += offset + 1;
                    return TokenKind::Text { closed: true };
                }
                _ => escaped = false,
            }
        }
        self.at += line;
        TokenKind::Text { closed: line < rest.len() }
    }

    fn number(&mut self) -> TokenKind {
        self.skip_ident();
        // `1.5` is one number, `1..5` and `1.max(2)` are not.
        if self.peek(0) == Some(b'.') && self.peek(1).is_some_and(|next| next.is_ascii_digit()) {
            self.at += 1;
            self.skip_ident();
        }
        let exponent = self.at > 0 && matches!(self.bytes[self.at - 1], b'e' | b'E');
        let signed = matches!(self.peek(0), Some(b'+' | b'-'));
        if exponent && signed && self.peek(1).is_some_and(|next| next.is_ascii_digit()) {
            self.at += 1;
            self.skip_ident();
        }
        TokenKind::Number
    }
}

fn is_ident(c: char) -> bool {
    c == '_' || c.is_alphanumeric()
}

/// The byte at which a number of code points ends; positions beyond the text mean its end.
pub fn byte_of(code: &str, chars: usize) -> usize {
    code.char_indices().nth(chars).map_or(code.len(), |(byte, _)| byte)
}

/// The number of code points before a byte.
pub fn chars_before(code: &str, byte: usize) -> usize {
    code[..byte].chars().count()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn kinds(code: &str) -> Vec<(&str, TokenKind)> {
        tokens(code).iter().map(|token| (token.text(code), token.kind)).collect()
    }

    #[test]
    fn strings_and_comments_hide_what_is_in_them() {
        let closed = TokenKind::Text { closed: true };
        assert_eq!(
            kinds(r##"r#"a " ("# "\"(" '(' b'\'' "##).iter().map(|k| k.1).collect::<Vec<_>>(),
            [closed; 4]
        );
        assert_eq!(
            kinds("/* ( /* { */ */"),
            [("/* ( /* { */ */", TokenKind::Comment { closed: true })]
        );
        assert_eq!(kinds("/* /* */").last().unwrap().1, TokenKind::Comment { closed: false });
        assert_eq!(kinds("\"open").last().unwrap().1, TokenKind::Text { closed: false });
        assert_eq!(kinds("r#\"open\"").last().unwrap().1, TokenKind::Text { closed: false });
    }

    #[test]
    fn lifetimes_numbers_and_raw_names_are_told_apart() {
        assert_eq!(kinds("&'a str")[1], ("'a", TokenKind::Lifetime));
        assert_eq!(kinds("1.5e-3 1..2 r#type")[0], ("1.5e-3", TokenKind::Number));
        assert_eq!(kinds("1..2")[0], ("1", TokenKind::Number));
        assert_eq!(kinds("r#type"), [("r#type", TokenKind::Ident)]);
        assert_eq!(kinds("größe::é")[1].1, TokenKind::PathSeparator);
    }

    #[test]
    fn front_matter_needs_its_own_closing_line() {
        assert_eq!(front_matter("let x = 1;"), FrontMatter::None);
        assert_eq!(front_matter("---x-1\n"), FrontMatter::Open { inner: 7 });
        assert_eq!(front_matter("\n---\n[cell]\n"), FrontMatter::Open { inner: 5 });
        let code = "---\n[cell]\n----\n---\nx";
        assert_eq!(front_matter(code), FrontMatter::Closed { inner: 4, fence: 16, rest: 20 });
    }

    proptest::proptest! {
        #[test]
        fn any_text_is_read_to_its_end(code in "\\PC*|[\"'rb#\\\\/*\n({é0-9.e:-]*") {
            let mut end = 0;
            for token in tokens(&code) {
                proptest::prop_assert!(token.start >= end && token.end > token.start);
                proptest::prop_assert!(code.get(token.start..token.end).is_some());
                end = token.end;
            }
        }
    }
}
