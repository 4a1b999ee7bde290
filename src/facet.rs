//! What does the polarization lattice mean on the plane that is cut?
//!
//! A facet has coprime indices `h` in the reciprocal primitive basis, the spacing `d = 1/|h B*|`, the area `A = V/d`
//! and the surface quantum `e/A`. The modular facet offset is `h · p`. Cutting the crystal below one of its layers
//! gives a tile; the dipole of the tile, `σ A = Σ Z_i u_i` with the heights `u_i` of the atoms in units of `d`, is the
//! exact bound charge of the upper surface of a stack of whole tiles. It equals `h · p` modulo one.

mod plane;
mod remedy;
mod stacking;
mod survey;

pub use plane::Facet;
pub use remedy::{Remedy, RemedyKind};
pub use stacking::{Layer, Stacking, StackingType, Termination};
pub use survey::distinct_planes;
