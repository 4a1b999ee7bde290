//! From tokens to a [`Document`].
//!
//! The parser never stops at a fault: it reports it and goes on at the next tag, loop or block. An *error* means that
//! something in the file was lost or had to be guessed at, a *warning* that the file was read in the one way it can be
//! meant. Whether a structure is refused because of it is decided by the reader, which refuses only what it uses.
//! Time and memory are linear in the length of the file, whatever is in it.

mod repeated;

use super::document::{BlockShape, Document, Entry, FrameShape, LoopShape, MAX_OFFSET, Place};
use super::findings::Findings;
use super::lex::{Dialect, Lexer, Token, TokenKind};
use super::source::{Lines, inspect, narrow};
use crate::diagnostic::{Code, Diagnostic, Span};
use itertools::Itertools;
use repeated::repeated;
use std::borrow::Cow;

/// Longest part of a value that a message quotes, in characters.
const QUOTED_LENGTH: usize = 40;
/// Longest name in characters, in CIF 1.1 (volume G, 2.2.7.1, paragraph 5) and in CIF 2.0, where the line is the limit.
const MAX_NAME: [usize; 2] = [75, 2048];

/// Parses a file. The diagnostics are in the order of the file; of each code at most 100 are listed and the rest counted.
///
/// ```
/// use cosetta::cif::parse;
/// let (document, diagnostics) = parse(b"data_NaCl\n_cell_length_a 5.64(1)\n");
/// assert!(diagnostics.is_empty());
/// let block = document.block(0).unwrap();
/// assert_eq!(block.value("_Cell_Length_a").unwrap().text, "5.64(1)");
/// ```
#[must_use]
pub fn parse(bytes: &[u8]) -> (Document<'_>, Vec<Diagnostic>) {
    if bytes.len() >= MAX_OFFSET {
        let message = format!("the file has {} bytes, above the limit of {}", bytes.len(), MAX_OFFSET - 1);
        return (
            Parser::new(&[], Lines::of(&[]).0).document,
            vec![Diagnostic::error(Code::FileTooLarge, message)],
        );
    }
    let (lines, long) = Lines::of(bytes);
    let mut diagnostics = inspect(bytes, &lines, long, Lexer::new(bytes).dialect());
    let mut parser = Parser::new(bytes, lines);
    if diagnostics.iter().any(|found| found.code == Code::CifEncoding) {
        return (parser.document, diagnostics);
    }
    parser.run();
    repeated(&parser.document, &mut parser.findings);
    diagnostics.extend(parser.findings.merge(parser.lexer.into_findings()));
    // What has no place is said last.
    diagnostics.sort_by_key(|found| found.span.map_or(usize::MAX, |span| span.start));
    (parser.document, diagnostics)
}

/// No more lines of a loop than this are searched for the one that is wrong.
const MAX_LINES_COMPARED: usize = 100_000;

/// No head of a loop has more tags than this.
const MAX_HEAD: usize = 1000;

struct Parser<'s> {
    document: Document<'s>,
    lexer: Lexer<'s>,
    ahead: Option<Token>,
    /// The heading and the first entry of the save frame that is open.
    frame: Option<(Token, u32)>,
    /// Tags without a value that were met one after the other.
    valueless: Vec<Token>,
    findings: Findings,
}

impl<'s> Parser<'s> {
    fn new(source: &'s [u8], lines: Lines) -> Self {
        let lexer = Lexer::new(source);
        let document = Document {
            source,
            text: std::str::from_utf8(source).ok(),
            dialect: lexer.dialect(),
            lines,
            blocks: Vec::new(),
            frames: Vec::new(),
            entries: Vec::new(),
            loops: Vec::new(),
            marks: Vec::new(),
            surplus: Vec::new(),
            faults: Vec::new(),
        };
        Self {
            document,
            lexer,
            ahead: None,
            frame: None,
            valueless: Vec::new(),
            findings: Findings::default(),
        }
    }

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
            if token.kind != TokenKind::Tag {
                self.report_valueless();
            }
            match token.kind {
                TokenKind::Block => self.open_block(&token),
                TokenKind::Frame => self.open_frame(token),
                TokenKind::FrameEnd => self.end_frame(&token),
                TokenKind::Loop => self.read_loop(&token),
                TokenKind::Tag => self.read_pair(&token),
                TokenKind::Global => {
                    self.warn(Code::CifReserved, token.span, || {
                        "global_ is not part of CIF; its items were read as a block of their own".into()
                    });
                    self.close_frame();
                    self.push_block(Some(&token));
                }
                TokenKind::Stop => self.pass_over_stop(&token),
                kind if is_value(kind) => self.skip_strays(&token),
                _ => {}
            }
        }
        self.report_valueless();
        if let Some((frame, _)) = self.frame {
            let name = self.text_of(&frame);
            self.error(Code::CifFrame, frame.span, || format!("save frame '{}' is not closed", shown(&name)));
            self.close_frame();
        }
        self.end_block();
    }

    /// The number that the next entry gets.
    fn next_entry(&self) -> u32 {
        narrow(self.document.entries.len())
    }

    fn end_block(&mut self) {
        let end = self.next_entry();
        if let Some(block) = self.document.blocks.last_mut() {
            block.entries.end = end;
        }
    }

    fn push_block(&mut self, heading: Option<&Token>) {
        self.end_block();
        let first = self.next_entry();
        let heading = heading.map(|token| narrow(token.span.start));
        self.document.blocks.push(BlockShape { heading, entries: first..first });
    }

    fn open_block(&mut self, token: &Token) {
        if let Some((frame, _)) = self.frame {
            let name = self.text_of(&frame);
            self.error(Code::CifFrame, frame.span, || {
                format!("save frame '{}' is not closed before the next block", shown(&name))
            });
            self.close_frame();
        }
        if token.start == token.end {
            self.warn(Code::CifBlockUnnamed, token.span, || "the block has no name after data_".into());
        }
        self.check_length(token, "the name of a block");
        self.push_block(Some(token));
    }

    fn open_frame(&mut self, token: Token) {
        if self.frame.is_some() {
            self.error(Code::CifFrame, token.span, || "a save frame begins inside another".into());
            self.close_frame();
        }
        self.check_length(&token, "the name of a save frame");
        self.need_block(token.span);
        self.frame = Some((token, self.next_entry()));
    }

    fn end_frame(&mut self, token: &Token) {
        if !self.close_frame() {
            self.error(Code::CifFrame, token.span, || "a save frame ends here that was not opened".into());
        }
    }

    fn close_frame(&mut self) -> bool {
        let Some((heading, first)) = self.frame.take() else { return false };
        let shape = FrameShape {
            block: narrow(self.document.blocks.len() - 1),
            heading: narrow(heading.span.start),
            entries: first..self.next_entry(),
        };
        self.document.frames.push(shape);
        true
    }

    /// Makes a block without a name if the file has not begun one.
    fn need_block(&mut self, span: Span) {
        if self.document.blocks.is_empty() {
            self.warn(Code::CifNoHeader, span, || {
                "data before the first data_ heading; they were read as a block without a name".into()
            });
            self.push_block(None);
        }
    }

    fn check_length(&mut self, token: &Token, what: &str) {
        let limit = MAX_NAME[usize::from(self.document.dialect == Dialect::Two)];
        if token.end - token.start <= limit {
            return;
        }
        let name = self.text_of(token);
        let length = name.chars().count();
        if length > limit {
            self.warn(Code::CifNameLong, token.span, || {
                format!("{what} has {length} characters, above the limit of {limit}: '{}'", shown(&name))
            });
        }
    }

    fn push_entry(&mut self, tag: &Token, place: Place) {
        self.check_length(tag, "a tag");
        self.document.entries.push(Entry::new(self.document.source, tag.start..tag.end, place));
    }

    fn read_pair(&mut self, tag: &Token) {
        if let Some(value) = self.next_if(is_value) {
            self.need_block(tag.span);
            self.push_entry(tag, Place::Pair(narrow(value.span.start)));
            self.report_valueless();
            return;
        }
        self.valueless.push(*tag);
        if self.valueless.len() == MAX_HEAD {
            self.report_valueless();
        }
    }

    /// Reports tags without a value that follow each other. Several of them are most often the head of a loop.
    fn report_valueless(&mut self) {
        let tags = std::mem::take(&mut self.valueless);
        for (number, tag) in tags.iter().enumerate() {
            let name = self.text_of(tag);
            self.findings.add(Code::CifNoValue, || {
                let found = Diagnostic::error(Code::CifNoValue, format!("tag {} has no value", shown(&name)))
                    .at(tag.span);
                match (number, tags.len()) {
                    (_, 1) => found.hint(format!("{} ?", shown(&name))),
                    (0, _) => found.hint(format!("loop_ before {}, if rows of values follow", shown(&name))),
                    _ => found,
                }
            });
        }
    }

    fn read_loop(&mut self, token: &Token) {
        let (number, first_entry) = (narrow(self.document.loops.len()), self.next_entry());
        while let Some(tag) = self.next_if(|kind| kind == TokenKind::Tag) {
            if self.next_entry() == first_entry {
                self.need_block(token.span);
            }
            self.push_entry(&tag, Place::Column(number));
        }
        let columns = self.next_entry() - first_entry;
        if columns == 0 {
            self.skip_values_of_no_tag(token);
            return;
        }
        let first_mark = narrow(self.document.marks.len());
        let mut values = 0_usize;
        while let Some(value) = self.next_if(is_value) {
            if values.is_multiple_of(LoopShape::VALUES_PER_MARK) {
                self.document.marks.push(narrow(value.span.start));
            }
            values += 1;
        }
        if let Some(stop) = self.next_if(|kind| kind == TokenKind::Stop) {
            self.pass_over_stop(&stop);
        }
        let rows = narrow(values / columns as usize);
        self.document.loops.push(LoopShape {
            start: narrow(token.span.start),
            first_entry,
            columns,
            rows,
            first_mark,
        });
        if values == 0 {
            let name = self.name_of(first_entry);
            self.warn(Code::CifLoopEmpty, token.span, || {
                format!("the loop of {} has no values", shown(&name))
            });
        } else if !values.is_multiple_of(columns as usize) {
            self.report_ragged(number, values);
        }
    }

    fn report_ragged(&mut self, number: u32, values: usize) {
        let shape = self.document.loops[number as usize];
        let columns = shape.columns as usize;
        let whole = values - values % columns;
        let mark = shape.first_mark as usize + whole / LoopShape::VALUES_PER_MARK;
        let mut lexer = self.document.lexer_at(self.document.marks[mark] as usize);
        let Some(first) = lexer.nth(whole % LoopShape::VALUES_PER_MARK) else { return };
        let mut message = format!(
            "the loop of {} has {columns} tags but {values} values: the last row, which begins with '{}', lacks {}",
            shown(&self.name_of(shape.first_entry)),
            shown(&self.text_of(&first)),
            columns - values % columns
        );
        if let Some((line, count)) = self.odd_line(&shape, values) {
            message = format!("{message}; line {line} holds {count}, others {columns}");
        }
        let found = Diagnostic::error(Code::CifLoopRagged, message)
            .at(first.span)
            .hint("put values with blanks in quotes, and ? for a missing value");
        self.findings.add(Code::CifLoopRagged, || found.clone());
        self.document.faults.push((number, found));
    }

    /// Of a loop written with one row a line: the first line with another number of values, and that number.
    fn odd_line(&self, shape: &LoopShape, values: usize) -> Option<(usize, usize)> {
        let start = *self.document.marks.get(shape.first_mark as usize)?;
        let lines = self.document.lexer_at(start as usize).take(values).chunk_by(|token| token.span.line);
        let counts: Vec<(usize, usize)> =
            lines.into_iter().map(|(line, tokens)| (line, tokens.count())).take(MAX_LINES_COMPARED).collect();
        let columns = shape.columns as usize;
        let even = counts.iter().filter(|(_, count)| *count == columns).count();
        let odd = counts.iter().find(|(_, count)| *count != columns)?;
        (2 * even >= counts.len()).then_some(*odd)
    }

    fn skip_values_of_no_tag(&mut self, token: &Token) {
        let mut skipped = 0_usize;
        while self.next_if(is_value).is_some() {
            skipped += 1;
        }
        self.error(Code::CifLoopNoTags, token.span, || {
            format!("loop_ is not followed by a tag; {skipped} values were passed over")
        });
    }

    fn pass_over_stop(&mut self, token: &Token) {
        self.warn(Code::CifReserved, token.span, || "stop_ is not part of CIF and was passed over".into());
    }

    /// Passes over values that no tag announces, and tells the pair before them.
    fn skip_strays(&mut self, first: &Token) {
        let (mut last, mut count) = (*first, 1_usize);
        while let Some(value) = self.next_if(is_value) {
            (last, count) = (value, count + 1);
        }
        let span = Span { end: last.span.end, ..first.span };
        let text = self.text_of(first);
        if self.document.blocks.is_empty() {
            self.warn(Code::CifNoHeader, span, || {
                format!(
                    "text before the first data_ heading was passed over; it begins with '{}'",
                    shown(&text)
                )
            });
            return;
        }
        let pair = self.pair_before();
        if let Some((entry, _)) = pair {
            self.document.surplus.push((entry, span));
        }
        // The whole value is meant to be quoted when all of it is on one line.
        let is_on_its_line =
            |value: usize| self.document.lines.at(self.document.source, value).line == span.line;
        let tag = pair
            .filter(|(_, value)| count < 10 && is_on_its_line(*value))
            .map(|(entry, _)| self.name_of(entry));
        self.findings.add(Code::CifNoTag, || {
            let message = if count == 1 {
                format!("value '{}' has no tag", shown(&text))
            } else {
                format!("{count} values have no tag; the first is '{}'", shown(&text))
            };
            let found = Diagnostic::error(Code::CifNoTag, message).at(span);
            match tag {
                Some(tag) => found.hint(format!("put the whole value of {} in quotes", shown(&tag))),
                None => found,
            }
        });
    }

    /// The number of the last entry and where its value begins, when it is a pair of the block or save frame at hand.
    fn pair_before(&self) -> Option<(u32, usize)> {
        let first = match self.frame {
            Some((_, first)) => first,
            None => self.document.blocks.last()?.entries.start,
        };
        let number = self.next_entry().checked_sub(1).filter(|number| *number >= first)?;
        match self.document.entries[number as usize].place() {
            Place::Pair(value) => Some((number, value as usize)),
            Place::Column(_) => None,
        }
    }

    fn name_of(&self, entry: u32) -> Cow<'s, str> {
        let start = self.document.entries[entry as usize].tag as usize;
        let token = self.document.lexer_at(start).next();
        token.map_or(Cow::Borrowed(""), |token| self.text_of(&token))
    }

    fn text_of(&self, token: &Token) -> Cow<'s, str> {
        self.document.slice(token.start, token.end)
    }

    fn error(&mut self, code: Code, span: Span, message: impl FnOnce() -> String) {
        self.findings.add(code, || Diagnostic::error(code, message()).at(span));
    }

    fn warn(&mut self, code: Code, span: Span, message: impl FnOnce() -> String) {
        self.findings.add(code, || Diagnostic::warning(code, message()).at(span));
    }
}

fn is_value(kind: TokenKind) -> bool {
    matches!(kind, TokenKind::Bare | TokenKind::Quoted | TokenKind::Text | TokenKind::List | TokenKind::Table)
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
    use super::super::document::Item;
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
        assert_eq!(document.blocks().len(), 2);
        assert_eq!(
            document.block(0).expect("a block").frames().next().expect("a frame").value("_t").map(|v| v.text),
            Some("2".into())
        );
        assert_eq!(document.block(0).expect("a block").value("_t").map(|v| v.text), Some("1".into()));
        assert_eq!(document.block(1).expect("a block").value("_t").map(|v| v.text), Some("text".into()));
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
            let last = document.blocks().last().expect("a block");
            assert_eq!(last.value("_w").map(|v| v.text), Some("7".into()), "{text}");
        }
        assert_eq!(codes("data_a _u\n;x\ndata_last _w 7"), [Code::CifTextOpen]);
    }

    #[test]
    fn a_loop_without_its_word_is_told_once() {
        let (_, found) = parse(b"data_a\n_u\n_v\n_w\n1 2 3\n4 5 6\n");
        let hints: Vec<_> = found.iter().map(|d| (d.code, d.hint.clone().unwrap_or_default())).collect();
        assert_eq!(hints[0], (Code::CifNoValue, "loop_ before _u, if rows of values follow".into()));
        assert_eq!(hints[1], (Code::CifNoValue, String::new()));
    }

    #[test]
    fn whole_rows_of_a_ragged_loop_are_kept() {
        let (document, found) = parse(b"data_a\nloop_ _u _v\n1 2\n3 4\n5");
        assert_eq!(found[0].span.map(|s| (s.line, s.column)), Some((5, 1)));
        assert!(found[0].message.ends_with("lacks 1; line 5 holds 1, others 2"), "{}", found[0].message);
        let (_, found) = parse(b"data_a\nloop_ _u _v\n1 2\n3\n4 5\n6 7");
        assert!(found[0].message.ends_with("line 4 holds 1, others 2"), "{}", found[0].message);
        let table = document.block(0).expect("a block").column(&["_v"]).expect("a loop");
        assert_eq!(table.rows(), 2);
        assert!(table.fault().is_some());
    }

    #[test]
    fn a_surplus_is_told_to_its_pair() {
        let (document, _) = parse(b"data_a _symbol P 21/c _other 1");
        let pair = document.block(0).expect("a block").pair("_symbol").expect("there");
        assert_eq!(pair.surplus.map(|span| document.raw(span)), Some(&b"21/c"[..]));
    }

    #[test]
    fn bytes_that_are_not_utf8_are_kept_in_the_source() {
        let (document, found) = parse(b"data_a _u \xE9x");
        assert_eq!(found[0].code, Code::CifNotUtf8);
        let value = document.block(0).expect("a block").value("_u").expect("there");
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
            for block in document.blocks() {
                for item in block.items() {
                    if let Item::Loop(table) = item {
                        prop_assert_eq!(table.iter().count(), table.rows());
                        for row in table.iter() {
                            prop_assert!(table.tags().enumerate().all(|(column, _)| row.value(column).is_some()));
                        }
                    }
                }
            }
        }
    }
}
