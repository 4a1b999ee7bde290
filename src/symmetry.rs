//! Which operations map a crystal onto itself: the symmetry search, the primitive cell, and the centres of inversion.

mod centre;
mod change;
pub mod engine;
mod mapping;
mod parent;
mod primitive;
pub mod setting;
mod symmetrise;

pub use centre::{Centre, Centres};
pub(crate) use change::wrap;
pub use change::{Change, ChangeError, transform_text};
pub use engine::{Engine, StandardCell, Symmetry, find_symmetry};
pub use mapping::Mapping;
pub use parent::Parent;
pub use primitive::{Centring, Primitive};
pub use symmetrise::{Symmetrised, symmetrise};

use crate::crystal::Crystal;
use crate::diagnostic::Diagnostic;

/// The symmetry of a crystal and its primitive cell with the whole point group.
///
/// A cell that is not a cell of its own lattice type (a 1 × 2 × 1 supercell of a trigonal crystal, a hexagonal cell of a
/// cubic one) has operations that are no integer matrices in its axes, and a search in those axes leaves them out. The
/// number of operations tells; the search is then repeated in the primitive cell, where every operation is integer.
///
/// # Errors
/// As [`find_symmetry`] and [`Primitive::new`].
pub fn analyse(
    crystal: &Crystal,
    kinds: &[i32],
    engine: Engine,
    tolerance: f64,
) -> Result<(Symmetry, Primitive), Diagnostic> {
    let mut symmetry = find_symmetry(crystal, kinds, engine, tolerance)?;
    let mut primitive = Primitive::new(crystal, kinds, &symmetry)?;
    if primitive.operations.len() < engine::point_group_order(symmetry.number) {
        let cell = primitive.to_crystal(crystal);
        let inner = find_symmetry(&cell, &primitive.kinds, engine, tolerance)?;
        let first_site = |atom: usize| primitive.representatives[inner.orbits[atom]];
        symmetry.orbits = primitive.atoms.iter().map(|&atom| first_site(atom)).collect();
        let again = Primitive::new(&cell, &primitive.kinds, &inner)?;
        if again.centring != Centring::P {
            return Err(primitive::inconsistent("the search finds more translations in the primitive cell"));
        }
        primitive.operations = again.operations;
    }
    Ok((symmetry, primitive))
}
