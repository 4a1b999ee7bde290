//! The command line of cosetta.

use std::process::ExitCode;

fn main() -> ExitCode {
    cosetta::cli::run().into()
}
