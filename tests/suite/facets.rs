//! Layers, terminations and bound charges against published stacking sequences.

use crate::published::entries;
use cosetta::collection::{Classification, Settings, classify_unit};
use cosetta::facet::{Facet, Stacking, StackingType};
use cosetta::polarization::Component;
use std::collections::BTreeMap;

fn classified(name: &str, parent_tolerance: Option<f64>) -> Classification {
    let entry =
        entries().into_iter().find(|entry| entry.name == name).unwrap_or_else(|| panic!("no entry {name}"));
    let mut settings = Settings { symmetry_tolerance: 1e-3, parent_tolerance, ..Settings::default() };
    settings.expand.merge = 0.01;
    let mut unit = entry.unit();
    for (site, charge) in unit.sites.iter_mut().zip(entry.formal_charges()) {
        site.oxidation = Some(charge);
    }
    classify_unit(&unit, &settings)
}

fn stacking(work: &Classification, miller: [i64; 3], tolerance: f64) -> (Facet, Stacking) {
    let primitive = work.primitive.as_ref().expect("a primitive cell");
    let formal = work.outcome.as_ref().expect("an answer");
    let charges = work.primitive_charges().expect("charges");
    let facet = Facet::new(primitive, miller).expect("a plane");
    let ideal = work.parent.as_ref().map(|found| found.parent.ideal.as_slice());
    let stacking = Stacking::new(&facet, primitive, &charges, formal, ideal, tolerance).expect("layers");
    (facet, stacking)
}

/// Element counts such as `Al2Mg2O4`, in alphabetical order.
fn content(work: &Classification, atoms: &[usize]) -> String {
    let (crystal, primitive) =
        (work.crystal.as_ref().expect("a crystal"), work.primitive.as_ref().expect("a cell"));
    let mut counts: BTreeMap<&str, usize> = BTreeMap::new();
    for &atom in atoms {
        *counts.entry(crystal.sites[primitive.representatives[atom]].element.symbol()).or_default() += 1;
    }
    counts
        .into_iter()
        .map(|(symbol, count)| if count == 1 { symbol.to_owned() } else { format!("{symbol}{count}") })
        .collect()
}

#[test]
fn ungrouped_layers_of_published_crystals() {
    let mut faults = Vec::new();
    let mut checked = 0;
    for line in include_str!("../data/surfaces.tsv").lines().skip_while(|line| line.starts_with('#')).skip(1)
    {
        let field: Vec<&str> = line.split('\t').collect();
        let [name, plane, spacing, area, layers, terminations, kind, offset] = field[..] else {
            panic!("{line}");
        };
        if name.contains("avg") {
            continue;
        }
        checked += 1;
        let miller: Vec<i64> = plane.split(',').map(|index| index.parse().expect("an index")).collect();
        let work = classified(name, None);
        // Layers merge below 0.002 Å, and below 0.05 Å in bixbyite.
        let tolerance = if name == "In2O3" { 0.05 } else { 0.002 };
        let (facet, stacking) = stacking(&work, [miller[0], miller[1], miller[2]], tolerance);
        let mut fault = |why: String| faults.push(format!("{name} ({plane}): {why}"));
        let printed = |text: &str| text.parse::<f64>().expect("a number");
        let misses = (facet.spacing - printed(spacing), facet.area - printed(area));
        if misses.0.abs() > 0.5001e-4 || misses.1.abs() > 0.5001e-3 {
            fault(format!("d = {:.4}, A = {:.3}", facet.spacing, facet.area));
        }
        // The letters of idealised types stand for elements of the tests.
        let is_idealised = name.starts_with("w-ideal");
        let expected: Vec<(f64, String, i64)> = layers
            .split("; ")
            .map(|layer| {
                let mut part = layer.split(':');
                let mut next = || part.next().expect("three parts");
                (next().parse().expect("a height"), next().to_owned(), next().parse().expect("a charge"))
            })
            .collect();
        let found: Vec<(f64, String, i64)> = stacking
            .layers
            .iter()
            .map(|layer| (layer.height, content(&work, &layer.atoms), layer.charge))
            .collect();
        let agree = found.len() == expected.len()
            && found.iter().zip(&expected).all(|(one, other)| {
                (one.0 - other.0).abs() < 1e-3 && (is_idealised || one.1 == other.1) && one.2 == other.2
            });
        if !agree {
            fault(format!("layers {found:?}"));
            continue;
        }
        for (termination, expected) in stacking.terminations.iter().zip(terminations.split("; ")) {
            let expected: f64 = expected.split(": ").nth(1).expect("a charge").parse().expect("a number");
            if (termination.charge.value() - expected).abs() > 1e-4 {
                fault(format!(
                    "{} in place of {expected} on top of layer {}",
                    termination.charge, termination.top
                ));
            }
        }
        if stacking.kind.to_string() != kind {
            fault(format!("type {}", stacking.kind));
        }
        let expected: f64 = offset.split(' ').next().expect("an offset").parse().expect("a number");
        let miss = stacking.offset.value() - expected;
        if (miss - miss.round()).abs() > 1e-4 {
            fault(format!("offset {}", stacking.offset));
        }
    }
    assert!(checked == 77, "{checked} rows");
    assert!(faults.is_empty(), "{} faults in {checked} rows:\n{}", faults.len(), faults.join("\n"));
}

#[test]
fn physical_layers_of_tilted_perovskites() {
    // Merged layers with atomic heights in every sum: layer charges and bound charges of an independent calculation
    // over the same coordinates. The layers are those of the parent, so that rumpled AO and BO2 layers stay whole.
    for (name, plane, area, layers, sigma) in [
        ("LaAlO3-R3c", [0, 1, 2], 28.737, &[-2, 2][..], &[-1.0, 1.0][..]),
        ("GdTiO3-Pbnm", [0, 0, 1], 30.692, &[2, -2, 2, -2], &[1.0, -1.0, 1.0, -1.0]),
        ("GdTiO3-Pbnm", [1, 1, 0], 60.089, &[4, -4], &[2.0, -2.0]),
        ("DyScO3-Pbnm", [1, 1, 0], 62.368, &[4, -4], &[2.0, -2.0]),
        ("LaGaO3-Pbnm", [0, 0, 1], 30.365, &[2, -2, 2, -2], &[1.0, -1.0, 1.0, -1.0]),
        ("LaInO3-Pbnm", [0, 0, 1], 33.995, &[2, -2, 2, -2], &[1.0, -1.0, 1.0, -1.0]),
        ("YAlO3-Pbnm", [0, 0, 1], 27.609, &[2, -2, 2, -2], &[1.0, -1.0, 1.0, -1.0]),
        ("CaTiO3-Pbnm", [0, 0, 1], 29.304, &[0, 0, 0, 0], &[0.0, 0.0, 0.0, 0.0]),
        ("BiFeO3-R3c", [0, 1, 2], 31.499, &[2, -2], &[1.7512, -0.2488]),
        ("CuAlO2", [0, 0, 1], 7.086, &[1, -1], &[0.5, -0.5]),
    ] {
        let work = classified(name, Some(0.8));
        // Delafossite is no distorted form of anything, its AlO2 layers are 1.9 Å thick; the parent of a polar
        // crystal keeps the polar displacements.
        let tolerance = match name {
            "CuAlO2" => 1.0,
            "BiFeO3-R3c" => 0.9,
            _ => 0.3,
        };
        let (facet, stacking) = stacking(&work, plane, tolerance);
        assert!((facet.area - area).abs() < 5e-4, "{name} {plane:?}: {}", facet.area);
        let mut found: Vec<(i64, f64)> = stacking
            .terminations
            .iter()
            .map(|termination| (stacking.layers[termination.top].charge, termination.charge.value()))
            .collect();
        let mut expected: Vec<(i64, f64)> = layers.iter().copied().zip(sigma.iter().copied()).collect();
        for list in [&mut found, &mut expected] {
            list.sort_by(|a, b| a.0.cmp(&b.0).then(a.1.total_cmp(&b.1)));
        }
        assert_eq!(found.len(), expected.len(), "{name} {plane:?}: {:?}", stacking.layers);
        for (one, other) in found.iter().zip(&expected) {
            assert!(one.0 == other.0 && (one.1 - other.1).abs() < 1e-3, "{name} {plane:?}: {found:?}");
        }
    }
}

#[test]
fn every_cut_agrees_with_the_facet_offset() {
    for name in ["MgAl2O4", "ZnO", "K2NiF4", "La2Zr2O7", "GaAs", "DyScO3-Pbnm"] {
        let work = classified(name, Some(0.8));
        let primitive = work.primitive.as_ref().expect("a cell");
        for plane in cosetta::facet::distinct_planes(primitive, 2) {
            let (_, up) = stacking(&work, plane, 0.01);
            let (_, down) = stacking(&work, plane.map(|index| -index), 0.01);
            assert_eq!(up.layers.iter().map(|layer| layer.charge).sum::<i64>(), 0);
            for termination in &up.terminations {
                let miss = termination.charge.value() - up.offset.value();
                assert!((miss - miss.round()).abs() < 1e-9, "{name} {plane:?}");
                if let Component::Free(_) = termination.charge {
                    continue;
                }
                assert!(matches!(up.offset, Component::Exact(_)));
            }
            // Reversing the normal reverses the charges: the same cuts, seen from the other side.
            let mut forth: Vec<i64> = up.terminations.iter().map(|t| round(t.charge.value())).collect();
            let mut back: Vec<i64> = down.terminations.iter().map(|t| round(-t.charge.value())).collect();
            forth.sort_unstable();
            back.sort_unstable();
            assert_eq!(forth, back, "{name} {plane:?}");
            let expected = if up.layers.iter().all(|layer| layer.charge == 0) {
                StackingType::One
            } else if up.terminations.iter().any(|t| t.charge.value().abs() < 1e-4) {
                StackingType::Two
            } else {
                StackingType::Three
            };
            assert_eq!(up.kind, expected);
        }
    }
}

#[allow(clippy::cast_possible_truncation)]
fn round(value: f64) -> i64 {
    (value * 1e6).round() as i64
}
