//! `cosetta check`.

use super::common::StructureOptions;
use super::exit::Exit;
use super::output::{self, Output};
use super::render::Drawing;
use crate::collection::{Contents, Material, Member, Settings, find_inputs};
use crate::diagnostic::{Code, Diagnostic, Severity};
use anyhow::Context;
use clap::{Args, ValueEnum};
use serde::Serialize;
use std::collections::HashSet;
use std::io::IsTerminal;
use std::path::PathBuf;

/// Say what is wrong or suspicious in files, with line, column and what to type.
///
/// Each file is read, expanded, searched for symmetry and given charges as `classify` does it. Everything that was
/// noticed on the way is drawn with its line of source: faults of syntax, statements that contradict each other, values
/// that were rounded, and the reason why there is no answer. Files without findings are not mentioned.
#[derive(Debug, Args)]
#[command(after_help = "Example:\n  cosetta check my.cif --strict\n\n\
    Exit status: 0 no errors (with --strict: no warnings either), 1 there are some, 2 usage, 3 input or output failed.\n\
    An error says that something in the file was lost, or why there is no answer; a warning that the file was read in one \
    of several possible ways; a note does not change the answer.")]
pub(super) struct Arguments {
    /// Files of structures (CIF, POSCAR, OPTIMADE JSON), also packed; folders; or - for standard input
    #[arg(required = true, value_name = "PATH")]
    paths: Vec<PathBuf>,
    #[command(flatten)]
    structure: StructureOptions,
    /// Count warnings as faults in the exit status
    #[arg(long)]
    strict: bool,
    /// Form of the answer
    #[arg(long, value_enum, default_value_t = Format::Text, help_heading = "Output")]
    format: Format,
    /// Colours: on a terminal, always, or never; `NO_COLOR` in the environment turns `auto` off
    #[arg(long, value_enum, value_name = "WHEN", default_value_t = Colour::Auto, help_heading = "Output")]
    color: Colour,
    /// Write to this file in place of stdout
    #[arg(short, long, value_name = "FILE", help_heading = "Output")]
    output: Option<PathBuf>,
    /// Leave out the summary on stderr
    #[arg(short, long, help_heading = "Output")]
    quiet: bool,
}

/// Form of the answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Format {
    /// For people
    Text,
    /// One JSON array with an object for each file or member of an archive
    Json,
}

/// When colours are used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
enum Colour {
    /// On a terminal, unless `NO_COLOR` is set
    Auto,
    /// Always
    Always,
    /// Never
    Never,
}

impl Colour {
    fn is_on(self, goes_to_file: bool) -> bool {
        let is_refused = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
        match self {
            Self::Auto => !goes_to_file && !is_refused && std::io::stdout().is_terminal(),
            Self::Always => true,
            Self::Never => false,
        }
    }
}

/// One file of the JSON answer.
#[derive(Debug, Serialize)]
struct FileRecord<'a> {
    file: &'a str,
    diagnostics: &'a [Finding],
}

/// A diagnostic and the data block it belongs to.
#[derive(Debug, Serialize)]
struct Finding {
    block: String,
    #[serde(flatten)]
    diagnostic: Diagnostic,
}

pub(super) fn run(arguments: Arguments) -> anyhow::Result<Exit> {
    let settings = arguments.structure.settings();
    let is_coloured = arguments.color.is_on(arguments.output.is_some());
    let drawing = Drawing { is_coloured, width: output::terminal_width() };
    let mut output = Output::open(arguments.output.as_deref(), &arguments.paths)?;
    let mut tally = Tally::default();
    for input in find_inputs(&arguments.paths) {
        input.visit(settings.max_unpacked, &mut |member| -> anyhow::Result<()> {
            let file = member.name.clone();
            let (source, findings) = examine(member, &settings);
            match arguments.format {
                Format::Text => {
                    for finding in &findings {
                        output.write(&drawing.draw(&file, &finding.block, &source, &finding.diagnostic))?;
                    }
                }
                Format::Json => {
                    let record = FileRecord { file: &file, diagnostics: &findings };
                    let text = serde_json::to_string(&record).context("cannot write a record as JSON")?;
                    let before = if tally.files == 0 { "[\n" } else { ",\n" };
                    output.write(&format!("{before}{text}"))?;
                }
            }
            tally.add(&findings);
            Ok(())
        })?;
    }
    if arguments.format == Format::Json {
        output.write(if tally.files == 0 { "[]\n" } else { "\n]\n" })?;
    }
    output.close()?;
    if !arguments.quiet {
        output::talk(&tally.to_string());
    }
    Ok(tally.exit(arguments.strict))
}

/// The content of a file or member and all that is to be said about it, in the order of the file; what has no place comes last.
fn examine(member: Member, settings: &Settings) -> (Vec<u8>, Vec<Finding>) {
    let file = member.name.clone();
    let bytes = match member.read() {
        Ok(bytes) => bytes,
        Err(diagnostic) => return (Vec::new(), vec![Finding { block: String::new(), diagnostic }]),
    };
    let mut findings: Vec<Finding> = Vec::new();
    let mut known = HashSet::new();
    let mut take = |material: Material| {
        let work = material.classification;
        for diagnostic in work.diagnostics.into_iter().chain(work.outcome.err()) {
            // One fault may be met twice: by the parser, and by the reader who needs the value.
            let place = diagnostic.span.map(|span| (span.start, diagnostic.message.clone()));
            if place.is_none_or(|place| known.insert(place)) {
                findings.push(Finding { block: material.block.clone(), diagnostic });
            }
        }
    };
    match Contents::open(&file, &bytes, settings) {
        Ok(contents) => (0..contents.len()).for_each(|number| take(contents.classify(number, settings))),
        Err(refused) => take(*refused),
    }
    findings.sort_by_key(|finding| finding.diagnostic.span.map_or(usize::MAX, |span| span.start));
    (bytes, findings)
}

/// Counts of files and findings.
#[derive(Default)]
struct Tally {
    files: usize,
    errors: usize,
    warnings: usize,
    notes: usize,
    is_unreadable: bool,
}

impl Tally {
    fn add(&mut self, findings: &[Finding]) {
        self.files += 1;
        for finding in findings {
            match finding.diagnostic.severity {
                Severity::Error => self.errors += 1,
                Severity::Warning => self.warnings += 1,
                Severity::Note => self.notes += 1,
            }
            self.is_unreadable |= finding.diagnostic.code == Code::FileUnreadable;
        }
    }

    fn exit(&self, is_strict: bool) -> Exit {
        if self.is_unreadable {
            Exit::Fault
        } else if self.errors > 0 || is_strict && self.warnings > 0 {
            Exit::Refused
        } else {
            Exit::Done
        }
    }
}

impl std::fmt::Display for Tally {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let count = |number: usize, what: &str| {
            let plural = if number == 1 { "" } else { "s" };
            format!("{number} {what}{plural}")
        };
        write!(
            f,
            "{}: {}, {}, {}",
            count(self.files, "file"),
            count(self.errors, "error"),
            count(self.warnings, "warning"),
            count(self.notes, "note")
        )
    }
}
