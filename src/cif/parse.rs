//! From tokens to a [`Document`].
//!
//! The parser never stops at a fault: it reports it and goes on at the next tag, loop or block. An *error* means that
//! something in the file was lost or had to be guessed at, a *warning* that the file was read in the one way it can be
//! meant. Whether a structure is refused because of it is decided by the reader, which refuses only what it uses.

use super::document::{Block, Document, Item, Loop, Pair, Tag, Value, ValueKind};
use super::lex::{Lexer, Token, TokenKind, inspect};
use crate::diagnostic::{Code, Diagnostic, Span};
use std::borrow::Cow;
use std::collections::HashMap;

/// Longest part of a value that a message quotes, in characters.
const QUOTED_LENGTH: usize = 40;

/// Parses a file. The diagnostics are in the order of the file.
///
/// ```
/// use cosetta::cif::parse;
/// let (document, diagnostics) = parse(b"data_NaCl\n_cell_length_a 5.64(1)\n");
/// assert!(diagnostics.is_empty());
/// assert_eq!(document.blocks[0].value("_Cell_Length_a").map(|value| value.text.as_ref()), Some("5.64(1)"));
/// ```
#[must_use]
pub fn parse(bytes: &[u8]) -> (Document<'_>, Vec<Diagnostic>) {
    let mut diagnostics = inspect(bytes);
    if diagnostics.iter().any(|found| found.code == Code::CifEncoding) {
        let dialect = Lexer::new(&[]).dialect();
        return (Document { source: bytes, dialect, blocks: Vec::new() }, diagnostics);
    }
    let mut parser = Parser {
        source: bytes,
        text: std::str::from_utf8(bytes).ok(),
        lexer: Lexer::new(bytes),
        ahead: None,
        blocks: Vec::new(),
        frame: None,
        names: HashMap::new(),
        diagnostics: Vec::new(),
    };
    parser.run();
    let dialect = parser.lexer.dialect();
    diagnostics.append(&mut parser.diagnostics);
    diagnostics.extend(parser.lexer.into_diagnostics());
    diagnostics.sort_by_key(|found| found.span.map_or(0, |span| span.start));
    (Document { source: bytes, dialect, blocks: parser.blocks }, diagnostics)
}

struct Parser<'s> {
    source: &'s [u8],
    /// The source as text, when all of it is UTF-8.
    text: Option<&'s str>,
    lexer: Lexer<'s>,
    ahead: Option<Token>,
    blocks: Vec<Block<'s>>,
    frame: Option<Block<'s>>,
    /// Block names in lower case, with the line of the first.
    names: HashMap<String, usize>,
    diagnostics: Vec<Diagnostic>,
}

impl<'s> Parser<'s> {
    fn next(&mut self) -> Option<Token> {
        self.ahead.take().or_else(|| self.lexer.next())
    }

    fn next_if(&mut self, wanted: impl Fn(TokenKind) -> bool) -> Option<Token> {
        let token = self.next()?;
        if wanted(token.kind) {
            return Some(token);
        }
        self.ahead = Some(token);
        None
    }

    fn run(&mut self) {
        while let Some(token) = self.next() {
            match token.kind {
                TokenKind::Block => self.open_block(&token),
                TokenKind::Frame => self.open_frame(&token),
                TokenKind::FrameEnd => {
                    if !self.close_frame() {
                        self.report(Code::CifFrame, "a save frame ends here that was not opened", token.span);
                    }
                }
                TokenKind::Loop => self.read_loop(&token),
                TokenKind::Tag => self.read_pair(&token),
                TokenKind::Global => {
                    self.warn(
                        Code::CifReserved,
                        "global_ is not part of CIF; its items were read as a block of their own",
                        token.span,
                    );
                    self.close_frame();
                    self.blocks.push(Block::new(Cow::Borrowed(""), token.span));
                }
                TokenKind::Stop => {
                    self.warn(Code::CifReserved, "stop_ is not part of CIF and was passed over", token.span);
                }
                TokenKind::Bare | TokenKind::Quoted | TokenKind::Text => self.skip_strays(&token),
            }
        }
        if let Some(frame) = &self.frame {
            let (message, span) = (format!("save frame '{}' is not closed", frame.name), frame.span);
            self.report(Code::CifFrame, message, span);
            self.close_frame();
        }
    }

    fn open_block(&mut self, token: &Token) {
        if let Some(frame) = &self.frame {
            let message = format!("save frame '{}' is not closed before the next block", frame.name);
            let span = frame.span;
            self.report(Code::CifFrame, message, span);
            self.close_frame();
        }
        let name = self.text_of(token);
        if name.is_empty() {
            self.warn(Code::CifBlockUnnamed, "the block has no name after data_", token.span);
        } else if let Some(first) = self.names.insert(name.to_ascii_lowercase(), token.span.line) {
            self.warn(
                Code::CifBlockRepeated,
                format!("block name '{}' was used before, at line {first}", shown(&name)),
                token.span,
            );
        }
        self.blocks.push(Block::new(name, token.span));
    }

    fn open_frame(&mut self, token: &Token) {
        if self.frame.is_some() {
            self.report(Code::CifFrame, "a save frame begins inside another", token.span);
            self.close_frame();
        }
        self.frame = Some(Block::new(self.text_of(token), token.span));
    }

    fn close_frame(&mut self) -> bool {
        let Some(frame) = self.frame.take() else { return false };
        let span = frame.span;
        self.block(span).frames.push(frame);
        true
    }

    /// The last block, made now if the file has not begun one.
    fn block(&mut self, span: Span) -> &mut Block<'s> {
        if self.blocks.is_empty() {
            self.warn(
                Code::CifNoHeader,
                "data before the first data_ heading; they were read as a block without a name",
                span,
            );
            self.blocks.push(Block::new(Cow::Borrowed(""), Span { end: span.start, ..span }));
        }
        let last = self.blocks.len() - 1;
        &mut self.blocks[last]
    }

    fn push(&mut self, item: Item<'s>, span: Span) {
        let target = match &mut self.frame {
            Some(frame) => frame,
            None => self.block(span),
        };
        let repeated = target.push(item);
        for tag in repeated {
            self.warn(
                Code::CifTagRepeated,
                format!("tag {} was given before in this block; the first was kept", shown(&tag.name)),
                tag.span,
            );
        }
    }

    fn read_pair(&mut self, token: &Token) {
        let tag = self.tag_of(token);
        if let Some(value) = self.next_if(is_value) {
            let value = self.value_of(&value);
            self.push(Item::Pair(Pair { tag, value, surplus: None }), token.span);
        } else {
            let message = format!("tag {} has no value", shown(&tag.name));
            let hint = format!("{} ?", shown(&tag.name));
            self.diagnostics.push(Diagnostic::error(Code::CifNoValue, message).at(token.span).hint(hint));
        }
    }

    fn read_loop(&mut self, token: &Token) {
        let mut tags = Vec::new();
        while let Some(tag) = self.next_if(|kind| kind == TokenKind::Tag) {
            tags.push(self.tag_of(&tag));
        }
        if tags.is_empty() {
            let mut skipped = 0;
            while self.next_if(is_value).is_some() {
                skipped += 1;
            }
            self.report(
                Code::CifLoopNoTags,
                format!("loop_ is not followed by a tag; {skipped} values were passed over"),
                token.span,
            );
            return;
        }
        let mut values = Vec::new();
        while let Some(value) = self.next_if(is_value) {
            values.push(self.value_of(&value));
        }
        if self.next_if(|kind| kind == TokenKind::Stop).is_some() {
            self.warn(Code::CifReserved, "stop_ is not part of CIF and was passed over", token.span);
        }
        if values.is_empty() {
            let message = format!("the loop of {} has no values", shown(&tags[0].name));
            self.warn(Code::CifLoopEmpty, message, token.span);
        }
        let surplus = values.len() % tags.len();
        let fault = (surplus > 0).then(|| {
            let whole = values.len() - surplus;
            Diagnostic::error(
                Code::CifLoopRagged,
                format!(
                    "the loop of {} has {} tags but {} values: the last row, which begins with '{}', lacks {}",
                    shown(&tags[0].name),
                    tags.len(),
                    values.len(),
                    shown(&values[whole].text),
                    tags.len() - surplus
                ),
            )
            .at(values[whole].span)
            .hint("put values with blanks in quotes, and ? for a missing value")
        });
        self.diagnostics.extend(fault.clone());
        values.truncate(values.len() - surplus);
        self.push(Item::Loop(Loop { span: token.span, tags, values, fault }), token.span);
    }

    /// Passes over values that no tag announces, and tells the pair before them.
    fn skip_strays(&mut self, first: &Token) {
        let (mut last, mut count) = (*first, 1);
        while let Some(value) = self.next_if(is_value) {
            (last, count) = (value, count + 1);
        }
        let span = Span { end: last.span.end, ..first.span };
        let text = self.text_of(first).into_owned();
        if self.blocks.is_empty() && self.frame.is_none() {
            self.warn(
                Code::CifNoHeader,
                format!(
                    "text before the first data_ heading was passed over; it begins with '{}'",
                    shown(&text)
                ),
                span,
            );
            return;
        }
        let message = if count == 1 {
            format!("value '{}' has no tag", shown(&text))
        } else {
            format!("{count} values have no tag; the first is '{}'", shown(&text))
        };
        let mut found = Diagnostic::error(Code::CifNoTag, message).at(span);
        let target = self.frame.as_mut().or(self.blocks.last_mut());
        if let Some(Item::Pair(pair)) = target.and_then(|block| block.items.last_mut()) {
            pair.surplus = Some(span);
            if pair.value.span.line == span.line && count < 10 {
                let tag = shown(&pair.tag.name).into_owned();
                found = found.hint(format!("put the whole value of {tag} in quotes"));
            }
        }
        self.diagnostics.push(found);
    }

    fn tag_of(&self, token: &Token) -> Tag<'s> {
        Tag { name: self.text_of(token), span: token.span }
    }

    fn value_of(&self, token: &Token) -> Value<'s> {
        let text = self.text_of(token);
        let kind = match (token.kind, text.as_ref()) {
            (TokenKind::Quoted, _) => ValueKind::Quoted,
            (TokenKind::Text, _) => ValueKind::Text,
            (_, ".") => ValueKind::Inapplicable,
            (_, "?") => ValueKind::Unknown,
            _ => ValueKind::Bare,
        };
        Value { kind, span: token.span, text }
    }

    fn text_of(&self, token: &Token) -> Cow<'s, str> {
        match self.text.and_then(|text| text.get(token.start..token.end)) {
            Some(text) => Cow::Borrowed(text),
            None => String::from_utf8_lossy(self.source.get(token.start..token.end).unwrap_or_default()),
        }
    }

    fn report(&mut self, code: Code, message: impl Into<String>, span: Span) {
        self.diagnostics.push(Diagnostic::error(code, message).at(span));
    }

    fn warn(&mut self, code: Code, message: impl Into<String>, span: Span) {
        self.diagnostics.push(Diagnostic::warning(code, message).at(span));
    }
}

fn is_value(kind: TokenKind) -> bool {
    matches!(kind, TokenKind::Bare | TokenKind::Quoted | TokenKind::Text)
}

/// A text short enough for a message, without line ends.
pub(super) fn shown(text: &str) -> Cow<'_, str> {
    let line_end = |c: char| c.is_control();
    if text.chars().take(QUOTED_LENGTH + 1).count() <= QUOTED_LENGTH && !text.contains(line_end) {
        return Cow::Borrowed(text);
    }
    let mut short: String =
        text.chars().take(QUOTED_LENGTH).map(|c| if line_end(c) { ' ' } else { c }).collect();
    if text.chars().nth(QUOTED_LENGTH).is_some() {
        short.push('…');
    }
    Cow::Owned(short)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn codes(text: &str) -> Vec<Code> {
        parse(text.as_bytes()).1.into_iter().map(|found| found.code).collect()
    }

    #[test]
    fn a_clean_file_has_no_findings() {
        let text = "# c\ndata_a\n_t 1\nloop_ _x _y 1 'b c' 2 .\nsave_f _t 2 save_\ndata_b\n_t\n;text\n;\n";
        let (document, found) = parse(text.as_bytes());
        assert!(found.is_empty(), "{found:?}");
        assert_eq!(document.blocks.len(), 2);
        assert_eq!(document.blocks[0].frames[0].value("_t").map(|v| v.text.as_ref()), Some("2"));
        assert_eq!(document.blocks[0].value("_t").map(|v| v.text.as_ref()), Some("1"));
        assert_eq!(document.blocks[1].value("_t").map(|v| v.text.as_ref()), Some("text"));
    }

    #[test]
    fn each_fault_has_its_code_and_parsing_goes_on() {
        for (text, expected) in [
            ("data_a _t 1 _T 2", Code::CifTagRepeated),
            ("data_a _u 1 data_A", Code::CifBlockRepeated),
            ("data_a loop_ _u _v 1 2 3", Code::CifLoopRagged),
            ("data_a _u _v 1", Code::CifNoValue),
            ("data_a _u 1 2", Code::CifNoTag),
            ("data_a 2", Code::CifNoTag),
            ("data_a loop_ 1 2", Code::CifLoopNoTags),
            ("data_a loop_ _u", Code::CifLoopEmpty),
            ("some text data_a", Code::CifNoHeader),
            ("_u 1", Code::CifNoHeader),
            ("data_ _u 1", Code::CifBlockUnnamed),
            ("data_a global_ _u 1", Code::CifReserved),
            ("data_a loop_ _u 1 stop_", Code::CifReserved),
            ("data_a save_f _u 1", Code::CifFrame),
            ("data_a save_f _u 1 data_b", Code::CifFrame),
            ("data_a save_", Code::CifFrame),
            ("data_a save_f save_g save_", Code::CifFrame),
            ("data_a _u 'x", Code::CifQuoteOpen),
        ] {
            let text = format!("{text}\ndata_last _w 7");
            let (document, found) = parse(text.as_bytes());
            assert_eq!(found.iter().map(|d| d.code).collect::<Vec<_>>(), [expected], "{text}");
            let last = document.blocks.last().expect("a block");
            assert_eq!(last.value("_w").map(|v| v.text.as_ref()), Some("7"), "{text}");
        }
        assert_eq!(codes("data_a _u\n;x\ndata_last _w 7"), [Code::CifTextOpen]);
    }

    #[test]
    fn whole_rows_of_a_ragged_loop_are_kept() {
        let (document, found) = parse(b"data_a\nloop_ _u _v\n1 2\n3 4\n5");
        assert_eq!(found[0].span.map(|s| (s.line, s.column)), Some((5, 1)));
        let table = document.blocks[0].column(&["_v"]).expect("a loop");
        assert_eq!(table.rows(), 2);
        assert!(table.fault().is_some());
    }

    #[test]
    fn a_surplus_is_told_to_its_pair() {
        let (document, _) = parse(b"data_a _symbol P 21/c _other 1");
        let pair = document.blocks[0].pair("_symbol").expect("there");
        assert_eq!(pair.surplus.map(|span| document.raw(span)), Some(&b"21/c"[..]));
    }

    #[test]
    fn bytes_that_are_not_utf8_are_kept_in_the_source() {
        let (document, found) = parse(b"data_a _u \xE9x");
        assert_eq!(found[0].code, Code::CifNotUtf8);
        let value = document.blocks[0].value("_u").expect("there");
        assert_eq!(value.text, "\u{FFFD}x");
        assert_eq!(document.raw(value.span), b"\xE9x");
    }

    proptest! {
        #[test]
        fn any_bytes_are_parsed(bytes in proptest::collection::vec(any::<u8>(), 0..600)) {
            let (_, found) = parse(&bytes);
            for span in found.iter().filter_map(|d| d.span) {
                prop_assert!(span.start <= span.end && span.end <= bytes.len());
            }
        }

        #[test]
        fn any_words_are_parsed(
            words in proptest::collection::vec(
                proptest::sample::select(vec![
                    "data_", "data_a", "loop_", "_a", "_b", "'x", "\"y z\"", "\n;", "\n", "save_", "save_f", "1.5(2)", "?",
                    "global_", "stop_",
                ]),
                0..50,
            )
        ) {
            let text = words.join(" ");
            let (document, _) = parse(text.as_bytes());
            for block in &document.blocks {
                for item in &block.items {
                    if let Item::Loop(looped) = item {
                        prop_assert_eq!(looped.values.len(), looped.rows() * looped.tags.len());
                    }
                }
            }
        }
    }
}
