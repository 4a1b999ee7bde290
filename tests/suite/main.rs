//! All integration tests, linked once.

#![allow(clippy::print_stdout, reason = "figures of a run are shown with --nocapture")]

mod build;
mod charges;
mod check;
mod cif;
mod commands;
mod conformance;
mod demo;
mod doors;
#[cfg(feature = "spglib")]
mod engines;
mod enumeration;
mod facets;
mod generated;
mod invariance;
mod layers;
mod parents;
mod permitted;
mod published;
mod readme;
mod remedies;
mod slow;
mod wide;
