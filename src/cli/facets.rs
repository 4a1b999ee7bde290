//! `cosetta facets`.

use super::classify::Format;
use super::common::{self, OutputOptions, StructureOptions};
use super::exit::Exit;
use super::output::{self, Output};
use crate::collection::{Material, Settings};
use crate::diagnostic::Diagnostic;
use crate::facet::{Facet, Stacking, distinct_planes};
use crate::report::facets::{self, FacetsRecord, Parts};
use crate::report::words;
use anyhow::Context;
use clap::Args;
use std::path::PathBuf;

/// Planes of one material: offset, layers, terminations, exact bound charge, what cures it.
///
/// Surveys the symmetry-distinct planes up to an index, or the planes named. Atoms nearer in height than the layer
/// tolerance are one layer; layers decide where a cut is allowed, and every sum keeps each atom's own height.
#[derive(Debug, Args)]
#[command(
    after_help = "Example:\n  cosetta facets structures/laino3-perovskite.cif --block LaInO3_cubic --plane 0,0,1\n\n\
    Exit status: 0 done, 1 the input was refused, 2 usage, 3 input or output failed.\n\
    The bound charge is that of an ideal truncation with formal charges; relaxation and redistribution of electrons are \
    not included. Some surface treatments use hazardous chemicals: follow your local rules."
)]
pub(super) struct Arguments {
    /// File of structures (CIF, POSCAR, OPTIMADE JSON), also packed, or - for standard input
    #[arg(value_name = "FILE")]
    file: PathBuf,
    #[command(flatten)]
    structure: StructureOptions,
    /// A plane, as indices in the axes of the file; may be repeated
    #[arg(long, value_name = "H,K,L", value_parser = common::plane, allow_hyphen_values = true)]
    plane: Vec<[i64; 3]>,
    /// Without --plane: all symmetry-distinct planes up to this index
    #[arg(long, value_name = "N", default_value_t = 1, value_parser = clap::value_parser!(i64).range(1..=9))]
    max_index: i64,
    /// Atoms nearer in height than this are one layer, in Å; heights are those of the parent structure where there is one
    #[arg(long, value_name = "Å", default_value_t = 0.3, value_parser = common::positive)]
    layer_tolerance: f64,
    /// Form of the answer; csv has one row for each termination
    #[arg(long, value_enum, default_value_t = Format::Text, help_heading = "Output")]
    format: Format,
    #[command(flatten)]
    output: OutputOptions,
}

pub(super) fn run(arguments: Arguments) -> anyhow::Result<Exit> {
    let settings = arguments.structure.settings();
    let materials = match common::materials_of(&arguments.file, &settings) {
        Ok(materials) => materials,
        Err(exit) => return Ok(exit),
    };
    let mut output = Output::open(arguments.output.output.as_deref(), std::slice::from_ref(&arguments.file))?;
    let mut exit = Exit::Done;
    let mut records = Vec::new();
    for material in &materials {
        let mut record = FacetsRecord::new(material, &settings, arguments.layer_tolerance);
        if let Err(refusal) =
            survey(material, &arguments.plane, arguments.max_index, arguments.layer_tolerance, &mut record)
        {
            exit = Exit::Refused;
            if !arguments.output.quiet {
                output::talk(&format!("{} {}: {refusal}", material.file, material.block));
            }
        }
        records.push(record);
    }
    let text = match arguments.format {
        Format::Text => describe(&materials, &records, &settings),
        Format::Json => {
            serde_json::to_string_pretty(&records).context("cannot write a record as JSON")? + "\n"
        }
        Format::Jsonl => records
            .iter()
            .map(|record| serde_json::to_string(record).map(|line| line + "\n"))
            .collect::<Result<String, _>>()
            .context("cannot write a record as JSON")?,
        Format::Csv => facets::table(&records).to_csv(true).context("cannot write a row as CSV")?,
    };
    output.write(&text)?;
    output.close()?;
    Ok(exit)
}

fn describe(materials: &[Material], records: &[FacetsRecord], settings: &Settings) -> String {
    let one = |(material, record): (&Material, &FacetsRecord)| {
        let planes = facets::describe(record);
        words::describe_briefly(material, settings) + &planes
    };
    materials.iter().zip(records).map(one).collect::<Vec<_>>().join("\n")
}

fn survey(
    material: &Material,
    named: &[[i64; 3]],
    max_index: i64,
    layer_tolerance: f64,
    record: &mut FacetsRecord,
) -> Result<(), Diagnostic> {
    let work = &material.classification;
    let formal = work.outcome.as_ref().map_err(Clone::clone)?;
    let (Some(crystal), Some(primitive), Some(charges)) =
        (&work.crystal, &work.primitive, work.primitive_charges())
    else {
        return Ok(());
    };
    let elements = primitive.representatives.iter().map(|&site| crystal.sites[site].element);
    let parts = Parts { primitive, ions: elements.zip(charges.iter().copied()).collect() };
    let ideal = work.parent.as_ref().map(|found| found.parent.ideal.as_slice());
    let planes = if named.is_empty() { distinct_planes(primitive, max_index) } else { named.to_vec() };
    for miller in planes {
        let facet = Facet::new(primitive, miller)?;
        let stacking = Stacking::new(&facet, primitive, &charges, formal, ideal, layer_tolerance)?;
        record.planes.push(parts.plane(&facet, &stacking));
    }
    Ok(())
}
