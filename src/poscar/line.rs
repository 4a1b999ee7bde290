//! The lines of a POSCAR file and the words in them.

use crate::diagnostic::{Code, Diagnostic, Lines, Span};
use nalgebra::Vector3;
use std::borrow::Cow;

/// So many bytes of a line are shown in a message.
const SHOWN: usize = 40;

/// A file, taken line by line.
pub(super) struct Source<'a> {
    bytes: &'a [u8],
    lines: Lines,
    ranges: Vec<(usize, usize)>,
    next: usize,
}

/// One line, without its line end.
pub(super) struct Line<'a> {
    bytes: &'a [u8],
    start: usize,
    /// Counted from one.
    pub(super) number: usize,
}

/// A part of a line between blanks.
#[derive(Debug, Clone)]
pub(super) struct Word<'a> {
    bytes: &'a [u8],
    /// Counted from zero, in bytes, from the start of the line.
    column: usize,
}

impl<'a> Source<'a> {
    pub(super) fn new(bytes: &'a [u8]) -> Self {
        let lines = Lines::new(bytes);
        let mut ranges: Vec<(usize, usize)> = lines.ranges().collect();
        while ranges.last().is_some_and(|&(start, end)| start == end) {
            ranges.pop();
        }
        Self { bytes, lines, ranges, next: 0 }
    }

    /// The number of the line that comes next, counted from one.
    pub(super) fn number(&self) -> usize {
        self.next + 1
    }

    pub(super) fn lines_left(&self) -> usize {
        self.ranges.len() - self.next
    }

    /// The end of the file.
    pub(super) fn end(&self) -> Span {
        let last = self.ranges.last().map_or(0, |&(start, _)| start);
        self.lines.span(last, self.bytes.len())
    }

    /// Refuses another position directly after the last: then the counts are not those of the file.
    pub(super) fn refuse_surplus(&mut self, counted: usize) -> Result<(), Diagnostic> {
        let Ok(line) = self.next("nothing") else { return Ok(()) };
        let words = line.words();
        if words.len() < 3 || words.iter().take(3).any(|word| word.number().is_none()) {
            return Ok(());
        }
        let message = format!(
            "the counts add up to {counted} atoms, but line {} holds another position: '{}'",
            line.number,
            line.excerpt()
        );
        Err(Diagnostic::error(Code::PoscarCounts, message)
            .at(line.span())
            .hint("correct the counts, or leave a blank line before velocities"))
    }

    pub(super) fn next(&mut self, what: &str) -> Result<Line<'a>, Diagnostic> {
        let number = self.number();
        let Some(&(start, end)) = self.ranges.get(self.next) else {
            let message = format!("the file ends before line {number}, which should hold {what}");
            return Err(Diagnostic::error(Code::PoscarShort, message).at(self.end()));
        };
        self.next += 1;
        let bytes = self.bytes.get(start..end).unwrap_or_default().trim_ascii_end();
        Ok(Line { bytes, start, number })
    }
}

impl<'a> Line<'a> {
    pub(super) fn text(&self) -> Cow<'a, str> {
        let bytes = self.bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(self.bytes);
        String::from_utf8_lossy(bytes)
    }

    /// The line as far as a message shows it.
    pub(super) fn excerpt(&self) -> String {
        shown(self.bytes)
    }

    /// Whether the first letter is one of these.
    pub(super) fn starts_with(&self, letters: &[u8]) -> bool {
        self.bytes.trim_ascii_start().first().is_some_and(|first| letters.contains(first))
    }

    /// The words up to a comment that is set off with `!` or `#`.
    pub(super) fn words(&self) -> Vec<Word<'a>> {
        self.all_words()
            .into_iter()
            .take_while(|word| !matches!(word.bytes.first(), Some(b'!' | b'#')))
            .collect()
    }

    /// The words, those of a comment too, without the marks that set it off.
    pub(super) fn all_words(&self) -> Vec<Word<'a>> {
        let mut words = Vec::new();
        let mut at = 0;
        for piece in self.bytes.split(u8::is_ascii_whitespace) {
            if !piece.is_empty() {
                words.push(Word { bytes: piece, column: at });
            }
            at += piece.len() + 1;
        }
        words
    }

    pub(super) fn span(&self) -> Span {
        let blanks = self.bytes.len() - self.bytes.trim_ascii_start().len();
        self.range(blanks, self.bytes.len())
    }

    pub(super) fn place(&self, word: &Word<'_>) -> Span {
        self.range(word.column, word.column + word.bytes.len())
    }

    fn range(&self, from: usize, to: usize) -> Span {
        Span { start: self.start + from, end: self.start + to, line: self.number, column: from + 1 }
    }

    pub(super) fn numeral(&self, word: Option<&Word<'_>>, what: &str) -> Result<f64, Diagnostic> {
        let Some(word) = word else {
            let message = format!("line {} should hold {what}, and a number is missing", self.number);
            return Err(Diagnostic::error(Code::PoscarNumber, message).at(self.span()));
        };
        word.number().ok_or_else(|| {
            let message = format!("'{}' in {what} is not a finite number", word.text());
            Diagnostic::error(Code::PoscarNumber, message).at(self.place(word))
        })
    }

    /// Three numbers.
    pub(super) fn vector(&self, words: &[Word<'_>], what: &str) -> Result<Vector3<f64>, Diagnostic> {
        Ok(Vector3::new(
            self.numeral(words.first(), what)?,
            self.numeral(words.get(1), what)?,
            self.numeral(words.get(2), what)?,
        ))
    }
}

impl Word<'_> {
    /// The word as far as a message shows it.
    pub(super) fn text(&self) -> String {
        shown(self.bytes)
    }

    /// A finite number; the exponent may be written with `D`, as Fortran does.
    pub(super) fn number(&self) -> Option<f64> {
        let text = std::str::from_utf8(self.bytes).ok()?;
        if !text.bytes().all(|byte| byte.is_ascii_digit() || b"+-.eEdD".contains(&byte)) {
            return None;
        }
        text.replace(['d', 'D'], "e").parse().ok().filter(|value: &f64| value.is_finite())
    }

    /// A number of atoms.
    pub(super) fn count(&self) -> Option<usize> {
        std::str::from_utf8(self.bytes).ok()?.parse().ok()
    }
}

fn shown(bytes: &[u8]) -> String {
    let text = String::from_utf8_lossy(bytes);
    let short: String = text.trim().chars().filter(|c| !c.is_control()).take(SHOWN).collect();
    if short.len() < text.trim().len() { short + "…" } else { short }
}
