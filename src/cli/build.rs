//! `cosetta build`.

use super::common::{OutputOptions, StructureOptions};
use super::exit::Exit;
use super::output::{self, Output};
use crate::cif::{BlockReading, CifText};
use crate::collection::{
    Axes, Classification, Contents, Input, Material, Recast, Settings, classify_bytes, difference, recast,
};
use crate::diagnostic::{Code, Diagnostic, Severity};
use crate::report::setting::{Provenance, Sheet, provenance, write_block};
use clap::{Args, Subcommand, ValueEnum};
use std::collections::BTreeSet;
use std::path::PathBuf;

/// Write structures as CIF.
#[derive(Debug, Args)]
#[command(disable_help_subcommand = true)]
pub(super) struct Arguments {
    #[command(subcommand)]
    work: Work,
}

#[derive(Debug, Subcommand)]
enum Work {
    /// The same crystal with its origin on a centre of inversion, in the axes you choose
    Setting(SettingArguments),
}

/// The same crystal with its origin on a centre of inversion, in the axes you choose.
///
/// Cell, symmetry operations, sites with charges, what the source says about its origin, and the label and offset under
/// the prefix `_cosetta_`. The origin of the file stays where it is a centre of inversion; otherwise it moves to a centre that
/// makes a setting of the International Tables, the one of the highest site symmetry and the nearest among equals. A crystal
/// without centres keeps its origin. Where the atoms have
/// more symmetry than the file states, they are averaged over it. What was written is read back and classified again, and
/// refused if anything differs. Displacement parameters, magnetic moments and bonds are not carried over.
#[derive(Debug, Args)]
#[command(
    after_help = "Example:\n  cosetta build setting structures/mgal2o4-spinel.cif --axes primitive -o spinel.cif\n\n\
    Exit status: 0 done, 1 a structure could not be written, 2 usage, 3 input or output failed.\n\
    A structure that is refused a label, because of shared sites for example, is written without results."
)]
struct SettingArguments {
    /// File of structures (CIF, POSCAR, OPTIMADE JSON), also compressed, or - for standard input
    #[arg(value_name = "FILE")]
    file: PathBuf,
    /// Axes of the structure that is written
    #[arg(long, value_enum, default_value_t = AxesName::File)]
    axes: AxesName,
    /// List every atom of the cell, in P 1, in place of the asymmetric unit and its operations
    #[arg(long)]
    expanded: bool,
    #[command(flatten)]
    structure: StructureOptions,
    #[command(flatten)]
    output: OutputOptions,
}

/// Axes of the structure that is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum AxesName {
    /// Those of the file
    File,
    /// Those of the standard setting of the space group
    Standard,
    /// Those of the primitive cell
    Primitive,
}

impl From<AxesName> for Axes {
    fn from(name: AxesName) -> Self {
        match name {
            AxesName::File => Self::File,
            AxesName::Standard => Self::Standard,
            AxesName::Primitive => Self::Primitive,
        }
    }
}

pub(super) fn run(arguments: Arguments) -> anyhow::Result<Exit> {
    match arguments.work {
        Work::Setting(arguments) => setting(arguments),
    }
}

fn setting(arguments: SettingArguments) -> anyhow::Result<Exit> {
    let settings = Settings { parent_tolerance: None, ..arguments.structure.settings() };
    let input =
        if arguments.file.as_os_str() == "-" { Input::Stdin } else { Input::File(arguments.file.clone()) };
    let name = input.name();
    let bytes = match input.read() {
        Ok(bytes) => bytes,
        Err(refusal) => {
            output::talk(&format!("{name}: {refusal}"));
            return Ok(if refusal.code == Code::FileUnreadable { Exit::Fault } else { Exit::Refused });
        }
    };
    let mut job = Job {
        settings: &settings,
        axes: arguments.axes.into(),
        is_expanded: arguments.expanded,
        text: CifText::new(),
        names: BTreeSet::new(),
        written: 0,
    };
    let mut exit = Exit::Done;
    let found = match sources(&name, &bytes, &settings) {
        Ok(found) => found,
        Err(refused) => {
            if let Err(refusal) = &refused.classification.outcome {
                output::talk(&format!("{name}: {refusal}"));
            }
            return Ok(Exit::Refused);
        }
    };
    for source in found {
        let (noticed, outcome) = job.add(&source);
        let shown = noticed.iter().filter(|found| {
            let least = if arguments.output.quiet { Severity::Error } else { Severity::Note };
            found.severity >= least
        });
        let of_source =
            source.material.classification.diagnostics.iter().filter(|_| arguments.output.verbose);
        for diagnostic in of_source.chain(shown).chain(outcome.as_ref().err()) {
            output::talk(&format!("{name} {}: {diagnostic}", source.material.block));
        }
        if outcome.is_err() {
            exit = Exit::Refused;
        }
    }
    if job.written > 0 {
        let mut output =
            Output::open(arguments.output.output.as_deref(), std::slice::from_ref(&arguments.file))?;
        output.write(&job.text.finish())?;
        output.close()?;
    }
    Ok(exit)
}

/// A structure of the file, with all that is known of it.
struct Source {
    material: Material,
    reading: BlockReading,
    provenance: Provenance,
}

/// The structures of a file, in its order; or the one refusal of a file without any.
fn sources(name: &str, bytes: &[u8], settings: &Settings) -> Result<Vec<Source>, Box<Material>> {
    let contents = Contents::open(name, bytes, settings)?;
    let mut provenance = if contents.is_cif() { provenance(bytes) } else { Vec::new() };
    let mut source = |number| Source {
        material: contents.classify(number, settings),
        reading: contents.reading(number),
        provenance: provenance.get_mut(contents.part(number)).map(std::mem::take).unwrap_or_default(),
    };
    Ok((0..contents.len()).map(&mut source).collect())
}

/// What is being written.
struct Job<'a> {
    settings: &'a Settings,
    axes: Axes,
    is_expanded: bool,
    text: CifText,
    names: BTreeSet<String>,
    written: usize,
}

impl Job<'_> {
    /// Writes one structure. Returns what was noticed, and why nothing was written if so.
    fn add(&mut self, source: &Source) -> (Vec<Diagnostic>, Result<(), Diagnostic>) {
        let work = &source.material.classification;
        let reading = &source.reading;
        let made = match recast(reading, work, self.settings, self.axes, self.is_expanded) {
            Ok(made) => made,
            Err(refusal) => return (Vec::new(), Err(reading.locate(refusal))),
        };
        let mut noticed = made.diagnostics.clone();
        if let Err(refusal) = &work.outcome {
            let message = format!("it is written without results: {} ({})", refusal.message, refusal.code);
            noticed.push(Diagnostic::note(Code::BuildWithoutResult, message));
        }
        match self.write(source, reading, &made) {
            Ok(dropped) => {
                noticed.extend(dropped);
                (noticed, Ok(()))
            }
            Err(refusal) => (noticed, Err(refusal)),
        }
    }

    fn write(
        &mut self,
        source: &Source,
        reading: &BlockReading,
        made: &Recast,
    ) -> Result<Vec<Diagnostic>, Diagnostic> {
        let sheet = Sheet {
            file: &source.material.file,
            block: &source.material.block,
            recast: made,
            source: &source.material.classification,
            formula_units: reading.formula_units,
            settings: self.settings,
            provenance: &source.provenance,
        };
        let unfaithful = |why: String| {
            Diagnostic::error(
                Code::BuildNotFaithful,
                format!("what was written is not read back as the same crystal: {why}"),
            )
        };
        let mut trial = CifText::new();
        write_block(&mut trial, "trial", &sheet, None).map_err(|why| unfaithful(why.to_string()))?;
        let again = classify_again(&trial.finish(), self.settings);
        if let Some(why) = difference(sheet.source, &again, made) {
            return Err(unfaithful(why));
        }
        let name = self.block_name(&source.material.block);
        let dropped = write_block(&mut self.text, &name, &sheet, Some(&again));
        self.written += 1;
        dropped.map_err(|why| unfaithful(why.to_string()))
    }

    /// The name of the source's block, without characters that cannot stand there, and not used before.
    fn block_name(&mut self, name: &str) -> String {
        let plain: String =
            name.chars().map(|c| if c.is_ascii_graphic() { c } else { '_' }).take(70).collect();
        let plain = if plain.is_empty() { "structure".to_owned() } else { plain };
        let numbered = (2..).map(|n| format!("{plain}_{n}"));
        let free =
            std::iter::once(plain.clone()).chain(numbered).find(|n| !self.names.contains(&n.to_lowercase()));
        let name = free.unwrap_or(plain);
        self.names.insert(name.to_lowercase());
        name
    }
}

/// Reads back what was written.
fn classify_again(text: &str, settings: &Settings) -> Classification {
    let settings = Settings { charges: None, block: None, ..settings.clone() };
    let materials = classify_bytes("", text.as_bytes(), &settings);
    match materials.into_iter().next() {
        Some(material) => material.classification,
        None => Classification::refused(Diagnostic::error(Code::FileEmpty, "nothing was read back")),
    }
}
