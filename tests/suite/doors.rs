//! The same structures through other doors: POSCAR, OPTIMADE, compressed files and archives.

use super::commands::run;
use cosetta::collection::{Input, Settings, classify_bytes, classify_input};
use cosetta::crystal::{Crystal, Element, Site};
use cosetta::diagnostic::Code;
use cosetta::symmetry::{Engine, find_symmetry};
use std::fs;
use std::path::{Path, PathBuf};

/// The number in the name of each file is its space group at 0.00001 Å; 774 of 784 is what the library these files were
/// collected for gives.
fn symmetry_of_the_poscar_files(engine: Engine) {
    let data = PathBuf::from(
        std::env::var_os("COSETTA_DATA").expect("COSETTA_DATA names the folder of the data sets"),
    );
    let mut misses = Vec::new();
    let mut files = 0;
    let mut walk: Vec<PathBuf> = walkdir::WalkDir::new(data.join("poscar-symmetry/data"))
        .into_iter()
        .map(|entry| entry.expect("a readable folder").into_path())
        .filter(|path| path.is_file())
        .collect();
    walk.sort();
    for path in walk {
        let name = path.file_name().expect("a name").to_string_lossy().into_owned();
        let number = name.split('-').nth(1).and_then(|part| part.parse::<u16>().ok());
        let Some(number) = number.filter(|number| (1..=230).contains(number)) else { continue };
        files += 1;
        let poscar = cosetta::poscar::read_bytes(&fs::read(&path).expect("a file")).expect("a POSCAR file");
        let kinds: Vec<i32> =
            poscar.kinds.iter().map(|&kind| i32::try_from(kind + 1).expect("few")).collect();
        let site = |(label, position): (&String, _)| Site::new(label.clone(), Element::OXYGEN, position);
        let crystal = Crystal {
            lattice: poscar.lattice.clone(),
            sites: poscar.labels.iter().zip(poscar.positions.iter().copied()).map(site).collect(),
            origins: (0..kinds.len()).collect(),
        };
        match find_symmetry(&crystal, &kinds, engine, 1e-5) {
            Ok(found) if found.number == number => {}
            Ok(found) => misses.push(format!("{}: {} in place of {number}", path.display(), found.number)),
            Err(refusal) => misses.push(format!("{}: {refusal}", path.display())),
        }
    }
    println!("{engine}: {} of {files} agree with the number in their name", files - misses.len());
    println!("{}", misses.join("\n"));
    assert_eq!(files, 784);
    assert!(files - misses.len() >= 774, "{} misses", misses.len());
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn symmetry_of_the_poscar_files_with_every_engine() {
    for &engine in Engine::ALL {
        symmetry_of_the_poscar_files(engine);
    }
}
