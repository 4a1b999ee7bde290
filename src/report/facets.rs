//! Planes, layers and terminations of one material, as records and in words.

use super::record::{MaterialRecord, OffsetComponent};
use super::table::{Column, Table};
use crate::collection::{Material, Settings};
use crate::crystal::Element;
use crate::facet::{Facet, Remedy, RemedyKind, Stacking, Termination};
use crate::polarization::C_PER_M2;
use crate::symmetry::Primitive;
use schemars::JsonSchema;
use serde::Serialize;
use std::fmt::Write;

/// The planes of one material.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct FacetsRecord {
    /// The classification.
    #[serde(flatten)]
    pub material: MaterialRecord,
    /// Atoms nearer than this in height are one layer, in Å.
    pub layer_tolerance: f64,
    /// The planes, absent when the material was refused.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub planes: Vec<PlaneRecord>,
}

/// One plane.
#[derive(Debug, Clone, Serialize, JsonSchema)]
#[allow(clippy::struct_excessive_bools, reason = "a record of independent answers")]
pub struct PlaneRecord {
    /// Indices in the axes of the file.
    pub miller: [i64; 3],
    /// Area of the primitive surface cell in Å².
    pub area: f64,
    /// Distance between lattice planes in Å.
    pub spacing: f64,
    /// Lengths in Å of the vectors of the primitive surface cell.
    pub surface_lengths: [f64; 2],
    /// Angle between them in degrees.
    pub surface_angle: f64,
    /// Facet offset `h · p` modulo one, in units of `e/A`.
    pub offset: OffsetComponent,
    /// Whether zero is among the values of the normal polarization, for single electrons.
    pub contains_zero: bool,
    /// 1: neutral layers; 2: charged layers, some cut without bound charge; 3: charged layers, every cut charged.
    pub stacking_type: u8,
    /// Whether the layers are neutral and the stack is polar all the same.
    pub polar_stack: bool,
    /// Whether a slab can end alike on both sides.
    pub reversible: bool,
    /// Whether the layers are those of the parent; else they are divided by gaps between the atoms.
    pub layers_of_parent: bool,
    /// One entry for each symmetry-distinct termination.
    pub terminations: Vec<TerminationRecord>,
}

/// One termination.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct TerminationRecord {
    /// Content of the layer on top.
    pub top: String,
    /// Content of the layer at the bottom of the tile.
    pub bottom: String,
    /// Bound charge of the upper surface in e per primitive surface cell: a fraction where symmetry fixes it.
    pub sigma_e: OffsetComponent,
    /// Bound charge in C/m².
    pub sigma_c_per_m2: f64,
    /// Bound charge in e/nm².
    pub sigma_e_per_nm2: f64,
    /// Number of terminations of the tile that symmetry makes equal to this one, itself included.
    pub multiplicity: usize,
    /// The layers of the tile from bottom to top.
    pub planes: Vec<LayerRecord>,
    /// What makes it neutral; empty when it is.
    pub remedies: Vec<RemedyRecord>,
}

/// One layer of a tile.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct LayerRecord {
    /// Height above the bottom layer of the tile in Å.
    pub height: f64,
    /// Content per primitive surface cell.
    pub content: String,
    /// Charge in e per primitive surface cell.
    pub charge: i64,
    /// Difference in height between its highest and its lowest atom in Å.
    pub thickness: f64,
}

/// One remedy.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct RemedyRecord {
    /// What is changed: `electrons`, `holes`, `remove`, `add`, `hydrogen`, `hydroxide` or `substitute`.
    pub kind: String,
    /// The ion taken away, added or replaced, such as `Mg2+`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub ion: Option<String>,
    /// Charge in e of the ion that comes in its place.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub replaced_by_charge: Option<i64>,
    /// Amount per primitive surface cell.
    pub coverage: OffsetComponent,
    /// Smallest number of primitive surface cells that makes the amount whole.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cells: Option<u32>,
    /// A surface cell of that number, n × m.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub shape: Option<[u32; 2]>,
}

/// What is needed of a material to describe its planes.
pub struct Parts<'a> {
    /// The primitive cell.
    pub primitive: &'a Primitive,
    /// Element and charge of each of its atoms.
    pub ions: Vec<(Element, i64)>,
}

impl FacetsRecord {
    /// A record without planes.
    #[must_use]
    pub fn new(material: &Material, settings: &Settings, layer_tolerance: f64) -> Self {
        Self { material: MaterialRecord::new(material, settings), layer_tolerance, planes: Vec::new() }
    }
}

impl Parts<'_> {
    /// Content of a set of atoms, cations first, such as `Mg2Al2O4`; not reduced.
    #[must_use]
    pub fn content(&self, atoms: &[usize]) -> String {
        let mut counts: Vec<(Element, i64, usize)> = Vec::new();
        for &atom in atoms {
            let (element, charge) = self.ions[atom];
            match counts.iter_mut().find(|(known, _, _)| *known == element) {
                Some((_, _, count)) => *count += 1,
                None => counts.push((element, charge, 1)),
            }
        }
        counts.sort_by_key(|(element, charge, _)| {
            (*charge < 0, charge.abs(), std::cmp::Reverse(element.number()))
        });
        let part = |(element, _, count): &(Element, i64, usize)| {
            if *count == 1 { element.to_string() } else { format!("{element}{count}") }
        };
        counts.iter().map(part).collect()
    }

    /// The record of a plane.
    #[must_use]
    pub fn plane(&self, facet: &Facet, stacking: &Stacking) -> PlaneRecord {
        let (surface_lengths, surface_angle) = facet.surface_cell(&self.primitive.lattice);
        let distinct = stacking.terminations.iter().enumerate().filter(|(index, t)| t.same_as == *index);
        PlaneRecord {
            miller: facet.miller,
            area: facet.area,
            spacing: facet.spacing,
            surface_lengths,
            surface_angle,
            offset: stacking.offset.into(),
            contains_zero: stacking.contains_zero,
            stacking_type: stacking.kind.number(),
            polar_stack: stacking.kind.number() == 1
                && !stacking.terminations.iter().any(|termination| termination.is_neutral),
            reversible: stacking.is_reversible,
            layers_of_parent: stacking.follows_parent,
            terminations: distinct
                .map(|(_, termination)| self.termination(facet, stacking, termination))
                .collect(),
        }
    }

    fn termination(
        &self,
        facet: &Facet,
        stacking: &Stacking,
        termination: &Termination,
    ) -> TerminationRecord {
        let count = stacking.layers.len();
        let base = stacking.layers[termination.bottom].height;
        let planes = (0..count)
            .map(|step| {
                let layer = &stacking.layers[(termination.bottom + step) % count];
                let above = layer.height - base;
                let above = if step > 0 && above <= 0.0 { above + 1.0 } else { above };
                LayerRecord {
                    height: above * facet.spacing,
                    content: self.content(&layer.atoms),
                    charge: layer.charge,
                    thickness: layer.thickness,
                }
            })
            .collect();
        let own = termination.same_as;
        TerminationRecord {
            top: self.content(&stacking.layers[termination.top].atoms),
            bottom: self.content(&stacking.layers[termination.bottom].atoms),
            sigma_e: termination.charge.into(),
            sigma_c_per_m2: termination.charge.value() / facet.area * C_PER_M2,
            sigma_e_per_nm2: termination.charge.value() / facet.area * 100.0,
            multiplicity: stacking.terminations.iter().filter(|other| other.same_as == own).count(),
            planes,
            remedies: Remedy::list(stacking, termination, &self.ions).iter().map(RemedyRecord::new).collect(),
        }
    }
}

impl RemedyRecord {
    fn new(remedy: &Remedy) -> Self {
        let kind = match remedy.kind {
            RemedyKind::Electrons => "electrons",
            RemedyKind::Holes => "holes",
            RemedyKind::Remove => "remove",
            RemedyKind::Add => "add",
            RemedyKind::Hydrogen => "hydrogen",
            RemedyKind::Hydroxide => "hydroxide",
            RemedyKind::Substitute => "substitute",
        };
        Self {
            kind: kind.to_owned(),
            ion: remedy.ion.map(|(element, charge)| ion_text(&element.to_string(), charge)),
            replaced_by_charge: remedy.replaced_by,
            coverage: remedy.coverage.into(),
            cells: remedy.cells,
            shape: remedy.shape(),
        }
    }

    fn words(&self) -> String {
        let amount = amount_text(&self.coverage);
        let ion = self.ion.as_deref().unwrap_or_default();
        let what = match (self.kind.as_str(), self.replaced_by_charge) {
            ("remove", _) => format!("take away {amount} {ion}"),
            ("add", _) => format!("add {amount} {ion}"),
            ("hydrogen", _) => format!("bind {amount} H+"),
            ("hydroxide", _) => format!("bind {amount} OH−"),
            ("substitute", Some(charge)) => format!("replace {amount} {ion} by an ion of charge {charge:+}"),
            (kind, _) => format!("{amount} {kind}"),
        };
        match (self.cells, self.shape) {
            (Some(1), _) => format!("{what} per 1×1"),
            (Some(_), Some([n, m])) => format!("{what} per 1×1 (whole in {n}×{m})"),
            _ => format!("{what} per 1×1"),
        }
    }
}

fn ion_text(symbol: &str, charge: i64) -> String {
    let sign = if charge < 0 { '-' } else { '+' };
    match charge.abs() {
        0 => symbol.to_owned(),
        1 => format!("{symbol}{sign}"),
        size => format!("{symbol}{size}{sign}"),
    }
}

fn amount_text(component: &OffsetComponent) -> String {
    match component {
        OffsetComponent::Exact(text) => text.clone(),
        OffsetComponent::Free(value) => format!("{value:.4}"),
    }
}

fn signed(component: &OffsetComponent) -> String {
    let text = amount_text(component);
    if text.starts_with('-') || text == "0" { text } else { format!("+{text}") }
}

/// The planes in words.
#[must_use]
pub fn describe(record: &FacetsRecord) -> String {
    let mut text = String::new();
    // Writing to a String cannot fail.
    let _ = write_planes(&mut text, record);
    text
}

fn write_planes(out: &mut String, record: &FacetsRecord) -> std::fmt::Result {
    for plane in &record.planes {
        let miller = plane.miller.map(|index| index.to_string()).join(" ");
        let zero = if plane.contains_zero { "contains zero" } else { "does not contain zero" };
        let polar = if plane.polar_stack { ", neutral layers that stack to a polar crystal" } else { "" };
        let ends =
            if plane.reversible { "a slab can end alike on both sides" } else { "the two sides differ" };
        let has_parent = record.material.parent.is_some();
        let by_gaps = if has_parent && !plane.layers_of_parent {
            "; layers by gaps, since those of the parent are none here"
        } else {
            ""
        };
        writeln!(
            out,
            "\n({miller})  d {:.4} Å, A {:.3} Å² ({:.4} × {:.4} Å, {:.2}°), offset {} e/A, {zero}; type {}{polar}; {ends}{by_gaps}",
            plane.spacing,
            plane.area,
            plane.surface_lengths[0],
            plane.surface_lengths[1],
            plane.surface_angle,
            amount_text(&plane.offset),
            plane.stacking_type,
        )?;
        for termination in &plane.terminations {
            writeln!(
                out,
                "  {} on top: {} e per 1×1 = {:+.4} C/m² = {:+.2} µC/cm² = {:+.4} e/nm² = {:+.3e} /cm²",
                termination.top,
                signed(&termination.sigma_e),
                termination.sigma_c_per_m2,
                termination.sigma_c_per_m2 * 100.0,
                termination.sigma_e_per_nm2,
                termination.sigma_e_per_nm2 * 1e14,
            )?;
            for remedy in &termination.remedies {
                writeln!(out, "      {}", remedy.words())?;
            }
        }
        if let Some(tile) = plane.terminations.first() {
            writeln!(out, "  layers upwards from {}:", tile.bottom)?;
            let mut running = 0;
            for layer in &tile.planes {
                running += layer.charge;
                writeln!(
                    out,
                    "    {:>9.4} Å  {:<14} charge {:>+4}   sum {running:>+4}   thickness {:.3} Å",
                    layer.height, layer.content, layer.charge, layer.thickness
                )?;
            }
        }
    }
    Ok(())
}

/// One row for each termination.
#[must_use]
pub fn table(records: &[FacetsRecord]) -> Table {
    let mut table = Table::new(&[
        Column::text("file", "file"),
        Column::text("block", "block"),
        Column::text("formula", "formula"),
        Column::text("miller", "plane"),
        Column::number("spacing_angstrom", "d"),
        Column::number("area_angstrom2", "A"),
        Column::text("offset", "offset"),
        Column::number("stacking_type", "type"),
        Column::text("top", "top"),
        Column::text("bottom", "bottom"),
        Column::number("sigma_e", "e per cell"),
        Column::number("sigma_c_per_m2", "C/m²"),
    ]);
    for record in records {
        for plane in &record.planes {
            for termination in &plane.terminations {
                table.rows.push(vec![
                    record.material.file.clone(),
                    record.material.block.clone(),
                    record.material.formula.clone().unwrap_or_default(),
                    plane.miller.map(|index| index.to_string()).join(" "),
                    format!("{:.6}", plane.spacing),
                    format!("{:.6}", plane.area),
                    amount_text(&plane.offset),
                    plane.stacking_type.to_string(),
                    termination.top.clone(),
                    termination.bottom.clone(),
                    amount_text(&termination.sigma_e),
                    format!("{:.6}", termination.sigma_c_per_m2),
                ]);
            }
        }
    }
    table
}
