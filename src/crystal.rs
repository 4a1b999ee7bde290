//! Which atoms sit where: species, sites, symmetry operations and the crystal they make.

mod element;
mod expand;
mod formula;
mod operation;
mod site;

pub use element::Element;
pub(crate) use expand::lattice_refusal;
pub use expand::{AsymmetricUnit, Crystal, ExpandTolerance};
pub use formula::Formula;
pub use operation::Operation;
pub use site::Site;
