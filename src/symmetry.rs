//! Which operations map a crystal onto itself: the symmetry search, the primitive cell, and the centres of inversion.

pub mod engine;

pub use engine::{Engine, Symmetry, find_symmetry};
