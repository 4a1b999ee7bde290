//! The command line: what may be typed, and what is done with it.

mod build;
mod check;
mod classify;
mod common;
mod enumerate;
mod exit;
mod facets;
mod output;
mod render;

pub use exit::Exit;

use clap::{CommandFactory, Parser, Subcommand};

/// Formal polarization lattices of insulating crystals, from CIF, POSCAR and OPTIMADE files.
///
/// For people who design interfaces between insulators: which formal polarization values does a crystal allow, is zero
/// among them, and what does that mean for the planes you will join.
#[derive(Debug, Parser)]
#[command(name = "cosetta", version, max_term_width = 100)]
struct Arguments {
    #[command(subcommand)]
    command: Task,
}

#[derive(Debug, Subcommand)]
enum Task {
    /// Label each material: its polarization lattice, and whether it contains zero
    Classify(classify::Arguments),
    /// List the basis choices of one material and the polarization values they reach
    Enumerate(enumerate::Arguments),
    /// Survey planes: layers, terminations, bound charge, and what cures it
    Facets(facets::Arguments),
    /// Say what is wrong or suspicious in files, with line, column and what to type
    Check(check::Arguments),
    /// Write structures as CIF
    Build(build::Arguments),
}

/// The definition of the command line, from which the manual pages are made.
#[must_use]
pub fn command() -> clap::Command {
    Arguments::command()
}

/// Runs the program on the process's own arguments.
#[must_use]
pub fn run() -> Exit {
    let arguments = match Arguments::try_parse() {
        Ok(arguments) => arguments,
        Err(error) => {
            // Help and version go to stdout with success, everything else is a fault of usage.
            let exit = if error.use_stderr() { Exit::Usage } else { Exit::Done };
            let _ = error.print();
            return exit;
        }
    };
    let outcome = match arguments.command {
        Task::Classify(arguments) => classify::run(arguments),
        Task::Enumerate(arguments) => enumerate::run(arguments),
        Task::Facets(arguments) => facets::run(arguments),
        Task::Check(arguments) => check::run(arguments),
        Task::Build(arguments) => build::run(arguments),
    };
    outcome.unwrap_or_else(|error| {
        if output::is_broken_pipe(&error) {
            return Exit::Done;
        }
        output::talk(&format!("error: {error:#}"));
        Exit::Fault
    })
}
