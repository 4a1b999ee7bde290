//! From bytes to entries that are not yet read, each with its place in the file.

use crate::diagnostic::{Code, Diagnostic, Lines, Span};
use serde::Deserialize;
use serde::de::IgnoredAny;
use serde_json::value::RawValue;

/// A JSON value that is part of a file.
#[derive(Debug, Clone, Copy)]
pub(super) struct Piece<'a> {
    pub(super) json: &'a str,
    /// Where it starts in the file.
    start: usize,
}

/// What may stand at the top of a document.
#[derive(Deserialize)]
struct Top<'a> {
    #[serde(borrow)]
    data: Option<&'a RawValue>,
    attributes: Option<IgnoredAny>,
    lattice_vectors: Option<IgnoredAny>,
    cartesian_site_positions: Option<IgnoredAny>,
    species_at_sites: Option<IgnoredAny>,
    #[serde(rename = "type")]
    kind: Option<IgnoredAny>,
}

impl<'a> Piece<'a> {
    /// A value inside this one.
    pub(super) fn inner(self, value: &RawValue) -> Piece<'_> {
        let offset = (value.get().as_ptr() as usize).saturating_sub(self.json.as_ptr() as usize);
        Piece { json: value.get(), start: self.start + offset }
    }

    /// Where all of this value is.
    pub(super) fn place(self, lines: &Lines) -> Span {
        lines.span(self.start, self.start + self.json.len())
    }

    /// Where the name of a property stands in this value, or where the value begins.
    pub(super) fn place_of(self, property: &str, lines: &Lines) -> Span {
        let quoted = format!("\"{property}\"");
        match self.json.find(&quoted).filter(|_| !property.is_empty()) {
            Some(at) => lines.span(self.start + at, self.start + at + quoted.len()),
            None => lines.span(self.start, self.start + 1),
        }
    }

    /// A fault of the JSON itself, at its place in the file.
    pub(super) fn fault(
        self,
        code: Code,
        what: &str,
        error: &serde_json::Error,
        lines: &Lines,
    ) -> Diagnostic {
        let lines_before = self.json.split_inclusive('\n').take(error.line().saturating_sub(1));
        let offset = lines_before.map(str::len).sum::<usize>() + error.column().saturating_sub(1);
        let at = self.start + offset.min(self.json.len());
        let text = error.to_string();
        let why = text.rsplit_once(" at line ").map_or(text.as_str(), |(why, _)| why);
        Diagnostic::error(code, format!("{what}: {why}")).at(lines.span(at, at + 1))
    }

    fn parse<T: Deserialize<'a>>(self, lines: &Lines) -> Result<T, Diagnostic> {
        serde_json::from_str(self.json).map_err(|error| {
            self.fault(Code::OptimadeSyntax, "this is not JSON that can be read", &error, lines)
        })
    }
}

/// The entries of a file, in order; a line that is not JSON becomes a fault in its place.
pub(super) fn split<'a>(
    bytes: &'a [u8],
    lines: &Lines,
) -> Result<Vec<Result<Piece<'a>, Diagnostic>>, Diagnostic> {
    match whole(bytes, lines) {
        Ok(pieces) => Ok(pieces.into_iter().map(Ok).collect()),
        Err(_) if is_of_lines(bytes, lines) => Ok(pieces_of_lines(bytes, lines)),
        Err(fault) => Err(fault),
    }
}

pub(super) fn no_entries(lines: &Lines) -> Diagnostic {
    let message =
        "the JSON holds no structures: neither a list in 'data' nor an entry with 'lattice_vectors'";
    Diagnostic::error(Code::OptimadeNoEntries, message).at(lines.span(0, 1))
}

/// The file as one JSON value.
fn whole<'a>(bytes: &'a [u8], lines: &Lines) -> Result<Vec<Piece<'a>>, Diagnostic> {
    let start = if bytes.starts_with(b"\xef\xbb\xbf") { 3 } else { 0 };
    let json = decode(bytes, start, bytes.len(), lines)?;
    let piece = Piece { json, start };
    let value: &RawValue = piece.parse(lines)?;
    let piece = piece.inner(value);
    if piece.json.starts_with('[') {
        return list(piece, lines);
    }
    if !piece.json.starts_with('{') {
        return Err(no_entries(lines));
    }
    let top: Top = piece.parse(lines)?;
    if let Some(data) = top.data {
        let data = piece.inner(data);
        return if data.json.starts_with('[') { list(data, lines) } else { Ok(vec![data]) };
    }
    let is_entry = top.attributes.is_some()
        || top.lattice_vectors.is_some()
        || top.cartesian_site_positions.is_some()
        || top.species_at_sites.is_some()
        || top.kind.is_some();
    if is_entry { Ok(vec![piece]) } else { Err(no_entries(lines)) }
}

fn list<'a>(piece: Piece<'a>, lines: &Lines) -> Result<Vec<Piece<'a>>, Diagnostic> {
    let values: Vec<&RawValue> = piece.parse(lines)?;
    Ok(values.into_iter().map(|value| piece.inner(value)).collect())
}

fn decode<'a>(bytes: &'a [u8], start: usize, end: usize, lines: &Lines) -> Result<&'a str, Diagnostic> {
    std::str::from_utf8(bytes.get(start..end).unwrap_or_default()).map_err(|error| {
        let at = start + error.valid_up_to();
        let message = "JSON is written in UTF-8, and these bytes are not";
        Diagnostic::error(Code::OptimadeSyntax, message).at(lines.span(at, at + 1))
    })
}

/// The lines that are not blank, with their first byte.
fn filled_lines<'a>(bytes: &'a [u8], lines: &Lines) -> impl Iterator<Item = (usize, &'a [u8])> {
    lines.ranges().filter_map(|(start, end)| {
        let start = if start == 0 && bytes.starts_with(b"\xef\xbb\xbf") { 3 } else { start };
        let line = bytes.get(start..end)?;
        let blanks = line.len() - line.trim_ascii_start().len();
        let line = line.trim_ascii();
        (!line.is_empty()).then_some((start + blanks, line))
    })
}

/// JSON lines: at least two lines, and most of them begin and end as objects do.
fn is_of_lines(bytes: &[u8], lines: &Lines) -> bool {
    let (mut all, mut objects) = (0_usize, 0_usize);
    for (_, line) in filled_lines(bytes, lines) {
        all += 1;
        objects += usize::from(line.starts_with(b"{") && line.ends_with(b"}"));
    }
    all > 1 && 2 * objects >= all
}

fn pieces_of_lines<'a>(bytes: &'a [u8], lines: &Lines) -> Vec<Result<Piece<'a>, Diagnostic>> {
    filled_lines(bytes, lines)
        .map(|(start, line)| {
            let json = decode(bytes, start, start + line.len(), lines)?;
            let piece = Piece { json, start };
            piece.parse::<IgnoredAny>(lines).map(|_| piece)
        })
        .collect()
}
