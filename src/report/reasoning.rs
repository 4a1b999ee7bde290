//! Why these charges: one row for each set of equivalent sites.

use super::table::{Column, Table};
use crate::charge::{BondValences, Parameters, bond_valences};
use crate::collection::{Alternative, Material};
use std::fmt::Write;

const COLUMNS: &[Column] = &[
    Column::text("site", "site"),
    Column::text("element", "element"),
    Column::number("sites", "sites"),
    Column::number("coordination", "bonds"),
    Column::number("bond_valence_sum", "sum"),
    Column::number("charge", "charge"),
    Column::number("probability", "probability"),
    Column::text("others", "other states"),
];

/// The table behind the charges of a material, and what other charges would change. Empty where no charges were found.
#[must_use]
pub fn explain(material: &Material, parameters: &Parameters) -> String {
    let mut text = String::new();
    // Writing to a String cannot fail.
    let _ = write_reasons(&mut text, material, parameters);
    text
}

/// Bond-valence sums of the charges used.
#[must_use]
pub fn bonds_of(material: &Material, parameters: &Parameters) -> Option<BondValences> {
    let work = &material.classification;
    let (crystal, symmetry, assignment) =
        (work.crystal.as_ref()?, work.symmetry.as_ref()?, work.assignment.as_ref()?);
    bond_valences(&crystal.lattice, &crystal.sites, &symmetry.orbits, &assignment.charges, parameters)
}

fn write_reasons(out: &mut String, material: &Material, parameters: &Parameters) -> std::fmt::Result {
    let work = &material.classification;
    let Some(assignment) = &work.assignment else { return Ok(()) };
    let reasoning = assignment.reasoning.as_ref();
    let Some(bonds) = bonds_of(material, parameters) else {
        return writeln!(
            out,
            "\nNo bond valences: parameters are missing, or there are no bonds between unlike elements."
        );
    };
    writeln!(out, "\nBonds and charges ({}):", assignment.source.describe())?;
    let mut table = Table::new(COLUMNS);
    for orbit in &bonds.orbits {
        let site = orbit.sites.first().copied().unwrap_or(0);
        let likely = |state: i64| reasoning.map(|reasoning| reasoning.site_probability(site, state));
        let others: Vec<String> = reasoning.map_or_else(Vec::new, |reasoning| {
            let mut states: Vec<i64> = reasoning
                .candidates
                .iter()
                .filter_map(|candidate| candidate.charges.get(site).copied())
                .collect();
            states.sort_unstable();
            states.dedup();
            states
                .into_iter()
                .filter(|&state| state != orbit.charge)
                .map(|state| format!("{state:+} ({:.4})", reasoning.site_probability(site, state)))
                .collect()
        });
        table.rows.push(vec![
            orbit.label.clone(),
            orbit.element.to_string(),
            orbit.sites.len().to_string(),
            format!("{:.1}", orbit.coordination),
            format!("{:+.3}", orbit.sum),
            format!("{:+}", orbit.charge),
            likely(orbit.charge).map_or_else(String::new, |probability| format!("{probability:.3}")),
            others.join(" "),
        ]);
    }
    out.push_str(&table.to_text(None));
    writeln!(
        out,
        "\nGlobal instability index {:.3} valence units{}",
        bonds.global_instability,
        judged(&bonds)
    )?;
    if reasoning.is_some() { write_alternatives(out, &work.alternatives) } else { Ok(()) }
}

/// What the index means (Lufaso & Woodward, Acta Cryst. B57, 725 (2001)).
fn judged(bonds: &BondValences) -> &'static str {
    match bonds.global_instability {
        index if index <= 0.1 => " (below 0.1: lengths fit the charges)",
        index if index <= 0.2 => " (0.1 to 0.2: strained)",
        _ => " (above 0.2: strongly strained, or structure or charges are wrong)",
    }
}

fn write_alternatives(out: &mut String, alternatives: &[Alternative]) -> std::fmt::Result {
    for other in alternatives {
        let change = if other.is_same {
            "same label and offset".to_owned()
        } else {
            format!("would be {}", other.label)
        };
        writeln!(out, "  --charges '{}'   probability {:.3}: {change}", other.text, other.probability)?;
    }
    writeln!(out, "{}", verdict(alternatives))
}

/// Whether the label hangs on the charges.
#[must_use]
pub fn verdict(alternatives: &[Alternative]) -> &'static str {
    if alternatives.iter().all(|other| other.is_same) {
        "The label is the same under all plausible charges."
    } else {
        "The label hangs on the charges: see the alternatives, and fix the charges with --charges."
    }
}
