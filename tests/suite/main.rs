//! All integration tests, linked once.

#![allow(clippy::print_stdout, reason = "figures of a run are shown with --nocapture")]

mod charges;
mod check;
mod cif;
mod commands;
mod demo;
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
