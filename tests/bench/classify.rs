//! Timings of the parts of a classification, on the demo structures.

use cosetta::cif;
use cosetta::collection::{Settings, classify_bytes, classify_unit, find_inputs};
use cosetta::symmetry::find_symmetry;
use divan::Bencher;

fn main() {
    divan::main();
}

fn files() -> Vec<Vec<u8>> {
    let folder = std::path::PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("structures");
    find_inputs(&[folder]).iter().map(|input| input.read().expect("a readable file")).collect()
}

#[divan::bench]
fn read(bencher: Bencher) {
    let files = files();
    bencher.bench(|| files.iter().map(|bytes| cif::read_bytes(bytes).blocks.len()).sum::<usize>());
}

/// The bare symmetry search, the floor of a classification.
#[divan::bench]
fn symmetry(bencher: Bencher) {
    let settings = Settings::default();
    let crystals: Vec<_> = files()
        .iter()
        .flat_map(|bytes| cif::read_bytes(bytes).blocks)
        .filter_map(|block| block.unit.ok())
        .filter_map(|unit| unit.expand(&settings.expand).ok())
        .map(|(crystal, _)| {
            let kinds: Vec<i32> = crystal.sites.iter().map(|site| i32::from(site.element.number())).collect();
            (crystal, kinds)
        })
        .collect();
    bencher.bench(|| {
        crystals
            .iter()
            .filter(|(crystal, kinds)| {
                find_symmetry(crystal, kinds, settings.engine, settings.symmetry_tolerance).is_ok()
            })
            .count()
    });
}

#[divan::bench]
fn classify(bencher: Bencher) {
    let settings = Settings::default();
    let units: Vec<_> = files()
        .iter()
        .flat_map(|bytes| cif::read_bytes(bytes).blocks)
        .filter_map(|block| block.unit.ok())
        .collect();
    bencher.bench(|| units.iter().filter(|unit| classify_unit(unit, &settings).outcome.is_ok()).count());
}

#[divan::bench]
fn whole(bencher: Bencher) {
    let settings = Settings::default();
    let files = files();
    bencher.bench(|| files.iter().map(|bytes| classify_bytes("", bytes, &settings).len()).sum::<usize>());
}
