//! The command line of cosetta.
fn main() {}
