//! From bytes to tokens: the lexical layer of CIF 1.1 (International Tables for Crystallography, volume G, chapter 2.2),
//! as it is found in the wild, and of CIF 2.0 (Bernstein et al., J. Appl. Cryst. 49 (2016) 277).
//!
//! The lexer walks over the bytes once, keeps line and column, and never fails: what it cannot close it ends at the end
//! of the line (quotes) or of the file (text fields), with a diagnostic.
//! Line ends are LF, CR LF or a lone CR. NUL, vertical tab, form feed and the old end-of-file mark 0x1A count as blanks.
//! With the `#\#CIF_2.0` comment in front, quotes close at the next quote, triple quotes are read, words end before
//! brackets, and a list or a table is one token, whatever is inside.

mod compound;

pub(super) use compound::{Part, parts};

use super::findings::Findings;
use super::source::{BYTE_ORDER_MARK, LineStart, line_end_after, line_end_length};
use super::text::lacks_prefix;
use crate::diagnostic::{Code, Diagnostic, Span};

/// The edition of the syntax a file declares.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Dialect {
    /// CIF 1.0 or 1.1, or no declaration.
    One,
    /// CIF 2.0, declared by the first line `#\#CIF_2.0`.
    Two,
}

/// What the first line of a file declares.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Declared {
    Nothing,
    Edition(Dialect),
    Other,
}

const MAGIC: &[u8] = b"#\\#CIF_";

fn declared(bytes: &[u8]) -> Declared {
    let Some(rest) = bytes.strip_prefix(MAGIC) else { return Declared::Nothing };
    let end = rest.iter().position(|&byte| is(byte, BLANK | LINE_END)).unwrap_or(rest.len());
    match &rest[..end] {
        b"1.0" | b"1.1" => Declared::Edition(Dialect::One),
        b"2.0" => Declared::Edition(Dialect::Two),
        _ => Declared::Other,
    }
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
    /// A list of CIF 2.0; the content is what is between the brackets.
    List,
    /// A table of CIF 2.0; the content is what is between the braces.
    Table,
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
    findings: Findings,
}

impl<'s> Lexer<'s> {
    /// A lexer at the start of the bytes. A UTF-8 byte order mark is skipped.
    #[must_use]
    pub fn new(bytes: &'s [u8]) -> Self {
        let start = if bytes.starts_with(BYTE_ORDER_MARK) { BYTE_ORDER_MARK.len() } else { 0 };
        let declared = declared(&bytes[start..]);
        let dialect = match declared {
            Declared::Edition(dialect) => dialect,
            Declared::Nothing | Declared::Other => Dialect::One,
        };
        let findings = Findings::default();
        let mut lexer = Self { bytes, at: start, line: 1, line_start: start, dialect, findings };
        if declared == Declared::Other {
            lexer.report_edition();
        }
        lexer
    }

    /// A lexer in the middle of a file, which reports nothing.
    pub(super) fn within(bytes: &'s [u8], at: usize, line: LineStart, dialect: Dialect) -> Self {
        // The first line begins after a byte order mark.
        let is_marked = line.start == 0 && bytes.starts_with(BYTE_ORDER_MARK);
        let line_start = if is_marked { BYTE_ORDER_MARK.len() } else { line.start };
        Self { bytes, at, line: line.line, line_start, dialect, findings: Findings::silent() }
    }

    /// The edition of the syntax the file declares.
    #[must_use]
    pub fn dialect(&self) -> Dialect {
        self.dialect
    }

    /// What was noticed so far.
    #[must_use]
    pub fn into_diagnostics(self) -> Vec<Diagnostic> {
        self.findings.merge(Findings::default())
    }

    pub(super) fn into_findings(self) -> Findings {
        self.findings
    }

    fn report_edition(&mut self) {
        let end = line_end_after(self.bytes, self.at);
        let span = Span { start: self.at, end, line: 1, column: 1 };
        let text = String::from_utf8_lossy(&self.bytes[self.at..end]).trim_end().to_owned();
        self.findings.add(Code::CifEdition, || {
            Diagnostic::warning(
                Code::CifEdition,
                format!(
                    "the first line '{text}' declares no known edition of CIF; the file was read as CIF 1.1"
                ),
            )
            .at(span)
            .hint("#\\#CIF_1.1 or #\\#CIF_2.0")
        });
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
            let class = CLASS[usize::from(byte)];
            if class & BLANK != 0 {
                self.at += 1;
            } else if class & LINE_END != 0 {
                self.step_over_line_end();
            } else if byte == b'#' {
                self.at = line_end_after(self.bytes, self.at);
            } else {
                return;
            }
        }
    }

    /// The place of what begins at the current byte.
    fn here(&self) -> Place {
        Place { start: self.at, line: self.line, column: self.at - self.line_start + 1 }
    }

    fn span_from(&self, place: Place) -> Span {
        Span { start: place.start, end: self.at, line: place.line, column: place.column }
    }

    /// Reports a value that is not followed by a blank.
    fn expect_blank(&mut self, what: &str, may_close: bool) {
        let Some(byte) = self.peek() else { return };
        if is(byte, BLANK | LINE_END) || may_close && matches!(byte, b']' | b'}') {
            return;
        }
        let place = self.here();
        let span = Span { start: place.start, end: place.start + 1, line: place.line, column: place.column };
        self.findings.add(Code::CifNoBlank, || {
            let next = char::from(byte);
            let next =
                if byte.is_ascii_graphic() { format!("'{next}'") } else { "the next character".to_owned() };
            Diagnostic::warning(
                Code::CifNoBlank,
                format!("no blank between {what} and {next}; it was read as if there were one"),
            )
            .at(span)
        });
    }

    fn text_field(&mut self) -> Token {
        let place = self.here();
        self.at += 1;
        loop {
            self.at = line_end_after(self.bytes, self.at);
            let end = self.at;
            if self.peek().is_none() {
                let span = Span { end: place.start + 1, ..self.span_from(place) };
                let line = place.line;
                self.findings.add(Code::CifTextOpen, || {
                    Diagnostic::error(
                        Code::CifTextOpen,
                        format!("the text field that begins at line {line} is not closed; the rest of the file was taken as its text"),
                    )
                    .at(span)
                    .hint("end it with a line that begins with ;")
                });
                return Token {
                    kind: TokenKind::Text,
                    span: self.span_from(place),
                    start: place.start + 1,
                    end,
                };
            }
            self.step_over_line_end();
            if self.peek() == Some(b';') {
                self.at += 1;
                let token =
                    Token { kind: TokenKind::Text, span: self.span_from(place), start: place.start + 1, end };
                self.check_prefix(&token);
                return token;
            }
        }
    }

    /// Reports a text field that announces a prefix which some line lacks.
    fn check_prefix(&mut self, token: &Token) {
        if self.dialect == Dialect::One {
            return;
        }
        let Some(number) = lacks_prefix(&self.bytes[token.start..token.end]) else { return };
        let span = Span { end: token.span.start + 1, ..token.span };
        self.findings.add(Code::CifProtocol, || {
            Diagnostic::warning(
                Code::CifProtocol,
                format!(
                    "the first line of the text field announces a prefix that line {} does not begin with; the text was kept as it stands",
                    span.line + number
                ),
            )
            .at(span)
        });
    }

    fn quoted(&mut self, quote: u8) -> Token {
        let place = self.here();
        if self.dialect == Dialect::Two && self.bytes[self.at..].starts_with(&[quote; 3]) {
            return self.triple_quoted(quote);
        }
        self.at += 1;
        // The quote and the line end are looked for together: a line may be as long as the file.
        while let Some(offset) = memchr::memchr3(quote, b'\n', b'\r', &self.bytes[self.at..]) {
            self.at += offset;
            if self.bytes[self.at] != quote {
                return self.open_quote(place, quote);
            }
            self.at += 1;
            if self.dialect == Dialect::Two || self.peek().is_none_or(|byte| is(byte, BLANK | LINE_END)) {
                let end = self.at - 1;
                return Token {
                    kind: TokenKind::Quoted,
                    span: self.span_from(place),
                    start: place.start + 1,
                    end,
                };
            }
        }
        self.at = self.bytes.len();
        self.open_quote(place, quote)
    }

    /// A quote that is not closed before the current byte, where its line ends.
    fn open_quote(&mut self, place: Place, quote: u8) -> Token {
        let start = place.start + 1;
        let end = start + self.bytes[start..self.at].trim_ascii_end().len();
        let span = self.span_from(place);
        self.findings.add(Code::CifQuoteOpen, || {
            let quote = char::from(quote);
            Diagnostic::error(
                Code::CifQuoteOpen,
                format!(
                    "the quote {quote} is not closed on its line; the rest of the line was taken as the value"
                ),
            )
            .at(span)
            .hint(format!("end the value with {quote} and a blank"))
        });
        Token { kind: TokenKind::Quoted, span, start, end }
    }

    fn triple_quoted(&mut self, quote: u8) -> Token {
        let place = self.here();
        self.at += 3;
        let start = self.at;
        while let Some(byte) = self.peek() {
            if is(byte, LINE_END) {
                self.step_over_line_end();
            } else if byte == quote && self.bytes[self.at..].starts_with(&[quote; 3]) {
                let end = self.at;
                self.at += 3;
                return Token { kind: TokenKind::Quoted, span: self.span_from(place), start, end };
            } else {
                self.at += 1;
            }
        }
        let span = Span { end: start, ..self.span_from(place) };
        self.findings.add(Code::CifTextOpen, || {
            Diagnostic::error(
                Code::CifTextOpen,
                format!(
                    "the triple quote that begins at line {} is not closed; the rest of the file was taken as its text",
                    span.line
                ),
            )
            .at(span)
            .hint("end it with the same three quotes")
        });
        Token { kind: TokenKind::Quoted, span: self.span_from(place), start, end: self.at }
    }

    fn word(&mut self) -> Token {
        let place = self.here();
        let rest = &self.bytes[self.at..];
        let stop = match self.dialect {
            Dialect::Two if !begins_name(rest) => BLANK | LINE_END | BRACKET,
            _ => BLANK | LINE_END,
        };
        let length = self.bytes[self.at..].iter().position(|&byte| is(byte, stop));
        // A word has at least one byte: a bracket that closes nothing is one of its own.
        self.at = length.map_or(self.bytes.len(), |length| self.at + length.max(1));
        let word = &self.bytes[place.start..self.at];
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
        let is_reserved = is(word[0], RESERVED);
        let token = Token { kind, span: self.span_from(place), start: place.start + lead, end: self.at };
        if kind == TokenKind::Bare && is_reserved {
            self.report_reserved(&token, char::from(self.bytes[place.start]));
        }
        token
    }

    fn report_reserved(&mut self, token: &Token, first: char) {
        let span = token.span;
        self.findings.add(Code::CifBracket, || {
            Diagnostic::warning(
                Code::CifBracket,
                format!(
                    "a value without quotes begins with {first}, which is reserved; it was kept as it is"
                ),
            )
            .at(span)
            .hint(format!("'{first}…'"))
        });
    }

    /// Passes over a closing bracket that closes nothing.
    fn skip_stray_bracket(&mut self, bracket: u8) {
        let place = self.here();
        self.at += 1;
        let span = self.span_from(place);
        self.findings.add(Code::CifBracket, || {
            let message = format!("bracket {} closes nothing and was passed over", char::from(bracket));
            Diagnostic::error(Code::CifBracket, message).at(span)
        });
    }

    /// One value or word, no list and no table. The current byte begins it.
    fn simple(&mut self, first: u8) -> Token {
        match first {
            b';' if self.at == self.line_start => self.text_field(),
            b'\'' | b'"' => self.quoted(first),
            _ => self.word(),
        }
    }
}

impl Iterator for Lexer<'_> {
    type Item = Token;

    fn next(&mut self) -> Option<Token> {
        loop {
            self.skip_blanks_and_comments();
            let first = self.peek()?;
            if self.dialect == Dialect::One {
                let token = self.simple(first);
                if token.kind == TokenKind::Text {
                    self.expect_blank("the text field", false);
                }
                return Some(token);
            }
            match first {
                b']' | b'}' => self.skip_stray_bracket(first),
                b'[' | b'{' => return Some(self.compound(&mut |_| {})),
                _ => {
                    let token = self.simple(first);
                    self.expect_blank("this value", true);
                    return Some(token);
                }
            }
        }
    }
}

/// Where a token begins.
#[derive(Debug, Clone, Copy)]
struct Place {
    start: usize,
    line: usize,
    column: usize,
}

const BLANK: u8 = 1;
const LINE_END: u8 = 2;
const BRACKET: u8 = 4;
/// What must not begin a value without quotes: volume G, 2.2.7.1, paragraph 14.
const RESERVED: u8 = 8;

/// What each byte is.
static CLASS: [u8; 256] = {
    const MEMBERS: [(u8, &[u8]); 4] =
        [(BLANK, b" \t\x0B\x0C\x00\x1A"), (LINE_END, b"\n\r"), (BRACKET, b"[]{}"), (RESERVED, b"$[]")];
    let mut class = [0; 256];
    let mut number = 0;
    while number < MEMBERS.len() {
        let (bit, bytes) = MEMBERS[number];
        let mut at = 0;
        while at < bytes.len() {
            class[bytes[at] as usize] |= bit;
            at += 1;
        }
        number += 1;
    }
    class
};

/// Whether a tag or a heading ends before this byte.
pub(super) fn ends_name(byte: u8) -> bool {
    is(byte, BLANK | LINE_END)
}

fn is(byte: u8, class: u8) -> bool {
    CLASS[usize::from(byte)] & class != 0
}

/// Whether a tag or a heading begins here; brackets are part of them.
fn begins_name(rest: &[u8]) -> bool {
    rest[0] == b'_' || has_prefix(rest, b"data_") || has_prefix(rest, b"save_")
}

fn has_prefix(word: &[u8], prefix: &[u8]) -> bool {
    word.len() >= prefix.len() && word[..prefix.len()].eq_ignore_ascii_case(prefix)
}

#[cfg(test)]
mod tests {
    use super::super::source::Lines;
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
    fn the_first_line_declares_the_edition() {
        for (text, dialect, codes) in [
            ("#\\#CIF_2.0\n", Dialect::Two, vec![]),
            ("\u{FEFF}#\\#CIF_2.0 \n", Dialect::Two, vec![]),
            ("#\\#CIF_1.1", Dialect::One, vec![]),
            ("#\\#CIF_2.01\n", Dialect::One, vec![Code::CifEdition]),
            (" #\\#CIF_2.0\n", Dialect::One, vec![]),
            ("# any\n", Dialect::One, vec![]),
        ] {
            assert_eq!(Lexer::new(text.as_bytes()).dialect(), dialect, "{text}");
            assert_eq!(super::tests::codes(text.as_bytes()), codes, "{text}");
        }
    }

    proptest! {
        #[test]
        fn spans_are_in_bounds_and_ordered(bytes in proptest::collection::vec(any::<u8>(), 0..400)) {
            check_spans(&bytes)?;
        }

        #[test]
        fn spans_are_ordered_in_text_that_looks_like_a_file(
            text in proptest::collection::vec(
                proptest::sample::select(vec!["data_", "loop_", "_a", "'", "\"", ";", "\n", "\r", " ", "#", "'''", "x", "save_", "#\\#CIF_2.0\n", "[", "]", "{", "}", ":", "'k':"]),
                0..60,
            )
        ) {
            check_spans(text.concat().as_bytes())?;
        }
    }

    fn check_spans(bytes: &[u8]) -> Result<(), TestCaseError> {
        let mut end = 0;
        let (lines, _) = Lines::of(bytes);
        for token in Lexer::new(bytes) {
            prop_assert!(token.span.start >= end && token.span.end > token.span.start);
            prop_assert!(token.span.end <= bytes.len());
            prop_assert_eq!(lines.at(bytes, token.span.start).line, token.span.line);
            end = token.span.end;
        }
        Ok(())
    }
}
