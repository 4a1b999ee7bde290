//! The primitive cell with exact operations: translations snapped to fractions, positions and metric averaged.
//!
//! From an origin on an inversion centre, the product of an operation `(W, w)` with its image under the inversion,
//! `(W, −w)`, is the translation by `2 w`: every `w` is half a lattice vector, whatever the crystal. From any other origin a
//! translation may be any number, and only one near to `n/24` is taken for a fraction.

use super::change::wrap;
use super::mapping::SiteIndex;
use super::primitive::{Primitive, inconsistent, match_limit};
use super::setting::{Group, Motion, UNIT};
use crate::cell::{CellParameters, Lattice};
use crate::crystal::Operation;
use crate::diagnostic::Diagnostic;
use nalgebra::{Matrix3, Vector3};

/// What the averaging made; everything in primitive axes.
#[derive(Debug, Clone)]
pub struct Symmetrised {
    /// The lattice, its metric averaged over the operations at the same volume, with `a` along x.
    pub lattice: Lattice,
    /// Positions from the new origin in [0, 1), for each atom of the primitive cell.
    pub positions: Vec<Vector3<f64>>,
    /// The operations that were kept, one for each rotation.
    pub operations: Vec<Operation>,
    /// For each atom, the first atom of its orbit.
    pub orbits: Vec<usize>,
    /// The largest distance in Å an atom was moved by the averaging.
    pub largest_move: f64,
}

/// Averages a primitive cell over those of its operations whose matrix is kept, as seen from an origin in primitive axes.
/// Away from centres of inversion, translations within `reach` Å of `n/24` are taken for fractions.
///
/// # Errors
/// `symmetry-006` when a translation is near to no fraction from this origin, or the operations are no group or do not map
/// the atoms.
pub fn symmetrise(
    primitive: &Primitive,
    origin: &Vector3<f64>,
    reach: f64,
    keep: impl Fn(&Matrix3<i32>) -> bool,
) -> Result<Symmetrised, Diagnostic> {
    let limit = match_limit(primitive.tolerance);
    let kept: Vec<&Operation> =
        primitive.operations.iter().filter(|operation| keep(&operation.rotation)).collect();
    let inversion = primitive.operations.iter().find(|operation| operation.is_inversion());
    let is_centre = inversion.is_some_and(|inversion| {
        let offset = (inversion.apply(origin) - origin).map(|x| x - x.round());
        primitive.lattice.to_cartesian(&offset).norm() <= 2.0 * limit
    });
    let (steps, reach) = if is_centre { (2, 2.0 * limit) } else { (24, reach) };
    let motions = kept.iter().map(|operation| snapped(operation, origin, steps, &primitive.lattice, reach));
    let motions: Vec<Motion> = motions.collect::<Option<_>>().ok_or_else(|| {
        inconsistent("from this origin, an operation found has a translation that is no fraction")
    })?;
    let group = Group::generate(motions.iter().copied(), motions.len());
    if group.is_none_or(|group| group.order() != motions.len()) {
        return Err(inconsistent(
            "the operations found are not a group once their translations are fractions",
        ));
    }
    let operations: Vec<Operation> = motions.iter().map(Motion::to_operation).collect();
    let from_origin: Vec<Vector3<f64>> =
        primitive.positions.iter().map(|position| position - origin).collect();
    let index = SiteIndex::new(&primitive.lattice, &from_origin, &primitive.kinds, 2.0 * limit);
    let mut sums = vec![Vector3::zeros(); from_origin.len()];
    let mut orbits: Vec<usize> = (0..from_origin.len()).collect();
    for operation in &operations {
        let mapping = index.map(operation).map_err(|atom| {
            inconsistent(&format!("an operation takes atom {} of the primitive cell to no atom", atom + 1))
        })?;
        for (atom, &target) in mapping.targets.iter().enumerate() {
            let image = operation.apply(&from_origin[atom]) - mapping.shifts[atom].map(float);
            sums[target] += image - from_origin[target];
            // Operations are a group, so the first atom reaches every atom of its orbit directly.
            orbits[target] = orbits[target].min(atom);
        }
    }
    let count = float(i64::try_from(operations.len()).unwrap_or(1));
    let moves = sums.iter().map(|sum| primitive.lattice.to_cartesian(&(sum / count)).norm());
    let largest_move = moves.fold(0.0, f64::max);
    let positions =
        from_origin.iter().zip(&sums).map(|(position, sum)| wrap(&(position + sum / count))).collect();
    let lattice = averaged(&primitive.lattice, &operations)?;
    Ok(Symmetrised { lattice, positions, operations, orbits, largest_move })
}

/// An operation seen from an origin, its translation a whole number of steps. `None` if it is further away than the limit.
fn snapped(
    operation: &Operation,
    origin: &Vector3<f64>,
    steps: i32,
    lattice: &Lattice,
    limit: f64,
) -> Option<Motion> {
    let translation = operation.apply(origin) - origin;
    let whole = translation.map(|x| (x * f64::from(steps)).round());
    if lattice.to_cartesian(&(translation - whole / f64::from(steps))).norm() > limit {
        return None;
    }
    #[allow(
        clippy::cast_possible_truncation,
        reason = "translations of one cell and its neighbours are small"
    )]
    let units = [0, 1, 2].map(|axis| whole[axis] as i64 * i64::from(UNIT / steps));
    Motion::new([0, 1, 2].map(|i| [0, 1, 2].map(|j| operation.rotation[(i, j)])), units)
}

/// The lattice whose metric is the mean over the operations, at the same volume.
fn averaged(lattice: &Lattice, operations: &[Operation]) -> Result<Lattice, Diagnostic> {
    let metric = lattice.basis().transpose() * lattice.basis();
    let sum: Matrix3<f64> = operations
        .iter()
        .map(|operation| operation.rotation.cast::<f64>())
        .map(|rotation| rotation.transpose() * metric * rotation)
        .sum();
    let scale = (metric.determinant() / sum.determinant()).cbrt();
    let mean = sum * scale;
    let lengths = [0, 1, 2].map(|i| mean[(i, i)].sqrt());
    let angle =
        |i: usize, j: usize| (mean[(i, j)] / (lengths[i] * lengths[j])).clamp(-1.0, 1.0).acos().to_degrees();
    let parameters = CellParameters { lengths, angles: [angle(1, 2), angle(0, 2), angle(0, 1)] };
    Lattice::from_parameters(&parameters).map_err(|error| crate::crystal::lattice_refusal(&error))
}

#[allow(clippy::cast_precision_loss, reason = "lattice translations between neighbouring cells")]
fn float(value: i64) -> f64 {
    value as f64
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::crystal::{Crystal, Element, Site};
    use crate::symmetry::{Centres, Engine, analyse};

    #[test]
    fn a_displaced_crystal_becomes_exact() {
        // Caesium chloride, its origin anywhere, one atom 0.0004 of 4.12 Å off its place: each atom is moved by half of that
        // once the centre is taken in the middle. By hand.
        let parameters = CellParameters { lengths: [4.12, 4.12, 4.121], angles: [90.0; 3] };
        let site = |symbol: &str, position: [f64; 3]| {
            Site::new(symbol, Element::from_symbol(symbol).expect("known"), position.into())
        };
        let crystal = Crystal {
            lattice: Lattice::from_parameters(&parameters).expect("a cell"),
            sites: vec![site("Cs", [0.1, 0.2, 0.3]), site("Cl", [0.6004, 0.7, 0.8])],
            origins: vec![0, 1],
        };
        let (_, primitive) = analyse(&crystal, &[55, 17], Engine::Moyo, 0.01).expect("a symmetry");
        let centres = Centres::find(&primitive).expect("centres").expect("centrosymmetric");
        let found = symmetrise(&primitive, &centres.origin().position, 0.01, |_| true).expect("a group");
        assert_eq!(found.operations.len(), 48);
        assert_eq!(found.orbits, [0, 1]);
        for position in &found.positions {
            assert!(position.map(|x| 2.0 * x - (2.0 * x).round()).norm() < 1e-9, "{position}");
        }
        assert!(
            found
                .operations
                .iter()
                .all(|operation| operation.translation.map(|x| x * 2.0 % 1.0).norm() < 1e-12)
        );
        assert!((found.largest_move - 0.0002 * 4.12).abs() < 1e-4, "{}", found.largest_move);
        assert!((found.lattice.volume() - crystal.lattice.volume()).abs() < 1e-9);
        let lengths = found.lattice.parameters().lengths;
        assert!((lengths[0] - lengths[2]).abs() < 1e-9);
    }

    #[test]
    fn an_origin_without_fractions_is_refused() {
        // Zincblende from an origin off every symmetry element.
        let parameters = CellParameters { lengths: [3.8; 3], angles: [60.0; 3] };
        let crystal = Crystal {
            lattice: Lattice::from_parameters(&parameters).expect("a cell"),
            sites: vec![
                Site::new("Zn", Element::from_symbol("Zn").expect("known"), Vector3::repeat(0.013)),
                Site::new("S", Element::from_symbol("S").expect("known"), Vector3::repeat(0.263)),
            ],
            origins: vec![0, 1],
        };
        let (_, primitive) = analyse(&crystal, &[30, 16], Engine::Moyo, 0.001).expect("a symmetry");
        assert!(symmetrise(&primitive, &Vector3::zeros(), 0.001, |_| true).is_err());
        let found = symmetrise(&primitive, &Vector3::repeat(0.013), 0.001, |_| true).expect("a group");
        assert_eq!(found.operations.len(), 24);
        assert!((found.positions[1] - Vector3::repeat(0.25)).norm() < 1e-9);
    }
}
