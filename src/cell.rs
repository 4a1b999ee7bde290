//! The lattice: its vectors, its metric, and distances between images of points.

mod cyclic;
mod lattice;
mod neighbours;
mod reduce;

pub(crate) use cyclic::group_cyclic;
pub use lattice::{CellParameters, Lattice, LatticeError};
pub use neighbours::{Contact, Neighbours, closest_contact, contacts_up_to, contacts_within, neighbours_of};
pub use reduce::Reduced;
