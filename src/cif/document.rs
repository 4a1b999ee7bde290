//! What a CIF says, as blocks of tags and values, before any of it is given a crystallographic meaning.
//!
//! # How the original text is kept
//! A [`Document`] borrows the bytes it was read from and never changes them. It remembers where each tag, value and loop
//! begins, and reads the text again when it is asked for: 12 bytes for a tag, and 4 for every 16 values of a loop, so that
//! a document takes less memory than its file. Every value that is handed out holds the [`Span`] of its own bytes,
//! delimiters included. Comments, blanks, line ends and the style of quotes are stored nowhere else: [`super::Edits`]
//! copies the source from span to span and puts new text only where something was changed, so that all other bytes come
//! out as they went in.

mod shape;
mod table;
mod value;

pub use table::{Row, Table};
pub use value::{Element, Value, ValueKind};

pub(super) use shape::{BlockShape, Entry, FrameShape, LoopShape, MAX_OFFSET, Place, fold};

use super::lex::{Dialect, Lexer, Token, TokenKind, ends_name};
use super::source::{Lines, narrow};
use crate::diagnostic::{Diagnostic, Span};
use std::borrow::Cow;
use std::ops::Range;

/// A whole file.
#[derive(Debug, Clone)]
pub struct Document<'s> {
    pub(super) source: &'s [u8],
    /// The source as text, when all of it is UTF-8.
    pub(super) text: Option<&'s str>,
    pub(super) dialect: Dialect,
    pub(super) lines: Lines,
    pub(super) blocks: Vec<BlockShape>,
    pub(super) frames: Vec<FrameShape>,
    pub(super) entries: Vec<Entry>,
    pub(super) loops: Vec<LoopShape>,
    /// Where every sixteenth value of each loop begins.
    pub(super) marks: Vec<u32>,
    /// Values without a tag that follow the value of an entry, by the number of the entry.
    pub(super) surplus: Vec<(u32, Span)>,
    /// Why a loop cannot be trusted, by the number of the loop.
    pub(super) faults: Vec<(u32, Diagnostic)>,
}

impl<'s> Document<'s> {
    /// The bytes the document was read from.
    #[must_use]
    pub fn source(&self) -> &'s [u8] {
        self.source
    }

    /// The edition of the syntax the file declares.
    #[must_use]
    pub fn dialect(&self) -> Dialect {
        self.dialect
    }

    /// The bytes of a span, as they stand in the file. Empty when the span belongs to another file.
    #[must_use]
    pub fn raw(&self, span: Span) -> &'s [u8] {
        self.source.get(span.start..span.end).unwrap_or_default()
    }

    /// Data blocks in the order of the file.
    #[must_use]
    pub fn blocks(&self) -> impl ExactSizeIterator<Item = Block<'_, 's>> {
        (0..self.blocks.len()).map(|number| self.block_of(number))
    }

    /// A data block by its number, counted from zero.
    #[must_use]
    pub fn block(&self, number: usize) -> Option<Block<'_, 's>> {
        (number < self.blocks.len()).then(|| self.block_of(number))
    }

    fn block_of(&self, number: usize) -> Block<'_, 's> {
        let shape = &self.blocks[number];
        let (name, span) = if let Some(heading) = shape.heading {
            self.heading(heading as usize)
        } else {
            // A block without heading begins with its first entry.
            let start = self.entries.get(shape.entries.start as usize).map_or(0, |entry| entry.begins(self));
            (Cow::Borrowed(""), self.lines.span(self.source, start, start))
        };
        let inner = self.frames_of(number);
        let mut own = Vec::with_capacity(inner.len() + 1);
        let mut from = shape.entries.start as usize;
        for frame in &self.frames[inner] {
            own.push(from..frame.entries.start as usize);
            from = frame.entries.end as usize;
        }
        own.push(from..shape.entries.end as usize);
        Block { document: self, number: Some(number), name, span, own }
    }

    /// Numbers of the save frames in a block.
    fn frames_of(&self, block: usize) -> Range<usize> {
        let of = |frame: &FrameShape| frame.block as usize;
        self.frames.partition_point(|frame| of(frame) < block)
            ..self.frames.partition_point(|frame| of(frame) <= block)
    }

    fn frame_of(&self, number: usize) -> Block<'_, 's> {
        let shape = &self.frames[number];
        let (name, span) = self.heading(shape.heading as usize);
        let entries = shape.entries.start as usize..shape.entries.end as usize;
        Block { document: self, number: None, name, span, own: Vec::from([entries]) }
    }

    /// Name and place of a heading that begins at a byte.
    fn heading(&self, start: usize) -> (Cow<'s, str>, Span) {
        match self.token_at(start) {
            Some(token) if matches!(token.kind, TokenKind::Block | TokenKind::Frame) => {
                (self.slice(token.start, token.end), token.span)
            }
            token => (Cow::Borrowed(""), token.map_or_else(Span::default, |token| token.span)),
        }
    }

    /// A lexer that begins at a byte.
    pub(super) fn lexer_at(&self, start: usize) -> Lexer<'s> {
        Lexer::within(self.source, start, self.lines.at(self.source, start), self.dialect)
    }

    fn token_at(&self, start: usize) -> Option<Token> {
        self.lexer_at(start).next()
    }

    /// Text between two bytes; what is not UTF-8 is shown as U+FFFD.
    pub(super) fn slice(&self, start: usize, end: usize) -> Cow<'s, str> {
        match self.text.and_then(|text| text.get(start..end)) {
            Some(text) => Cow::Borrowed(text),
            None => String::from_utf8_lossy(self.source.get(start..end).unwrap_or_default()),
        }
    }

    fn value_at(&self, start: usize) -> Option<Value<'s>> {
        self.token_at(start).map(|token| self.value_of(&token))
    }

    /// The bytes of the name of a block; empty where it has none.
    pub(super) fn block_name(&self, number: u32) -> &'s [u8] {
        const WORD: usize = "data_".len();
        let Some(heading) = self.blocks[number as usize].heading else { return &[] };
        let heading = &self.source[heading as usize..];
        // The other word that begins a block is global_.
        if !heading.get(..WORD).is_some_and(|word| word.eq_ignore_ascii_case(b"data_")) {
            return &[];
        }
        let length = heading.iter().position(|&byte| ends_name(byte)).unwrap_or(heading.len());
        &heading[WORD..length]
    }

    /// The bytes of the tag of an entry.
    pub(super) fn name_of(&self, entry: u32) -> &'s [u8] {
        let rest = &self.source[self.entries[entry as usize].tag as usize..];
        let length = rest.iter().position(|&byte| ends_name(byte)).unwrap_or(rest.len());
        &rest[..length]
    }

    pub(super) fn tag_at(&self, start: usize) -> Tag<'s> {
        let token = self.token_at(start);
        token.map_or_else(Tag::default, |token| Tag {
            name: self.slice(token.start, token.end),
            span: token.span,
        })
    }
}

/// A data block, or a save frame inside one.
#[derive(Debug, Clone)]
pub struct Block<'d, 's> {
    document: &'d Document<'s>,
    /// Its number; none for a save frame.
    number: Option<usize>,
    /// The name after `data_` or `save_`; empty when the file gives none.
    pub name: Cow<'s, str>,
    /// The heading.
    pub span: Span,
    /// Its entries, without those of the save frames inside.
    own: Vec<Range<usize>>,
}

/// A tag with its value, or a loop.
#[derive(Debug, Clone)]
pub enum Item<'d, 's> {
    /// A tag with one value.
    Pair(Pair<'s>),
    /// A loop, with all its columns.
    Loop(Table<'d, 's>),
}

/// The name of a data item.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct Tag<'s> {
    /// The name as the file spells it, underscore included.
    pub name: Cow<'s, str>,
    /// Where it is.
    pub span: Span,
}

/// A tag with one value.
#[derive(Debug, Clone)]
pub struct Pair<'s> {
    /// The tag.
    pub tag: Tag<'s>,
    /// Its value.
    pub value: Value<'s>,
    /// Further values that follow without a tag of their own, most often the rest of a value that should have been
    /// quoted. A number with a surplus cannot be trusted.
    pub surplus: Option<Span>,
}

impl<'d, 's> Block<'d, 's> {
    /// The document it belongs to.
    #[must_use]
    pub fn document(&self) -> &'d Document<'s> {
        self.document
    }

    /// Numbers of its entries, without those of the save frames inside.
    pub(super) fn entry_numbers(&self) -> impl Iterator<Item = u32> + '_ {
        self.own.iter().cloned().flatten().map(narrow)
    }

    /// Save frames inside, in the order of the file.
    pub fn frames(&self) -> impl Iterator<Item = Block<'d, 's>> + use<'d, 's> {
        let document = self.document;
        self.number.map_or(0..0, |number| document.frames_of(number)).map(|frame| document.frame_of(frame))
    }

    /// Tags with one value and loops, in the order of the file. A tag that is given twice comes twice.
    pub fn items(&self) -> impl Iterator<Item = Item<'d, 's>> + use<'_, 'd, 's> {
        let document = self.document;
        self.own.iter().cloned().flatten().filter_map(move |number| match document.entries[number].place() {
            Place::Pair(_) => self.pair_of(number).map(Item::Pair),
            Place::Column(number_of_loop) => {
                let shape = &document.loops[number_of_loop as usize];
                (shape.first_entry as usize == number)
                    .then(|| Item::Loop(Table::whole(document, number_of_loop)))
            }
        })
    }

    /// The entry of a tag, in any case; of a repeated tag the first.
    fn find(&self, tag: &str) -> Option<usize> {
        let hash = fold(tag.as_bytes());
        let entries = &self.document.entries;
        self.own.iter().cloned().find_map(|range| {
            let first = range.start;
            entries.get(range)?.iter().enumerate().find_map(|(number, entry)| {
                (entry.hash == hash && entry.is_named(self.document.source, tag)).then_some(first + number)
            })
        })
    }

    fn pair_of(&self, number: usize) -> Option<Pair<'s>> {
        let entry = self.document.entries.get(number)?;
        let Place::Pair(value) = entry.place() else { return None };
        let surplus = &self.document.surplus;
        let surplus = surplus
            .binary_search_by_key(&number, |(entry, _)| *entry as usize)
            .ok()
            .map(|found| surplus[found].1);
        Some(Pair {
            tag: self.document.tag_at(entry.tag as usize),
            value: self.document.value_at(value as usize)?,
            surplus,
        })
    }

    /// Whether the block has a tag, in any case.
    #[must_use]
    pub fn has(&self, tag: &str) -> bool {
        self.find(tag).is_some()
    }

    /// Where a tag is, in any case.
    #[must_use]
    pub fn tag(&self, tag: &str) -> Option<Tag<'s>> {
        let entry = self.document.entries[self.find(tag)?];
        Some(self.document.tag_at(entry.tag as usize))
    }

    /// The pair of a tag, in any case.
    #[must_use]
    pub fn pair(&self, tag: &str) -> Option<Pair<'s>> {
        self.pair_of(self.find(tag)?)
    }

    /// The value of a tag, in any case; of a looped tag the value in the first row.
    #[must_use]
    pub fn value(&self, tag: &str) -> Option<Value<'s>> {
        match self.document.entries[self.find(tag)?].place() {
            Place::Pair(value) => self.document.value_at(value as usize),
            Place::Column(_) => self.column(&[tag])?.row(0)?.into_value(0),
        }
    }

    /// Columns that belong together. Each column is asked for by its possible tags; the first tag that the block has
    /// decides which loop is read, and a column that is not in this loop is absent. Tags with single values are read as
    /// a table of one row.
    #[must_use]
    pub fn table(&self, columns: &[&[&str]]) -> Option<Table<'d, 's>> {
        let home = columns.iter().copied().flatten().find_map(|tag| self.find(tag))?;
        let home = self.document.entries[home].place();
        let places = columns
            .iter()
            .map(|tags| {
                tags.iter().filter_map(|tag| self.find(tag)).find(|&number| {
                    match (home, self.document.entries[number].place()) {
                        (Place::Column(home), Place::Column(own)) => home == own,
                        (Place::Pair(_), Place::Pair(_)) => true,
                        _ => false,
                    }
                })
            })
            .collect();
        Some(Table::of(self.document, home, places))
    }

    /// One column: the looped or single values of the first of these tags that the block has.
    #[must_use]
    pub fn column(&self, tags: &[&str]) -> Option<Table<'d, 's>> {
        self.table(&[tags])
    }
}

#[cfg(test)]
mod tests {
    use super::super::parse::parse;

    #[test]
    fn lookup_ignores_case() {
        let (document, _) = parse(b"data_x\n_Cell_Length_A 4.0\nloop_ _a _b 1 2 3 4");
        let block = document.block(0).expect("a block");
        assert_eq!(block.value("_cell_length_a").map(|v| v.text), Some("4.0".into()));
        assert_eq!(block.tag("_CELL_LENGTH_A").map(|t| t.name), Some("_Cell_Length_A".into()));
        let table = block.table(&[&["_zz", "_B"], &["_missing"]]).expect("a loop");
        assert_eq!(table.rows(), 2);
        assert!(!table.has(1));
        assert_eq!(table.row(1).and_then(|row| row.into_value(0)).map(|v| v.text), Some("4".into()));
        assert!(table.row(2).is_none());
    }

    #[test]
    fn single_values_make_a_table_of_one_row() {
        let (document, _) = parse(b"data_x _a 1 _b 2");
        let table = document.block(0).expect("a block").table(&[&["_a"], &["_b"]]).expect("two values");
        assert_eq!(table.rows(), 1);
        assert_eq!(table.row(0).and_then(|row| row.into_value(1)).map(|v| v.text), Some("2".into()));
    }

    #[test]
    fn raw_text_keeps_its_delimiters() {
        let (document, _) = parse(b"data_x _a 'b c' _d ? _e '?'");
        let block = document.block(0).expect("a block");
        let value = block.value("_a").expect("there");
        assert_eq!(document.raw(value.span), b"'b c'");
        assert_eq!(block.value("_d").expect("there").stated(), None);
        assert_eq!(block.value("_e").expect("there").stated(), Some("?"));
    }

    #[test]
    fn many_tags_take_linear_time() {
        // With a quadratic lookup this would take minutes.
        let text: String = std::iter::once("data_x\n".to_owned())
            .chain((0..200_000).map(|n| format!("_t{n} {n}\n")))
            .collect();
        let (document, found) = parse(text.as_bytes());
        assert!(found.is_empty());
        assert_eq!(
            document.block(0).expect("a block").value("_T199999").map(|v| v.text),
            Some("199999".into())
        );
    }
}
