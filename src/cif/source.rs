//! The bytes of a file: where its lines begin, and what is wrong with its characters.
//!
//! Line ends are LF, CR LF or a lone CR (International Tables for Crystallography, volume G, 2.2.7.1, paragraph 9).

use super::lex::Dialect;
use crate::diagnostic::{Code, Diagnostic, Span};

/// Longest line in characters, by CIF 1.1 and 2.0 alike.
const MAX_LINE: usize = 2048;
/// Distance in bytes of the places whose line is remembered.
const STEP: usize = 256;

/// The UTF-8 byte order mark.
pub(super) const BYTE_ORDER_MARK: &[u8] = b"\xEF\xBB\xBF";

/// A place in a file: its line, counted from one, and the byte with which the line begins.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct LineStart {
    pub(super) line: usize,
    pub(super) start: usize,
}

/// The lines of a file: every 256 bytes one place is remembered, in 8 bytes, so that any other is found by counting
/// over at most 256 bytes.
#[derive(Debug, Clone)]
pub(super) struct Lines {
    /// For each multiple of [`STEP`], how many line ends lie before it, and where the last of them ends.
    marks: Vec<(u32, u32)>,
}

impl Lines {
    /// Counts the lines of a file of less than 4 GiB, and finds the first that is too long.
    pub(super) fn of(bytes: &[u8]) -> (Self, Option<LineStart>) {
        let mut marks = Vec::with_capacity(bytes.len() / STEP + 1);
        let mut long = None;
        let mut current = LineStart { line: 1, start: 0 };
        let mut reach = |current: LineStart, end: usize| {
            while marks.len() * STEP < end {
                marks.push((narrow(current.line), narrow(current.start)));
            }
            if end - current.start > MAX_LINE && long.is_none() {
                let line = &bytes[current.start..end];
                let content = line.trim_ascii_end();
                if String::from_utf8_lossy(content).chars().count() > MAX_LINE {
                    long = Some(current);
                }
            }
        };
        for end in memchr::memchr2_iter(b'\n', b'\r', bytes) {
            // The CR of a CR LF is part of the line that the LF ends.
            if bytes[end] == b'\r' && bytes.get(end + 1) == Some(&b'\n') {
                continue;
            }
            reach(current, end + 1);
            current = LineStart { line: current.line + 1, start: end + 1 };
        }
        reach(current, bytes.len() + 1);
        (Self { marks }, long)
    }

    /// The line of a byte.
    pub(super) fn at(&self, bytes: &[u8], offset: usize) -> LineStart {
        let mark = (offset / STEP).min(self.marks.len().saturating_sub(1));
        let Some(&(line, start)) = self.marks.get(mark) else { return LineStart { line: 1, start: 0 } };
        let mut found = LineStart { line: line as usize, start: start as usize };
        let from = mark * STEP;
        for end in memchr::memchr2_iter(b'\n', b'\r', bytes.get(from..offset).unwrap_or_default()) {
            let end = from + end;
            if bytes[end] == b'\n' || bytes.get(end + 1) != Some(&b'\n') {
                found = LineStart { line: found.line + 1, start: end + 1 };
            }
        }
        found
    }

    /// The span of some bytes.
    pub(super) fn span(&self, bytes: &[u8], start: usize, end: usize) -> Span {
        let found = self.at(bytes, start);
        Span { start, end: end.min(bytes.len()), line: found.line, column: start - found.start + 1 }
    }
}

/// What is wrong with the characters of a file. Each kind of fault is reported once, at its first place.
pub(super) fn inspect(
    bytes: &[u8],
    lines: &Lines,
    long: Option<LineStart>,
    dialect: Dialect,
) -> Vec<Diagnostic> {
    let place = |offset: usize| lines.span(bytes, offset, offset + 1);
    if bytes.starts_with(&[0xFF, 0xFE]) || bytes.starts_with(&[0xFE, 0xFF]) {
        return vec![
            Diagnostic::error(Code::CifEncoding, "the file is in UTF-16, not in ASCII or UTF-8")
                .at(place(0))
                .hint("iconv -f UTF-16 -t UTF-8 FILE"),
        ];
    }
    let mut found = Vec::new();
    found.extend(if bytes.is_ascii() { None } else { beyond_ascii(bytes, dialect, place) });
    let is_control = |&byte: &u8| (byte < 0x20 && !matches!(byte, b'\t' | b'\n' | b'\r')) || byte == 0x7F;
    if let Some(offset) = bytes.iter().position(is_control) {
        found.push(
            Diagnostic::warning(
                Code::CifControlByte,
                format!("control byte 0x{:02X} in the text", bytes[offset]),
            )
            .at(place(offset))
            .hint("tr -d '\\000-\\010\\013\\014\\016-\\037\\177' < FILE"),
        );
    }
    if let Some(line) = long {
        let text =
            String::from_utf8_lossy(&bytes[line.start..line_end_after(bytes, line.start)]).into_owned();
        let allowed: usize = text.chars().take(MAX_LINE).map(char::len_utf8).sum();
        found.push(
            Diagnostic::warning(
                Code::CifLineLong,
                format!(
                    "line {} has {} characters, above the limit of {MAX_LINE}",
                    line.line,
                    text.chars().count()
                ),
            )
            .at(place((line.start + allowed).min(bytes.len().saturating_sub(1)))),
        );
    }
    found
}

/// Characters that the edition does not have, or bytes that are no characters.
fn beyond_ascii(bytes: &[u8], dialect: Dialect, place: impl Fn(usize) -> Span) -> Option<Diagnostic> {
    let text = match std::str::from_utf8(bytes) {
        Ok(text) => text,
        Err(error) => {
            let offset = error.valid_up_to();
            let byte = bytes.get(offset).copied().unwrap_or_default();
            let message = format!("byte 0x{byte:02X} is not UTF-8; such bytes are shown as \u{FFFD}");
            let found = Diagnostic::warning(Code::CifNotUtf8, message).at(place(offset));
            return Some(found.hint("iconv -f ISO-8859-1 -t UTF-8 FILE"));
        }
    };
    let start = if bytes.starts_with(BYTE_ORDER_MARK) { BYTE_ORDER_MARK.len() } else { 0 };
    let is_foreign = |c: char| match dialect {
        Dialect::One => !c.is_ascii(),
        Dialect::Two => {
            let code = u32::from(c);
            matches!(code, 0x80..=0x9F | 0xFDD0..=0xFDEF | 0xFEFF) || code & 0xFFFE == 0xFFFE
        }
    };
    let (offset, character) = text[start..].char_indices().find(|(_, c)| is_foreign(*c))?;
    let shown = character.escape_unicode();
    let found = match dialect {
        Dialect::One => Diagnostic::note(
            Code::CifCharacter,
            format!("character '{character}' ({shown}) is not in the set of CIF 1.1; it was read as UTF-8"),
        )
        .hint("#\\#CIF_2.0"),
        Dialect::Two => Diagnostic::warning(
            Code::CifCharacter,
            format!("character {shown} is not in the set of CIF 2.0; it was kept"),
        ),
    };
    Some(found.at(place(start + offset)))
}

/// Offset of the first line end at or after `from`, or the end of the bytes.
pub(super) fn line_end_after(bytes: &[u8], from: usize) -> usize {
    memchr::memchr2(b'\n', b'\r', &bytes[from..]).map_or(bytes.len(), |n| from + n)
}

/// How many bytes the line end at `at` has: none, one or two.
pub(super) fn line_end_length(bytes: &[u8], at: usize) -> usize {
    match bytes.get(at) {
        Some(b'\r') if bytes.get(at + 1) == Some(&b'\n') => 2,
        Some(b'\r' | b'\n') => 1,
        _ => 0,
    }
}

/// An offset in 32 bits. Files of 4 GiB and more are refused before they are parsed.
pub(super) fn narrow(offset: usize) -> u32 {
    u32::try_from(offset).unwrap_or(u32::MAX)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn found(bytes: &[u8], dialect: Dialect) -> Vec<(Code, usize, usize)> {
        let (lines, long) = Lines::of(bytes);
        let place = |d: Diagnostic| (d.code, d.span.map_or(0, |s| s.line), d.span.map_or(0, |s| s.column));
        inspect(bytes, &lines, long, dialect).into_iter().map(place).collect()
    }

    #[test]
    fn characters_are_inspected_once() {
        let both = found(b"ab\n\xE9\xE9\x00\x00", Dialect::One);
        assert_eq!(both, [(Code::CifNotUtf8, 2, 1), (Code::CifControlByte, 2, 3)]);
        assert_eq!(found(b"\xFF\xFEd\0", Dialect::One), [(Code::CifEncoding, 1, 1)]);
        assert_eq!(found("# Å\n\t".as_bytes(), Dialect::One), [(Code::CifCharacter, 1, 3)]);
        assert!(found("\u{FEFF}# Å\n\t".as_bytes(), Dialect::Two).is_empty());
        assert_eq!(found("a\u{FFFE}".as_bytes(), Dialect::Two), [(Code::CifCharacter, 1, 2)]);
        assert_eq!(found(b"a\x7F", Dialect::One), [(Code::CifControlByte, 1, 2)]);
    }

    #[test]
    fn long_lines_are_told_at_the_first_character_too_many() {
        let line = |n: usize| format!("\n{}\n", "x".repeat(n));
        assert!(found(line(2048).as_bytes(), Dialect::One).is_empty());
        assert_eq!(found(line(2049).as_bytes(), Dialect::One), [(Code::CifLineLong, 2, 2049)]);
    }

    proptest! {
        #[test]
        fn lines_are_those_counted_from_the_start(
            bytes in proptest::collection::vec(proptest::sample::select(b"ab\r\n".to_vec()), 0..1200),
            at in 0..1200_usize,
        ) {
            let (lines, _) = Lines::of(&bytes);
            let at = at.min(bytes.len());
            let mut expected = LineStart { line: 1, start: 0 };
            let mut from = 0;
            while from < at {
                let length = line_end_length(&bytes, from);
                from += length.max(1);
                if length > 0 && from <= at {
                    expected = LineStart { line: expected.line + 1, start: from };
                }
            }
            prop_assert_eq!(lines.at(&bytes, at), expected);
        }
    }
}
