//! A table of typed columns, printed for the terminal or as CSV.

use comfy_table::{CellAlignment, ContentArrangement, Table as ScreenTable, presets};

/// How a column is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Align {
    /// Text.
    Left,
    /// Numbers.
    Right,
}

/// A column: its machine name, its heading on the screen, and how it is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Column {
    /// Heading in CSV.
    pub name: &'static str,
    /// Heading on the screen.
    pub title: &'static str,
    /// How it is set.
    pub align: Align,
}

impl Column {
    /// A column of text.
    #[must_use]
    pub const fn text(name: &'static str, title: &'static str) -> Self {
        Self { name, title, align: Align::Left }
    }

    /// A column of numbers.
    #[must_use]
    pub const fn number(name: &'static str, title: &'static str) -> Self {
        Self { name, title, align: Align::Right }
    }
}

/// Rows under columns. Each row has a cell for each column; an empty cell means not applicable.
#[derive(Debug, Clone, Default)]
pub struct Table {
    /// The columns.
    pub columns: Vec<Column>,
    /// The rows.
    pub rows: Vec<Vec<String>>,
}

impl Table {
    /// A table without rows.
    #[must_use]
    pub fn new(columns: &[Column]) -> Self {
        Self { columns: columns.to_vec(), rows: Vec::new() }
    }

    /// The table for a terminal of a width in characters, or as wide as it needs to be.
    #[must_use]
    pub fn to_text(&self, width: Option<u16>) -> String {
        let mut screen = ScreenTable::new();
        screen.load_style(presets::NOTHING);
        if let Some(width) = width {
            screen.set_content_arrangement(ContentArrangement::Dynamic).set_width(width);
        } else {
            screen.set_content_arrangement(ContentArrangement::Disabled);
        }
        screen.set_header(self.columns.iter().map(|column| column.title));
        for row in &self.rows {
            screen.add_row(row);
        }
        for (column, settings) in self.columns.iter().zip(screen.column_iter_mut()) {
            settings.set_padding((0, 2));
            if column.align == Align::Right {
                settings.set_cell_alignment(CellAlignment::Right);
            }
        }
        let mut text: String = screen.lines().map(|line| line.trim_end().to_owned() + "\n").collect();
        text.shrink_to_fit();
        text
    }

    /// The table as CSV with a heading (RFC 4180).
    ///
    /// # Errors
    /// When a row does not have a cell for each column.
    pub fn to_csv(&self, with_heading: bool) -> Result<String, csv::Error> {
        let mut writer = csv::Writer::from_writer(Vec::new());
        if with_heading {
            writer.write_record(self.columns.iter().map(|column| column.name))?;
        }
        for row in &self.rows {
            writer.write_record(row)?;
        }
        let bytes = writer
            .into_inner()
            .map_err(|error| csv::Error::from(std::io::Error::other(error.to_string())))?;
        Ok(String::from_utf8_lossy(&bytes).into_owned())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn formats() {
        let mut table = Table::new(&[Column::text("formula", "formula"), Column::number("atoms", "atoms")]);
        table.rows.push(vec!["BaSnO3".into(), "5".into()]);
        table.rows.push(vec!["a, \"quoted\"".into(), "12".into()]);
        assert_eq!(
            table.to_csv(true).expect("rows fit"),
            "formula,atoms\nBaSnO3,5\n\"a, \"\"quoted\"\"\",12\n"
        );
        assert!(table.to_text(None).starts_with("formula"));
    }
}
