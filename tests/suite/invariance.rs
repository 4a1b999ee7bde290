//! The answer does not depend on how the crystal is described: cell, origin, order of the atoms, supercell.

use crate::published::entries;
use cosetta::collection::{Classification, Settings, classify_unit};
use cosetta::crystal::{AsymmetricUnit, ExpandTolerance, Site};
use cosetta::polarization::Component;
use nalgebra::{Matrix3, Vector3};
use proptest::prelude::*;

/// All atoms of one cell of a published crystal, with its charges as stated oxidation numbers.
fn cell_of(name: &str) -> AsymmetricUnit {
    let entry = entries().into_iter().find(|entry| entry.name == name).expect("an entry");
    let mut unit = entry.unit();
    for (site, charge) in unit.sites.iter_mut().zip(entry.formal_charges()) {
        site.oxidation = Some(charge);
    }
    let (crystal, _) = unit.expand(&ExpandTolerance::default()).expect("a crystal");
    AsymmetricUnit { lattice: crystal.lattice, sites: crystal.sites, operations: Vec::new() }
}

fn classify(unit: &AsymmetricUnit) -> Classification {
    classify_unit(unit, &Settings { symmetry_tolerance: 1e-3, ..Settings::default() })
}

/// Whether two descriptions in the same Cartesian axes give the same coset, for electrons and for pairs.
fn same_answer(one: &Classification, other: &Classification) -> Result<(), String> {
    let formal = |work: &Classification| work.outcome.clone().map_err(|why| why.to_string());
    let (first, second) = (formal(one)?, formal(other)?);
    if first.label != second.label {
        return Err(format!("{} and {}", first.label, second.label));
    }
    let (a, b) = (one.primitive.as_ref().ok_or("no cell")?, other.primitive.as_ref().ok_or("no cell")?);
    for (coset, against) in first.cosets.iter().zip(&second.cosets) {
        let vector = |offset: [Component; 3]| Vector3::from(offset.map(Component::value));
        let p = a.lattice.to_cartesian(&vector(coset.offset));
        let q = b.lattice.to_cartesian(&vector(against.offset));
        let miss = a.lattice.to_fractional(&(p - q));
        if coset.value != against.value || (miss - miss.map(f64::round)).norm() > 1e-4 {
            return Err(format!("{:?} and {:?}", coset.offset, against.offset));
        }
    }
    Ok(())
}

/// Labels of every kind: contains-zero with and without pairs, half, quarters, thirds-permitting, polar.
const NAMES: [&str; 12] = [
    "MgO",
    "NaCl",
    "GaAs",
    "ZnO",
    "CaF2",
    "TiO2-rutile",
    "alpha-Al2O3",
    "KTaO3",
    "LaAlO3-R3c",
    "BiFeO3-R3c",
    "K2NiF4",
    "SiO2-quartz",
];

proptest! {
    #![proptest_config(ProptestConfig::with_cases(40))]

    #[test]
    fn cell_origin_and_order(
        name in proptest::sample::select(&NAMES[..]),
        steps in proptest::collection::vec((0..3_usize, 1..3_usize, -1..=1_i32), 1..5),
        shift in [-1.0..1.0_f64, -1.0..1.0, -1.0..1.0],
        turn in 0..100_usize,
    ) {
        let unit = cell_of(name);
        // A product of elementary matrices: unimodular, with its inverse beside it.
        let (mut change, mut inverse) = (Matrix3::<f64>::identity(), Matrix3::<f64>::identity());
        for (row, by, factor) in steps {
            let mut step = Matrix3::identity();
            step[(row, (row + by) % 3)] = f64::from(factor);
            let mut back = Matrix3::identity();
            back[(row, (row + by) % 3)] = -f64::from(factor);
            change *= step;
            inverse = back * inverse;
        }
        let moved = |site: &Site| Site { position: inverse * (site.position + Vector3::from(shift)), ..site.clone() };
        let mut sites: Vec<Site> = unit.sites.iter().map(moved).collect();
        let count = sites.len();
        sites.rotate_left(turn % count);
        let lattice = unit.lattice.transformed(&change).expect("same volume");
        let other = AsymmetricUnit { lattice, sites, operations: Vec::new() };
        let outcome = same_answer(&classify(&unit), &classify(&other));
        prop_assert!(outcome.is_ok(), "{name}: {outcome:?}");
    }

    /// Cells of a sublattice, of any shape: a hexagonal cell of a cubic crystal, a trigonal one doubled along one axis.
    #[test]
    fn supercell(
        name in proptest::sample::select(&NAMES[..]),
        diagonal in [1..3_i32, 1..3_i32, 1..3_i32],
        above in [0..2_i32, 0..2_i32, 0..2_i32],
        swap in any::<bool>(),
    ) {
        let unit = cell_of(name);
        let mut shape = Matrix3::new(
            diagonal[0], above[0], above[1],
            0, diagonal[1], above[2],
            0, 0, diagonal[2],
        ).cast::<f64>();
        if swap {
            shape = shape.transpose();
        }
        let back = shape.try_inverse().expect("a shape");
        let lattice = unit.lattice.transformed(&shape).expect("a larger cell");
        // The translations of the small cell inside the large one.
        let translations: Vec<Vector3<f64>> = itertools::iproduct!(0..6, 0..6, 0..6)
            .map(|(x, y, z)| Vector3::new(f64::from(x), f64::from(y), f64::from(z)))
            .filter(|n| (back * n).iter().all(|x| *x > -1e-9 && *x < 1.0 - 1e-9))
            .collect();
        prop_assert_eq!(translations.len(), usize::try_from(diagonal.iter().product::<i32>()).expect("positive"));
        let sites = translations
            .iter()
            .flat_map(|n| unit.sites.iter().map(move |site| Site { position: back * (site.position + n), ..site.clone() }))
            .collect();
        let other = AsymmetricUnit { lattice, sites, operations: Vec::new() };
        let outcome = same_answer(&classify(&unit), &classify(&other));
        prop_assert!(outcome.is_ok(), "{name}: {outcome:?}");
    }
}
