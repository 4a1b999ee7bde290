//! A structure in another setting as a CIF: cell, symmetry, sites, provenance, and the answer under our own prefix.

mod provenance;

pub use provenance::{Provenance, provenance};

use crate::charge::charges_text;
use crate::cif::{CifText, Datum, WriteError};
use crate::collection::{Classification, Recast, Settings};
use crate::crystal::{Element, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::polarization::{Coset, FormalPolarization};
use crate::symmetry::setting::Motion;
use crate::symmetry::transform_text;
use nalgebra::Vector3;
use num_integer::Integer;
use std::collections::BTreeMap;

/// Amounts this near to a whole number of atoms are whole.
const WHOLE: f64 = 1e-3;

/// What is written of one structure.
#[derive(Debug, Clone, Copy)]
pub struct Sheet<'a> {
    /// The file the structure comes from.
    pub file: &'a str,
    /// Its data block.
    pub block: &'a str,
    /// The structure in its new setting.
    pub recast: &'a Recast,
    /// The classification of the source.
    pub source: &'a Classification,
    /// The number of formula units in the cell that the source states.
    pub formula_units: Option<f64>,
    /// How it was classified.
    pub settings: &'a Settings,
    /// What the source says about its origin.
    pub provenance: &'a Provenance,
}

/// Writes a data block, with the results of its own classification where there are any. Returns what had to be left out.
///
/// # Errors
/// A number, label or symbol that cannot be written, which no structure that was read has.
pub fn write_block(
    text: &mut CifText,
    name: &str,
    sheet: &Sheet<'_>,
    results: Option<&Classification>,
) -> Result<Vec<Diagnostic>, WriteError> {
    text.block(name)?;
    text.pair(
        "_audit_creation_method",
        &Datum::text(concat!("cosetta ", env!("CARGO_PKG_VERSION"), " build setting")),
    )?;
    let dropped = write_provenance(text, sheet.provenance);
    text.gap();
    write_contents(text, sheet)?;
    text.gap();
    write_cell(text, sheet.recast)?;
    text.gap();
    write_symmetry(text, sheet.recast)?;
    text.gap();
    write_sites(text, sheet.recast)?;
    text.gap();
    write_setting(text, sheet)?;
    write_results(text, sheet, results)?;
    Ok(dropped)
}

fn write_provenance(text: &mut CifText, provenance: &Provenance) -> Vec<Diagnostic> {
    let mut dropped = Vec::new();
    let mut report = |tag: &str, outcome: Result<(), WriteError>| {
        if let Err(why) = outcome {
            let message = format!("{tag} of the source was left out: {why}");
            dropped.push(Diagnostic::note(Code::BuildItemDropped, message));
        }
    };
    for (tag, value) in &provenance.items {
        report(tag, text.pair(tag, &Datum::text(value.as_str())));
    }
    for (tag, values) in &provenance.lists {
        let rows: Vec<Vec<Datum>> = values.iter().map(|value| vec![Datum::text(value.as_str())]).collect();
        report(tag, text.table(&[tag], &rows));
    }
    dropped
}

/// Formula and number of formula units.
fn write_contents(text: &mut CifText, sheet: &Sheet<'_>) -> Result<(), WriteError> {
    let mut amounts: BTreeMap<Element, f64> = BTreeMap::new();
    for (site, count) in sheet.recast.unit.sites.iter().zip(&sheet.recast.multiplicities) {
        *amounts.entry(site.element).or_default() += site.occupancy * float(*count);
    }
    let stated = sheet.formula_units.map(|units| units * sheet.recast.axes.determinant());
    let units = formula_units(&amounts, &sheet.recast.multiplicities, stated);
    text.pair("_chemical_formula_sum", &Datum::text(hill(&amounts, float(units))))?;
    text.pair("_cell_formula_units_Z", &Datum::count(units))
}

/// The stated number of formula units, if it divides the content of the cell; else the greatest common divisor of whole
/// amounts, or of the multiplicities where amounts are not whole.
fn formula_units(amounts: &BTreeMap<Element, f64>, multiplicities: &[usize], stated: Option<f64>) -> usize {
    let whole = |amount: f64| {
        let rounded = amount.round();
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "numbers of atoms in a cell"
        )]
        ((amount - rounded).abs() < WHOLE && rounded >= 1.0).then_some(rounded as usize)
    };
    let counts: Option<Vec<usize>> = amounts.values().map(|&amount| whole(amount)).collect();
    let divisor =
        counts.as_ref().map_or(0, |counts| counts.iter().fold(0, |divisor, count| count.gcd(&divisor)));
    match (stated.and_then(whole), divisor) {
        // Shared sites have any amounts.
        (Some(units), 0) => units,
        (Some(units), divisor) if divisor % units == 0 => units,
        (_, 0) => multiplicities.iter().fold(0, |divisor, count| count.gcd(&divisor)).max(1),
        (_, divisor) => divisor,
    }
}

/// The sum formula in the order of the CIF dictionary: carbon, hydrogen, then by symbol; without carbon all by symbol.
fn hill(amounts: &BTreeMap<Element, f64>, units: f64) -> String {
    let has_carbon = amounts.keys().any(|element| element.symbol() == "C");
    let rank = |element: &Element| match element.symbol() {
        "C" => (0, "C"),
        "H" if has_carbon => (1, "H"),
        symbol => (2, symbol),
    };
    let mut elements: Vec<_> = amounts.iter().collect();
    elements.sort_by_key(|(element, _)| rank(element));
    let part = |(element, amount): (&Element, &f64)| match Datum::number(amount / units, 4) {
        Datum::Number(count) if count != "1" => format!("{element}{count}"),
        _ => element.to_string(),
    };
    elements.into_iter().map(part).collect::<Vec<_>>().join(" ")
}

fn write_cell(text: &mut CifText, recast: &Recast) -> Result<(), WriteError> {
    const TAGS: [&str; 6] = [
        "_cell_length_a",
        "_cell_length_b",
        "_cell_length_c",
        "_cell_angle_alpha",
        "_cell_angle_beta",
        "_cell_angle_gamma",
    ];
    let parameters = recast.unit.lattice.parameters();
    let values = parameters.lengths.iter().chain(&parameters.angles);
    for ((tag, value), uncertainty) in TAGS.iter().zip(values).zip(recast.cell_uncertainty) {
        text.pair(tag, &Datum::measured(*value, uncertainty))?;
    }
    text.pair("_cell_volume", &Datum::number(recast.unit.lattice.volume(), 4))
}

fn write_symmetry(text: &mut CifText, recast: &Recast) -> Result<(), WriteError> {
    if let Some(number) = recast.number {
        text.pair("_space_group_IT_number", &Datum::count(usize::from(number)))?;
    }
    if let Some(setting) = &recast.setting {
        text.pair("_space_group_name_Hall", &Datum::text(setting.hall.as_str()))?;
        if !setting.hm.is_empty() {
            text.pair("_space_group_name_H-M_alt", &Datum::text(setting.hm.as_str()))?;
        }
    }
    let motions = recast.unit.operations.iter().filter_map(Motion::from_operation);
    let mut names: Vec<String> = motions.map(|motion| motion.to_string()).collect();
    if names.is_empty() {
        names.push(Motion::IDENTITY.to_string());
    }
    let row = |(index, name): (usize, String)| vec![Datum::count(index + 1), Datum::text(name)];
    let rows: Vec<Vec<Datum>> = names.into_iter().enumerate().map(row).collect();
    text.table(&["_space_group_symop_id", "_space_group_symop_operation_xyz"], &rows)
}

/// An element with its oxidation number, such as `Fe3+`.
fn type_symbol(site: &Site) -> String {
    let Some(number) = site.oxidation else { return site.element.to_string() };
    let Datum::Number(magnitude) = Datum::number(number.abs(), 4) else { return site.element.to_string() };
    format!("{}{magnitude}{}", site.element, if number < 0.0 { '-' } else { '+' })
}

fn write_sites(text: &mut CifText, recast: &Recast) -> Result<(), WriteError> {
    let sites = &recast.unit.sites;
    let types: BTreeMap<String, Option<f64>> =
        sites.iter().map(|site| (type_symbol(site), site.oxidation)).collect();
    if types.values().any(Option::is_some) {
        let number =
            |oxidation: &Option<f64>| oxidation.map_or(Datum::Unknown, |number| Datum::number(number, 4));
        let row = |(symbol, oxidation): (&String, &Option<f64>)| {
            vec![Datum::text(symbol.as_str()), number(oxidation)]
        };
        let rows: Vec<Vec<Datum>> = types.iter().map(row).collect();
        text.table(&["_atom_type_symbol", "_atom_type_oxidation_number"], &rows)?;
        text.gap();
    }
    let rows: Vec<Vec<Datum>> = sites
        .iter()
        .enumerate()
        .map(|(index, site)| {
            let uncertainty = recast.site_uncertainty.get(index).copied().unwrap_or_default();
            let coordinate = |axis: usize| Datum::measured(site.position[axis], uncertainty[axis]);
            vec![
                Datum::text(printable(&site.label)),
                Datum::text(type_symbol(site)),
                coordinate(0),
                coordinate(1),
                coordinate(2),
                Datum::number(site.occupancy, 6),
                Datum::count(recast.multiplicities.get(index).copied().unwrap_or(1)),
            ]
        })
        .collect();
    let tags = [
        "_atom_site_label",
        "_atom_site_type_symbol",
        "_atom_site_fract_x",
        "_atom_site_fract_y",
        "_atom_site_fract_z",
        "_atom_site_occupancy",
        "_atom_site_symmetry_multiplicity",
    ];
    text.table(&tags, &rows)
}

/// How the setting follows from that of the source.
fn write_setting(text: &mut CifText, sheet: &Sheet<'_>) -> Result<(), WriteError> {
    let recast = sheet.recast;
    text.comment(
        "P and p of the change from the source to this file: (a',b',c') = (a,b,c) P, and the origin of this file is at p \
         in the axes of the source",
    );
    text.pair("_cosetta_version", &Datum::text(env!("CARGO_PKG_VERSION")))?;
    text.pair("_cosetta_source_file", &Datum::text(spoken(sheet.file)))?;
    text.pair("_cosetta_source_block", &Datum::text(spoken(sheet.block)))?;
    text.pair("_cosetta_transform_Pp_abc", &Datum::text(transform_text(&recast.axes, &recast.origin)))?;
    text.pair("_cosetta_symmetry_engine", &Datum::text(sheet.settings.engine.to_string()))?;
    text.pair("_cosetta_symmetry_tolerance", &Datum::number(sheet.settings.symmetry_tolerance, 8))
}

fn write_results(
    text: &mut CifText,
    sheet: &Sheet<'_>,
    results: Option<&Classification>,
) -> Result<(), WriteError> {
    let Some(work) = results else { return Ok(()) };
    let formal = match &work.outcome {
        Ok(formal) => formal,
        Err(refusal) => return text.pair("_cosetta_refusal_code", &Datum::text(refusal.code.as_str())),
    };
    if let (Some(crystal), Some(assignment)) = (&work.crystal, &work.assignment) {
        text.pair("_cosetta_charges", &Datum::text(charges_text(&crystal.sites, &assignment.charges)))?;
    }
    if let Some(assignment) = &sheet.source.assignment {
        text.pair("_cosetta_charges_source", &Datum::text(assignment.source.to_string()))?;
    }
    text.pair("_cosetta_label", &Datum::text(formal.label.to_string()))?;
    if let Some(primitive) = &work.primitive {
        let (numerators, denominator) = primitive.vectors();
        let axes = numerators.map(|entry| quotient(entry, denominator));
        let vectors = transform_text(&axes, &Vector3::zeros());
        let vectors = vectors.split(';').next().unwrap_or_default();
        text.comment("Offsets are in units of e a_i / V times the modulus, along these primitive vectors");
        text.pair("_cosetta_primitive_vectors", &Datum::text(vectors))?;
    }
    write_cosets(text, formal)
}

fn write_cosets(text: &mut CifText, formal: &FormalPolarization) -> Result<(), WriteError> {
    let row = |coset: &Coset| {
        vec![
            Datum::text(coset.modulus.to_string()),
            Datum::Number(coset.value.to_string()),
            Datum::text(coset.offset.map(|component| component.to_string()).join(",")),
            Datum::text(if coset.contains_zero { "yes" } else { "no" }),
        ]
    };
    let rows: Vec<Vec<Datum>> = formal.cosets.iter().map(row).collect();
    let tags = [
        "_cosetta_offset_modulus_name",
        "_cosetta_offset_modulus",
        "_cosetta_offset",
        "_cosetta_offset_contains_zero",
    ];
    text.table(&tags, &rows)
}

/// A label without blanks or characters outside printable ASCII.
fn printable(label: &str) -> String {
    label.chars().map(|c| if c.is_ascii_graphic() { c } else { '_' }).collect()
}

/// A name in one line.
fn spoken(name: &str) -> String {
    name.chars().map(|c| if c.is_control() { '_' } else { c }).collect()
}

#[allow(clippy::cast_precision_loss, reason = "numbers of atoms and formula units are small")]
fn float(count: usize) -> f64 {
    count as f64
}

#[allow(clippy::cast_precision_loss, reason = "entries of primitive vectors are small")]
fn quotient(numerator: i64, denominator: i64) -> f64 {
    numerator as f64 / denominator as f64
}

#[cfg(test)]
mod tests {
    use super::*;

    fn amounts(parts: &[(&str, f64)]) -> BTreeMap<Element, f64> {
        parts.iter().map(|(symbol, amount)| (Element::from_symbol(symbol).expect("known"), *amount)).collect()
    }

    #[test]
    fn formulas_follow_the_dictionary() {
        // By hand; the order is that of _chemical_formula_sum in the core dictionary (from memory).
        let spinel = amounts(&[("Mg", 8.0), ("Al", 16.0), ("O", 32.0)]);
        assert_eq!((formula_units(&spinel, &[], None), formula_units(&spinel, &[], Some(4.0))), (8, 4));
        assert_eq!(formula_units(&spinel, &[], Some(3.0)), 8);
        assert_eq!(hill(&spinel, 8.0), "Al2 Mg O4");
        let calcite = amounts(&[("Ca", 6.0), ("C", 6.0), ("O", 18.0), ("H", 6.0)]);
        assert_eq!(hill(&calcite, 6.0), "C H Ca O3");
        let shared = amounts(&[("Fe", 3.7), ("Mg", 4.3), ("O", 8.0)]);
        assert_eq!(
            (formula_units(&shared, &[4, 4, 8], Some(2.0)), formula_units(&shared, &[4, 4, 8], None)),
            (2, 4)
        );
        assert_eq!(hill(&shared, 4.0), "Fe0.925 Mg1.075 O2");
    }
}
