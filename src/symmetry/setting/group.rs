//! Finite sets of operations modulo the translations of the cell, in exact arithmetic.

use super::affine::{Affine, UNIT};
use crate::cell::Lattice;
use crate::crystal::Operation;
use nalgebra::{Matrix3, Vector3};
use num_integer::Integer;
use std::collections::HashSet;
use std::fmt;
use std::hash::{Hash, Hasher};
use std::sync::OnceLock;

/// An operation modulo whole cell translations: integer matrix, translation in units of 1/[`UNIT`], each in
/// `0..UNIT`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct Motion {
    rotation: [[i8; 3]; 3],
    translation: [i32; 3],
}

impl Hash for Motion {
    /// Two words in place of twelve numbers, because groups are made for every file.
    fn hash<H: Hasher>(&self, state: &mut H) {
        let pack = |word: u64, entry: u64, bits: u32| (word << bits) ^ entry;
        let rotation = self.rotation.iter().flatten();
        state.write_u64(rotation.fold(0, |word, entry| pack(word, u64::from(entry.cast_unsigned()), 7)));
        let translation = self.translation.iter();
        state.write_u64(translation.fold(0, |word, entry| pack(word, u64::from(entry.cast_unsigned()), 20)));
    }
}

impl Motion {
    /// The motion that leaves everything where it is.
    pub const IDENTITY: Self = Self { rotation: [[1, 0, 0], [0, 1, 0], [0, 0, 1]], translation: [0; 3] };

    /// From a matrix and a translation in units of 1/[`UNIT`]. `None` when an entry leaves the range of a byte.
    #[must_use]
    pub fn new(rotation: [[i32; 3]; 3], translation: [i64; 3]) -> Option<Self> {
        let mut small = [[0; 3]; 3];
        for (to, from) in small.iter_mut().flatten().zip(rotation.iter().flatten()) {
            *to = i8::try_from(*from).ok()?;
        }
        let unit = i64::from(UNIT);
        let translation = translation.map(|t| i32::try_from(t.rem_euclid(unit)).unwrap_or(0));
        Some(Self { rotation: small, translation })
    }

    /// From an affine map. `None` when a coefficient is not a whole number.
    #[must_use]
    pub fn from_affine(affine: &Affine) -> Option<Self> {
        if affine.linear.iter().flatten().any(|entry| entry % UNIT != 0) {
            return None;
        }
        Self::new(affine.linear.map(|row| row.map(|entry| entry / UNIT)), affine.shift.map(i64::from))
    }

    /// From an operation. `None` when its translation is not a multiple of 1/[`UNIT`] within 1e-8.
    #[must_use]
    pub fn from_operation(operation: &Operation) -> Option<Self> {
        let rotation = [0, 1, 2].map(|i| [0, 1, 2].map(|j| operation.rotation[(i, j)]));
        let mut translation = [0; 3];
        for (to, from) in translation.iter_mut().zip(&operation.translation) {
            let wrapped = from - from.floor();
            let units = (wrapped * f64::from(UNIT)).round();
            if !wrapped.is_finite() || (wrapped - units / f64::from(UNIT)).abs() > 1e-8 {
                return None;
            }
            *to = units_of(units);
        }
        Self::new(rotation, translation)
    }

    /// The same as an operation, translation in [0, 1).
    #[must_use]
    pub fn to_operation(&self) -> Operation {
        Operation {
            rotation: Matrix3::from_fn(|i, j| i32::from(self.rotation[i][j])),
            translation: Vector3::from_fn(|i, _| f64::from(self.translation[i]) / f64::from(UNIT)),
        }
    }

    /// First the other motion, then this one. `None` when an entry leaves the range of a byte.
    #[must_use]
    pub fn after(&self, first: &Self) -> Option<Self> {
        let mut rotation = [[0; 3]; 3];
        let mut translation = [0; 3];
        for i in 0..3 {
            let row = self.rotation[i].map(i32::from);
            rotation[i] = [0, 1, 2].map(|j| (0..3).map(|k| row[k] * i32::from(first.rotation[k][j])).sum());
            let moved: i64 = (0..3).map(|k| i64::from(row[k]) * i64::from(first.translation[k])).sum();
            translation[i] = moved + i64::from(self.translation[i]);
        }
        Self::new(rotation, translation)
    }

    /// Determinant of the matrix.
    #[must_use]
    pub fn determinant(&self) -> i32 {
        let [a, b, c] = self.rotation.map(|row| row.map(i32::from));
        a[0] * (b[1] * c[2] - b[2] * c[1]) - a[1] * (b[0] * c[2] - b[2] * c[0])
            + a[2] * (b[0] * c[1] - b[1] * c[0])
    }

    /// Trace of the matrix; with the determinant it tells the kind of rotation.
    #[must_use]
    pub fn trace(&self) -> i32 {
        (0..3).map(|i| i32::from(self.rotation[i][i])).sum()
    }

    /// The matrix, row by row.
    #[must_use]
    pub fn rotation(&self) -> &[[i8; 3]; 3] {
        &self.rotation
    }

    /// The translation in units of 1/[`UNIT`].
    #[must_use]
    pub fn translation(&self) -> &[i32; 3] {
        &self.translation
    }

    /// Whether the matrix is the unit matrix.
    #[must_use]
    pub fn is_translation(&self) -> bool {
        self.rotation == Self::IDENTITY.rotation
    }
}

impl fmt::Display for Motion {
    /// As a CIF writes it, such as `-x+1/2,y,-z`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (i, row) in self.rotation.iter().enumerate() {
            if i > 0 {
                f.write_str(",")?;
            }
            let mut is_first = true;
            for (entry, name) in row.iter().zip(["x", "y", "z"]).filter(|(entry, _)| **entry != 0) {
                let sign = match (*entry < 0, is_first) {
                    (true, _) => "-",
                    (false, true) => "",
                    (false, false) => "+",
                };
                f.write_str(sign)?;
                if entry.unsigned_abs() != 1 {
                    write!(f, "{}", entry.unsigned_abs())?;
                }
                f.write_str(name)?;
                is_first = false;
            }
            if self.translation[i] != 0 {
                let divisor = self.translation[i].gcd(&UNIT);
                write!(f, "+{}/{}", self.translation[i] / divisor, UNIT / divisor)?;
            }
        }
        Ok(())
    }
}

#[allow(clippy::cast_possible_truncation, reason = "the value is between 0 and UNIT")]
fn units_of(value: f64) -> i64 {
    value as i64
}

/// A group of motions, modulo whole cell translations.
#[derive(Debug, Clone)]
pub struct Group {
    motions: Vec<Motion>,
    members: HashSet<Motion>,
    /// Motions that generate the others.
    generators: Vec<Motion>,
    kinds: OnceLock<Vec<(i32, i32)>>,
}

impl Group {
    /// The group that the motions generate; `None` when it has more than `limit` elements.
    ///
    /// The identity comes first, then the elements in the order in which they arise. Each element is multiplied once by
    /// each generator that was needed, so the work grows with the order of the group times a handful.
    #[must_use]
    pub fn generate(generators: impl IntoIterator<Item = Motion>, limit: usize) -> Option<Self> {
        let mut group = Self {
            motions: vec![Motion::IDENTITY],
            members: HashSet::from([Motion::IDENTITY]),
            generators: Vec::new(),
            kinds: OnceLock::new(),
        };
        for generator in generators {
            if group.contains(&generator) {
                continue;
            }
            if generator.determinant().abs() != 1 {
                return None;
            }
            group.generators.push(generator);
            // Elements from before are closed under the older generators.
            let old = group.motions.len();
            let mut at = 0;
            while at < group.motions.len() {
                let element = group.motions[at];
                let factors =
                    if at < old { std::slice::from_ref(&generator) } else { group.generators.as_slice() };
                for factor in factors {
                    let product = element.after(factor)?;
                    if group.members.insert(product) {
                        if group.motions.len() == limit {
                            return None;
                        }
                        group.motions.push(product);
                    }
                }
                at += 1;
            }
        }
        Some(group)
    }

    /// How many elements there are.
    #[must_use]
    pub fn order(&self) -> usize {
        self.motions.len()
    }

    /// Whether a motion is an element.
    #[must_use]
    pub fn contains(&self, motion: &Motion) -> bool {
        self.members.contains(motion)
    }

    /// The elements, identity first.
    #[must_use]
    pub fn motions(&self) -> &[Motion] {
        &self.motions
    }

    /// The elements as operations.
    #[must_use]
    pub fn operations(&self) -> Vec<Operation> {
        self.motions.iter().map(Motion::to_operation).collect()
    }

    /// How many elements are translations, the identity included: the lattice points of the cell.
    #[must_use]
    pub fn translations(&self) -> usize {
        self.motions.iter().filter(|motion| motion.is_translation()).count()
    }

    /// Whether an element has the negative unit matrix.
    #[must_use]
    pub fn has_inversion(&self) -> bool {
        self.motions.iter().any(|motion| motion.determinant() == -1 && motion.trace() == -3)
    }

    /// Whether two groups have the same elements.
    #[must_use]
    pub fn equals(&self, other: &Self) -> bool {
        self.order() == other.order() && self.motions.iter().all(|motion| other.contains(motion))
    }

    /// Determinant and trace of each element's matrix, sorted, divided among the lattice points. Groups of the same
    /// geometric class have the same list, whatever their axes and origin.
    #[must_use]
    pub fn kinds(&self) -> &[(i32, i32)] {
        self.kinds.get_or_init(|| {
            let mut rotations: Vec<_> = self.motions.iter().map(|motion| motion.rotation).collect();
            rotations.sort_unstable();
            rotations.dedup();
            let mut kinds: Vec<_> = rotations
                .into_iter()
                .map(|rotation| Motion { rotation, translation: [0; 3] })
                .map(|motion| (motion.determinant(), motion.trace()))
                .collect();
            kinds.sort_unstable();
            kinds
        })
    }

    /// Whether a shift of origin makes the other group out of this one. Shifts in steps of 1/24 are tried.
    #[must_use]
    pub fn equals_up_to_origin(&self, other: &Self) -> bool {
        const STEPS: i32 = 24;
        if self.order() != other.order() || self.kinds() != other.kinds() {
            return false;
        }
        let step = i64::from(UNIT / STEPS);
        let steps = || 0..i64::from(STEPS);
        steps().any(|i| {
            steps().any(|j| {
                steps().any(|k| {
                    let shift = [i * step, j * step, k * step];
                    self.generators
                        .iter()
                        .all(|motion| motion.shifted(&shift).is_some_and(|motion| other.contains(&motion)))
                })
            })
        })
    }

    /// Whether every matrix keeps the metric of a lattice: lengths within 2 % and angles within about 1°.
    #[must_use]
    pub fn fits(&self, lattice: &Lattice) -> bool {
        const TOLERANCE: f64 = 0.02;
        let metric = lattice.basis().transpose() * lattice.basis();
        self.generators.iter().all(|motion| {
            let rotation = Matrix3::from_fn(|i, j| f64::from(motion.rotation[i][j]));
            let moved = rotation.transpose() * metric * rotation;
            (0..3).all(|i| {
                (0..3).all(|j| {
                    let scale = (metric[(i, i)] * metric[(j, j)]).sqrt();
                    (moved[(i, j)] - metric[(i, j)]).abs() <= 2.0 * TOLERANCE * scale
                })
            })
        })
    }
}

impl Motion {
    /// The motion seen from an origin moved by `-shift`: `w + s - W s`.
    fn shifted(&self, shift: &[i64; 3]) -> Option<Self> {
        let rotation = self.rotation.map(|row| row.map(i32::from));
        let translation = [0, 1, 2].map(|i| {
            let turned: i64 = (0..3).map(|k| i64::from(rotation[i][k]) * shift[k]).sum();
            i64::from(self.translation[i]) + shift[i] - turned
        });
        Self::new(rotation, translation)
    }
}

#[cfg(test)]
mod tests {
    use super::super::affine::parse_affine;
    use super::*;

    fn motion(text: &str) -> Motion {
        Motion::from_affine(&parse_affine(text).expect("an affine map")).expect("whole numbers")
    }

    #[test]
    fn generators_of_p_21_c() {
        // International Tables, volume A, group 14.
        let group = Group::generate(["-x,y+1/2,-z+1/2", "-x,-y,-z"].map(motion), 192).expect("a group");
        assert_eq!(group.order(), 4);
        assert!(group.contains(&motion("x,1/2-y,1/2+z")));
        assert!(group.has_inversion());
    }

    #[test]
    fn endless_groups_are_given_up() {
        assert!(Group::generate([motion("x+y,y,z")], 192).is_none());
        assert!(Group::generate([motion("-y,x-y,z"), motion("-y,x,z")], 192).is_none());
        assert!(Group::generate([motion("2x,y,z")], 192).is_none());
    }

    #[test]
    fn operations_round_trip() {
        let one = motion("-y,x-y,z+1/3");
        assert_eq!(Motion::from_operation(&one.to_operation()), Some(one));
        let mut odd = one.to_operation();
        odd.translation.x = 0.123_456_789;
        assert_eq!(Motion::from_operation(&odd), None);
    }

    #[test]
    fn motions_are_written_as_files_write_them() {
        assert_eq!(motion("-X+1/2, x-y, 0.25-z").to_string(), "-x+1/2,x-y,-z+1/4");
    }

    #[test]
    fn origins_are_found() {
        let group = |texts: [&str; 2]| Group::generate(texts.map(motion), 192).expect("a group");
        let first = group(["-x,-y,z", "1/4-x,1/4-y,1/4-z"]);
        let second = group(["1/4-x,1/4-y,z", "-x,-y,-z"]);
        assert!(first.equals_up_to_origin(&second) && !first.equals(&second));
        let screw = group(["-x,-y,z+1/2", "-x,-y,-z"]);
        assert!(!first.equals_up_to_origin(&screw));
    }
}
