//! The table of classified materials, short for the terminal and full for CSV.

use super::record::{ChargesRecord, LevelRecord, MaterialRecord, OffsetComponent};
use super::table::{Column, Table};

const SHORT: &[Column] = &[
    Column::text("file", "file"),
    Column::text("block", "block"),
    Column::text("formula", "formula"),
    Column::number("space_group", "group"),
    Column::text("label", "label"),
    Column::text("offset", "offset"),
    Column::text("zero", "zero e/pair"),
    Column::text("parent", "parent"),
    Column::text("charges", "charges"),
];

const FULL: &[Column] = &[
    Column::text("file", "file"),
    Column::text("block", "block"),
    Column::text("formula", "formula"),
    Column::text("status", "status"),
    Column::number("space_group_number", "group"),
    Column::text("space_group_symbol", "symbol"),
    Column::text("centrosymmetric", "centrosymmetric"),
    Column::text("label", "label"),
    Column::text("offset_a1", "offset a1"),
    Column::text("offset_a2", "offset a2"),
    Column::text("offset_a3", "offset a3"),
    Column::text("contains_zero", "zero"),
    Column::number("pair_modulus", "pair modulus"),
    Column::text("pair_contains_zero", "zero in pairs"),
    Column::number("ion_spacing", "ion spacing"),
    Column::text("ion_contains_zero", "zero by ions"),
    Column::text("parent_label", "parent"),
    Column::number("parent_cells", "parent cells"),
    Column::number("parent_max_displacement_angstrom", "displacement"),
    Column::text("charges", "charges"),
    Column::text("charges_source", "source"),
    Column::number("residual_e_angstrom", "residual"),
    Column::number("residual_fraction", "fraction"),
    Column::number("primitive_atoms", "atoms"),
    Column::number("primitive_volume_angstrom3", "volume"),
    Column::text("refusal_code", "refusal"),
    Column::text("refusal_message", "reason"),
    Column::number("charges_probability", "probability"),
    Column::number("global_instability_index", "instability"),
    Column::text("label_is_certain", "certain"),
];

/// An empty table of materials, with all columns or with those for the terminal.
#[must_use]
pub fn table(full: bool) -> Table {
    Table::new(if full { FULL } else { SHORT })
}

/// A row for the terminal.
#[must_use]
pub fn short_row(record: &MaterialRecord) -> Vec<String> {
    let (label, offset, zero) = match (&record.strict, &record.refusal) {
        (Some(level), _) => {
            let offset = level.offset.each_ref().map(|component| component_text(component, 4)).join(",");
            let zero = format!("{}/{}", yes_no(level.contains_zero), yes_no(level.pair.contains_zero));
            (level.label.to_string(), offset, zero)
        }
        (None, Some(refusal)) => ("undefined".to_owned(), refusal.code.to_string(), String::new()),
        (None, None) => (String::new(), String::new(), String::new()),
    };
    let last = match (&record.refusal, &record.charges) {
        (Some(refusal), _) => shorten(&refusal.message, 60),
        (None, Some(charges)) => format!("{} ({})", charges.text, charges.source),
        (None, None) => String::new(),
    };
    vec![
        record.file.clone(),
        record.block.clone(),
        record.formula.clone().unwrap_or_default(),
        record.space_group.as_ref().map_or_else(String::new, |group| group.number.to_string()),
        label,
        offset,
        zero,
        record.parent.as_ref().map_or_else(String::new, |parent| parent.level.label.to_string()),
        last,
    ]
}

/// A row with everything.
#[must_use]
pub fn full_row(record: &MaterialRecord) -> Vec<String> {
    let level = record.strict.as_ref();
    let text = |value: Option<String>| value.unwrap_or_default();
    let of_level = |pick: &dyn Fn(&LevelRecord) -> String| text(level.map(pick));
    let of_charges =
        |pick: &dyn Fn(&ChargesRecord) -> Option<String>| text(record.charges.as_ref().and_then(pick));
    let offset = |axis: usize| of_level(&|level| component_text(&level.offset[axis], 6));
    let group = record.space_group.as_ref();
    vec![
        record.file.clone(),
        record.block.clone(),
        text(record.formula.clone()),
        if level.is_some() { "ok".to_owned() } else { "refused".to_owned() },
        text(group.map(|group| group.number.to_string())),
        text(group.map(|group| group.symbol.clone())),
        text(record.centrosymmetric.map(|yes| yes.to_string())),
        level.map_or_else(|| "undefined".to_owned(), |level| level.label.to_string()),
        offset(0),
        offset(1),
        offset(2),
        of_level(&|level| level.contains_zero.to_string()),
        of_level(&|level| level.pair.modulus.to_string()),
        of_level(&|level| level.pair.contains_zero.to_string()),
        of_level(&|level| level.ion.spacing.to_string()),
        of_level(&|level| level.ion.contains_zero.to_string()),
        text(record.parent.as_ref().map(|parent| parent.level.label.to_string())),
        text(record.parent.as_ref().map(|parent| parent.cells.to_string())),
        text(record.parent.as_ref().map(|parent| format!("{:.4}", parent.max_displacement))),
        text(record.charges.as_ref().map(|charges| charges.text.clone())),
        text(record.charges.as_ref().map(|charges| charges.source.clone())),
        of_level(&|level| format!("{:.6}", level.residual)),
        of_level(&|level| text(level.residual_fraction.map(|fraction| format!("{fraction:.6}")))),
        text(record.primitive.as_ref().map(|primitive| primitive.atoms.to_string())),
        text(record.primitive.as_ref().map(|primitive| format!("{:.4}", primitive.volume))),
        text(record.refusal.as_ref().map(|refusal| refusal.code.to_string())),
        text(record.refusal.as_ref().map(|refusal| refusal.message.clone())),
        of_charges(&|charges| charges.probability.map(|probability| format!("{probability:.4}"))),
        of_charges(&|charges| charges.global_instability.map(|index| format!("{index:.4}"))),
        of_charges(&|charges| charges.label_is_certain.map(|is_certain| is_certain.to_string())),
    ]
}

fn component_text(component: &OffsetComponent, digits: usize) -> String {
    match component {
        OffsetComponent::Exact(text) => text.clone(),
        OffsetComponent::Free(value) => format!("{value:.digits$}"),
    }
}

fn yes_no(answer: bool) -> &'static str {
    if answer { "yes" } else { "no" }
}

fn shorten(text: &str, limit: usize) -> String {
    if text.chars().count() <= limit {
        return text.to_owned();
    }
    text.chars().take(limit - 1).chain(std::iter::once('…')).collect()
}
