//! The primitive cell of a crystal and its operations in primitive axes, as exact matrices.
//!
//! The primitive vectors stay tied to the axes of the file, so that an answer can be read next to it: the file's own
//! vectors where the cell is primitive, the usual vectors of the centred lattices
//!
//! | lattice | primitive vectors in the axes of the cell |
//! | --- | --- |
//! | A | (1,0,0) (0,½,½) (0,−½,½) |
//! | B | (½,0,−½) (0,1,0) (½,0,½) |
//! | C | (½,½,0) (−½,½,0) (0,0,1) |
//! | I | (−½,½,½) (½,−½,½) (½,½,−½) |
//! | F | (0,½,½) (½,0,½) (½,½,0) |
//! | R, obverse | (⅔,⅓,⅓) (−⅓,⅓,⅓) (−⅓,−⅔,⅓) |
//! | R, reverse | (−⅔,−⅓,⅓) (⅓,−⅓,⅓) (⅓,⅔,⅓) |
//!
//! (common practice, no single source), and otherwise the reduced vectors of the translation lattice.

use super::engine::Symmetry;
use super::mapping::{Mapping, SiteIndex};
use crate::cell::{Lattice, Reduced};
use crate::crystal::{Crystal, Operation, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, RowLattice};
use nalgebra::{Matrix3, Vector3};
use std::collections::BTreeSet;
use std::fmt;

/// How the given cell is centred.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Centring {
    /// Primitive.
    P,
    /// (0,½,½).
    A,
    /// (½,0,½).
    B,
    /// (½,½,0).
    C,
    /// (½,½,½).
    I,
    /// (0,½,½), (½,0,½), (½,½,0).
    F,
    /// (⅔,⅓,⅓), (⅓,⅔,⅔).
    R,
    /// (⅓,⅔,⅓), (⅔,⅓,⅔).
    RReverse,
    /// Any other: a supercell.
    Other,
}

impl fmt::Display for Centring {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::P => "P",
            Self::A => "A",
            Self::B => "B",
            Self::C => "C",
            Self::I => "I",
            Self::F => "F",
            Self::R => "R (obverse)",
            Self::RReverse => "R (reverse)",
            Self::Other => "supercell",
        })
    }
}

/// Centrings, their translations in sixths, and their primitive vectors in sixths (one vector a row).
type Usual = (Centring, &'static [[i64; 3]], [[i64; 3]; 3]);
const USUAL: [Usual; 8] = [
    (Centring::P, &[], [[6, 0, 0], [0, 6, 0], [0, 0, 6]]),
    (Centring::A, &[[0, 3, 3]], [[6, 0, 0], [0, 3, 3], [0, -3, 3]]),
    (Centring::B, &[[3, 0, 3]], [[3, 0, -3], [0, 6, 0], [3, 0, 3]]),
    (Centring::C, &[[3, 3, 0]], [[3, 3, 0], [-3, 3, 0], [0, 0, 6]]),
    (Centring::I, &[[3, 3, 3]], [[-3, 3, 3], [3, -3, 3], [3, 3, -3]]),
    (Centring::F, &[[0, 3, 3], [3, 0, 3], [3, 3, 0]], [[0, 3, 3], [3, 0, 3], [3, 3, 0]]),
    (Centring::R, &[[2, 4, 4], [4, 2, 2]], [[4, 2, 2], [-2, 2, 2], [-2, -4, 2]]),
    (Centring::RReverse, &[[2, 4, 2], [4, 2, 4]], [[-4, -2, 2], [2, -2, 2], [2, 4, 2]]),
];

/// The primitive cell: `B_p = B P`, with `P` rational and `P⁻¹` an integer matrix.
#[derive(Debug, Clone)]
pub struct Primitive {
    /// The primitive lattice, in the Cartesian axes of the crystal.
    pub lattice: Lattice,
    /// How the crystal's own cell is centred.
    pub centring: Centring,
    /// For each atom of the primitive cell, the site of the crystal that stands for it.
    pub representatives: Vec<usize>,
    /// For each site of the crystal, the atom of the primitive cell it is an image of.
    pub atoms: Vec<usize>,
    /// Fractional positions in primitive axes, averaged over the translations of the crystal's cell.
    pub positions: Vec<Vector3<f64>>,
    /// What the symmetry search took each atom for.
    pub kinds: Vec<i32>,
    /// One operation for each element of the point group, in primitive axes.
    pub operations: Vec<Operation>,
    /// The distance tolerance in Å at which sites count as mapped onto each other.
    pub tolerance: f64,
    numerators: Matrix3<i64>,
    denominator: i64,
    inverse: Matrix3<i64>,
}

impl Primitive {
    /// Finds the primitive cell from a crystal and its symmetry.
    ///
    /// # Errors
    /// `symmetry-006` when the operations do not map the sites onto themselves, `cell-003` when the lattice is
    /// degenerate, `polarization-003` when a number leaves the exact range.
    pub fn new(crystal: &Crystal, kinds: &[i32], symmetry: &Symmetry) -> Result<Self, Diagnostic> {
        let translations: Vec<_> =
            symmetry.operations.iter().filter(|operation| operation.is_translation()).collect();
        let whole = whole_translations(&translations, crystal, symmetry.tolerance)?;
        let (centring, numerators, denominator) = primitive_vectors(&whole, &crystal.lattice)?;
        let inverse = integer_inverse(&numerators, denominator)
            .ok_or_else(|| inconsistent("the translations found do not form a lattice"))?;
        let change = numerators.cast::<f64>() / float(denominator);
        let lattice =
            crystal.lattice.transformed(&change).map_err(|error| crate::crystal::lattice_refusal(&error))?;

        let all: Vec<Vector3<f64>> = crystal.sites.iter().map(|site| site.position).collect();
        let limit = match_limit(symmetry.tolerance);
        let index = SiteIndex::new(&crystal.lattice, &all, kinds, limit);
        let mut representatives = Vec::new();
        let mut positions = Vec::new();
        let mut atoms = vec![usize::MAX; all.len()];
        for site in 0..all.len() {
            if atoms[site] != usize::MAX {
                continue;
            }
            let mut sum = Vector3::zeros();
            for translation in &translations {
                let image = all[site] + translation.translation;
                let (target, _) = index.nearest(&image, kinds[site]).ok_or_else(|| {
                    inconsistent(&format!(
                        "a translation found takes site {} to no site",
                        crystal.sites[site].label
                    ))
                })?;
                atoms[target] = representatives.len();
                sum += (all[target] - image).map(|x| x - x.round());
            }
            let mean = all[site] + sum / float(i64::try_from(translations.len()).unwrap_or(1));
            representatives.push(site);
            positions.push(inverse.cast::<f64>() * mean);
        }
        if representatives.len() * translations.len() != all.len() || atoms.contains(&usize::MAX) {
            return Err(inconsistent(&format!(
                "{} sites and {} translations do not make a whole number of primitive atoms",
                all.len(),
                translations.len()
            )));
        }
        let operations = primitive_operations(symmetry, &numerators, denominator, &inverse)?;
        Ok(Self {
            lattice,
            centring,
            kinds: representatives.iter().map(|&site| kinds[site]).collect(),
            representatives,
            atoms,
            positions,
            operations,
            tolerance: symmetry.tolerance,
            numerators,
            denominator,
            inverse,
        })
    }

    /// The primitive cell as a crystal of its own, one site for each atom.
    #[must_use]
    pub fn to_crystal(&self, crystal: &Crystal) -> Crystal {
        let sites = self.representatives.iter().zip(&self.positions);
        Crystal {
            lattice: self.lattice.clone(),
            sites: sites.map(|(&site, &position)| Site { position, ..crystal.sites[site].clone() }).collect(),
            origins: (0..self.positions.len()).collect(),
        }
    }

    /// The primitive vectors in the axes of the crystal's cell: whole numbers, one vector a column, over a common
    /// denominator.
    #[must_use]
    pub fn vectors(&self) -> (&Matrix3<i64>, i64) {
        (&self.numerators, self.denominator)
    }

    /// Fractional coordinates in the crystal's cell of a position in primitive axes.
    #[must_use]
    pub fn to_cell(&self, position: &Vector3<f64>) -> Vector3<f64> {
        self.numerators.cast::<f64>() * position / float(self.denominator)
    }

    /// Fractional coordinates in primitive axes of a position in the crystal's cell.
    #[must_use]
    pub fn from_cell(&self, position: &Vector3<f64>) -> Vector3<f64> {
        self.inverse.cast::<f64>() * position
    }

    /// Coprime indices, in the reciprocal primitive basis, of the plane that has indices `miller` in the crystal's
    /// cell: `h' ∝ h P`. `None` for (0 0 0) or when a number overflows.
    #[must_use]
    pub fn plane(&self, miller: [i64; 3]) -> Option<[i64; 3]> {
        let mut scaled = [0_i64; 3];
        for (column, entry) in scaled.iter_mut().enumerate() {
            for (row, index) in miller.iter().enumerate() {
                *entry = entry.checked_add(index.checked_mul(self.numerators[(row, column)])?)?;
            }
        }
        let divisor = scaled.iter().fold(0_i64, |divisor, entry| num_integer::gcd(divisor, *entry));
        (divisor != 0).then(|| scaled.map(|entry| entry / divisor))
    }

    /// Where each operation of the list takes the atoms.
    ///
    /// # Errors
    /// `symmetry-006` when an operation takes an atom to no atom.
    pub fn map(&self, operation: &Operation) -> Result<Mapping, Diagnostic> {
        let limit = match_limit(self.tolerance);
        SiteIndex::new(&self.lattice, &self.positions, &self.kinds, limit).map(operation).map_err(|atom| {
            inconsistent(&format!(
                "an operation found takes atom {} of the primitive cell to no atom",
                atom + 1
            ))
        })
    }
}

/// Engines accept images somewhat outside their tolerance; sites are at least half an Å apart, so that a search
/// this much wider stays unique.
pub(super) fn match_limit(tolerance: f64) -> f64 {
    (4.0 * tolerance).clamp(0.02, 0.24)
}

pub(super) fn inconsistent(why: &str) -> Diagnostic {
    Diagnostic::error(Code::SymmetryNotFound, why.to_owned())
}

#[allow(
    clippy::cast_precision_loss,
    reason = "called with numbers of sites and translations, far below 2^52"
)]
fn float(value: i64) -> f64 {
    value as f64
}

/// The translations times their number, which are whole numbers because the translations modulo the cell form a
/// group of that order.
#[allow(clippy::cast_possible_truncation, reason = "checked to lie within the number of translations")]
fn whole_translations(
    translations: &[&Operation],
    crystal: &Crystal,
    tolerance: f64,
) -> Result<Vec<[i64; 3]>, Diagnostic> {
    let count = i64::try_from(translations.len()).unwrap_or(i64::MAX);
    translations
        .iter()
        .map(|operation| {
            let scaled = operation.translation.map(|x| (x - x.floor()) * float(count));
            let whole = scaled.map(f64::round);
            let miss = crystal.lattice.to_cartesian(&((scaled - whole) / float(count))).norm();
            if miss > match_limit(tolerance) {
                return Err(inconsistent(&format!(
                    "a translation found is {miss:.3} Å away from a fraction of the cell"
                )));
            }
            Ok([0, 1, 2].map(|axis| (whole[axis] as i64).rem_euclid(count)))
        })
        .collect()
}

/// The centring, and primitive vectors as columns over a denominator.
fn primitive_vectors(
    whole: &[[i64; 3]],
    lattice: &Lattice,
) -> Result<(Centring, Matrix3<i64>, i64), Diagnostic> {
    let count = i64::try_from(whole.len()).unwrap_or(i64::MAX);
    let found: BTreeSet<[i64; 3]> = whole.iter().copied().collect();
    if found.len() != whole.len() {
        return Err(inconsistent("the search returned one translation twice"));
    }
    if 6 % count == 0 || count == 4 {
        for (centring, translations, vectors) in USUAL {
            let expected: BTreeSet<[i64; 3]> = std::iter::once([0; 3])
                .chain(translations.iter().map(|t| t.map(|sixths| sixths * count / 6)))
                .collect();
            if expected == found {
                return Ok((centring, Matrix3::from_fn(|row, column| vectors[column][row]), 6));
            }
        }
    }
    let overflow = |_: Overflow| Diagnostic::error(Code::PolarizationOverflow, Overflow.to_string());
    let mut rows = RowLattice::new(3);
    for axis in 0..3 {
        let mut row = [0_i128; 3];
        row[axis] = i128::from(count);
        rows.insert(&row).map_err(overflow)?;
    }
    for translation in whole {
        rows.insert(&translation.map(i128::from)).map_err(overflow)?;
    }
    let basis = rows.basis();
    let numerators = Matrix3::from_fn(|row, column| i64::try_from(basis.get(column, row)).unwrap_or(0));
    let plain = lattice
        .transformed(&(numerators.cast::<f64>() / float(count)))
        .map_err(|error| crate::crystal::lattice_refusal(&error))?;
    let reduced = Reduced::new(&plain).map_err(|error| crate::crystal::lattice_refusal(&error))?;
    #[allow(clippy::cast_possible_truncation, reason = "entries of a reduction are small whole numbers")]
    let mut change = reduced.change().map(|x| x as i64);
    if change.cast::<f64>().determinant() < 0.0 {
        change.set_column(2, &-change.column(2).into_owned());
    }
    Ok((Centring::Other, numerators * change, count))
}

/// `(N / d)⁻¹`, if it is an integer matrix.
fn integer_inverse(numerators: &Matrix3<i64>, denominator: i64) -> Option<Matrix3<i64>> {
    let n = numerators.map(i128::from);
    let minor =
        |r0: usize, r1: usize, c0: usize, c1: usize| n[(r0, c0)] * n[(r1, c1)] - n[(r0, c1)] * n[(r1, c0)];
    let next = |i: usize| ((i + 1) % 3, (i + 2) % 3);
    let determinant: i128 = (0..3).map(|c| n[(0, c)] * minor(1, 2, next(c).0, next(c).1)).sum();
    if determinant == 0 {
        return None;
    }
    let mut inverse = Matrix3::zeros();
    for row in 0..3 {
        for column in 0..3 {
            let ((r0, r1), (c0, c1)) = (next(column), next(row));
            let value = minor(r0, r1, c0, c1) * i128::from(denominator);
            if value % determinant != 0 {
                return None;
            }
            inverse[(row, column)] = i64::try_from(value / determinant).ok()?;
        }
    }
    Some(inverse)
}

/// One operation per rotation, in primitive axes: `W' = P⁻¹ W P`, `w' = P⁻¹ w` modulo one.
fn primitive_operations(
    symmetry: &Symmetry,
    numerators: &Matrix3<i64>,
    denominator: i64,
    inverse: &Matrix3<i64>,
) -> Result<Vec<Operation>, Diagnostic> {
    let mut seen = BTreeSet::new();
    let mut operations = Vec::new();
    let (right, left) = (numerators.map(i128::from), inverse.map(i128::from));
    for operation in &symmetry.operations {
        let given = <[[i32; 3]; 3]>::from(operation.rotation);
        if !seen.insert(given) {
            continue;
        }
        let scaled = left * operation.rotation.map(i128::from) * right;
        if scaled.iter().any(|entry| entry % i128::from(denominator) != 0) {
            return Err(inconsistent("a rotation found does not map the lattice onto itself"));
        }
        let rotation = scaled.map(|entry| i32::try_from(entry / i128::from(denominator)).unwrap_or(0));
        let translation = (inverse.cast::<f64>() * operation.translation).map(|x| x - x.floor());
        operations.push(Operation { rotation, translation });
    }
    Ok(operations)
}
