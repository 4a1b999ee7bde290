//! Timings of the parts of a classification, on the demo structures.

use cosetta::cell::Lattice;
use cosetta::charge::{self, Parameters};
use cosetta::cif;
use cosetta::collection::{Settings, classify_bytes, classify_unit, find_inputs};
use cosetta::crystal::{Crystal, Element, Site};
use cosetta::symmetry::find_symmetry;
use divan::Bencher;
use nalgebra::{Matrix3, Vector3};

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

/// The inference of charges alone, on crystals whose orbits are known: what it adds to the symmetry search.
#[divan::bench]
fn charges(bencher: Bencher) {
    let settings = Settings::default();
    let crystals: Vec<(Crystal, Vec<usize>)> = files()
        .iter()
        .flat_map(|bytes| cif::read_bytes(bytes).blocks)
        .filter_map(|block| block.unit.ok())
        .filter_map(|unit| {
            let work = classify_unit(&unit, &settings);
            Some((work.crystal?, work.symmetry?.orbits))
        })
        .collect();
    bencher.bench(|| crystals.iter().filter(|(crystal, orbits)| infer(crystal, orbits)).count());
}

fn infer(crystal: &Crystal, orbits: &[usize]) -> bool {
    let positions = Some((&crystal.lattice, Parameters::standard()));
    charge::infer(&crystal.sites, orbits, positions, None).is_ok()
}

/// 200 atoms without symmetry, 8 elements that all have many states.
#[divan::bench]
fn charges_at_worst(bencher: Bencher) {
    let symbols = ["Fe", "Mn", "Mo", "V", "O", "S", "Cr", "O"];
    let place =
        |index: u32| Vector3::new(index % 6, index / 6 % 6, index / 36).map(|step| f64::from(step) / 6.0);
    let sites: Vec<Site> = (0..200)
        .map(|index| {
            let symbol = symbols[(index % 6 + index / 6 + index / 36) as usize % symbols.len()];
            Site::new(format!("{symbol}{index}"), Element::from_symbol(symbol).expect("known"), place(index))
        })
        .collect();
    let lattice = Lattice::from_basis(Matrix3::identity() * 12.0).expect("a cell");
    let orbits: Vec<usize> = (0..sites.len()).collect();
    let crystal = Crystal { lattice, origins: orbits.clone(), sites };
    bencher.bench(|| infer(&crystal, &orbits));
}
