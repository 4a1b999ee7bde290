//! Where the lines of a source begin.

use super::Span;

/// The first byte of each line of a source, to turn byte numbers into lines and columns. A line ends with a line feed,
/// a carriage return, or both.
///
/// ```
/// use cosetta::diagnostic::Lines;
/// let lines = Lines::new(b"one\r\ntwo\n");
/// let span = lines.span(6, 8);
/// assert_eq!((span.line, span.column), (2, 2));
/// ```
#[derive(Debug, Clone)]
pub struct Lines {
    starts: Vec<usize>,
    length: usize,
}

impl Lines {
    /// Finds the lines of a source.
    #[must_use]
    pub fn new(source: &[u8]) -> Self {
        let mut starts = vec![0];
        for (at, &byte) in source.iter().enumerate() {
            if byte == b'\n' || byte == b'\r' && source.get(at + 1) != Some(&b'\n') {
                starts.push(at + 1);
            }
        }
        Self { starts, length: source.len() }
    }

    /// Bytes `start` to `end` as a place in the source.
    #[must_use]
    pub fn span(&self, start: usize, end: usize) -> Span {
        let line = self.starts.partition_point(|&first| first <= start);
        let first = self.starts.get(line.wrapping_sub(1)).copied().unwrap_or(0);
        Span { start, end: end.max(start), line: line.max(1), column: start - first + 1 }
    }

    /// The first byte of each line and one past its last, line ends included.
    pub fn ranges(&self) -> impl Iterator<Item = (usize, usize)> + '_ {
        let ends = self.starts.iter().skip(1).copied().chain([self.length]);
        self.starts.iter().copied().zip(ends)
    }

    /// The byte of a line and column, both counted from one; the end of the source for a line it does not have.
    #[must_use]
    pub fn offset(&self, line: usize, column: usize) -> usize {
        let first = self.starts.get(line.saturating_sub(1)).copied().unwrap_or(self.length);
        first.saturating_add(column.saturating_sub(1)).min(self.length)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn all_line_ends() {
        let source = b"a\nb\r\nc\rd";
        let lines = Lines::new(source);
        let starts: Vec<usize> = lines.ranges().map(|(start, _)| start).collect();
        assert_eq!(starts, [0, 2, 5, 7]);
        assert_eq!(lines.ranges().last(), Some((7, 8)));
        assert_eq!((lines.span(7, 8).line, lines.span(7, 8).column), (4, 1));
        assert_eq!((lines.span(0, 1).line, lines.span(0, 1).column), (1, 1));
    }

    proptest! {
        #[test]
        fn places_round_trip(source in "[ab\r\n]{0,40}", at in 0_usize..40) {
            let lines = Lines::new(source.as_bytes());
            let at = at.min(source.len());
            let span = lines.span(at, at);
            prop_assert_eq!(lines.offset(span.line, span.column), at);
        }
    }
}
