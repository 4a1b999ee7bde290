//! From bytes to tokens: the lexical layer of CIF 1.1 (International Tables for Crystallography, volume G, chapter 2.2),
//! as it is found in the wild.
//!
//! The lexer walks over the bytes once, keeps line and column, and never fails: what it cannot close it ends at the end
//! of the line (quotes) or of the file (text fields), with a diagnostic.
//! Line ends are LF, CR LF or a lone CR. NUL, vertical tab, form feed and the old end-of-file mark 0x1A count as blanks.
//! With the `#\#CIF_2.0` comment in front, quotes close at the next quote and triple quotes are read.

use crate::diagnostic::{Code, Diagnostic, Span};

/// The edition of the syntax a file declares.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Dialect {
    /// CIF 1.0 or 1.1, or no declaration.
    One,
    /// CIF 2.0, declared by the first line `#\#CIF_2.0`.
    Two,
}

/// What a token is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TokenKind {
    /// `data_name`; the content is the name.
    Block,
    /// `save_name`; the content is the name.
    Frame,
    /// `save_` alone.
    FrameEnd,
    /// `loop_`.
    Loop,
    /// `global_`, reserved and not part of CIF.
    Global,
    /// `stop_`, reserved and not part of CIF.
    Stop,
    /// A word that begins with an underscore.
    Tag,
    /// A word without quotes.
    Bare,
    /// Text between single, double or triple quotes; the content is what is inside.
    Quoted,
    /// A text field between semicolons at line starts; the content is what is inside, without the last line end.
    Text,
}

/// One token.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Token {
    /// What it is.
    pub kind: TokenKind,
    /// Where all of it is, delimiters included.
    pub span: Span,
    /// First byte of the content, which is the token without its delimiters.
    pub start: usize,
    /// One past the last byte of the content.
    pub end: usize,
}

/// Turns bytes into tokens.
#[derive(Debug)]
pub struct Lexer<'s> {
    bytes: &'s [u8],
    at: usize,
    line: usize,
    line_start: usize,
    dialect: Dialect,
    diagnostics: Vec<Diagnostic>,
}

const BYTE_ORDER_MARK: &[u8] = b"\xEF\xBB\xBF";

impl<'s> Lexer<'s> {
    /// A lexer at the start of the bytes. A UTF-8 byte order mark is skipped.
    #[must_use]
    pub fn new(bytes: &'s [u8]) -> Self {
        let start = if bytes.starts_with(BYTE_ORDER_MARK) { BYTE_ORDER_MARK.len() } else { 0 };
        let dialect = if bytes[start..].starts_with(b"#\\#CIF_2.0") { Dialect::Two } else { Dialect::One };
        Self { bytes, at: start, line: 1, line_start: start, dialect, diagnostics: Vec::new() }
    }

    /// The edition of the syntax the file declares.
    #[must_use]
    pub fn dialect(&self) -> Dialect {
        self.dialect
    }

    /// What was noticed so far.
    #[must_use]
    pub fn into_diagnostics(self) -> Vec<Diagnostic> {
        self.diagnostics
    }

    fn peek(&self) -> Option<u8> {
        self.bytes.get(self.at).copied()
    }

    /// Steps over the line end at the current byte.
    fn step_over_line_end(&mut self) {
        self.at += line_end_length(self.bytes, self.at);
        self.line += 1;
        self.line_start = self.at;
    }

    fn skip_blanks_and_comments(&mut self) {
        while let Some(byte) = self.peek() {
            match byte {
                b'\n' | b'\r' => self.step_over_line_end(),
                b'#' => self.at = line_end_after(self.bytes, self.at),
                _ if is_blank(byte) => self.at += 1,
                _ => return,
            }
        }
    }

    fn span_from(&self, start: usize, line: usize, line_start: usize) -> Span {
        Span { start, end: self.at, line, column: start - line_start + 1 }
    }

    fn text_field(&mut self) -> Token {
        let (start, line, line_start) = (self.at, self.line, self.line_start);
        self.at += 1;
        loop {
            self.at = line_end_after(self.bytes, self.at);
            let end = self.at;
            if self.peek().is_none() {
                let span = self.span_from(start, line, line_start);
                self.diagnostics.push(
                    Diagnostic::error(
                        Code::CifTextOpen,
                        format!("the text field that begins at line {line} is not closed; the rest of the file was taken as its text"),
                    )
                    .at(Span { end: start + 1, ..span })
                    .hint("end it with a line that begins with ;"),
                );
                return Token { kind: TokenKind::Text, span, start: start + 1, end };
            }
            self.step_over_line_end();
            if self.peek() == Some(b';') {
                self.at += 1;
                let span = self.span_from(start, line, line_start);
                return Token { kind: TokenKind::Text, span, start: start + 1, end };
            }
        }
    }

    fn quoted(&mut self, quote: u8) -> Token {
        let (start, line, line_start) = (self.at, self.line, self.line_start);
        if self.dialect == Dialect::Two && self.bytes[start..].starts_with(&[quote; 3]) {
            return self.triple_quoted(quote);
        }
        self.at += 1;
        while let Some(byte) = self.peek() {
            if byte == b'\n' || byte == b'\r' {
                break;
            }
            self.at += 1;
            let is_closing = byte == quote
                && (self.dialect == Dialect::Two || self.peek().is_none_or(is_blank_or_line_end));
            if is_closing {
                let span = self.span_from(start, line, line_start);
                return Token { kind: TokenKind::Quoted, span, start: start + 1, end: self.at - 1 };
            }
        }
        let span = self.span_from(start, line, line_start);
        let end = start + 1 + self.bytes[start + 1..self.at].trim_ascii_end().len();
        self.diagnostics.push(
            Diagnostic::error(
                Code::CifQuoteOpen,
                format!(
                    "the quote {} is not closed on its line; the rest of the line was taken as the value",
                    char::from(quote)
                ),
            )
            .at(span)
            .hint(format!("end the value with {} and a blank", char::from(quote))),
        );
        Token { kind: TokenKind::Quoted, span, start: start + 1, end }
    }

    fn triple_quoted(&mut self, quote: u8) -> Token {
        let (start, line, line_start) = (self.at, self.line, self.line_start);
        self.at += 3;
        while let Some(byte) = self.peek() {
            if byte == b'\n' || byte == b'\r' {
                self.step_over_line_end();
            } else if self.bytes[self.at..].starts_with(&[quote; 3]) {
                let end = self.at;
                self.at += 3;
                let span = self.span_from(start, line, line_start);
                return Token { kind: TokenKind::Quoted, span, start: start + 3, end };
            } else {
                self.at += 1;
            }
        }
        let span = self.span_from(start, line, line_start);
        self.diagnostics.push(
            Diagnostic::error(
                Code::CifTextOpen,
                format!(
                    "the triple quote that begins at line {line} is not closed; the rest of the file was taken as its text"
                ),
            )
            .at(Span { end: start + 3, ..span })
            .hint("end it with the same three quotes"),
        );
        Token { kind: TokenKind::Quoted, span, start: start + 3, end: self.at }
    }

    fn word(&mut self) -> Token {
        let start = self.at;
        while self.peek().is_some_and(|byte| !is_blank_or_line_end(byte)) {
            self.at += 1;
        }
        let span = self.span_from(start, self.line, self.line_start);
        let word = &self.bytes[start..self.at];
        let (kind, lead) = match word[0] {
            b'_' => (TokenKind::Tag, 0),
            b'd' | b'D' if has_prefix(word, b"data_") => (TokenKind::Block, 5),
            b's' | b'S' if word.eq_ignore_ascii_case(b"save_") => (TokenKind::FrameEnd, 0),
            b's' | b'S' if has_prefix(word, b"save_") => (TokenKind::Frame, 5),
            b's' | b'S' if word.eq_ignore_ascii_case(b"stop_") => (TokenKind::Stop, 0),
            b'l' | b'L' if word.eq_ignore_ascii_case(b"loop_") => (TokenKind::Loop, 0),
            b'g' | b'G' if word.eq_ignore_ascii_case(b"global_") => (TokenKind::Global, 0),
            _ => (TokenKind::Bare, 0),
        };
        Token { kind, span, start: start + lead, end: self.at }
    }
}

impl Iterator for Lexer<'_> {
    type Item = Token;

    fn next(&mut self) -> Option<Token> {
        self.skip_blanks_and_comments();
        match self.peek()? {
            b';' if self.at == self.line_start => Some(self.text_field()),
            quote @ (b'\'' | b'"') => Some(self.quoted(quote)),
            _ => Some(self.word()),
        }
    }
}

/// What is wrong with the bytes themselves: an encoding that cannot be read, bytes that are not UTF-8, control bytes.
/// Each is reported once, at its first place.
pub(super) fn inspect(bytes: &[u8]) -> Vec<Diagnostic> {
    if bytes.starts_with(&[0xFF, 0xFE]) || bytes.starts_with(&[0xFE, 0xFF]) {
        return vec![
            Diagnostic::error(Code::CifEncoding, "the file is in UTF-16, not in ASCII or UTF-8")
                .at(span_of_byte(bytes, 0))
                .hint("iconv -f UTF-16 -t UTF-8 FILE"),
        ];
    }
    let mut found = Vec::new();
    if let Err(error) = std::str::from_utf8(bytes) {
        let offset = error.valid_up_to();
        found.push(
            Diagnostic::warning(
                Code::CifNotUtf8,
                format!(
                    "byte 0x{:02X} is not UTF-8; such bytes are shown as \u{FFFD}",
                    bytes.get(offset).copied().unwrap_or_default()
                ),
            )
            .at(span_of_byte(bytes, offset))
            .hint("iconv -f ISO-8859-1 -t UTF-8 FILE"),
        );
    }
    let is_control = |&byte: &u8| byte < 0x20 && !matches!(byte, b'\t' | b'\n' | b'\r');
    if let Some(offset) = bytes.iter().position(is_control) {
        found.push(
            Diagnostic::warning(
                Code::CifControlByte,
                format!("control byte 0x{:02X} in the text", bytes[offset]),
            )
            .at(span_of_byte(bytes, offset))
            .hint("tr -d '\\000-\\010\\013\\014\\016-\\037' < FILE"),
        );
    }
    found
}

/// The span of one byte, found by counting lines from the start.
fn span_of_byte(bytes: &[u8], offset: usize) -> Span {
    let (mut at, mut line, mut line_start) = (0, 1, 0);
    while at < offset {
        let length = line_end_length(bytes, at);
        at += length.max(1);
        if length > 0 && at <= offset {
            line += 1;
            line_start = at;
        }
    }
    Span { start: offset, end: (offset + 1).min(bytes.len()), line, column: offset - line_start + 1 }
}

/// Offset of the first line end at or after `from`, or the end of the bytes.
fn line_end_after(bytes: &[u8], from: usize) -> usize {
    bytes[from..].iter().position(|&b| b == b'\n' || b == b'\r').map_or(bytes.len(), |n| from + n)
}

/// How many bytes the line end at `at` has: none, one or two.
fn line_end_length(bytes: &[u8], at: usize) -> usize {
    match bytes.get(at) {
        Some(b'\r') if bytes.get(at + 1) == Some(&b'\n') => 2,
        Some(b'\r' | b'\n') => 1,
        _ => 0,
    }
}

fn is_blank(byte: u8) -> bool {
    matches!(byte, b' ' | b'\t' | 0x0B | 0x0C | 0x00 | 0x1A)
}

fn is_blank_or_line_end(byte: u8) -> bool {
    is_blank(byte) || byte == b'\n' || byte == b'\r'
}

fn has_prefix(word: &[u8], prefix: &[u8]) -> bool {
    word.len() >= prefix.len() && word[..prefix.len()].eq_ignore_ascii_case(prefix)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn tokens(text: &str) -> Vec<(TokenKind, String)> {
        Lexer::new(text.as_bytes())
            .map(|token| (token.kind, text[token.start..token.end].to_owned()))
            .collect()
    }

    fn codes(bytes: &[u8]) -> Vec<Code> {
        let mut lexer = Lexer::new(bytes);
        while lexer.next().is_some() {}
        lexer.into_diagnostics().into_iter().map(|d| d.code).collect()
    }

    #[test]
    fn words_and_keywords() {
        // Reserved words are told apart whatever their case: vol. G, 2.2.7.1, appendix 2.2.7.1.
        use TokenKind::{Bare, Block, Frame, FrameEnd, Global, Loop, Stop, Tag};
        let found = tokens("DATA_x LOOP_ _tag save_f save_ global_ stop_ loop_s 1.5 # comment\nx#y");
        let kinds: Vec<_> = found.iter().map(|t| t.0).collect();
        assert_eq!(kinds, [Block, Loop, Tag, Frame, FrameEnd, Global, Stop, Bare, Bare, Bare]);
        // A # inside a word does not begin a comment (2.2.7.1, paragraph 21).
        assert_eq!(found[9].1, "x#y");
    }

    #[test]
    fn quotes_close_before_a_blank_only() {
        // The example of the specification, 2.2.7.1 paragraph 15.
        assert_eq!(tokens("'a dog's life'")[0], (TokenKind::Quoted, "a dog's life".to_owned()));
        assert_eq!(tokens("\"x,y\" '' z").len(), 3);
        assert_eq!(tokens("'O5''' x")[0].1, "O5''");
    }

    #[test]
    fn text_fields_begin_at_line_start() {
        let found = tokens(";one\ntwo\n; ;three\n");
        assert_eq!(found[0], (TokenKind::Text, "one\ntwo".to_owned()));
        assert_eq!(found[1], (TokenKind::Bare, ";three".to_owned()));
        assert_eq!(tokens(";a\r\nb\r\n;")[0].1, "a\r\nb");
        assert_eq!(tokens(";a\rb\r;")[0].1, "a\rb");
    }

    #[test]
    fn open_quotes_and_text_fields_are_reported() {
        assert_eq!(codes(b"'open \nnext"), [Code::CifQuoteOpen]);
        assert_eq!(tokens("'open \nnext")[0].1, "open");
        assert_eq!(codes(b";open\nnext"), [Code::CifTextOpen]);
    }

    #[test]
    fn positions_count_all_line_ends() {
        let text = b"a\nb\r\nc\rd  e";
        let places: Vec<_> = Lexer::new(text).map(|t| (t.span.line, t.span.column)).collect();
        assert_eq!(places, [(1, 1), (2, 1), (3, 1), (4, 1), (4, 4)]);
    }

    #[test]
    fn second_edition_closes_quotes_at_once() {
        let found = tokens("#\\#CIF_2.0\n'''a\n'b''' 'c'");
        assert_eq!(found[0].1, "a\n'b");
        assert_eq!(found[1].1, "c");
    }

    #[test]
    fn bytes_are_inspected_once() {
        let found = inspect(b"ab\n\xE9\xE9\x00\x00");
        assert_eq!(
            found.iter().map(|d| d.code).collect::<Vec<_>>(),
            [Code::CifNotUtf8, Code::CifControlByte]
        );
        assert_eq!(found[0].span.map(|s| (s.line, s.column)), Some((2, 1)));
        assert_eq!(inspect(b"\xFF\xFEd\0")[0].code, Code::CifEncoding);
        assert!(inspect("# Å\n\t".as_bytes()).is_empty());
    }

    proptest! {
        #[test]
        fn spans_are_in_bounds_and_ordered(bytes in proptest::collection::vec(any::<u8>(), 0..400)) {
            check_spans(&bytes)?;
        }

        #[test]
        fn spans_are_ordered_in_text_that_looks_like_a_file(
            text in proptest::collection::vec(
                proptest::sample::select(vec!["data_", "loop_", "_a", "'", "\"", ";", "\n", "\r", " ", "#", "'''", "x", "save_"]),
                0..60,
            )
        ) {
            check_spans(text.concat().as_bytes())?;
        }
    }

    fn check_spans(bytes: &[u8]) -> Result<(), TestCaseError> {
        let mut end = 0;
        for token in Lexer::new(bytes) {
            prop_assert!(token.span.start >= end && token.span.end > token.span.start);
            prop_assert!(token.span.end <= bytes.len());
            prop_assert_eq!(span_of_byte(bytes, token.span.start).line, token.span.line);
            end = token.span.end;
        }
        Ok(())
    }
}
