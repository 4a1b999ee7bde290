//! Formal polarization lattices of crystals, for people who design interfaces between insulators.
//!
//! From a file of structures to the question whether zero is one of the formal polarization values that a crystal allows:
//!
//! | module | question |
//! | --- | --- |
//! | [`diagnostic`] | what is wrong with an input? |
//! | [`exact`] | integers, rationals and their normal forms |
//! | [`cell`] | lattice vectors, reduction, neighbours |
//! | [`crystal`] | which atoms sit where? |
//! | [`symmetry`] | which operations map the crystal onto itself, and where are its centres of inversion? |
//! | [`cif`] | what does the file say? |
//! | [`poscar`] | the same, for files of vectors and positions |
//! | [`optimade`] | the same, for the JSON of databases |
//! | [`charge`] | which formal charge does each ion carry? |
//! | [`polarization`] | which values are allowed, and is zero among them? |
//! | [`facet`] | what does that mean on a plane that is cut? |
//! | [`collection`] | the same for many files |
//! | [`report`] | records, tables, words |
//! | [`cli`] | the command line |
//!
//! Modules import from those above them only.

pub mod cell;
pub mod charge;
pub mod cif;
pub mod cli;
pub mod collection;
pub mod crystal;
pub mod diagnostic;
pub mod exact;
pub mod facet;
pub mod optimade;
pub mod polarization;
pub mod poscar;
pub mod report;
pub mod symmetry;
