//! A lattice plane: indices, spacing, area and the primitive surface cell.

use crate::cell::Lattice;
use crate::crystal::Operation;
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, complete_to_basis};
use crate::symmetry::Primitive;
use nalgebra::Vector3;

/// A family of lattice planes of a crystal.
#[derive(Debug, Clone, PartialEq)]
pub struct Facet {
    /// Indices in the axes of the file.
    pub miller: [i64; 3],
    /// Coprime indices `h` in the reciprocal primitive basis.
    pub indices: [i64; 3],
    /// Distance `d` between neighbouring lattice planes in Å.
    pub spacing: f64,
    /// Area `A` of the primitive surface cell in Å².
    pub area: f64,
    /// Two primitive lattice vectors that span the plane, reduced, in primitive axes. With the normal they are
    /// right-handed.
    pub in_plane: [[i64; 3]; 2],
}

impl Facet {
    /// The facet with the given indices in the axes of the file.
    ///
    /// # Errors
    /// `facet-001` for (0 0 0), `polarization-003` when a number leaves the exact range.
    pub fn new(primitive: &Primitive, miller: [i64; 3]) -> Result<Self, Diagnostic> {
        let overflow = |_: Overflow| Diagnostic::error(Code::PolarizationOverflow, Overflow.to_string());
        let indices = primitive.plane(miller).ok_or_else(|| {
            Diagnostic::error(
                Code::FacetIndices,
                format!("({}) is not a plane", miller.map(|i| i.to_string()).join(" ")),
            )
            .hint("--plane 0,0,1")
        })?;
        let normal = primitive.lattice.inverse().transpose() * Vector3::from(indices).cast::<f64>();
        let spacing = 1.0 / normal.norm();
        let basis = complete_to_basis(&indices.map(i128::from)).map_err(overflow)?;
        let columns = match basis {
            Some(basis) => basis.inverse_unimodular().map_err(overflow)?,
            None => None,
        };
        let columns = columns.ok_or_else(|| overflow(Overflow))?;
        let narrow = |value: i128| i64::try_from(value).map_err(|_| overflow(Overflow));
        let column = |j: usize| -> Result<[i64; 3], Diagnostic> {
            Ok([narrow(columns.get(0, j))?, narrow(columns.get(1, j))?, narrow(columns.get(2, j))?])
        };
        let in_plane = reduce(&primitive.lattice, column(1)?, column(2)?, &normal);
        Ok(Self { miller, indices, spacing, area: primitive.lattice.volume() / spacing, in_plane })
    }

    /// Indices of the plane that an operation in primitive axes makes of this one: `h W`.
    #[must_use]
    pub fn image(&self, operation: &Operation) -> [i64; 3] {
        let rotation = operation.rotation.map(i64::from);
        (nalgebra::RowVector3::from(self.indices) * rotation).transpose().into()
    }

    /// Heights `h · r` of positions in primitive axes, in units of the spacing.
    #[must_use]
    pub fn heights(&self, positions: &[Vector3<f64>]) -> Vec<f64> {
        let indices = Vector3::from(self.indices).cast::<f64>();
        positions.iter().map(|position| indices.dot(position)).collect()
    }

    /// Lengths in Å of the two in-plane vectors and the angle between them in degrees.
    #[must_use]
    pub fn surface_cell(&self, lattice: &Lattice) -> ([f64; 2], f64) {
        let [a, b] = self.in_plane.map(|vector| lattice.to_cartesian(&Vector3::from(vector).cast::<f64>()));
        ([a.norm(), b.norm()], a.angle(&b).to_degrees())
    }
}

/// Gauss's reduction in the plane, right-handed about the normal, with an angle from 90° to 120°.
fn reduce(lattice: &Lattice, a: [i64; 3], b: [i64; 3], normal: &Vector3<f64>) -> [[i64; 3]; 2] {
    let cartesian = |v: &Vector3<i64>| lattice.to_cartesian(&v.cast::<f64>());
    let (mut a, mut b) = (Vector3::from(a), Vector3::from(b));
    for _ in 0..1000 {
        if cartesian(&b).norm_squared() < cartesian(&a).norm_squared() * (1.0 - 1e-12) {
            std::mem::swap(&mut a, &mut b);
        }
        let factor = (cartesian(&a).dot(&cartesian(&b)) / cartesian(&a).norm_squared() - 1e-9).round();
        #[allow(clippy::cast_possible_truncation, reason = "ratios of lattice vectors of limited length")]
        let whole = factor as i64;
        if whole == 0 {
            break;
        }
        b -= a * whole;
    }
    if cartesian(&a).dot(&cartesian(&b)) > 1e-9 {
        b = -b;
    }
    if cartesian(&a).cross(&cartesian(&b)).dot(normal) < 0.0 {
        std::mem::swap(&mut a, &mut b);
    }
    [a.into(), b.into()]
}
