//! Writes CIF text that every reader of the standard takes as it was meant.
//!
//! The text is CIF 1.1 (International Tables for Crystallography, volume G, chapter 2.2) as long as it can be, and CIF 2.0
//! (Bernstein et al., J. Appl. Cryst. 49 (2016) 277) with its magic code where a value holds characters outside ASCII,
//! or lines that a text field cannot hold. Values are delimited so that both editions read them alike.

mod datum;

pub use datum::Datum;

use std::fmt::Write as _;
use thiserror::Error;

/// Lines are kept below this many characters where the values allow it.
const LINE: usize = 80;
/// No line may be longer (CIF 1.1 and CIF 2.0).
const MAX_LINE: usize = 2048;
/// Values stand in this column of a pair, counted from zero, where the tag is shorter.
const VALUE_COLUMN: usize = 34;

/// Why a text cannot be written.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum WriteError {
    /// A character that is not allowed in a CIF.
    #[error("character U+{code:04X} cannot stand in a CIF")]
    Character {
        /// Its code point.
        code: u32,
    },
    /// A line that is too long.
    #[error("a line has {length} characters, above the limit of {MAX_LINE}")]
    LongLine {
        /// Its length.
        length: usize,
    },
    /// A text that holds the end of every delimiter.
    #[error("the text holds lines that begin with ';' or a marker of a protocol, and both triple quotes")]
    Delimiters,
    /// A name of a tag or a block that is none.
    #[error("'{name}' is not a name")]
    Name {
        /// The name.
        name: String,
    },
}

/// A CIF in the making.
///
/// ```
/// use cosetta::cif::{CifText, Datum};
/// let mut text = CifText::new();
/// text.block("MgO")?;
/// text.pair("_cell_length_a", &Datum::measured(4.212, Some(0.002)))?;
/// text.pair("_chemical_formula_sum", &Datum::text("Mg O"))?;
/// let text = text.finish();
/// assert!(text.starts_with("#\\#CIF_1.1\n"));
/// assert!(text.ends_with("_cell_length_a                    4.212(2)\n_chemical_formula_sum             'Mg O'\n"));
/// # Ok::<(), cosetta::cif::WriteError>(())
/// ```
#[derive(Debug, Clone, Default)]
pub struct CifText {
    body: String,
    needs_second_edition: bool,
}

/// A value with its delimiters.
struct Delimited {
    text: String,
    /// Whether it begins and ends on lines of its own.
    is_field: bool,
    needs_second_edition: bool,
}

impl CifText {
    /// Nothing yet.
    #[must_use]
    pub fn new() -> Self {
        Self::default()
    }

    /// Begins a data block.
    ///
    /// # Errors
    /// A name that is empty or holds blanks or characters outside printable ASCII.
    pub fn block(&mut self, name: &str) -> Result<(), WriteError> {
        check_name(name)?;
        if !self.body.is_empty() {
            self.body.push('\n');
        }
        self.body.extend(["data_", name, "\n"]);
        Ok(())
    }

    /// Leaves a line empty.
    pub fn gap(&mut self) {
        self.body.push('\n');
    }

    /// A line that readers pass over, broken at blanks. Characters outside printable ASCII are left out.
    pub fn comment(&mut self, words: &str) {
        let mut line = String::from("#");
        for word in words.split_whitespace() {
            let word: String = word.chars().filter(char::is_ascii_graphic).collect();
            if line.len() + 1 + word.len() > LINE && line.len() > 1 {
                self.body.extend([line.as_str(), "\n"]);
                "#".clone_into(&mut line);
            }
            line.push(' ');
            line.push_str(&word);
        }
        self.body.extend([line.as_str(), "\n"]);
    }

    /// A tag with one value.
    ///
    /// # Errors
    /// A tag that is none, or a value that cannot be written; nothing is written then.
    pub fn pair(&mut self, tag: &str, value: &Datum) -> Result<(), WriteError> {
        check_tag(tag)?;
        let value = delimit(value)?;
        self.needs_second_edition |= value.needs_second_edition;
        let pad = VALUE_COLUMN.saturating_sub(tag.len()).max(1);
        self.body.push_str(tag);
        if value.is_field {
            let _ = write!(self.body, "\n{}\n", value.text);
        } else if tag.len() + pad + width(&value.text) <= LINE {
            let _ = writeln!(self.body, "{:pad$}{}", "", value.text);
        } else {
            let _ = writeln!(self.body, "\n  {}", value.text);
        }
        Ok(())
    }

    /// A loop with aligned columns, rows that are too long broken between values. A row that is too
    /// short is filled with unknown values. Nothing is written for no rows.
    ///
    /// # Errors
    /// A tag that is none, or a value that cannot be written; nothing is written then.
    pub fn table(&mut self, tags: &[&str], rows: &[Vec<Datum>]) -> Result<(), WriteError> {
        tags.iter().try_for_each(|tag| check_tag(tag))?;
        let cells: Vec<Vec<Delimited>> = rows
            .iter()
            .map(|row| (0..tags.len()).map(|i| delimit(row.get(i).unwrap_or(&Datum::Unknown))).collect())
            .collect::<Result<_, _>>()?;
        if cells.is_empty() || tags.is_empty() {
            return Ok(());
        }
        self.body.push_str("loop_\n");
        for tag in tags {
            self.body.extend(["  ", tag, "\n"]);
        }
        let widths: Vec<usize> = (0..tags.len())
            .map(|i| {
                cells.iter().filter(|row| !row[i].is_field).map(|row| width(&row[i].text)).max().unwrap_or(0)
            })
            .collect();
        for row in &cells {
            self.row(row, &widths);
        }
        Ok(())
    }

    fn row(&mut self, row: &[Delimited], widths: &[usize]) {
        let mut line = String::new();
        let end_line = |line: &mut String, body: &mut String| {
            if !line.trim().is_empty() {
                body.extend([line.trim_end(), "\n"]);
            }
            line.clear();
        };
        for (cell, &column) in row.iter().zip(widths) {
            self.needs_second_edition |= cell.needs_second_edition;
            if cell.is_field {
                end_line(&mut line, &mut self.body);
                self.body.extend([cell.text.as_str(), "\n"]);
                continue;
            }
            if width(&line) + width(&cell.text) > LINE {
                end_line(&mut line, &mut self.body);
                line.push_str("  ");
            }
            let pad = column - width(&cell.text) + 1;
            let _ = write!(line, "{}{:pad$}", cell.text, "");
        }
        end_line(&mut line, &mut self.body);
    }

    /// The whole text, beginning with the magic code of its edition.
    #[must_use]
    pub fn finish(self) -> String {
        let edition = if self.needs_second_edition { "#\\#CIF_2.0\n" } else { "#\\#CIF_1.1\n" };
        edition.to_owned() + &self.body
    }
}

fn width(text: &str) -> usize {
    text.chars().count()
}

fn check_name(name: &str) -> Result<(), WriteError> {
    let is_name = !name.is_empty() && name.bytes().all(|byte| byte.is_ascii_graphic());
    if is_name && name.len() < MAX_LINE - 5 {
        Ok(())
    } else {
        Err(WriteError::Name { name: name.to_owned() })
    }
}

fn check_tag(tag: &str) -> Result<(), WriteError> {
    check_name(tag.strip_prefix('_').unwrap_or_default())
}

fn delimit(value: &Datum) -> Result<Delimited, WriteError> {
    let plain =
        |text: &str| Delimited { text: text.to_owned(), is_field: false, needs_second_edition: false };
    match value {
        Datum::Unknown => Ok(plain("?")),
        Datum::Inapplicable => Ok(plain(".")),
        Datum::Number(text) => Ok(plain(text)),
        Datum::Text(text) => delimit_text(text),
    }
}

fn delimit_text(text: &str) -> Result<Delimited, WriteError> {
    if let Some(bad) = text.chars().find(|c| !is_allowed(*c)) {
        return Err(WriteError::Character { code: u32::from(bad) });
    }
    // Delimiters may stand on the same line.
    let longest = text.split('\n').map(width).max().unwrap_or(0) + 6;
    if longest > MAX_LINE {
        return Err(WriteError::LongLine { length: longest });
    }
    let needs_second_edition = !text.is_ascii();
    let inline = |text: String| Delimited { text, is_field: false, needs_second_edition };
    let is_one_line = !text.contains('\n');
    if is_bare(text) {
        return Ok(inline(text.to_owned()));
    }
    for quote in ['\'', '"'] {
        if is_one_line && !text.contains(quote) {
            return Ok(inline(format!("{quote}{text}{quote}")));
        }
    }
    if !text.contains("\n;") && !is_protocol(text) {
        return Ok(Delimited { text: format!(";{text}\n;"), is_field: true, needs_second_edition });
    }
    for quote in ["'''", "\"\"\""] {
        if !text.contains(quote) && !text.ends_with(&quote[..1]) {
            let text = format!("{quote}{text}{quote}");
            // On lines of its own, behind a blank that keeps a leading semicolon from the start of the line.
            return Ok(Delimited { text: format!("  {text}"), is_field: true, needs_second_edition: true });
        }
    }
    Err(WriteError::Delimiters)
}

/// Whether the first line asks a reader to undo the line-prefix or line-folding protocol (International Tables, volume
/// G, 2.2.7.1; CIF 2.0, 5.2 and 5.3).
fn is_protocol(text: &str) -> bool {
    text.split('\n').next().unwrap_or_default().trim_end().ends_with('\\')
}

/// Line ends, tabs, and the printable characters of CIF 2.0. Whatever a reader may take for the end of a line is out.
fn is_allowed(c: char) -> bool {
    match c {
        '\n' | '\t' => true,
        '\u{FEFF}' | '\u{2028}' | '\u{2029}' => false,
        _ => !c.is_control() && u32::from(c) & 0xFFFE != 0xFFFE && !('\u{FDD0}'..='\u{FDEF}').contains(&c),
    }
}

/// Whether a text can stand without delimiters in either edition and will be taken for a text. Numbers are left bare:
/// the two editions make no difference between a number and its text.
fn is_bare(text: &str) -> bool {
    let lower = text.to_ascii_lowercase();
    let Some(first) = text.bytes().next() else { return false };
    text.bytes().all(|byte| byte.is_ascii_graphic() && !matches!(byte, b'[' | b']' | b'{' | b'}'))
        && !matches!(first, b'_' | b'#' | b'$' | b'\'' | b'"' | b';')
        && !matches!(lower.as_str(), "." | "?" | "loop_" | "global_" | "stop_")
        && !lower.starts_with("data_")
        && !lower.starts_with("save_")
}

#[cfg(test)]
mod tests;
