//! What structures does a file in the JSON of the OPTIMADE standard hold?
//!
//! Taken are a response with one entry or a list of entries in `data`, a single entry, a list of entries, and JSON lines
//! with one entry a line, the form of database dumps. An entry has its properties in `attributes`, as the standard
//! asks, or beside its `id`. (OPTIMADE specification 1.2, entry type `structures`; Andersen et al., Sci. Data 8, 217
//! (2021). Names of properties from memory.)
//!
//! Entries are read one by one: what is wrong with one costs that one.

mod document;
mod entry;
mod species;

use crate::crystal::AsymmetricUnit;
use crate::diagnostic::{Code, Diagnostic, Lines, Span};
use document::{Piece, split};

/// What was read from one entry.
#[derive(Debug, Clone)]
pub struct Entry {
    /// Its `id`, or `#N` counted from one where it has none.
    pub id: String,
    /// Where it begins.
    pub span: Span,
    /// Whether it is of the type `structures`; a file may hold entries of other types beside them.
    pub is_structure: bool,
    /// The structure, or the refusal.
    pub unit: Result<AsymmetricUnit, Diagnostic>,
    /// Where the position of each site is, in the order of the sites of `unit`.
    pub site_places: Vec<Span>,
    /// Everything noticed but the refusal.
    pub diagnostics: Vec<Diagnostic>,
}

/// Reads the entries of a file.
///
/// # Errors
/// `optimade-001` when the file is not JSON, with the place; `optimade-002` when it holds no entries.
///
/// ```
/// let text = br#"{"id": "x/1", "type": "structures", "attributes": {
///   "lattice_vectors": [[0, 2.1, 2.1], [2.1, 0, 2.1], [2.1, 2.1, 0]], "dimension_types": [1, 1, 1],
///   "cartesian_site_positions": [[0, 0, 0], [2.1, 2.1, 2.1]], "species_at_sites": ["Mg", "O"],
///   "species": [{"name": "Mg", "chemical_symbols": ["Mg"], "concentration": [1]},
///               {"name": "O", "chemical_symbols": ["O"], "concentration": [1]}]}}"#;
/// let entries = cosetta::optimade::read_bytes(text)?;
/// assert_eq!((entries[0].id.as_str(), entries[0].unit.clone()?.sites.len()), ("x/1", 2));
/// # Ok::<(), cosetta::diagnostic::Diagnostic>(())
/// ```
pub fn read_bytes(bytes: &[u8]) -> Result<Vec<Entry>, Diagnostic> {
    let lines = Lines::new(bytes);
    let pieces = split(bytes, &lines)?;
    let entries: Vec<Entry> = pieces
        .into_iter()
        .enumerate()
        .filter_map(|(index, piece)| {
            let fallback = format!("#{}", index + 1);
            match piece {
                Ok(piece) => entry::read(piece, fallback, &lines),
                Err(fault) => Some(Entry {
                    id: fallback,
                    span: fault.span.unwrap_or_default(),
                    is_structure: true,
                    unit: Err(fault),
                    site_places: Vec::new(),
                    diagnostics: Vec::new(),
                }),
            }
        })
        .collect();
    if entries.is_empty() { Err(document::no_entries(&lines)) } else { Ok(entries) }
}

/// A refusal of a piece, with the place in the file.
fn refusal(code: Code, message: String, piece: Piece<'_>, property: &str, lines: &Lines) -> Diagnostic {
    Diagnostic::error(code, message).at(piece.place_of(property, lines))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Rock salt in its primitive cell, from memory, as an entry on one line; parts may be replaced.
    fn entry(id: &str, changes: &[(&str, &str)]) -> String {
        let mut text = r#"{"id": "ID", "type": "structures", "attributes": {"lattice_vectors": [[0, 2.1, 2.1], [2.1, 0, 2.1], [2.1, 2.1, 0]], "dimension_types": [1, 1, 1], "nperiodic_dimensions": 3, "nsites": 2, "cartesian_site_positions": [[0, 0, 0], [2.1, 2.1, 2.1]], "species_at_sites": ["Mg", "O"], "species": [{"name": "Mg", "chemical_symbols": ["Mg"], "concentration": [1.0]}, {"name": "O", "chemical_symbols": ["O"], "concentration": [1.0]}], "assemblies": null, "structure_features": []}}"#
            .replace("ID", id);
        for (from, to) in changes {
            assert!(text.contains(from), "{from}");
            text = text.replace(from, to);
        }
        text
    }

    fn codes(text: &str) -> Vec<(String, Option<Code>)> {
        let entries = read_bytes(text.as_bytes()).expect("entries");
        entries.into_iter().map(|entry| (entry.id, entry.unit.err().map(|refusal| refusal.code))).collect()
    }

    #[test]
    fn all_forms_of_a_document() {
        let (a, b) = (entry("a", &[]), entry("b", &[]));
        let heading = r#"{"x-optimade": {"meta": {"api_version": "1.2.0"}}}"#;
        for text in [
            format!("[{a}, {b}]"),
            format!("{{\"meta\": {{}}, \"data\": [\n{a},\n{b}\n]}}"),
            format!("{a}\n{b}\n"),
            format!("\u{feff}{heading}\r\n{a}\r\n\r\n{b}"),
        ] {
            assert_eq!(codes(&text), [("a".into(), None), ("b".into(), None)], "{text}");
        }
        for text in [a.clone(), format!("{{\"data\": {a}}}"), format!("{heading}\n{a}")] {
            assert_eq!(codes(&text), [("a".into(), None)], "{text}");
        }
        // Properties beside the id, and no id that can be used.
        let flat = entry("a", &[(r#""attributes": {"#, ""), ("[]}}", "[]}")]);
        assert_eq!(codes(&flat), [("a".into(), None)]);
        let unnamed = flat.replace(r#""id": "a""#, r#""_id": {"$oid": "a"}"#);
        assert_eq!(codes(&format!("[{flat},{unnamed}]")), [("a".into(), None), ("#2".into(), None)]);
    }

    #[test]
    fn a_formula_that_the_sites_do_not_make_is_told() {
        let with = |formula: &str| {
            let formula = format!(r#""attributes": {{"chemical_formula_reduced": "{formula}", "#);
            let text = entry("a", &[(r#""attributes": {"#, formula.as_str())]);
            read_bytes(text.as_bytes()).expect("entries")[0]
                .diagnostics
                .iter()
                .map(|d| d.code)
                .collect::<Vec<_>>()
        };
        assert_eq!(with("MgO"), []);
        assert_eq!(with("MgO2"), [Code::SiteFormula]);
    }

    #[test]
    fn positions_are_fractions_of_the_cell() {
        let entries = read_bytes(entry("a", &[]).as_bytes()).expect("entries");
        let unit = entries[0].unit.as_ref().expect("a structure");
        // By hand: half the sum of the vectors is (2.1, 2.1, 2.1).
        assert!((unit.sites[1].position.add_scalar(-0.5)).norm() < 1e-12);
        assert_eq!(unit.sites[0].label, "Mg1");
        let text = entry("a", &[]);
        assert_eq!(&text[entries[0].site_places[1].start..entries[0].site_places[1].end], "[2.1, 2.1, 2.1]");
    }

    #[test]
    fn one_bad_entry_costs_one() {
        let good = entry("good", &[]);
        for (changes, code, property) in [
            (&[("[[0, 2.1, 2.1]", "[[null, 2.1, 2.1]")][..], Code::OptimadeProperty, "\"lattice_vectors\""),
            (&[("\"lattice_vectors\"", "\"vectors\"")], Code::OptimadeProperty, "{"),
            (&[("[2.1, 2.1, 0]]", "[0, 4.2, 4.2]]")], Code::CellDegenerate, "\"lattice_vectors\""),
            (&[("[1, 1, 1]", "[1, 1, 0]")], Code::OptimadeDimensions, "\"dimension_types\""),
            (&[("dimensions\": 3", "dimensions\": 2")], Code::OptimadeDimensions, "\"nperiodic_dimensions\""),
            (&[("\"nsites\": 2", "\"nsites\": 3")], Code::OptimadeCounts, "\"cartesian_site_positions\""),
            (&[("[\"Mg\", \"O\"]", "[\"Mg\"]")], Code::OptimadeCounts, "\"cartesian_site_positions\""),
            (&[("[\"Mg\", \"O\"]", "[\"Mg\", \"O2\"]")], Code::OptimadeSpecies, "\"species\""),
            (&[("symbols\": [\"O\"]", "symbols\": [\"X\"]")], Code::OptimadeSpecies, "\"species\""),
            (&[("symbols\": [\"O\"]", "symbols\": []")], Code::OptimadeSpecies, "\"species\""),
            (&[("[1.0]", "[1.5]")], Code::SiteOccupancyInvalid, "\"species\""),
            (
                &[("[1.0]", "[1.0], \"attached\": [\"H\"], \"nattached\": [3]")],
                Code::SiteHydrogenAttached,
                "\"species\"",
            ),
            (
                &[("features\": []", "features\": [\"implicit_atoms\"]")],
                Code::OptimadeFeature,
                "\"structure_features\"",
            ),
            (
                &[(
                    "assemblies\": null",
                    "assemblies\": [{\"sites_in_groups\": [[9]], \"group_probabilities\": [1]}]",
                )],
                Code::OptimadeProperty,
                "\"assemblies\"",
            ),
            (&[("\"structures\"", "\"references\"")], Code::OptimadeType, "\"type\""),
            (&[("[2.1, 2.1, 2.1]]", "[2.1, 2.1]]")], Code::OptimadeProperty, "]"),
            (&[("[2.1, 2.1, 2.1]]", "[2.1, 2.1, 1e999]]")], Code::OptimadeProperty, "9"),
        ] {
            let text = format!("{{\"data\": [\n{good},\n{},\n{good}\n]}}", entry("bad", changes));
            let entries = read_bytes(text.as_bytes()).expect("entries");
            assert_eq!(entries.len(), 3);
            assert!(entries[0].unit.is_ok() && entries[2].unit.is_ok(), "{changes:?}");
            let refusal = entries[1].unit.as_ref().expect_err("refused");
            let span = refusal.span.expect("a place");
            assert_eq!((refusal.code, span.line), (code, 3), "{refusal}");
            assert!(text[span.start..].starts_with(property), "{refusal}: {}", &text[span.start..span.end]);
            assert!(refusal.message.contains("entry bad"), "{refusal}");
        }
    }

    #[test]
    fn disorder_becomes_occupancies() {
        let occupancies = |changes: &[(&str, &str)]| {
            let entries = read_bytes(entry("a", changes).as_bytes()).expect("entries");
            let unit = entries[0].unit.clone().expect("a structure");
            unit.sites.iter().map(|site| (site.label.clone(), site.occupancy)).collect::<Vec<_>>()
        };
        let mixed = occupancies(&[(
            "symbols\": [\"Mg\"], \"concentration\": [1.0]",
            "symbols\": [\"Mg\", \"Ca\", \"vacancy\"], \"concentration\": [0.5, 0.25, 0.25]",
        )]);
        assert_eq!(mixed, [("Mg1".into(), 0.5), ("Ca1".into(), 0.25), ("O1".into(), 1.0)]);
        let grouped = occupancies(&[(
            "assemblies\": null",
            "assemblies\": [{\"sites_in_groups\": [[0], [1]], \"group_probabilities\": [0.25, 0.75]}]",
        )]);
        assert_eq!(grouped, [("Mg1".into(), 0.25), ("O1".into(), 0.75)]);
    }

    #[test]
    fn broken_json_has_a_place() {
        let good = entry("good", &[]);
        let refusal = read_bytes(b"{\"data\": [\n {\"id\": 1,}\n]}").expect_err("not JSON");
        assert_eq!(
            (refusal.code, refusal.span.map(|span| (span.line, span.column))),
            (Code::OptimadeSyntax, Some((2, 11)))
        );
        for text in ["{}", "[]", "3", "{\"data\": []}", "{\"data\": null}", "{\"errors\": [{}]}"] {
            assert_eq!(
                read_bytes(text.as_bytes()).expect_err("nothing").code,
                Code::OptimadeNoEntries,
                "{text}"
            );
        }
        // A broken line of JSON lines costs that line.
        let lines = format!("{good}\n{{\"id\": \n{good}\n{good}");
        let found = codes(&lines);
        assert_eq!(found[1], ("#2".into(), Some(Code::OptimadeSyntax)));
        assert_eq!(found.iter().filter(|(_, code)| code.is_none()).count(), 3);
        let latin = [good.as_bytes(), b"\n{\"id\": \"\xe9\"}\n", good.as_bytes()].concat();
        let entries = read_bytes(&latin).expect("entries");
        assert_eq!(
            entries[1].unit.as_ref().expect_err("not UTF-8").span.map(|span| (span.line, span.column)),
            Some((2, 9))
        );
        assert!(entries[0].unit.is_ok() && entries[2].unit.is_ok());
    }

    proptest! {
        #[test]
        fn anything_is_taken(cut in 0_usize..700, text in "[\\[\\]{}\",:a0-9. \n-]{0,12}", bytes in proptest::collection::vec(any::<u8>(), 0..60)) {
            let mut whole = entry("a", &[]);
            whole.replace_range(cut.min(whole.len()).., &text);
            let _ = read_bytes(whole.as_bytes());
            let _ = read_bytes(&bytes);
        }
    }
}
