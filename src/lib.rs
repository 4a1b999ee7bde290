//! Formal polarization lattices of crystals, for people who design interfaces between insulators.
pub mod cell;
pub mod charge;
pub mod cif;
pub mod cli;
pub mod collection;
pub mod crystal;
pub mod diagnostic;
pub mod exact;
pub mod polarization;
pub mod report;
pub mod symmetry;
