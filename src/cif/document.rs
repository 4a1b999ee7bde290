//! What a CIF says, as blocks of tags and values, before any of it is given a crystallographic meaning.
//!
//! # How the original text is kept
//! A [`Document`] borrows the bytes it was read from and never changes them. Every tag and every value holds the
//! [`Span`] of its own bytes, delimiters included, and its text as a [`Cow`]: borrowed from the source as long as it is
//! what the file says, owned once it was changed (or when the source was not UTF-8). Comments, blanks, line ends and the
//! style of quotes are not stored anywhere else: a writer copies the source from span to span and puts new text only where
//! a value was changed, so that all other bytes come out as they went in.
//!
//! # What comes later
//! [`ValueKind`] is not exhaustive: the lists and tables of CIF 2.0 become further kinds, whose elements are values
//! again. Save frames are blocks inside a block.

use super::lex::Dialect;
use crate::diagnostic::{Diagnostic, Span};
use std::borrow::Cow;
use std::collections::HashMap;
use std::collections::hash_map::Entry;
use std::hash::{Hash, Hasher};

/// A whole file.
#[derive(Debug, Clone)]
pub struct Document<'s> {
    /// The bytes the document was read from.
    pub source: &'s [u8],
    /// The edition of the syntax the file declares.
    pub dialect: Dialect,
    /// Data blocks in the order of the file.
    pub blocks: Vec<Block<'s>>,
}

impl Document<'_> {
    /// The bytes of a span, as they stand in the file. Empty when the span belongs to another file.
    #[must_use]
    pub fn raw(&self, span: Span) -> &[u8] {
        self.source.get(span.start..span.end).unwrap_or_default()
    }
}

/// A data block, or a save frame inside one.
#[derive(Debug, Clone, Default)]
pub struct Block<'s> {
    /// The name after `data_` or `save_`; empty when the file gives none.
    pub name: Cow<'s, str>,
    /// The heading.
    pub span: Span,
    /// Tags with one value, and loops, in the order of the file.
    pub items: Vec<Item<'s>>,
    /// Save frames in the order of the file.
    pub frames: Vec<Block<'s>>,
    /// Where each tag is; of a repeated tag the first place.
    index: HashMap<Folded<'s>, Place>,
}

/// A tag with its value, or a loop.
#[derive(Debug, Clone)]
pub enum Item<'s> {
    /// A tag with one value.
    Pair(Pair<'s>),
    /// A loop.
    Loop(Loop<'s>),
}

/// The name of a data item.
#[derive(Debug, Clone, PartialEq, Eq)]
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

/// A table: tags, and values row by row.
#[derive(Debug, Clone)]
pub struct Loop<'s> {
    /// The word `loop_`.
    pub span: Span,
    /// One tag for each column.
    pub tags: Vec<Tag<'s>>,
    /// Values row by row; always a whole number of rows.
    pub values: Vec<Value<'s>>,
    /// Why the loop cannot be trusted, if its values did not fill whole rows.
    pub fault: Option<Diagnostic>,
}

impl Loop<'_> {
    /// How many whole rows there are.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.values.len().checked_div(self.tags.len()).unwrap_or(0)
    }
}

/// How a value is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum ValueKind {
    /// Without quotes.
    Bare,
    /// In quotes.
    Quoted,
    /// In a text field.
    Text,
    /// A bare `.`: the item does not apply, or has its default value.
    Inapplicable,
    /// A bare `?`: the value is not known.
    Unknown,
}

/// One value.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Value<'s> {
    /// How it is written.
    pub kind: ValueKind,
    /// Where all of it is, delimiters included.
    pub span: Span,
    /// Its text without delimiters.
    pub text: Cow<'s, str>,
}

impl Value<'_> {
    /// The text without blanks around it; `None` for a bare `.` or `?`, or when nothing is left.
    #[must_use]
    pub fn stated(&self) -> Option<&str> {
        match self.kind {
            ValueKind::Inapplicable | ValueKind::Unknown => None,
            _ => Some(self.text.trim()).filter(|text| !text.is_empty()),
        }
    }
}

/// Where a tag is in its block.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Place {
    item: usize,
    column: usize,
}

/// A tag compared without regard to ASCII case.
#[derive(Debug, Clone, Eq)]
struct Folded<'s>(Cow<'s, str>);

impl PartialEq for Folded<'_> {
    fn eq(&self, other: &Self) -> bool {
        self.0.eq_ignore_ascii_case(&other.0)
    }
}

impl Hash for Folded<'_> {
    fn hash<H: Hasher>(&self, state: &mut H) {
        let mut folded = [0_u8; 32];
        for chunk in self.0.as_bytes().chunks(folded.len()) {
            for (to, from) in folded.iter_mut().zip(chunk) {
                *to = from.to_ascii_lowercase();
            }
            state.write(&folded[..chunk.len()]);
        }
        state.write_u8(0xFF);
    }
}

impl<'s> Block<'s> {
    /// An empty block.
    #[must_use]
    pub fn new(name: Cow<'s, str>, span: Span) -> Self {
        Self { name, span, ..Self::default() }
    }

    /// Appends an item. Returns the tags that the block or the item has already; their first place stays in force.
    pub fn push(&mut self, item: Item<'s>) -> Vec<Tag<'s>> {
        let place = self.items.len();
        let tags = match &item {
            Item::Pair(pair) => std::slice::from_ref(&pair.tag),
            Item::Loop(looped) => looped.tags.as_slice(),
        };
        let mut repeated = Vec::new();
        for (column, tag) in tags.iter().enumerate() {
            match self.index.entry(Folded(tag.name.clone())) {
                Entry::Occupied(_) => repeated.push(tag.clone()),
                Entry::Vacant(entry) => {
                    entry.insert(Place { item: place, column });
                }
            }
        }
        self.items.push(item);
        repeated
    }

    fn place(&self, tag: &str) -> Option<Place> {
        self.index.get(&Folded(Cow::Borrowed(tag))).copied()
    }

    /// Where a tag is, in any case.
    #[must_use]
    pub fn tag(&self, tag: &str) -> Option<&Tag<'s>> {
        let place = self.place(tag)?;
        match self.items.get(place.item)? {
            Item::Pair(pair) => Some(&pair.tag),
            Item::Loop(looped) => looped.tags.get(place.column),
        }
    }

    /// The pair of a tag, in any case.
    #[must_use]
    pub fn pair(&self, tag: &str) -> Option<&Pair<'s>> {
        match self.items.get(self.place(tag)?.item)? {
            Item::Pair(pair) => Some(pair),
            Item::Loop(_) => None,
        }
    }

    /// The value of a tag, in any case; of a looped tag the value in the first row.
    #[must_use]
    pub fn value(&self, tag: &str) -> Option<&Value<'s>> {
        let place = self.place(tag)?;
        match self.items.get(place.item)? {
            Item::Pair(pair) => Some(&pair.value),
            Item::Loop(looped) => looped.values.get(place.column),
        }
    }

    /// Columns that belong together. Each column is asked for by its possible tags; the first tag that the block has
    /// decides which loop is read, and a column that is not in this loop is absent. Tags with single values are read as
    /// a table of one row.
    #[must_use]
    pub fn table(&self, columns: &[&[&str]]) -> Option<Table<'_, 's>> {
        let home = columns.iter().copied().flatten().find_map(|tag| self.place(tag))?;
        let is_loop = matches!(self.items.get(home.item)?, Item::Loop(_));
        let places = columns
            .iter()
            .map(|tags| {
                tags.iter().find_map(|tag| self.place(tag)).filter(|place| {
                    if is_loop {
                        place.item == home.item
                    } else {
                        matches!(self.items.get(place.item), Some(Item::Pair(_)))
                    }
                })
            })
            .collect();
        let looped = match self.items.get(home.item)? {
            Item::Loop(looped) => Some(looped),
            Item::Pair(_) => None,
        };
        Some(Table { block: self, looped, places })
    }

    /// One column: the looped or single values of the first of these tags that the block has.
    #[must_use]
    pub fn column(&self, tags: &[&str]) -> Option<Table<'_, 's>> {
        self.table(&[tags])
    }
}

/// Columns that belong together; see [`Block::table`].
#[derive(Debug, Clone)]
pub struct Table<'d, 's> {
    block: &'d Block<'s>,
    looped: Option<&'d Loop<'s>>,
    places: Vec<Option<Place>>,
}

impl<'d, 's> Table<'d, 's> {
    /// How many rows there are.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.looped.map_or(1, Loop::rows)
    }

    /// Whether the table has a column, by its number in the request.
    #[must_use]
    pub fn has(&self, column: usize) -> bool {
        self.places.get(column).is_some_and(Option::is_some)
    }

    /// The value in a row, by the number of the column in the request.
    #[must_use]
    pub fn value(&self, row: usize, column: usize) -> Option<&'d Value<'s>> {
        let place = (*self.places.get(column)?)?;
        match (self.looped, self.block.items.get(place.item)?) {
            (Some(looped), _) => looped.values.get(row * looped.tags.len() + place.column),
            (None, Item::Pair(pair)) => (row == 0).then_some(&pair.value),
            (None, Item::Loop(_)) => None,
        }
    }

    /// Why the table cannot be trusted, if its values did not fill whole rows.
    #[must_use]
    pub fn fault(&self) -> Option<&'d Diagnostic> {
        self.looped.and_then(|looped| looped.fault.as_ref())
    }

    /// Where the table begins.
    #[must_use]
    pub fn span(&self) -> Option<Span> {
        if let Some(looped) = self.looped {
            return Some(looped.span);
        }
        let place = self.places.iter().flatten().next()?;
        match self.block.items.get(place.item)? {
            Item::Pair(pair) => Some(pair.tag.span),
            Item::Loop(looped) => Some(looped.span),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::super::parse::parse;

    #[test]
    fn lookup_ignores_case() {
        let (document, _) = parse(b"data_x\n_Cell_Length_A 4.0\nloop_ _a _b 1 2 3 4");
        let block = &document.blocks[0];
        assert_eq!(block.value("_cell_length_a").map(|v| v.text.as_ref()), Some("4.0"));
        assert_eq!(block.tag("_CELL_LENGTH_A").map(|t| t.name.as_ref()), Some("_Cell_Length_A"));
        let table = block.table(&[&["_zz", "_B"], &["_missing"]]).expect("a loop");
        assert_eq!(table.rows(), 2);
        assert!(!table.has(1));
        assert_eq!(table.value(1, 0).map(|v| v.text.as_ref()), Some("4"));
        assert!(table.value(2, 0).is_none());
    }

    #[test]
    fn single_values_make_a_table_of_one_row() {
        let (document, _) = parse(b"data_x _a 1 _b 2");
        let table = document.blocks[0].table(&[&["_a"], &["_b"]]).expect("two values");
        assert_eq!(table.rows(), 1);
        assert_eq!(table.value(0, 1).map(|v| v.text.as_ref()), Some("2"));
    }

    #[test]
    fn raw_text_keeps_its_delimiters() {
        let (document, _) = parse(b"data_x _a 'b c' _d ? _e '?'");
        let block = &document.blocks[0];
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
        assert_eq!(document.blocks[0].value("_T199999").map(|v| v.text.as_ref()), Some("199999"));
    }
}
