//! Wider runs over public data sets that are not part of the repository. They are ignored by default and look for the
//! data in the folder named by `COSETTA_DATA`: `cargo test --release -- --ignored`.

use crate::slow;
use cosetta::cell::{CellParameters, Lattice};
use cosetta::collection::{Settings, classify_bytes, classify_unit, find_inputs};
use cosetta::crystal::{AsymmetricUnit, Element, Site};
use cosetta::diagnostic::Code;
use cosetta::polarization::Label;
use flate2::read::GzDecoder;
use nalgebra::Vector3;
use std::collections::BTreeMap;
use std::fs::File;
use std::io::{BufRead, BufReader};
use std::path::PathBuf;

fn data() -> PathBuf {
    PathBuf::from(std::env::var_os("COSETTA_DATA").expect("COSETTA_DATA names the folder of the data sets"))
}

/// The five folders of CIFs.
pub(crate) fn cif_folders() -> Vec<PathBuf> {
    [
        "cif-public-domain",
        "cif-all-space-groups",
        "cif-oxidation-loops",
        "cif-edge-cases",
        "cif-mixed-exports",
    ]
    .map(|folder| data().join(folder))
    .to_vec()
}

/// One structure of the labelled oxides (J. George et al., "The Limited Predictive Power of the Pauling Rules",
/// CC BY 4.0).
#[derive(serde::Deserialize)]
pub(crate) struct Labelled {
    pub(crate) id: String,
    cell: [f64; 6],
    pub(crate) elements: Vec<String>,
    frac: Vec<[f64; 3]>,
    pub(crate) valence: Vec<f64>,
    pub(crate) reduced_formula: String,
    pub(crate) mixed_valence: bool,
}

pub(crate) fn labelled(name: &str) -> Vec<Labelled> {
    let file = File::open(data().join("oxides-with-valences").join(name)).expect("the data set");
    BufReader::new(GzDecoder::new(file))
        .lines()
        .map(|line| serde_json::from_str(&line.expect("text")).expect("a record"))
        .collect()
}

pub(crate) fn unit(record: &Labelled) -> AsymmetricUnit {
    let [a, b, c, alpha, beta, gamma] = record.cell;
    let parameters = CellParameters { lengths: [a, b, c], angles: [alpha, beta, gamma] };
    let sites = record
        .elements
        .iter()
        .zip(&record.frac)
        .zip(&record.valence)
        .enumerate()
        .map(|(index, ((symbol, position), valence))| {
            let element = Element::from_symbol(symbol).expect("an element");
            let mut site = Site::new(format!("{symbol}{}", index + 1), element, Vector3::from(*position));
            site.oxidation = Some(*valence);
            site
        })
        .collect();
    AsymmetricUnit {
        lattice: Lattice::from_parameters(&parameters).expect("a cell"),
        sites,
        operations: Vec::new(),
    }
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn labelled_oxides_agree_with_the_slow_routine() {
    let settings = Settings::default();
    let mut labels: BTreeMap<String, usize> = BTreeMap::new();
    let mut refusals: BTreeMap<Code, Vec<String>> = BTreeMap::new();
    let mut centrosymmetric = 0;
    let mut largest_residual = 0.0_f64;
    let mut faults = Vec::new();
    let mut count = 0;
    for name in ["pauling_oxides_mp.jsonl.gz", "pauling_oxides_cod.jsonl.gz"] {
        for record in labelled(name) {
            count += 1;
            let unit = unit(&record);
            let work = classify_unit(&unit, &settings);
            match &work.outcome {
                Ok(formal) => {
                    *labels.entry(formal.label.to_string()).or_default() += 1;
                    centrosymmetric += usize::from(work.centres.is_some());
                    largest_residual = largest_residual.max(formal.residual);
                    if let Err(why) = slow::check(&work) {
                        faults.push(format!("{}: {why}", record.id));
                    }
                }
                Err(refusal) => {
                    refusals
                        .entry(refusal.code)
                        .or_default()
                        .push(format!("{}: {}", record.id, refusal.message));
                }
            }
        }
    }
    println!(
        "{count} oxides: {labels:?}, {centrosymmetric} centrosymmetric, largest residual {largest_residual:.4} e·Å"
    );
    for (code, which) in &refusals {
        println!(
            "refused {code}: {}\n  {}",
            which.len(),
            which.iter().take(12).cloned().collect::<Vec<_>>().join("\n  ")
        );
    }
    assert!(faults.is_empty(), "{} disagree:\n{}", faults.len(), faults.join("\n"));
    assert!(!refusals.contains_key(&Code::PolarizationRoutes), "two routes disagree");
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn every_block_of_the_cif_folders_is_a_row_or_a_coded_refusal() {
    let inputs = find_inputs(&cif_folders());
    let mut codes: BTreeMap<String, usize> = BTreeMap::new();
    let mut blocks = 0;
    let mut compared = 0;
    for input in &inputs {
        let bytes = input.read().expect("a readable file");
        let materials = classify_bytes(&input.name(), &bytes, &Settings::default());
        assert!(!materials.is_empty(), "{}: nothing came out", input.name());
        for material in materials {
            blocks += 1;
            let key = match &material.classification.outcome {
                Ok(formal) => {
                    assert_ne!(formal.label, Label::Undefined);
                    // The slow routine takes the cube of the number of atoms.
                    if material
                        .classification
                        .crystal
                        .as_ref()
                        .is_some_and(|crystal| crystal.sites.len() <= 200)
                    {
                        compared += 1;
                        slow::check(&material.classification)
                            .unwrap_or_else(|why| panic!("{} {}: {why}", material.file, material.block));
                    }
                    formal.label.to_string()
                }
                Err(refusal) => refusal.code.to_string(),
            };
            *codes.entry(key).or_default() += 1;
        }
    }
    println!("{} files, {blocks} blocks, {compared} compared with the slow routine", inputs.len());
    for (code, count) in &codes {
        println!("{count:>6} {code}");
    }
}
