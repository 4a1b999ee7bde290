//! `cosetta classify`.

use super::common::{self, OutputOptions, StructureOptions};
use super::exit::Exit;
use super::output::{self, Output};
use crate::collection::{Contents, Material, Member, Settings, classify_member, find_inputs};
use crate::diagnostic::Code;
use crate::report::record::MaterialRecord;
use crate::report::table::Table;
use crate::report::{materials, reasoning, words};
use anyhow::Context;
use clap::{Args, ValueEnum};
use indicatif::{ProgressBar, ProgressDrawTarget, ProgressStyle};
use rayon::prelude::*;
use std::collections::BTreeMap;
use std::io::IsTerminal;
use std::path::PathBuf;

/// Files and members that are worked on together before their results are written.
const CHUNK: usize = 256;
/// Unpacked members are worked on together up to this many bytes.
const CHUNK_BYTES: usize = 64 << 20;
/// The structures of a file from this many bytes up are worked on together and written as they come.
const LARGE: u64 = 1 << 20;

/// Label each material: its polarization lattice, and whether it contains zero.
///
/// Reads CIF files, POSCAR files, OPTIMADE JSON, each also compressed with gzip; zip and tar archives of them; folders
/// (at any depth) and standard input. A file that cannot be answered is refused with a code and a reason and never
/// stops the run. With one structure the answer is in words; with several there is one
/// row for each.
#[derive(Debug, Args)]
#[command(after_help = "Example:\n  cosetta classify structures/ktao3-perovskite.cif --plane 0,0,1\n\n\
    Exit status: 0 done, 1 some input was refused, 2 usage, 3 input or output failed.\n\
    Formal polarization is defined for insulators; a CIF does not show whether there is a band gap.")]
pub(super) struct Arguments {
    /// Files of structures (CIF, POSCAR, OPTIMADE JSON), also packed; folders; or - for standard input
    #[arg(required = true, value_name = "PATH")]
    paths: Vec<PathBuf>,
    #[command(flatten)]
    structure: StructureOptions,
    /// Direction of the number ladder, as indices in the axes of the file
    #[arg(long, value_name = "H,K,L", value_parser = common::plane, allow_hyphen_values = true)]
    plane: Option<[i64; 3]>,
    /// Describe every material in words, also when there are several
    #[arg(long)]
    details: bool,
    /// Show why the charges are what they are: bonds, bond-valence sums and probabilities of every site
    #[arg(long)]
    explain: bool,
    /// Form of the answer
    #[arg(long, value_enum, default_value_t = Format::Text, help_heading = "Output")]
    format: Format,
    /// Worker threads; as many as processors without it
    #[arg(short, long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    jobs: Option<u16>,
    #[command(flatten)]
    output: OutputOptions,
}

/// Form of the answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(super) enum Format {
    /// For people
    Text,
    /// One JSON array
    Json,
    /// One JSON object per line
    Jsonl,
    /// Comma-separated values with a heading
    Csv,
}

pub(super) fn run(arguments: Arguments) -> anyhow::Result<Exit> {
    let settings = arguments.structure.settings();
    let inputs = find_inputs(&arguments.paths);
    let jobs = arguments.jobs.map_or(0, usize::from);
    let pool =
        rayon::ThreadPoolBuilder::new().num_threads(jobs).build().context("cannot start worker threads")?;
    let sink = Sink {
        output: Output::open(arguments.output.output.as_deref(), &arguments.paths)?,
        format: arguments.format,
        details: arguments.details || arguments.explain,
        explain: arguments.explain,
        plane: arguments.plane,
        settings: &settings,
        table: materials::table(arguments.format == Format::Csv),
        kept: None,
        written: 0,
    };
    let mut run = Run {
        progress: progress_bar(inputs.len(), arguments.output.quiet),
        pool: (jobs != 1).then_some(pool),
        is_verbose: arguments.output.verbose,
        tally: Tally::default(),
        chunk: Vec::new(),
        held: 0,
        sink,
    };
    for input in &inputs {
        let mut members = 0_u64;
        input.visit(settings.max_unpacked, &mut |member| {
            // How many members an archive holds is not known before.
            run.progress.inc_length(members.min(1));
            members += 1;
            run.take(member)
        })?;
    }
    run.flush()?;
    run.progress.finish_and_clear();
    run.sink.finish()?;
    if !arguments.output.quiet && run.tally.materials > 1 {
        output::talk(&run.tally.to_string());
    }
    Ok(run.tally.exit())
}

/// Collects members and classifies them together, in order.
struct Run<'a> {
    progress: ProgressBar,
    /// Worker threads, unless one is enough.
    pool: Option<rayon::ThreadPool>,
    is_verbose: bool,
    tally: Tally,
    chunk: Vec<Member>,
    held: usize,
    sink: Sink<'a>,
}

impl Run<'_> {
    fn take(&mut self, member: Member) -> anyhow::Result<()> {
        if member.length() >= LARGE {
            self.flush()?;
            self.take_large(member)?;
            self.progress.inc(1);
            return Ok(());
        }
        self.held += member.held();
        self.chunk.push(member);
        if self.chunk.len() >= CHUNK || self.held >= CHUNK_BYTES { self.flush() } else { Ok(()) }
    }

    fn flush(&mut self) -> anyhow::Result<()> {
        self.held = 0;
        let chunk = std::mem::take(&mut self.chunk);
        let (progress, settings) = (&self.progress, self.sink.settings);
        let one = |member: Member| {
            let materials = classify_member(member, settings);
            progress.inc(1);
            materials
        };
        // A pool of one thread would only hand the work over and wait.
        let results: Vec<Vec<Material>> = match &self.pool {
            Some(pool) if chunk.len() > 1 => pool.install(|| chunk.into_par_iter().map(one).collect()),
            _ => chunk.into_iter().map(one).collect(),
        };
        results.into_iter().flatten().try_for_each(|material| self.tell(material))
    }

    /// Classifies the structures of one file in parallel.
    fn take_large(&mut self, member: Member) -> anyhow::Result<()> {
        let name = member.name.clone();
        let bytes = match member.read() {
            Ok(bytes) => bytes,
            Err(refusal) => return self.tell(Material::refused(&name, refusal)),
        };
        let settings = self.sink.settings;
        let contents = match Contents::open(&name, &bytes, settings) {
            Ok(contents) => contents,
            Err(refused) => return self.tell(*refused),
        };
        for first in (0..contents.len()).step_by(CHUNK) {
            let numbers = first..(first + CHUNK).min(contents.len());
            let one = |number| contents.classify(number, settings);
            let results: Vec<Material> = match &self.pool {
                Some(pool) => pool.install(|| numbers.into_par_iter().map(one).collect()),
                None => numbers.map(one).collect(),
            };
            results.into_iter().try_for_each(|material| self.tell(material))?;
        }
        Ok(())
    }

    fn tell(&mut self, material: Material) -> anyhow::Result<()> {
        self.tally.add(&material);
        if self.is_verbose {
            self.progress.suspend(|| talk_diagnostics(&material));
        }
        self.sink.take(material)
    }
}

fn progress_bar(inputs: usize, quiet: bool) -> ProgressBar {
    let is_shown =
        !quiet && inputs > 1 && std::io::stderr().is_terminal() && !std::io::stdout().is_terminal();
    let target = if is_shown { ProgressDrawTarget::stderr() } else { ProgressDrawTarget::hidden() };
    let bar = ProgressBar::with_draw_target(Some(inputs as u64), target);
    if let Ok(style) = ProgressStyle::with_template("{pos} of {len} files  {wide_bar}  {per_sec}  {eta} left")
    {
        bar.set_style(style);
    }
    bar
}

fn talk_diagnostics(material: &Material) {
    let work = &material.classification;
    for diagnostic in work.diagnostics.iter().chain(work.outcome.as_ref().err()) {
        output::talk(&format!("{} {}: {diagnostic}", material.file, material.block));
    }
}

/// Writes results as they come, in order.
struct Sink<'a> {
    output: Output,
    format: Format,
    details: bool,
    explain: bool,
    plane: Option<[i64; 3]>,
    settings: &'a Settings,
    table: Table,
    /// The first material of a text report, until it is known whether it is the only one.
    kept: Option<Material>,
    written: usize,
}

impl Sink<'_> {
    fn take(&mut self, material: Material) -> anyhow::Result<()> {
        match self.format {
            Format::Text if self.details => {
                let gap = if self.written > 0 { "\n" } else { "" };
                let text = words::describe(&material, self.settings, self.plane);
                let reasons = if self.explain {
                    reasoning::explain(&material, self.settings.parameters())
                } else {
                    String::new()
                };
                self.output.write(&output::plain(&format!("{gap}{text}{reasons}")))?;
            }
            Format::Text => {
                let record = MaterialRecord::new(&material, self.settings);
                self.table.rows.push(materials::short_row(&record));
                self.kept = (self.written == 0).then_some(material);
            }
            Format::Json | Format::Jsonl => {
                let record = MaterialRecord::new(&material, self.settings);
                let text = serde_json::to_string(&record).context("cannot write a record as JSON")?;
                let before = match (self.format, self.written) {
                    (Format::Json, 0) => "[\n",
                    (Format::Json, _) => ",\n",
                    _ => "",
                };
                let after = if self.format == Format::Jsonl { "\n" } else { "" };
                self.output.write(&format!("{before}{text}{after}"))?;
            }
            Format::Csv => {
                let record = MaterialRecord::new(&material, self.settings);
                self.table.rows = vec![materials::full_row(&record)];
                let text = self.table.to_csv(self.written == 0).context("cannot write a row as CSV")?;
                self.output.write(&text)?;
            }
        }
        self.written += 1;
        Ok(())
    }

    fn finish(mut self) -> anyhow::Result<()> {
        match self.format {
            Format::Text if self.details => {}
            Format::Text => {
                let text = match self.kept.take() {
                    Some(material) => words::describe(&material, self.settings, self.plane),
                    None => format!("{}{}\n", self.table.to_text(output::terminal_width()), words::INSULATOR),
                };
                self.output.write(&output::plain(&text))?;
            }
            Format::Json if self.written == 0 => self.output.write("[]\n")?,
            Format::Json => self.output.write("\n]\n")?,
            Format::Csv if self.written == 0 => {
                let text = self.table.to_csv(true).context("cannot write a heading as CSV")?;
                self.output.write(&text)?;
            }
            Format::Jsonl | Format::Csv => {}
        }
        self.output.close()
    }
}

/// Counts of labels and refusal codes.
#[derive(Default)]
struct Tally {
    materials: usize,
    labels: BTreeMap<String, usize>,
    refusals: BTreeMap<Code, usize>,
}

impl Tally {
    fn add(&mut self, material: &Material) {
        self.materials += 1;
        match &material.classification.outcome {
            Ok(formal) => *self.labels.entry(formal.label.to_string()).or_default() += 1,
            Err(refusal) => *self.refusals.entry(refusal.code).or_default() += 1,
        }
    }

    fn exit(&self) -> Exit {
        if self.refusals.contains_key(&Code::FileUnreadable) {
            Exit::Fault
        } else if self.refusals.is_empty() {
            Exit::Done
        } else {
            Exit::Refused
        }
    }
}

impl std::fmt::Display for Tally {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let mut parts: Vec<String> =
            self.labels.iter().map(|(label, count)| format!("{count} {label}")).collect();
        let refused: usize = self.refusals.values().sum();
        if refused > 0 {
            let codes: Vec<String> =
                self.refusals.iter().map(|(code, count)| format!("{count} {code}")).collect();
            parts.push(format!("{refused} refused ({})", codes.join(", ")));
        }
        write!(f, "{} materials: {}", self.materials, parts.join(", "))
    }
}
