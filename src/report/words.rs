//! One material in words.

use super::ladder::ladder;
use super::reasoning;
use super::record::{EnumerationRecord, centre_position, primitive_vectors};
use crate::charge::charges_text;
use crate::collection::{Material, ParentLevel, Settings};
use crate::polarization::{C_PER_M2, Component, Coset, FormalPolarization, Label, Modulus};
use crate::symmetry::{Centring, Primitive};
use std::fmt::Write;

/// The sentence that goes under every answer.
pub const INSULATOR: &str =
    "An insulator is assumed: formal charges do not show whether there is a band gap.";

/// Everything that was found about one material. `plane` is the direction of the number ladder, in the axes of the
/// file; without it the first of (001), (100), (010), (110), (111) on which zero is missing, else (001).
#[must_use]
pub fn describe(material: &Material, settings: &Settings, plane: Option<[i64; 3]>) -> String {
    let mut text = String::new();
    // Writing to a String cannot fail.
    let _ = write_description(&mut text, material, settings, plane);
    text
}

/// Formula, file, group, charges, offset and label, one line each; a refusal with its reason.
#[must_use]
pub fn describe_briefly(material: &Material, settings: &Settings) -> String {
    let full = describe(material, settings, None);
    let kept = [
        "  space group",
        "  primitive cell",
        "  formal charges",
        "  refused",
        "  where",
        "  hint",
        "  offset",
        "  label",
        "  parent label",
        "                     averaged",
    ];
    let mut lines = full.lines();
    let mut brief: String = lines.next().map(|line| line.to_owned() + "\n").unwrap_or_default();
    brief.extend(
        lines.filter(|line| kept.iter().any(|start| line.starts_with(start))).flat_map(|line| [line, "\n"]),
    );
    brief + "  " + INSULATOR + "\n"
}

fn write_description(
    out: &mut String,
    material: &Material,
    settings: &Settings,
    plane: Option<[i64; 3]>,
) -> std::fmt::Result {
    let work = &material.classification;
    let formula = work.formula().map_or_else(|| "?".to_owned(), |formula| formula.to_string());
    let block =
        if material.block.is_empty() { String::new() } else { format!(" (block {})", material.block) };
    writeln!(out, "{formula}   {}{block}", material.file)?;
    if let Some(symmetry) = &work.symmetry {
        writeln!(
            out,
            "  space group        {} {}, Hall {} ({} at {} Å)",
            symmetry.number,
            symmetry.symbol,
            symmetry.hall,
            settings.engine,
            short(symmetry.tolerance)
        )?;
    }
    if let Some(primitive) = &work.primitive {
        write_cell(out, primitive)?;
        write_centres(out, material)?;
    }
    if let (Some(assignment), Some(crystal)) = (&work.assignment, &work.crystal) {
        writeln!(
            out,
            "  formal charges     {}   ({})",
            charges_text(&crystal.sites, &assignment.charges),
            assignment.source.describe()
        )?;
    }
    write_certainty(out, material, settings)?;
    for diagnostic in &work.diagnostics {
        writeln!(
            out,
            "  {:<18} {}: {}",
            diagnostic.severity.to_string(),
            diagnostic.code,
            diagnostic.message
        )?;
    }
    match &work.outcome {
        Ok(formal) => write_answer(out, work.primitive.as_ref(), work.parent.as_ref(), formal, plane)?,
        Err(refusal) => {
            writeln!(out, "  refused            {}: {}", refusal.code, refusal.message)?;
            if let Some(span) = refusal.span {
                writeln!(out, "  where              line {}, column {}", span.line, span.column)?;
            }
            if let Some(hint) = &refusal.hint {
                writeln!(out, "  hint               {hint}")?;
            }
            write_candidates(out, material)?;
        }
    }
    Ok(())
}

/// How sure the charges are, and whether they matter.
fn write_certainty(out: &mut String, material: &Material, settings: &Settings) -> std::fmt::Result {
    let work = &material.classification;
    let Some(reasoning) = work.assignment.as_ref().and_then(|assignment| assignment.reasoning.as_ref())
    else {
        return Ok(());
    };
    let bonds = reasoning::bonds_of(material, settings.parameters());
    let index = bonds.map_or_else(String::new, |bonds| {
        format!(", global instability index {:.2}", bonds.global_instability)
    });
    writeln!(out, "  how sure           probability {:.3}{index}", reasoning.probability)?;
    if work.outcome.is_ok() {
        writeln!(out, "                     {}", reasoning::verdict(&work.alternatives))?;
    }
    Ok(())
}

/// The charges that came into question, ready to be typed.
fn write_candidates(out: &mut String, material: &Material) -> std::fmt::Result {
    const SHOWN: usize = 4;
    let work = &material.classification;
    let Some(crystal) = &work.crystal else { return Ok(()) };
    let likely = work.candidates.iter().filter(|candidate| candidate.probability >= 0.001);
    for (rank, candidate) in likely.take(SHOWN).enumerate() {
        let title = if rank == 0 { "candidates" } else { "" };
        let text = charges_text(&crystal.sites, &candidate.charges);
        writeln!(out, "  {title:<18} --charges '{text}'   probability {:.3}", candidate.probability)?;
    }
    Ok(())
}

fn write_cell(out: &mut String, primitive: &Primitive) -> std::fmt::Result {
    let atoms = primitive.positions.len();
    let volume = primitive.lattice.volume();
    write!(out, "  primitive cell     {atoms} atoms, {volume:.3} Å³; ")?;
    if primitive.centring == Centring::P {
        writeln!(out, "vectors a1 a2 a3 are those of the file")
    } else {
        let vectors = primitive_vectors(primitive).map(|vector| format!("({})", vector.join(",")));
        writeln!(out, "file cell {}, vectors a1 a2 a3 = {}", primitive.centring, vectors.join(" "))
    }
}

fn write_centres(out: &mut String, material: &Material) -> std::fmt::Result {
    let work = &material.classification;
    let (Some(crystal), Some(primitive)) = (&work.crystal, &work.primitive) else { return Ok(()) };
    let Some(centres) = &work.centres else {
        return writeln!(out, "  inversion centres  none");
    };
    let mut first = true;
    for (index, centre) in centres.classes.iter().enumerate() {
        let title = if first { "inversion centres" } else { "" };
        first = false;
        let position = centre_position(primitive, centre.position).map(short);
        let mut labels: Vec<&str> = centre
            .atoms
            .iter()
            .map(|&atom| crystal.sites[primitive.representatives[atom]].label.as_str())
            .collect();
        labels.sort_unstable();
        let ions = if labels.is_empty() { "no ion".to_owned() } else { labels.join(" ") };
        let origin = if index == centres.chosen { "   origin of the centrosymmetric setting" } else { "" };
        writeln!(out, "  {title:<18} ({}): {ions}{origin}", position.join(", "))?;
    }
    Ok(())
}

fn write_answer(
    out: &mut String,
    primitive: Option<&Primitive>,
    parent: Option<&ParentLevel>,
    formal: &FormalPolarization,
    plane: Option<[i64; 3]>,
) -> std::fmt::Result {
    writeln!(
        out,
        "  offset             {}   in e a_i / V along a1 a2 a3, modulo 1",
        offset_text(formal.electron())
    )?;
    for coset in &formal.cosets {
        let zero = if coset.contains_zero { "contains zero" } else { "does not contain zero" };
        let unit = match coset.modulus {
            Modulus::Electron => "one electron at a time".to_owned(),
            Modulus::Pair if coset.value == 1 => "an odd charge: as single electrons".to_owned(),
            Modulus::Pair => "electrons in pairs".to_owned(),
            Modulus::Ion if coset.value == 1 => "whole ions: as single electrons".to_owned(),
            Modulus::Ion => "whole ions".to_owned(),
        };
        let times = if coset.value == 1 { String::new() } else { format!(" × {} e", coset.value) };
        writeln!(
            out,
            "    {:<16} {zero}: offset {}{times} ({unit})",
            coset.modulus.to_string(),
            offset_text(coset)
        )?;
    }
    write_units(out, formal)?;
    let next = if formal.runner_up.is_finite() {
        format!("next permitted value {:.3} e·Å away", formal.runner_up)
    } else {
        "every value is permitted".to_owned()
    };
    writeln!(
        out,
        "  residual           {:.2e} e·Å, limit {:.2e} e·Å, {next}",
        formal.residual, formal.residual_limit
    )?;
    writeln!(out, "  permitted offsets  {}", permitted_text(formal))?;
    if let Some(primitive) = primitive {
        write_ladder(out, primitive, formal, plane)?;
    }
    writeln!(out, "  label              {}", formal.label)?;
    if let Some(found) = parent {
        let cell =
            found.primitive.lattice.parameters().lengths.map(|length| format!("{length:.3}")).join(" × ");
        writeln!(
            out,
            "  parent label       {}: offset {} in the parent cell of {cell} Å ({} of them make the primitive cell)",
            found.formal.label,
            offset_text(found.formal.electron()),
            found.parent.cells
        )?;
        writeln!(
            out,
            "                     averaged structure {} {}; displacements up to {:.3} Å, r.m.s. {:.3} Å",
            found.symmetry.number,
            found.symmetry.symbol,
            found.parent.max_displacement,
            found.parent.rms_displacement
        )?;
    }
    write_wrapped(out, &sentence(formal))?;
    writeln!(out, "  {INSULATOR}")
}

/// The offset and the quantum in other units, one row for each primitive vector.
fn write_units(out: &mut String, formal: &FormalPolarization) -> std::fmt::Result {
    writeln!(
        out,
        "  {:<18} {:>13} {:>9} {:>9} {:>13} {:>9} {:>9}",
        "polarization", "C/m²", "µC/cm²", "e/nm²", "modulo C/m²", "µC/cm²", "e/nm²"
    )?;
    // Of the values that symmetry leaves free the one nearest to zero is shown.
    let offset = formal.electron().offset.map(|component| match component {
        Component::Free(value) => value - value.round(),
        Component::Exact(_) => component.value(),
    });
    for (axis, quantum) in formal.quanta().into_iter().enumerate() {
        let units = |value: f64| (value * C_PER_M2, value * C_PER_M2 * 100.0, value * 100.0);
        let (value, value_uc, value_e) = units(quantum * offset[axis]);
        let (whole, whole_uc, whole_e) = units(quantum);
        writeln!(
            out,
            "  {:<18} a{} {value:>10.4} {value_uc:>9.2} {value_e:>9.4} {whole:>13.4} {whole_uc:>9.2} {whole_e:>9.4}",
            "",
            axis + 1
        )?;
    }
    Ok(())
}

fn write_ladder(
    out: &mut String,
    primitive: &Primitive,
    formal: &FormalPolarization,
    plane: Option<[i64; 3]>,
) -> std::fmt::Result {
    const USUAL: [[i64; 3]; 5] = [[0, 0, 1], [1, 0, 0], [0, 1, 0], [1, 1, 0], [1, 1, 1]];
    let along = |miller: [i64; 3]| {
        let reduced = primitive.plane(miller)?;
        formal.along(reduced).ok().map(|component| (miller, reduced, component))
    };
    let chosen = match plane {
        Some(miller) => along(miller),
        None => USUAL
            .into_iter()
            .filter_map(along)
            .find(|(_, _, component)| component.value().abs() > 1e-9)
            .or_else(|| along(USUAL[0])),
    };
    let Some((miller, reduced, component)) = chosen else { return Ok(()) };
    let normal = primitive.lattice.inverse().transpose() * nalgebra::Vector3::from(reduced).cast::<f64>();
    let quantum = normal.norm() / primitive.lattice.volume() / normal.norm_squared();
    let indices = miller.map(|index| index.to_string()).join(" ");
    writeln!(
        out,
        "  {:<18} {}   in quanta e/A = {:.4} C/m²",
        format!("across ({indices})"),
        ladder(component.value()),
        quantum * C_PER_M2
    )
}

/// A sentence in lines of at most 96 characters.
fn write_wrapped(out: &mut String, sentence: &str) -> std::fmt::Result {
    const WIDTH: usize = 96;
    let mut line = String::new();
    for word in sentence.split(' ') {
        if !line.is_empty() && line.chars().count() + 1 + word.chars().count() > WIDTH {
            writeln!(out, "  {line}")?;
            line.clear();
        }
        if !line.is_empty() {
            line.push(' ');
        }
        line.push_str(word);
    }
    writeln!(out, "  {line}")
}

/// The conclusion in one sentence.
fn sentence(formal: &FormalPolarization) -> String {
    let pair = formal.pair();
    match formal.label {
        Label::ContainsZero if pair.value == 2 && !pair.contains_zero => {
            "Zero is among the values for single electrons but not for pairs: a plane can be polar by a whole electron \
             per cell."
                .to_owned()
        }
        Label::ContainsZero => {
            "Zero is among the values: whole electrons can remove any charge of this cell's surfaces.".to_owned()
        }
        Label::HalfQuantum => {
            "Zero is not among the values: planes across which the offset is ½ carry half an electron per primitive \
             surface cell that whole electrons cannot remove."
                .to_owned()
        }
        Label::Rational => {
            "Zero is not among the values: symmetry fixes a fraction other than ½ of the quantum.".to_owned()
        }
        Label::Polar => {
            "The crystal is polar: along the free direction the value depends on the positions.".to_owned()
        }
        Label::Undefined => "No value is defined.".to_owned(),
    }
}

/// `(1/2, 1/2, 1/2)`.
#[must_use]
pub fn offset_text(coset: &Coset) -> String {
    format!("({})", coset.offset.map(|component| component.to_string()).join(", "))
}

/// The permitted offsets, and the free directions.
#[must_use]
pub fn permitted_text(formal: &FormalPolarization) -> String {
    let offsets: Vec<String> = formal
        .permitted
        .offsets()
        .iter()
        .map(|offset| format!("({})", offset.map(|ratio| ratio.to_string()).join(",")))
        .collect();
    let free: Vec<String> = formal
        .permitted
        .free()
        .iter()
        .map(|direction| format!("({})", direction.map(|entry| entry.to_string()).join(",")))
        .collect();
    if free.is_empty() {
        offsets.join(" ")
    } else {
        format!("{} plus any multiple of {}", offsets.join(" "), free.join(" and "))
    }
}

/// A number without trailing zeros.
fn short(value: f64) -> String {
    let text = format!("{value:.6}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// The basis choices in words.
#[must_use]
pub fn describe_choices(record: &EnumerationRecord) -> String {
    let mut text = String::new();
    let _ = write_choices(&mut text, record);
    text
}

fn write_choices(out: &mut String, record: &EnumerationRecord) -> std::fmt::Result {
    use super::record::OffsetComponent;
    let show = |component: &OffsetComponent| match component {
        OffsetComponent::Exact(text) => text.clone(),
        OffsetComponent::Free(value) => format!("{value:.4}"),
    };
    if !record.sweep.is_empty() {
        let bases: Vec<usize> = record.sweep.iter().map(|sweep| sweep.planes.len()).collect();
        writeln!(
            out,
            "\nSweep: a window of the primitive cell moved through the crystal passes {} bases ({}).",
            bases.iter().product::<usize>(),
            bases.iter().map(ToString::to_string).collect::<Vec<_>>().join(" × ")
        )?;
        for sweep in &record.sweep {
            writeln!(out, "  along {}, window starting below the plane:", sweep.axis)?;
            for plane in &sweep.planes {
                writeln!(
                    out,
                    "    {:>8.5}  charge {:>+4}  p = {:>8}   {}",
                    plane.coordinate,
                    plane.charge,
                    show(&plane.polarization),
                    plane.sites.join(" ")
                )?;
            }
        }
    }
    if let Some(free) = &record.free {
        writeln!(
            out,
            "\nFree: each ion from any of the {} cells around its own makes {} bases.",
            (2 * u64::from(free.window) + 1).pow(3),
            free.choices
        )?;
        writeln!(out, "  along one axis they change p by {} different amounts:", free.values_per_axis)?;
        writeln!(out, "    {:>8}  choices along one axis", "change")?;
        let shown = 9;
        let middle = free.counts.len() / 2;
        let start = middle.saturating_sub(shown / 2);
        if start > 0 {
            writeln!(out, "    {:>8}", "...")?;
        }
        for count in free.counts.iter().skip(start).take(shown) {
            writeln!(out, "    {:>+8}  {}", count.change, count.choices)?;
        }
        if start + shown < free.counts.len() {
            writeln!(out, "    {:>8}  (all with --format json)", "...")?;
        }
        if let Some(zero) = &free.choices_at_zero {
            writeln!(out, "  {zero} of the choices have zero polarization.")?;
        }
    }
    Ok(())
}
