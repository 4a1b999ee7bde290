//! Columns that belong together: a loop, or part of one, or single values.

use super::{Document, LoopShape, Place, Tag, Value};
use crate::cif::lex::{Lexer, Token};
use crate::diagnostic::{Diagnostic, Span};

/// Columns that belong together; see [`super::Block::table`].
#[derive(Debug, Clone)]
pub struct Table<'d, 's> {
    document: &'d Document<'s>,
    /// The loop the columns are in.
    home: Option<u32>,
    /// For each column of the request, the number of its entry.
    entries: Vec<Option<usize>>,
}

/// The values of one row, in the order of the columns of the request.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Row<'s> {
    values: Vec<Option<Value<'s>>>,
}

impl<'s> Row<'s> {
    /// The value in a column, by its number in the request.
    #[must_use]
    pub fn value(&self, column: usize) -> Option<&Value<'s>> {
        self.values.get(column)?.as_ref()
    }

    /// The value in a column, taken out of the row.
    #[must_use]
    pub fn into_value(self, column: usize) -> Option<Value<'s>> {
        self.values.into_iter().nth(column)?
    }

    /// What the file states in a column; see [`Value::stated`].
    #[must_use]
    pub fn stated(&self, column: usize) -> Option<&str> {
        self.value(column).and_then(Value::stated)
    }
}

impl<'d, 's> Table<'d, 's> {
    pub(super) fn of(document: &'d Document<'s>, home: Place, entries: Vec<Option<usize>>) -> Self {
        let home = match home {
            Place::Column(number) => Some(number),
            Place::Pair(_) => None,
        };
        Self { document, home, entries }
    }

    /// A loop with all its columns.
    pub(super) fn whole(document: &'d Document<'s>, number: u32) -> Self {
        let shape = &document.loops[number as usize];
        let first = shape.first_entry as usize;
        let entries = (first..first + shape.columns as usize).map(Some).collect();
        Self { document, home: Some(number), entries }
    }

    fn shape(&self) -> Option<&'d LoopShape> {
        self.home.map(|number| &self.document.loops[number as usize])
    }

    /// How many rows there are.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.shape().map_or(1, |shape| shape.rows as usize)
    }

    /// Whether the table has a column, by its number in the request.
    #[must_use]
    pub fn has(&self, column: usize) -> bool {
        self.entries.get(column).is_some_and(Option::is_some)
    }

    /// The tags of the columns, in the order of the request.
    pub fn tags(&self) -> impl Iterator<Item = Option<Tag<'s>>> + use<'_, 'd, 's> {
        self.entries
            .iter()
            .map(|entry| Some(self.document.tag_at(self.document.entries[(*entry)?].tag as usize)))
    }

    /// A row by its number, counted from zero.
    #[must_use]
    pub fn row(&self, number: usize) -> Option<Row<'s>> {
        self.rows_from(number).next()
    }

    /// All rows in the order of the file.
    pub fn iter(&self) -> impl Iterator<Item = Row<'s>> + use<'_, 'd, 's> {
        self.rows_from(0)
    }

    fn rows_from(&self, first: usize) -> impl Iterator<Item = Row<'s>> + use<'_, 'd, 's> {
        let shape = self.shape();
        let rows = self.rows();
        let mut tokens = Vec::new();
        let mut lexer = shape.filter(|_| first < rows).and_then(|shape| self.lexer_at(shape, first));
        (first..rows).map(move |_| match (shape, &mut lexer) {
            (Some(shape), Some(lexer)) => {
                tokens.clear();
                tokens.extend(lexer.take(shape.columns as usize));
                self.looped_row(shape, &tokens)
            }
            _ => self.single_row(),
        })
    }

    /// A lexer that begins with the first value of a row.
    fn lexer_at(&self, shape: &LoopShape, row: usize) -> Option<Lexer<'s>> {
        let value = row * shape.columns as usize;
        let mark = value / LoopShape::VALUES_PER_MARK;
        let start = *self.document.marks.get(shape.first_mark as usize + mark)?;
        let mut lexer = self.document.lexer_at(start as usize);
        for _ in 0..value % LoopShape::VALUES_PER_MARK {
            lexer.next();
        }
        Some(lexer)
    }

    fn looped_row(&self, shape: &LoopShape, tokens: &[Token]) -> Row<'s> {
        let value = |entry: &Option<usize>| {
            let column = (*entry)?.checked_sub(shape.first_entry as usize)?;
            tokens.get(column).map(|token| self.document.value_of(token))
        };
        Row { values: self.entries.iter().map(value).collect() }
    }

    fn single_row(&self) -> Row<'s> {
        let value = |entry: &Option<usize>| match self.document.entries[(*entry)?].place() {
            Place::Pair(start) => self.document.value_at(start as usize),
            Place::Column(_) => None,
        };
        Row { values: self.entries.iter().map(value).collect() }
    }

    /// Why the table cannot be trusted, if its values did not fill whole rows.
    #[must_use]
    pub fn fault(&self) -> Option<&'d Diagnostic> {
        let faults = &self.document.faults;
        let found = faults.binary_search_by_key(&self.home?, |(number, _)| *number).ok()?;
        Some(&faults[found].1)
    }

    /// Where the table begins.
    #[must_use]
    pub fn span(&self) -> Option<Span> {
        let start = match self.shape() {
            Some(shape) => shape.start,
            None => self.document.entries[*self.entries.iter().flatten().next()?].tag,
        };
        self.document.token_at(start as usize).map(|token| token.span)
    }
}
