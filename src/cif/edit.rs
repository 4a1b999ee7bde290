//! Changes to a file that leave everything else as it was, byte by byte.

use super::document::Document;
use crate::diagnostic::Span;
use thiserror::Error;

/// Why a change cannot be made.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum EditError {
    /// The span is not inside the file.
    #[error("bytes {start} to {end} are not inside the file of {length} bytes")]
    Outside {
        /// First byte of the span.
        start: usize,
        /// One past its last byte.
        end: usize,
        /// Length of the file.
        length: usize,
    },
    /// Another change touches some of the same bytes.
    #[error("bytes {start} to {end} are changed already")]
    Overlap {
        /// First byte of the span.
        start: usize,
        /// One past its last byte.
        end: usize,
    },
}

/// Changes to the text of a document. They are given as text of CIF, delimiters included, and are not looked into.
///
/// ```
/// use cosetta::cif::{Edits, parse};
/// let (document, _) = parse(b"data_x  # a comment\n_cell_length_a  4.2 # wrong\n");
/// let value = document.block(0).unwrap().value("_cell_length_a").unwrap();
/// let mut edits = Edits::new(&document);
/// edits.replace(value.span, "4.212")?;
/// assert_eq!(edits.write(), b"data_x  # a comment\n_cell_length_a  4.212 # wrong\n");
/// # Ok::<(), cosetta::cif::EditError>(())
/// ```
#[derive(Debug, Clone)]
pub struct Edits<'s> {
    source: &'s [u8],
    /// Changes in the order of the file, none of which overlap.
    changes: Vec<(usize, usize, Vec<u8>)>,
}

impl<'s> Edits<'s> {
    /// No changes yet.
    #[must_use]
    pub fn new(document: &Document<'s>) -> Self {
        Self { source: document.source(), changes: Vec::new() }
    }

    /// Puts text in the place of a span, such as that of a value.
    ///
    /// # Errors
    /// The span is not inside the file, or overlaps another change.
    pub fn replace(&mut self, span: Span, text: impl Into<Vec<u8>>) -> Result<(), EditError> {
        let Span { start, end, .. } = span;
        if start > end || end > self.source.len() {
            return Err(EditError::Outside { start, end, length: self.source.len() });
        }
        let at = self.changes.partition_point(|(other, _, _)| *other < start);
        let overlaps_before = at.checked_sub(1).is_some_and(|before| self.changes[before].1 > start);
        // Two insertions at one place would have no order.
        let overlaps_after =
            self.changes.get(at).is_some_and(|(other, _, _)| *other < end || *other == start && start == end);
        if overlaps_before || overlaps_after {
            return Err(EditError::Overlap { start, end });
        }
        self.changes.insert(at, (start, end, text.into()));
        Ok(())
    }

    /// Puts text before a byte.
    ///
    /// # Errors
    /// The byte is not inside the file, or is inside another change.
    pub fn insert(&mut self, at: usize, text: impl Into<Vec<u8>>) -> Result<(), EditError> {
        self.replace(Span { start: at, end: at, ..Span::default() }, text)
    }

    /// The text with all changes made.
    #[must_use]
    pub fn write(&self) -> Vec<u8> {
        let mut text = Vec::with_capacity(self.source.len());
        let mut from = 0;
        for (start, end, new) in &self.changes {
            text.extend_from_slice(&self.source[from..*start]);
            text.extend_from_slice(new);
            from = *end;
        }
        text.extend_from_slice(&self.source[from..]);
        text
    }
}

#[cfg(test)]
mod tests {
    use super::super::document::Item;
    use super::super::parse::parse;
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn changes_that_meet_are_refused() {
        let (document, _) = parse(b"data_x _a 12345");
        let value = document.block(0).and_then(|block| block.value("_a")).expect("there").span;
        let mut edits = Edits::new(&document);
        edits.replace(value, "'6 7'").expect("inside");
        assert!(matches!(edits.replace(value, "8"), Err(EditError::Overlap { start: 10, end: 15 })));
        assert!(matches!(edits.insert(12, "8"), Err(EditError::Overlap { .. })));
        assert!(matches!(edits.insert(16, "8"), Err(EditError::Outside { length: 15, .. })));
        edits.insert(15, " _b 9").expect("behind the value");
        assert_eq!(edits.write(), b"data_x _a '6 7' _b 9");
    }

    proptest! {
        #[test]
        fn changing_one_value_changes_no_other_byte(
            words in proptest::collection::vec(
                proptest::sample::select(vec!["_a 1", "_b 'x y'", "# c", "\n;t\n;\n", "loop_ _c _d 1 2 3 4", "data_y", "\r\n", "é"]),
                0..20,
            ),
            choice in any::<prop::sample::Index>(),
        ) {
            let text = format!("data_x {}\n", words.join("\n"));
            let (document, _) = parse(text.as_bytes());
            let spans: Vec<Span> = document
                .blocks()
                .flat_map(|block| block.items().flat_map(|item| match item {
                    Item::Pair(pair) => vec![pair.value.span],
                    Item::Loop(table) => table.iter().filter_map(|row| row.value(0).map(|v| v.span)).collect(),
                }).collect::<Vec<_>>())
                .collect();
            prop_assert_eq!(Edits::new(&document).write(), text.as_bytes());
            if !spans.is_empty() {
                let span = *choice.get(&spans);
                let mut edits = Edits::new(&document);
                edits.replace(span, "new").expect("inside");
                let written = edits.write();
                prop_assert_eq!(&written[..span.start], &text.as_bytes()[..span.start]);
                prop_assert_eq!(&written[span.start + 3..], &text.as_bytes()[span.end..]);
            }
        }
    }
}
