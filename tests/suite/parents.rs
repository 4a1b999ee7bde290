//! Parent cells of distorted crystals against the labels of their undistorted forms.

use crate::published::entries;
use cosetta::collection::{Classification, Settings, classify_unit};
use cosetta::polarization::Label;

fn classified(name: &str, settings: &Settings) -> Classification {
    let entry =
        entries().into_iter().find(|entry| entry.name == name).unwrap_or_else(|| panic!("no entry {name}"));
    let mut unit = entry.unit();
    for (site, charge) in unit.sites.iter_mut().zip(entry.formal_charges()) {
        site.oxidation = Some(charge);
    }
    classify_unit(&unit, settings)
}

#[test]
fn tilted_perovskites_have_the_label_of_the_cubic_parent() {
    // III–III cubic perovskites are half-quantum, II–IV ones contain zero; the tilted cells hold two (R-3c) and four
    // (Pbnm) formula units. By hand.
    for (name, strict, parent, cells) in [
        ("LaAlO3-R3c", Label::HalfQuantum, Label::HalfQuantum, 2),
        ("CaTiO3-Pbnm", Label::ContainsZero, Label::ContainsZero, 4),
        ("GdTiO3-Pbnm", Label::ContainsZero, Label::HalfQuantum, 4),
        ("LaGaO3-Pbnm", Label::ContainsZero, Label::HalfQuantum, 4),
        ("DyScO3-Pbnm", Label::ContainsZero, Label::HalfQuantum, 4),
        ("LaInO3-Pbnm", Label::ContainsZero, Label::HalfQuantum, 4),
        ("YAlO3-Pbnm", Label::ContainsZero, Label::HalfQuantum, 4),
    ] {
        let work = classified(name, &Settings::default());
        assert_eq!(work.outcome.as_ref().expect("an answer").label, strict, "{name}");
        let found = work.parent.as_ref().unwrap_or_else(|| panic!("{name}: no parent"));
        assert_eq!((found.formal.label, found.parent.cells), (parent, cells), "{name}");
        assert_eq!(found.primitive.positions.len(), 5, "{name}");
        assert!(found.parent.max_displacement <= 0.8 && found.parent.rms_displacement > 0.0, "{name}");
    }
}

#[test]
fn undistorted_crystals_have_no_parent() {
    // Rutile, corundum, calcite, wurtzite, spinel, garnet and the like are types of their own; a rock-salt ordered
    // double perovskite keeps its order. Common practice, no source.
    for name in [
        "TiO2-rutile",
        "SnO2",
        "MgF2",
        "alpha-Al2O3",
        "ZnO",
        "h-BN bulk AA'",
        "beta-Ga2O3",
        "MgAl2O4",
        "Y3Al5O12",
        "La2Zr2O7",
        "Sr2MgWO6-type",
        "La2MgTiO6-type",
        "SiO2-quartz",
        "SrTiO3",
        "Mg2SiO4",
    ] {
        let work = classified(name, &Settings::default());
        assert!(work.outcome.is_ok(), "{name}");
        let parent = work.parent.map(|found| (found.parent.cells, found.parent.max_displacement));
        assert_eq!(parent, None, "{name}");
    }
}

#[test]
fn charge_order_blocks_a_parent_and_says_so() {
    use cosetta::cell::{CellParameters, Lattice};
    use cosetta::crystal::{AsymmetricUnit, Element, Site};
    use nalgebra::Vector3;
    // Two cubic perovskite cells along c, B sites of charge 3 and 5 in turn, oxygen moved towards the higher charge.
    let parameters = CellParameters { lengths: [4.2, 4.2, 8.4], angles: [90.0; 3] };
    let site = |label: &str, symbol: &str, position: [f64; 3], charge: f64| {
        let mut site =
            Site::new(label, Element::from_symbol(symbol).expect("known"), Vector3::from(position));
        site.oxidation = Some(charge);
        site
    };
    let mut sites = vec![
        site("Ba1", "Ba", [0.0, 0.0, 0.0], 2.0),
        site("Ba2", "Ba", [0.0, 0.0, 0.5], 2.0),
        site("Bi1", "Bi", [0.5, 0.5, 0.25], 3.0),
        site("Bi2", "Bi", [0.5, 0.5, 0.75], 5.0),
    ];
    for (index, position) in [
        [0.5, 0.0, 0.25],
        [0.0, 0.5, 0.25],
        [0.5, 0.0, 0.75],
        [0.0, 0.5, 0.75],
        [0.5, 0.5, 0.01],
        [0.5, 0.5, 0.49],
    ]
    .into_iter()
    .enumerate()
    {
        sites.push(site(&format!("O{}", index + 1), "O", position, -2.0));
    }
    let lattice = Lattice::from_parameters(&parameters).expect("a cell");
    let work =
        classify_unit(&AsymmetricUnit { lattice, sites, operations: Vec::new() }, &Settings::default());
    assert!(work.outcome.is_ok(), "{:?}", work.outcome);
    assert!(work.parent.is_none());
    assert!(
        work.diagnostics.iter().any(|found| found.message.contains("charge order blocks a smaller parent"))
    );
}

#[test]
fn the_search_can_be_left_out() {
    let settings = Settings { parent_tolerance: None, ..Settings::default() };
    assert!(classified("LaGaO3-Pbnm", &settings).parent.is_none());
}
