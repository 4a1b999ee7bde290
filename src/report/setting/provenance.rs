//! What a file says about where it comes from: copied, because it stays true in any setting.

use crate::cif::{self, Value};

/// Items with one value that say where a structure comes from, what it is called, and under which conditions it was
/// measured (core dictionary, and the items that public databases add to it).
const ITEMS: &[&str] = &[
    "_chemical_name_common",
    "_chemical_name_mineral",
    "_chemical_name_systematic",
    "_chemical_formula_structural",
    "_chemical_formula_moiety",
    "_journal_name_full",
    "_journal_year",
    "_journal_volume",
    "_journal_issue",
    "_journal_page_first",
    "_journal_page_last",
    "_journal_paper_doi",
    "_journal_paper_DOI",
    "_journal_article_reference",
    "_citation_journal_full",
    "_citation_title",
    "_citation_year",
    "_citation_doi",
    "_citation_DOI",
    "_publ_section_title",
    "_cod_database_code",
    "_database_code_amcsd",
    "_database_code_COD",
    "_database_code_CSD",
    "_database_code_depnum_ccdc_archive",
    "_database_code_ICSD",
    "_database_code_NBS",
    "_database_code_PDF",
    "_diffrn_ambient_temperature",
    "_diffrn_ambient_pressure",
    "_cell_measurement_temperature",
    "_cell_measurement_pressure",
    "_exptl_crystal_density_diffrn",
];

/// Items with a value for each row of a loop.
const LISTS: &[&str] = &["_publ_author_name", "_citation_author_name"];

/// Items to be copied.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Provenance {
    /// Tags with one value.
    pub items: Vec<(&'static str, String)>,
    /// Tags with several.
    pub lists: Vec<(&'static str, Vec<String>)>,
}

/// The items of each data block of a file, in its order.
#[must_use]
pub fn provenance(bytes: &[u8]) -> Vec<Provenance> {
    let (document, _) = cif::parse(bytes);
    document
        .blocks()
        .map(|block| {
            let mut found = Provenance::default();
            for tag in ITEMS {
                let is_known = found.items.iter().any(|(known, _)| known.eq_ignore_ascii_case(tag));
                let value = block.value(tag).filter(|_| !is_known);
                if let Some(text) = value.as_ref().and_then(Value::stated) {
                    found.items.push((tag, text.to_owned()));
                }
            }
            for tag in LISTS {
                let Some(table) = block.column(&[tag]) else { continue };
                let values = table.iter().filter_map(|row| row.stated(0).map(str::to_owned));
                found.lists.push((tag, values.collect()));
            }
            found
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn authors_and_single_items_are_found() {
        let text = b"data_x _journal_year 1999 _journal_paper_DOI 10.1/x _journal_issue ?\nloop_ _publ_author_name 'A, B.' \"O'C\"\n\
            data_y _publ_section_title\n;\r\n one\r\n two\r\n;\n";
        let found = provenance(text);
        assert_eq!(found.len(), 2);
        assert_eq!(
            found[0].items,
            [("_journal_year", "1999".to_owned()), ("_journal_paper_doi", "10.1/x".to_owned())]
        );
        assert_eq!(found[0].lists, [("_publ_author_name", vec!["A, B.".to_owned(), "O'C".to_owned()])]);
        assert_eq!(found[1].items, [("_publ_section_title", "one\n two".to_owned())]);
    }
}
