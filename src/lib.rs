//! Formal polarization lattices of crystals, for people who design interfaces between insulators.

pub mod cell;
pub mod cif;
pub mod crystal;
pub mod diagnostic;
pub mod symmetry;
