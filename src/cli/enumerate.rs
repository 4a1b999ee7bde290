//! `cosetta enumerate`.

use super::classify::Format;
use super::common::{self, OutputOptions, StructureOptions};
use super::exit::Exit;
use super::output::{self, Output};
use crate::collection::{Material, Settings};
use crate::diagnostic::Diagnostic;
use crate::polarization::{Choices, Component, FormalPolarization, Sweep};
use crate::report::record::{EnumerationRecord, FreeCountRecord, FreeRecord, MaterialRecord, SweepRecord};
use crate::report::table::{Column, Table};
use crate::report::words;
use anyhow::Context;
use clap::{Args, ValueEnum};
use std::path::PathBuf;

/// List the basis choices of one material and the polarization values they reach.
///
/// Sweep: a window of the shape of the primitive cell is moved through the crystal; a new basis appears whenever a
/// plane of atoms crosses its faces. Free: each ion is taken from any cell within the window around its own; these
/// choices are counted exactly, not listed.
#[derive(Debug, Args)]
#[command(after_help = "Example:\n  cosetta enumerate structures/mgal2o4-spinel.cif --choices sweep\n\n\
    Exit status: 0 done, 1 the input was refused, 2 usage, 3 input or output failed.")]
pub(super) struct Arguments {
    /// File of structures (CIF, POSCAR, OPTIMADE JSON), also packed, or - for standard input
    #[arg(value_name = "FILE")]
    file: PathBuf,
    #[command(flatten)]
    structure: StructureOptions,
    /// Which family of choices
    #[arg(long, value_enum, default_value_t = Family::Both)]
    choices: Family,
    /// Free choices: cells within this distance of an ion's own
    #[arg(long, value_name = "W", default_value_t = 1, value_parser = clap::value_parser!(u32).range(1..=50))]
    window: u32,
    /// Form of the answer; csv lists the planes of the sweep
    #[arg(long, value_enum, default_value_t = Format::Text, help_heading = "Output")]
    format: Format,
    #[command(flatten)]
    output: OutputOptions,
}

/// Families of basis choices.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Family {
    /// A window moved through the crystal
    Sweep,
    /// Each ion from any cell around its own
    Free,
    /// Both
    Both,
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
        let (record, refusal) = enumerate(material, &settings, arguments.choices, arguments.window);
        if let Some(refusal) = refusal {
            exit = Exit::Refused;
            if !arguments.output.quiet {
                output::talk(&format!("{} {}: {refusal}", material.file, material.block));
            }
        }
        records.push(record);
    }
    let text = match arguments.format {
        Format::Text => materials
            .iter()
            .zip(&records)
            .map(|(material, record)| {
                words::describe(material, &settings, None) + &words::describe_choices(record)
            })
            .collect::<Vec<_>>()
            .join("\n"),
        Format::Json => {
            serde_json::to_string_pretty(&records).context("cannot write a record as JSON")? + "\n"
        }
        Format::Jsonl => records
            .iter()
            .map(|record| serde_json::to_string(record).map(|line| line + "\n"))
            .collect::<Result<String, _>>()
            .context("cannot write a record as JSON")?,
        Format::Csv => sweep_table(&records).to_csv(true).context("cannot write a row as CSV")?,
    };
    output.write(&text)?;
    output.close()?;
    Ok(exit)
}

fn enumerate(
    material: &Material,
    settings: &Settings,
    family: Family,
    window: u32,
) -> (EnumerationRecord, Option<Diagnostic>) {
    let mut record = EnumerationRecord {
        material: MaterialRecord::new(material, settings),
        sweep: Vec::new(),
        free: None,
    };
    let work = &material.classification;
    let formal = match &work.outcome {
        Ok(formal) => formal,
        Err(refusal) => return (record, Some(refusal.clone())),
    };
    let (Some(crystal), Some(primitive), Some(charges)) =
        (&work.crystal, &work.primitive, work.primitive_charges())
    else {
        return (record, None);
    };
    let labels: Vec<String> =
        primitive.representatives.iter().map(|&site| crystal.sites[site].label.clone()).collect();
    if family != Family::Free {
        for axis in 0..3 {
            match Sweep::along(axis, primitive, &charges, formal, settings.symmetry_tolerance) {
                Ok(sweep) => record.sweep.push(SweepRecord::new(&sweep, &labels)),
                Err(refusal) => return (record, Some(refusal)),
            }
        }
    }
    if family != Family::Sweep {
        match Choices::count(&charges, window) {
            Ok(choices) => record.free = Some(free_record(&choices, formal)),
            Err(refusal) => return (record, Some(refusal)),
        }
    }
    (record, None)
}

fn free_record(choices: &Choices, formal: &FormalPolarization) -> FreeRecord {
    // A change that takes the polarization to zero exists where every component is a whole number.
    let to_zero = formal.polarization.map(|component| match component {
        Component::Exact(ratio) if ratio.is_integer() => i64::try_from(-ratio.numerator()).ok(),
        _ => None,
    });
    let choices_at_zero = if formal.permitted.is_polar() {
        None
    } else {
        let ways = match to_zero {
            [Some(x), Some(y), Some(z)] => choices.ways([x, y, z]).to_string(),
            _ => "0".to_owned(),
        };
        Some(ways)
    };
    FreeRecord {
        window: choices.window,
        choices: choices.total.to_string(),
        values_per_axis: choices.counts.len(),
        counts: choices
            .counts
            .iter()
            .map(|(&change, ways)| FreeCountRecord { change, choices: ways.to_string() })
            .collect(),
        choices_at_zero,
    }
}

fn sweep_table(records: &[EnumerationRecord]) -> Table {
    let mut table = Table::new(&[
        Column::text("file", "file"),
        Column::text("block", "block"),
        Column::text("axis", "axis"),
        Column::number("coordinate", "coordinate"),
        Column::text("sites", "sites"),
        Column::number("charge", "charge"),
        Column::number("polarization", "p"),
    ]);
    for record in records {
        for sweep in &record.sweep {
            for plane in &sweep.planes {
                table.rows.push(vec![
                    record.material.file.clone(),
                    record.material.block.clone(),
                    sweep.axis.clone(),
                    format!("{:.6}", plane.coordinate),
                    plane.sites.join(" "),
                    plane.charge.to_string(),
                    match &plane.polarization {
                        crate::report::record::OffsetComponent::Exact(text) => text.clone(),
                        crate::report::record::OffsetComponent::Free(value) => format!("{value:.6}"),
                    },
                ]);
            }
        }
    }
    table
}
