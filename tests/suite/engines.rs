//! Two independent symmetry engines have to agree.

use cosetta::cell::Lattice;
use cosetta::crystal::{Crystal, Element, ExpandTolerance, Operation, Site};
use cosetta::symmetry::{Engine, Symmetry, find_symmetry};
use nalgebra::{Matrix3, Vector3};

const TOLERANCE: f64 = 1e-5;

/// The atomic numbers, which is what tells sites apart when nothing else is known.
fn kinds(crystal: &Crystal) -> Vec<i32> {
    crystal.sites.iter().map(|site| i32::from(site.element.number())).collect()
}

fn search(name: &str, crystal: &Crystal, engine: Engine, tolerance: f64) -> Symmetry {
    find_symmetry(crystal, &kinds(crystal), engine, tolerance)
        .unwrap_or_else(|why| panic!("{name}: {}", why.message))
}

/// What two searches say differently about one crystal: group number, inversion, orbits.
fn differences(first: &Symmetry, second: &Symmetry) -> Vec<String> {
    let has_inversion = |found: &Symmetry| found.operations.iter().any(Operation::is_inversion);
    let mut found = Vec::new();
    if first.number != second.number {
        found.push(format!("group {} against {}", first.number, second.number));
    }
    if has_inversion(first) != has_inversion(second) {
        found.push(format!("inversion {} against {}", has_inversion(first), has_inversion(second)));
    }
    if first.orbits != second.orbits {
        found.push(format!("orbits {:?} against {:?}", first.orbits, second.orbits));
    }
    found
}

/// One line for each crystal on which the two engines differ or of which only one makes something.
fn compare<'a>(crystals: impl IntoIterator<Item = (&'a str, &'a Crystal)>, tolerance: f64) -> Vec<String> {
    let mut lines = Vec::new();
    for (name, crystal) in crystals {
        let find = |engine| find_symmetry(crystal, &kinds(crystal), engine, tolerance);
        match (find(Engine::Moyo), find(Engine::Spglib)) {
            (Ok(first), Ok(second)) => {
                let found = differences(&first, &second);
                if !found.is_empty() {
                    lines.push(format!("{name}: {}", found.join("; ")));
                }
            }
            (Err(why), Ok(_)) | (Ok(_), Err(why)) => lines.push(format!("{name}: {}", why.message)),
            (Err(_), Err(_)) => {}
        }
    }
    lines
}

fn crystal(basis: Matrix3<f64>, sites: &[(&str, [f64; 3])]) -> Crystal {
    let site = |&(symbol, position): &(&str, [f64; 3])| {
        Site::new(symbol, Element::from_symbol(symbol).expect("an element"), position.into())
    };
    let lattice = Lattice::from_basis(basis).expect("a good cell");
    let sites = sites.iter().map(site).collect();
    let (crystal, noticed) =
        Crystal::from_sites(lattice, sites, &ExpandTolerance::default()).expect("a good crystal");
    assert!(noticed.is_empty());
    crystal
}

fn diagonal(a: f64, b: f64, c: f64) -> Matrix3<f64> {
    Matrix3::from_diagonal(&Vector3::new(a, b, c))
}

fn hexagonal(a: f64, c: f64) -> Matrix3<f64> {
    Matrix3::new(a, -a / 2.0, 0.0, 0.0, a * 0.75_f64.sqrt(), 0.0, 0.0, 0.0, c)
}

fn rhombohedral(a: f64, c: f64) -> Matrix3<f64> {
    let obverse = Matrix3::new(2.0, -1.0, -1.0, 1.0, 1.0, -2.0, 1.0, 1.0, 1.0) / 3.0;
    hexagonal(a, c) * obverse
}

fn face_centred(a: f64) -> Matrix3<f64> {
    Matrix3::new(0.0, 1.0, 1.0, 1.0, 0.0, 1.0, 1.0, 1.0, 0.0) * (a / 2.0)
}

/// Name, group number, operations of the cell, number of orbits, crystal. Cell edges and free coordinates are rounded;
/// only the arrangement matters here.
fn structures() -> Vec<(&'static str, u16, usize, usize, Crystal)> {
    let perovskite = [
        ("Sr", [0.0; 3]),
        ("Ti", [0.5; 3]),
        ("O", [0.5, 0.5, 0.0]),
        ("O", [0.5, 0.0, 0.5]),
        ("O", [0.0, 0.5, 0.5]),
    ];
    let doubled: Vec<_> = perovskite
        .iter()
        .flat_map(|&(symbol, [x, y, z])| {
            [(symbol, [x, y, z / 2.0]), (symbol, [x, y, f64::midpoint(z, 1.0) % 1.0])]
        })
        .collect();
    let (third, u, x, y) = (1.0 / 3.0, 0.305, 0.352, 0.556);
    let rock_salt = [("Mg", [0.0; 3]), ("O", [0.5; 3])];
    let wurtzite = [
        ("Zn", [third, 2.0 * third, 0.0]),
        ("Zn", [2.0 * third, third, 0.5]),
        ("O", [third, 2.0 * third, 0.38]),
        ("O", [2.0 * third, third, 0.88]),
    ];
    let rutile = [
        ("Ti", [0.0; 3]),
        ("Ti", [0.5; 3]),
        ("O", [u, u, 0.0]),
        ("O", [1.0 - u, 1.0 - u, 0.0]),
        ("O", [0.5 + u, 0.5 - u, 0.5]),
        ("O", [0.5 - u, 0.5 + u, 0.5]),
    ];
    let corundum = [
        ("Al", [x; 3]),
        ("Al", [0.5 - x; 3]),
        ("Al", [1.0 - x; 3]),
        ("Al", [0.5 + x; 3]),
        ("O", [y, 0.5 - y, 0.25]),
        ("O", [0.25, y, 0.5 - y]),
        ("O", [0.5 - y, 0.25, y]),
        ("O", [1.0 - y, 0.5 + y, 0.75]),
        ("O", [0.75, 1.0 - y, 0.5 + y]),
        ("O", [0.5 + y, 0.75, 1.0 - y]),
    ];
    let ferroelectric = [
        ("Pb", [0.0; 3]),
        ("Ti", [0.5, 0.5, 0.54]),
        ("O", [0.5, 0.5, 0.11]),
        ("O", [0.5, 0.0, 0.61]),
        ("O", [0.0, 0.5, 0.61]),
    ];
    let skew = Matrix3::new(4.1, 0.3, -0.7, 0.0, 5.2, 0.9, 0.0, 0.0, 6.3);
    let pair =
        [("Ba", [0.11, 0.23, 0.37]), ("Ba", [0.89, 0.77, 0.63]), ("O", [0.0; 3]), ("O", [0.5, 0.0, 0.0])];
    let lone = [("Ba", [0.11, 0.23, 0.37]), ("Ba", [0.80, 0.77, 0.63]), ("O", [0.0; 3])];
    let mirrored = hexagonal(3.25, 5.2) * diagonal(-1.0, 1.0, 1.0);
    let mirrored_sites = wurtzite.map(|(symbol, [x, y, z])| (symbol, [(1.0 - x) % 1.0, y, z]));
    vec![
        ("rock salt", 225, 48, 2, crystal(face_centred(4.21), &rock_salt)),
        ("sphalerite", 216, 24, 2, crystal(face_centred(5.41), &[("Zn", [0.0; 3]), ("S", [0.25; 3])])),
        (
            "fluorite",
            225,
            48,
            2,
            crystal(face_centred(5.41), &[("Ce", [0.0; 3]), ("O", [0.25; 3]), ("O", [0.75; 3])]),
        ),
        ("perovskite", 221, 48, 3, crystal(diagonal(3.905, 3.905, 3.905), &perovskite)),
        ("wurtzite", 186, 12, 2, crystal(hexagonal(3.25, 5.2), &wurtzite)),
        ("left-handed cell", 186, 12, 2, crystal(mirrored, &mirrored_sites)),
        ("rutile", 136, 16, 2, crystal(diagonal(4.59, 4.59, 2.96), &rutile)),
        ("corundum", 167, 12, 2, crystal(rhombohedral(4.76, 12.99), &corundum)),
        ("ferroelectric", 99, 8, 4, crystal(diagonal(3.90, 3.90, 4.15), &ferroelectric)),
        ("inversion alone", 2, 2, 3, crystal(skew, &pair)),
        ("nothing", 1, 1, 3, crystal(skew, &lone)),
        // 16 of the 48 operations keep the doubled cell, each with two translations. The three oxygen positions stay
        // one orbit: orbits belong to the crystal, not to the cell.
        ("doubled perovskite", 221, 32, 3, crystal(diagonal(3.905, 3.905, 7.81), &doubled)),
    ]
}

#[test]
fn known_structures() {
    for (name, number, operations, orbits, crystal) in &structures() {
        for &engine in Engine::ALL {
            let found = search(name, crystal, engine, TOLERANCE);
            let firsts = found.orbits.iter().enumerate().filter(|&(site, &first)| site == first).count();
            assert_eq!(
                (found.number, found.operations.len(), firsts),
                (*number, *operations, *orbits),
                "{name} with {engine}"
            );
        }
    }
}

#[test]
fn the_engines_agree() {
    let structures = structures();
    let crystals = structures.iter().map(|(name, .., crystal)| (*name, crystal));
    assert_eq!(compare(crystals, TOLERANCE), Vec::<String>::new());
}

#[test]
fn a_group_is_named_alike() {
    for (name, .., crystal) in &structures() {
        let names: Vec<_> = Engine::ALL
            .iter()
            .map(|&engine| search(name, crystal, engine, TOLERANCE))
            .map(|found| (found.symbol, found.hall))
            .collect();
        assert!(names.windows(2).all(|pair| pair[0] == pair[1]), "{name}: {names:?}");
    }
}

#[test]
fn a_difference_is_seen() {
    let structures = structures();
    let found = |k: usize| search(structures[k].0, &structures[k].4, Engine::Spglib, TOLERANCE);
    assert_eq!(differences(&found(0), &found(1)), ["group 225 against 216", "inversion true against false"]);
    assert_eq!(differences(&found(0), &found(0)), Vec::<String>::new());
}

/// Every ordered crystal of a list of folders.
fn read_crystals(folders: &[std::path::PathBuf]) -> Vec<(String, Crystal)> {
    let mut found = Vec::new();
    for input in cosetta::collection::find_inputs(folders) {
        let bytes = input.read().expect("a readable file");
        for block in cosetta::cif::read_bytes(&bytes).blocks {
            let name = format!("{} {}", input.name(), block.name);
            if let Some((crystal, _)) =
                block.unit.ok().and_then(|unit| unit.expand(&ExpandTolerance::default()).ok())
                && crystal.is_ordered()
            {
                found.push((name, crystal));
            }
        }
    }
    found
}

#[test]
fn engines_agree_on_the_demo_structures() {
    let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("structures");
    let crystals = read_crystals(&[folder]);
    assert!(crystals.len() >= 45);
    let lines = compare(crystals.iter().map(|(name, crystal)| (name.as_str(), crystal)), 0.01);
    assert!(lines.is_empty(), "{}", lines.join("\n"));
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn engines_agree_on_the_cif_folders() {
    let folders = crate::wide::cif_folders();
    let crystals = read_crystals(&folders);
    for tolerance in [0.01, 0.001] {
        let lines = compare(crystals.iter().map(|(name, crystal)| (name.as_str(), crystal)), tolerance);
        println!("{} crystals at {tolerance} Å, {} disagreements", crystals.len(), lines.len());
        for line in &lines {
            println!("  {}", line.chars().take(240).collect::<String>());
        }
        // The two take different tolerances on positions at the limit; each case is explained in DEVELOPERS.md.
        assert!(lines.len() * 50 <= crystals.len(), "more than 2 % disagree");
    }
}
