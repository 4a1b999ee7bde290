//! The demo structures against `structures/index.tsv`, whose expected values were computed without this program.

use crate::slow;
use cosetta::collection::{Settings, classify_bytes};
use std::collections::BTreeSet;
use std::fs;
use std::path::Path;

#[test]
fn every_structure_has_its_expected_label() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("structures");
    let index = fs::read_to_string(folder.join("index.tsv")).expect("the index");
    let mut rows = index.lines().map(|line| line.split('\t').collect::<Vec<_>>());
    let heading = rows.next().expect("a heading");
    let column =
        |name: &str| heading.iter().position(|title| *title == name).unwrap_or_else(|| panic!("{name}"));
    let (file, block, group, label, offset, pair, charges) = (
        column("file"),
        column("block"),
        column("space_group"),
        column("expected_label"),
        column("expected_offset"),
        column("contains_zero_pair"),
        column("charges"),
    );
    let mut seen = BTreeSet::new();
    let mut count = 0;
    for row in rows {
        count += 1;
        seen.insert(row[file].to_owned());
        let bytes = fs::read(folder.join(row[file])).expect("a demo file");
        let with = |charges| {
            let settings = Settings { charges, block: Some(row[block].to_owned()), ..Settings::default() };
            let mut materials = classify_bytes(row[file], &bytes, &settings);
            assert_eq!(materials.len(), 1, "{}", row[file]);
            materials.remove(0).classification
        };
        // With the charges of the index, and with those the program finds by itself.
        for work in [with(Some(row[charges].parse().expect("charges"))), with(None)] {
            let formal = work.outcome.as_ref().unwrap_or_else(|why| panic!("{}: {why}", row[file]));
            assert_eq!(
                work.symmetry.as_ref().expect("a group").number.to_string(),
                row[group],
                "{}",
                row[file]
            );
            assert_eq!(formal.label.to_string(), row[label], "{}", row[file]);
            if row[offset] != "-" {
                let found = formal.electron().offset.map(|component| component.to_string()).join(",");
                assert_eq!(found, row[offset], "{}", row[file]);
            }
            if row[pair] != "-" {
                assert_eq!(formal.pair().value, 2, "{}", row[file]);
                assert_eq!(formal.pair().contains_zero, row[pair] == "yes", "{}", row[file]);
            }
        }
        slow::check(&with(None)).unwrap_or_else(|why| panic!("{}: {why}", row[file]));
    }
    assert!(count >= 45, "{count} demo structures");
    let files = fs::read_dir(&folder).expect("the folder").map(|entry| entry.expect("an entry").file_name());
    let unlisted: Vec<_> = files
        .filter(|name| Path::new(name).extension().is_some_and(|extension| extension == "cif"))
        .map(|name| name.to_string_lossy().into_owned())
        .filter(|name| !seen.contains(name))
        .collect();
    assert!(unlisted.is_empty(), "not in index.tsv: {unlisted:?}");
}
