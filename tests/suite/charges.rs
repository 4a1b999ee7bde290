//! Inferred charges against labels, published states and worked bond-valence sums.

use crate::wide::{data, labelled, unit};
use cosetta::charge::{Parameters, bond_valences};
use cosetta::collection::{Settings, classify_unit};
use std::fmt::Write;

/// Part of the labelled oxides that is only measured: by a hash of the reduced formula, 2 in 5.
fn is_held_out(formula: &str) -> bool {
    let hash = formula.bytes().fold(0xcbf2_9ce4_8422_2325_u64, |hash, byte| {
        (hash ^ u64::from(byte)).wrapping_mul(0x0100_0000_01b3)
    });
    (hash >> 20) % 5 < 2
}

#[test]
#[ignore = "writes the figures that the table of widths is fitted to"]
fn write_fit_data() {
    let settings = Settings { parent_tolerance: None, ..Settings::default() };
    let mut text = String::new();
    for name in ["pauling_oxides_mp.jsonl.gz", "pauling_oxides_cod.jsonl.gz"] {
        for record in labelled(name) {
            if is_held_out(&record.reduced_formula) {
                continue;
            }
            let unit = unit(&record);
            let work = classify_unit(&unit, &settings);
            let (Some(crystal), Some(symmetry), Some(assignment)) = (work.crystal, work.symmetry, work.assignment) else {
                continue;
            };
            let Some(found) = bond_valences(
                &crystal.lattice,
                &crystal.sites,
                &symmetry.orbits,
                &assignment.charges,
                Parameters::standard(),
            ) else {
                continue;
            };
            for orbit in found.orbits {
                let _ = writeln!(
                    text,
                    "{}\t{}\t{}\t{}\t{:.4}\t{}\t{:.4}",
                    record.id, record.reduced_formula, orbit.element, orbit.charge, orbit.sum, orbit.coordination,
                    found.global_instability
                );
            }
        }
    }
    std::fs::write(std::env::temp_dir().join("cosetta-fit.tsv"), text).expect("a writable folder");
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn dump() {
    let settings = Settings { parent_tolerance: None, ..Settings::default() };
    let mut text = String::new();
    for name in ["pauling_oxides_mp.jsonl.gz", "pauling_oxides_cod.jsonl.gz"] {
        for record in labelled(name) {
            let mut unit = unit(&record);
            for site in &mut unit.sites { site.oxidation = None; }
            let work = classify_unit(&unit, &settings);
            let part = if is_held_out(&record.reduced_formula) { "held" } else { "fit" };
            let label: Vec<i64> = record.valence.iter().map(|v| *v as i64).collect();
            let labels = cosetta::charge::charges_text(&unit.sites, &label);
            // Labels that no assignment by orbit can reach.
            let broken = work.symmetry.as_ref().is_some_and(|s| {
                let c = work.crystal.as_ref().expect("c");
                (0..c.sites.len()).any(|i| label[c.origins[i]] != label[c.origins[s.orbits[i]]])
            });
            let (status, mine, runner, margin) = match (&work.outcome, &work.assignment) {
                (_, Some(a)) => {
                    let mine: Vec<i64> = a.charges.clone();
                    let same = work.crystal.as_ref().expect("c").origins.iter().zip(&mine).all(|(&o, &q)| label[o] == q);
                    (if same { "same" } else { "differ" }.to_owned(), cosetta::charge::charges_text(&work.crystal.as_ref().expect("c").sites, &mine),
                     a.runner_up.as_ref().map(|r| cosetta::charge::charges_text(&work.crystal.as_ref().expect("c").sites, r)).unwrap_or_default(), a.margin.unwrap_or(f64::INFINITY))
                }
                (Err(r), _) => (format!("refused {}", r.code), r.message.clone(), r.hint.clone().unwrap_or_default(), 0.0),
                _ => unreachable!(),
            };
            let _ = writeln!(text, "{}\t{}\t{}\t{}\t{}\t{}\t{}\t{}\t{:.4e}\t{}\t{}", name, part, record.id, record.reduced_formula, status, labels, mine, runner, margin, broken, record.mixed_valence);
        }
    }
    std::fs::write(std::env::temp_dir().join("cosetta-dump.tsv"), text).expect("a writable folder");
}
