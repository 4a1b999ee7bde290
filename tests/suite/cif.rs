//! Reading CIFs: small files that each show one thing.
//!
//! Expected numbers are worked out by hand from the files and the space-group tables (International Tables for
//! Crystallography, volume A: multiplicities and orders) unless another source is named.

use cosetta::cif::{BlockReading, SymmetrySource, read_bytes};
use cosetta::crystal::ExpandTolerance;
use cosetta::diagnostic::{Code, Diagnostic};
use proptest::prelude::*;
use std::path::{Path, PathBuf};

fn files(folder: &str) -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data").join(folder);
    let mut files: Vec<_> = std::fs::read_dir(folder)
        .expect("the folder is there")
        .map(|entry| entry.expect("readable").path())
        .filter(|path| path.extension().is_some_and(|extension| extension == "cif"))
        .collect();
    files.sort();
    files
}

fn name(path: &Path) -> String {
    path.file_stem().expect("a file").to_string_lossy().into_owned()
}

/// What every reading must satisfy.
fn assert_sound(block: &BlockReading, length: usize) {
    let findings = block.diagnostics.iter().chain(block.unit.as_ref().err());
    for finding in findings {
        if let Some(span) = finding.span {
            assert!(
                span.start <= span.end && span.end <= length && span.line > 0 && span.column > 0,
                "{finding}"
            );
        }
        assert!(!finding.message.ends_with('.'), "{finding}");
        assert!(finding.message.chars().next().is_some_and(|c| !c.is_uppercase() || c == 'H'), "{finding}");
    }
    if let Ok(unit) = &block.unit {
        assert!(!unit.sites.is_empty() && !unit.operations.is_empty());
        assert!(unit.sites.iter().all(|site| site.occupancy > 0.0 && site.occupancy <= 1.0));
    }
}

#[test]
fn good_files_are_read() {
    use SymmetrySource::{Hall, HermannMauguin, Number, Operations};
    // File, source of the symmetry, operations, atoms in the cell.
    let expected = [
        ("capitals", HermannMauguin, 192, 8),
        ("dotted", HermannMauguin, 192, 8),
        ("hall", Hall, 192, 12),
        ("hermann-mauguin", HermannMauguin, 192, 8),
        ("hexagonal-axes", HermannMauguin, 36, 30),
        ("hydrogen", HermannMauguin, 12, 5),
        ("line-ends-cr", HermannMauguin, 192, 8),
        ("line-ends-crlf", HermannMauguin, 192, 8),
        ("number", Number, 48, 5),
        ("one-site", Number, 192, 4),
        ("operations", Operations, 12, 4),
        ("origin-first", HermannMauguin, 192, 8),
        ("origin-second", HermannMauguin, 192, 8),
        ("origin-stated", HermannMauguin, 192, 8),
        ("oxidation", HermannMauguin, 192, 56),
        ("quotes", HermannMauguin, 192, 8),
        ("rhombohedral-axes", HermannMauguin, 12, 10),
        ("several-blocks", HermannMauguin, 192, 8),
    ];
    let found: Vec<_> = files("good").iter().map(|path| name(path)).collect();
    assert_eq!(found, expected.map(|row| row.0));
    for (path, (file, source, operations, atoms)) in files("good").iter().zip(expected) {
        let bytes = std::fs::read(path).expect("readable");
        let reading = read_bytes(&bytes);
        assert!(reading.diagnostics.is_empty(), "{file}: {:?}", reading.diagnostics);
        for block in reading.blocks.iter().filter(|block| block.is_structure) {
            assert_sound(block, bytes.len());
            let unit = block.unit.as_ref().unwrap_or_else(|refusal| panic!("{file}: {refusal}"));
            assert_eq!(block.stated.source, source, "{file}");
            assert_eq!(unit.operations.len(), operations, "{file}");
            let (crystal, _) = unit.expand(&ExpandTolerance::default()).expect("no clash");
            assert_eq!(crystal.sites.len(), atoms, "{file}");
            let is_quiet = block.diagnostics.iter().all(|d| d.code == Code::SymmetrySetting);
            assert!(is_quiet, "{file}: {:?}", block.diagnostics);
        }
    }
}

/// Each file in `tests/data/bad` is named after the code it shows. (That every code is shown is tested by the conformance
/// suite.)
#[test]
fn bad_files_show_their_codes() {
    for path in files("bad") {
        let bytes = std::fs::read(&path).expect("readable");
        let file = name(&path);
        let code: String = file.splitn(3, '-').take(2).collect::<Vec<_>>().join("-");
        let reading = read_bytes(&bytes);
        let blocks = reading.blocks.iter();
        blocks.clone().for_each(|block| assert_sound(block, bytes.len()));
        let expanded: Vec<Diagnostic> = blocks
            .clone()
            .filter_map(|block| Some((block, block.unit.as_ref().ok()?)))
            .flat_map(|(block, unit)| {
                let noticed = match unit.expand(&ExpandTolerance::default()) {
                    Ok((_, noticed)) => noticed,
                    Err(refusal) => vec![refusal],
                };
                noticed.into_iter().map(|finding| block.locate(finding))
            })
            .collect();
        let findings: Vec<&Diagnostic> = reading
            .diagnostics
            .iter()
            .chain(&expanded)
            .chain(blocks.flat_map(|block| block.diagnostics.iter().chain(block.unit.as_ref().err())))
            .collect();
        let own: Vec<_> = findings.iter().filter(|finding| finding.code.as_str() == code).collect();
        assert!(!own.is_empty(), "{file}: {findings:?}");
        assert!(
            own.iter().all(|finding| finding.span.is_some() || finding.code == Code::SymmetryMissing),
            "{file} names no place"
        );
    }
}

fn read_good(file: &str) -> BlockReading {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/good").join(file);
    read_bytes(&std::fs::read(path).expect("readable")).blocks.swap_remove(0)
}

#[test]
fn what_a_block_states_is_kept() {
    let block = read_good("operations.cif");
    assert_eq!(block.formula_sum.as_deref(), Some("O Zn"));
    assert_eq!(block.formula_units, Some(2.0));
    assert_eq!(block.stated.operations, 12);
    let uncertainty = block.cell_uncertainty[2].expect("stated");
    assert!((uncertainty - 4e-4).abs() < 1e-12);
    assert_eq!(block.cell_uncertainty[5], None);
    let unit = block.unit.expect("a structure");
    assert_eq!(unit.sites.iter().map(|site| site.oxidation).collect::<Vec<_>>(), [Some(2.0), Some(-2.0)]);
}

#[test]
fn oxidation_numbers_may_be_fractions() {
    let unit = read_good("oxidation.cif").unit.expect("a structure");
    let oxidation: Vec<_> = unit.sites.iter().map(|site| site.oxidation).collect();
    assert_eq!(oxidation, [Some(3.0), Some(2.5), Some(-2.0)]);
}

#[test]
fn a_heading_is_no_structure() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/good/several-blocks.cif");
    let reading = read_bytes(&std::fs::read(path).expect("readable"));
    let blocks: Vec<_> = reading.blocks.iter().map(|b| (b.name.as_str(), b.is_structure)).collect();
    assert_eq!(blocks, [("global", false), ("first", true), ("second", true)]);
    assert_eq!(reading.blocks[0].unit.as_ref().err().map(|d| d.code), Some(Code::CifNoStructure));
}

#[test]
fn places_are_those_a_person_would_count() {
    let text = "data_x\n_cell_length_a 4\n_cell_length_b 4\n_cell_length_c  abc\n_cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 90\n";
    let refusal = read_bytes(text.as_bytes()).blocks.swap_remove(0).unit.expect_err("no number");
    assert_eq!(
        refusal.to_string(),
        "error[cell-002]: _cell_length_c is 'abc', which is not a number (line 4, column 17); hint: _cell_length_c and its value in Å"
    );
}

#[test]
fn a_list_with_a_gap_names_what_is_missing() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/bad/symmetry-009-gap.cif");
    let reading = read_bytes(&std::fs::read(path).expect("readable"));
    let refusal = reading.blocks[0].unit.as_ref().expect_err("no group");
    assert_eq!(
        refusal.message,
        "the 3 symmetry operations are not a group: -x,-y,z (number 2) followed by x,-y,-z (number 3) gives -x,y,-z, which is not listed"
    );
}

#[test]
fn every_statement_of_symmetry_leads_to_the_same_operations() {
    let cell = "data_ZnO\n_cell_length_a 3.25\n_cell_length_b 3.25\n_cell_length_c 5.2\n_cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 120\n";
    let sites = "\nloop_\n_atom_site_label\n_atom_site_fract_x\n_atom_site_fract_y\n_atom_site_fract_z\nZn1 1/3 2/3 0\nO1 1/3 2/3 .382\n";
    let listed = read_good("operations.cif").unit.expect("a structure").operations;
    for statement in [
        "_space_group_name_Hall 'P 6c -2c'",
        "_symmetry_space_group_name_Hall P_6c_-2c",
        "_space_group_name_H-M_alt 'P 63 m c'",
        "_symmetry_space_group_name_H-M P63mc",
        "_space_group.name_H-M_alt \"P 6_3 m c\"",
        // Not quoted: a fault of syntax, but what is meant is plain.
        "_symmetry_space_group_name_H-M P 63 m c",
        "_space_group_IT_number 186",
        "_symmetry_Int_Tables_number 186",
    ] {
        let text = format!("{cell}{statement}{sites}");
        let unit = read_bytes(text.as_bytes()).blocks.swap_remove(0).unit.expect("a structure");
        assert_eq!(unit.operations.len(), 12, "{statement}");
        for operation in &listed {
            let is_same = |other: &cosetta::crystal::Operation| {
                other.rotation == operation.rotation
                    && (other.translation - operation.translation).norm() < 1e-12
            };
            assert!(unit.operations.iter().any(is_same), "{statement}");
        }
    }
}

proptest! {
    /// Damaged files are read or refused, and never stop the program.
    #[test]
    fn damaged_files_are_read(
        choice in any::<prop::sample::Index>(),
        edits in proptest::collection::vec((any::<prop::sample::Index>(), 0..3_u8, any::<u8>()), 1..12),
    ) {
        let mut paths = files("good");
        paths.extend(files("bad"));
        let mut bytes = std::fs::read(choice.get(&paths)).expect("readable");
        for (place, kind, byte) in edits {
            if bytes.is_empty() {
                break;
            }
            let at = place.index(bytes.len());
            match kind {
                0 => bytes[at] = byte,
                1 => bytes.insert(at, byte),
                _ => {
                    bytes.remove(at);
                }
            }
        }
        let reading = read_bytes(&bytes);
        for block in &reading.blocks {
            assert_sound(block, bytes.len());
            if let Ok(unit) = &block.unit {
                let _ = unit.expand(&ExpandTolerance::default());
            }
        }
    }
}
