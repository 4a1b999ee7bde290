//! Which operations map a crystal onto itself: the symmetry search, the primitive cell, and the centres of inversion.

mod centre;
pub mod engine;
mod mapping;
mod primitive;
pub mod setting;

pub use centre::{Centre, Centres};
pub use engine::{Engine, Symmetry, find_symmetry};
pub use mapping::Mapping;
pub use primitive::{Centring, Primitive};
