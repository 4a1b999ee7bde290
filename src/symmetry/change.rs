//! Change of setting: other axes and another origin, carried out exactly on operations.
//!
//! The new vectors are `(a', b', c') = (a, b, c) P` and the new origin is at `p` in the old axes, so that
//! `x' = P⁻¹ (x − p)`, `W' = P⁻¹ W P` and `w' = P⁻¹ (w + W p − p)` (International Tables for Crystallography, volume A,
//! chapter 1.5).

use super::setting::{Group, Motion, UNIT};
use crate::crystal::{AsymmetricUnit, Operation, Site};
use nalgebra::{Matrix3, Vector3};
use num_integer::Integer;
use std::collections::HashSet;
use thiserror::Error;

/// A coordinate this near to 0 or 1 is 0: half of the eighth decimal, the last that is written.
const WRAP: f64 = 5e-9;

/// Why a change of setting is not possible.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum ChangeError {
    /// The new vectors are not right-handed, or lie in a plane.
    #[error("the new vectors do not span a right-handed cell")]
    Handedness,
    /// An operation is no integer matrix in the new axes.
    #[error("an operation does not map the new lattice onto itself")]
    Rotation,
    /// A translation is no fraction that can be held exactly.
    #[error("a translation is not a fraction that can be written exactly")]
    Fraction,
    /// The operations do not make a group, or not the one expected from the volume of the new cell.
    #[error("the operations do not form a group in the new cell")]
    NotGroup,
    /// A number is too large.
    #[error("a number of the change of axes is too large")]
    Overflow,
}

/// New axes and a new origin.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Change {
    /// `P` times `denominator`, one new vector a column.
    numerators: Matrix3<i64>,
    denominator: i64,
    /// `P⁻¹` times `inverse_denominator`.
    inverse: Matrix3<i64>,
    inverse_denominator: i64,
    /// `p` in units of 1/[`UNIT`].
    shift: [i64; 3],
}

impl Change {
    /// From the new vectors, as whole numbers over a denominator with one vector a column, and the new origin in units of
    /// 1/[`UNIT`] of the old axes.
    ///
    /// # Errors
    /// Vectors that are not right-handed, or numbers out of range.
    pub fn new(numerators: Matrix3<i64>, denominator: i64, shift: [i64; 3]) -> Result<Self, ChangeError> {
        let divisor = numerators.iter().fold(denominator, |divisor, entry| divisor.gcd(entry)).max(1);
        let (numerators, denominator) = (numerators.map(|entry| entry / divisor), denominator / divisor);
        if denominator <= 0
            || numerators.iter().any(|entry| entry.abs() > 1_000_000)
            || denominator > 1_000_000
        {
            return Err(ChangeError::Overflow);
        }
        let n = numerators.map(i128::from);
        let determinant = determinant(&n);
        if determinant <= 0 {
            return Err(ChangeError::Handedness);
        }
        let adjugate = adjugate(&n) * i128::from(denominator);
        let divisor = adjugate.iter().fold(determinant, |divisor, entry| divisor.gcd(entry)).max(1);
        let narrow = |value: i128| i64::try_from(value / divisor).map_err(|_| ChangeError::Overflow);
        let mut inverse = Matrix3::zeros();
        for (to, from) in inverse.iter_mut().zip(adjugate.iter()) {
            *to = narrow(*from)?;
        }
        Ok(Self { numerators, denominator, inverse, inverse_denominator: narrow(determinant)?, shift })
    }

    /// The same axes seen from another origin, in units of 1/[`UNIT`].
    #[must_use]
    pub fn of_origin(shift: [i64; 3]) -> Self {
        let identity = Matrix3::identity();
        Self { numerators: identity, denominator: 1, inverse: identity, inverse_denominator: 1, shift }
    }

    /// The new vectors in the old axes, one a column.
    #[must_use]
    pub fn axes(&self) -> Matrix3<f64> {
        self.numerators.map(float) / float(self.denominator)
    }

    /// The new origin in the old axes.
    #[must_use]
    pub fn origin(&self) -> Vector3<f64> {
        Vector3::from(self.shift).map(float) / f64::from(UNIT)
    }

    /// Whether the axes stay what they are.
    #[must_use]
    pub fn keeps_axes(&self) -> bool {
        self.permutation().is_some_and(|(order, signs)| order == [0, 1, 2] && signs == [1; 3])
    }

    /// For axes that are the old ones in another order or direction, the old axis of each new one, and its sign.
    #[must_use]
    pub fn permutation(&self) -> Option<([usize; 3], [i64; 3])> {
        let mut order = [0; 3];
        let mut signs = [1; 3];
        for axis in 0..3 {
            let column = self.numerators.column(axis);
            let mut entries = column.iter().enumerate().filter(|(_, entry)| **entry != 0);
            let (old, entry) = entries.next()?;
            if entries.next().is_some() || entry.abs() != self.denominator {
                return None;
            }
            (order[axis], signs[axis]) = (old, entry.signum());
        }
        Some((order, signs))
    }

    /// A position in the new setting, not reduced to one cell.
    #[must_use]
    pub fn position(&self, position: &Vector3<f64>) -> Vector3<f64> {
        self.inverse.map(float) * (position - self.origin()) / float(self.inverse_denominator)
    }

    /// A motion in the new setting.
    ///
    /// # Errors
    /// Its matrix is not whole there, or its translation is not a fraction.
    pub fn motion(&self, motion: &Motion) -> Result<Motion, ChangeError> {
        let rotation = Matrix3::from_fn(|i, j| i128::from(motion.rotation()[i][j]));
        let scaled = self.inverse.map(i128::from) * rotation * self.numerators.map(i128::from);
        let divisor = i128::from(self.inverse_denominator) * i128::from(self.denominator);
        let mut matrix = [[0; 3]; 3];
        for (i, row) in matrix.iter_mut().enumerate() {
            for (j, entry) in row.iter_mut().enumerate() {
                if scaled[(i, j)] % divisor != 0 {
                    return Err(ChangeError::Rotation);
                }
                *entry = i32::try_from(scaled[(i, j)] / divisor).map_err(|_| ChangeError::Rotation)?;
            }
        }
        let shift = Vector3::from(self.shift).map(i128::from);
        let moved = Vector3::from_fn(|i, _| i128::from(motion.translation()[i])) + rotation * shift - shift;
        Motion::new(matrix, self.translation(&moved)?).ok_or(ChangeError::Rotation)
    }

    /// `P⁻¹ t` for a vector in units of 1/[`UNIT`].
    fn translation(&self, vector: &Vector3<i128>) -> Result<[i64; 3], ChangeError> {
        let scaled = self.inverse.map(i128::from) * vector;
        let mut whole = [0; 3];
        for (to, from) in whole.iter_mut().zip(scaled.iter()) {
            let (quotient, rest) = from.div_mod_floor(&i128::from(self.inverse_denominator));
            if rest != 0 {
                return Err(ChangeError::Fraction);
            }
            *to = i64::try_from(quotient.mod_floor(&i128::from(UNIT))).map_err(|_| ChangeError::Overflow)?;
        }
        Ok(whole)
    }

    /// The group in the new setting, with all translations of the new cell.
    ///
    /// # Errors
    /// The new lattice is not one of the group, or a translation is not a fraction.
    pub fn group(&self, group: &Group) -> Result<Group, ChangeError> {
        let mut generators = Vec::with_capacity(group.order() + 3);
        for axis in 0..3 {
            let mut step = Vector3::zeros();
            step[axis] = i128::from(UNIT);
            let step = Motion::new([[1, 0, 0], [0, 1, 0], [0, 0, 1]], self.translation(&step)?);
            generators.push(step.ok_or(ChangeError::Overflow)?);
        }
        for motion in group.motions() {
            generators.push(self.motion(motion)?);
        }
        let order = i128::try_from(group.order()).map_err(|_| ChangeError::Overflow)?;
        let volume = determinant(&self.numerators.map(i128::from));
        let old = i128::from(self.denominator).pow(3);
        let (expected, rest) = (order * volume).div_mod_floor(&old);
        let expected = usize::try_from(expected).map_err(|_| ChangeError::Overflow)?;
        let made = Group::generate(generators, expected).ok_or(ChangeError::NotGroup)?;
        if rest == 0 && made.order() == expected { Ok(made) } else { Err(ChangeError::NotGroup) }
    }

    /// The operations of a changed group, those that come from the old ones first and in their order.
    fn in_order(&self, old: &[Motion], changed: &Group) -> Vec<Operation> {
        let moved = old.iter().filter_map(|motion| self.motion(motion).ok());
        let mut seen = HashSet::new();
        let all = moved.chain(changed.motions().iter().copied());
        all.filter(|motion| seen.insert(*motion)).map(|motion| motion.to_operation()).collect()
    }

    /// A structure in the new setting: lattice, listed sites in [0, 1), and the operations of the new cell. Where
    /// nothing changes, sites stay as they are.
    ///
    /// # Errors
    /// As [`Change::group`]; also when the operations of the structure cannot be held exactly, or are not a group.
    pub fn apply(&self, unit: &AsymmetricUnit) -> Result<AsymmetricUnit, ChangeError> {
        let motions = unit
            .operations
            .iter()
            .map(|operation| Motion::from_operation(operation).ok_or(ChangeError::Fraction));
        let motions: Vec<Motion> = motions.collect::<Result<_, _>>()?;
        let group =
            Group::generate(motions.iter().copied(), motions.len().max(1)).ok_or(ChangeError::NotGroup)?;
        let changed = self.group(&group)?;
        let keeps_all = self.keeps_axes() && self.shift == [0; 3];
        let place = |site: &Site| {
            let position = if keeps_all { site.position } else { wrap(&self.position(&site.position)) };
            Site { position, ..site.clone() }
        };
        Ok(AsymmetricUnit {
            lattice: unit.lattice.transformed(&self.axes()).map_err(|_| ChangeError::Handedness)?,
            sites: unit.sites.iter().map(place).collect(),
            operations: self.in_order(&motions, &changed),
        })
    }
}

/// Into [0, 1), with rounding noise below 1 taken for 0.
pub(crate) fn wrap(position: &Vector3<f64>) -> Vector3<f64> {
    position.map(|x| {
        let wrapped = x - x.floor();
        if (WRAP..=1.0 - WRAP).contains(&wrapped) { wrapped } else { 0.0 }
    })
}

/// New axes and origin as `a-b,a+b,c;1/8,1/8,1/8`, the notation of the core dictionary for `P` and `p`.
#[must_use]
pub fn transform_text(axes: &Matrix3<f64>, origin: &Vector3<f64>) -> String {
    let vector = |column: usize| {
        let mut text = String::new();
        for (name, &entry) in ["a", "b", "c"].iter().zip(axes.column(column).iter()) {
            if entry.abs() < 1e-9 {
                continue;
            }
            let sign = if entry < 0.0 {
                "-"
            } else if text.is_empty() {
                ""
            } else {
                "+"
            };
            let size = fraction(entry.abs());
            text.extend([sign, if size == "1" { "" } else { size.as_str() }, *name]);
        }
        text
    };
    let origin: Vec<String> = origin.iter().map(|&x| fraction(x)).collect();
    format!("{},{},{};{}", vector(0), vector(1), vector(2), origin.join(","))
}

/// A fraction with a denominator up to 48, or eight decimals.
fn fraction(value: f64) -> String {
    for denominator in 1..=48_u32 {
        let scaled = value * f64::from(denominator);
        if (scaled - scaled.round()).abs() < 1e-7 {
            let numerator = scaled.round() + 0.0;
            return if denominator == 1 {
                format!("{numerator}")
            } else {
                format!("{numerator}/{denominator}")
            };
        }
    }
    format!("{value:.8}")
}

#[allow(clippy::cast_precision_loss, reason = "entries are below a million, shifts a few times UNIT")]
fn float(value: i64) -> f64 {
    value as f64
}

fn determinant(n: &Matrix3<i128>) -> i128 {
    let cofactors = adjugate(n);
    (0..3).map(|k| n[(0, k)] * cofactors[(k, 0)]).sum()
}

fn adjugate(n: &Matrix3<i128>) -> Matrix3<i128> {
    Matrix3::from_fn(|i, j| {
        let ((r0, r1), (c0, c1)) = (((j + 1) % 3, (j + 2) % 3), ((i + 1) % 3, (i + 2) % 3));
        n[(r0, c0)] * n[(r1, c1)] - n[(r0, c1)] * n[(r1, c0)]
    })
}

#[cfg(test)]
mod tests {
    use super::super::setting::{Hint, from_hall, from_hm};
    use super::*;
    use crate::cell::{CellParameters, Lattice};
    use crate::crystal::{Element, ExpandTolerance};
    use proptest::prelude::*;

    const EIGHTH: i64 = UNIT as i64 / 8;

    fn unit(hall: &str, positions: &[[f64; 3]]) -> AsymmetricUnit {
        let parameters = CellParameters { lengths: [8.08; 3], angles: [90.0; 3] };
        AsymmetricUnit {
            lattice: Lattice::from_parameters(&parameters).expect("a cell"),
            sites: positions.iter().map(|&p| Site::new("O1", Element::OXYGEN, p.into())).collect(),
            operations: from_hall(hall).expect("a Hall symbol").operations(),
        }
    }

    #[test]
    fn spinel_from_origin_1_to_origin_2() {
        // International Tables, volume A, group 227: the inversion centre of origin choice 1 is at 1/8,1/8,1/8.
        let settings = from_hm("F d -3 m", &Hint::default()).settings;
        let of =
            |choice: &str| settings.iter().find(|s| s.hm.ends_with(choice)).expect("both").group().clone();
        let change = Change::of_origin([EIGHTH; 3]);
        assert!(change.group(&of("1")).expect("a group").equals(&of("2")));
        let moved = change.apply(&unit("F 4d 2 3 -1d", &[[0.0; 3]])).expect("a change");
        assert_eq!(moved.sites[0].position, Vector3::repeat(0.875));
    }

    #[test]
    fn rhombohedral_from_hexagonal_axes() {
        // International Tables, volume A, figure 1.5.1.6: obverse setting.
        let change = Change::new(Matrix3::new(2, -1, -1, 1, 1, -2, 1, 1, 1), 3, [0; 3]).expect("a change");
        let hexagonal = from_hall("-R 3 2\"c").expect("known");
        let primitive = from_hall("-P 3* 2n").expect("known");
        assert!(change.group(hexagonal.group()).expect("a group").equals(primitive.group()));
        // And back, three lattice points for one.
        let back = Change::new(Matrix3::new(1, 0, 1, -1, 1, 1, 0, -1, 1), 1, [0; 3]).expect("a change");
        assert!(back.group(primitive.group()).expect("a group").equals(hexagonal.group()));
    }

    #[test]
    fn what_cannot_be_done_is_refused() {
        let p4 = from_hall("P 4").expect("known");
        let double = Change::new(Matrix3::new(2, 0, 0, 0, 1, 0, 0, 0, 1), 1, [0; 3]).expect("a change");
        assert_eq!(double.group(p4.group()).err(), Some(ChangeError::Rotation));
        let half = Change::new(Matrix3::new(1, 0, 0, 0, 1, 0, 0, 0, 1), 2, [0; 3]).expect("a change");
        assert_eq!(half.group(p4.group()).err(), Some(ChangeError::NotGroup));
        let left = Change::new(Matrix3::new(0, 1, 0, 1, 0, 0, 0, 0, 1), 1, [0; 3]);
        assert_eq!(left.err(), Some(ChangeError::Handedness));
    }

    #[test]
    fn changes_are_named() {
        let change =
            Change::new(Matrix3::new(1, 1, 0, -1, 1, 0, 0, 0, 2), 2, [EIGHTH, 0, -EIGHTH]).expect("a change");
        assert_eq!(transform_text(&change.axes(), &change.origin()), "1/2a-1/2b,1/2a+1/2b,c;1/8,0,-1/8");
        assert!(change.permutation().is_none());
        let cyclic = Change::new(Matrix3::new(0, 0, 1, 1, 0, 0, 0, 1, 0), 1, [0; 3]).expect("a change");
        assert_eq!(cyclic.permutation(), Some(([1, 2, 0], [1, 1, 1])));
    }

    proptest! {
        #[test]
        fn the_atoms_stay_where_they_are(
            position in [0.0..1.0_f64, 0.0..1.0, 0.0..1.0],
            shift in [0..24_i64, 0..24, 0..24],
            choice in 0..3_usize,
        ) {
            // Every atom of the new cell is an image of an old one, and there are as many per volume.
            let columns = [
                Matrix3::new(0, 1, 1, 1, 0, 1, 1, 1, 0),
                Matrix3::new(2, 0, 0, 0, 2, 0, 0, 0, 2),
                Matrix3::new(1, 1, 0, -1, 1, 0, 0, 0, 2),
            ];
            let old = unit("-F 4 2 3", &[position]);
            let change = Change::new(columns[choice], 2, shift.map(|n| n * EIGHTH / 3)).expect("a change");
            let new = match change.apply(&old) {
                Ok(new) => new,
                // The third lattice is not mapped onto itself by the threefold axes.
                Err(why) => { prop_assert_eq!((choice, why), (2, ChangeError::Rotation)); return Ok(()); }
            };
            let tolerance = ExpandTolerance { merge: 1e-6, min_distance: 1e-6, ..ExpandTolerance::default() };
            let (Ok((before, _)), Ok((after, _))) = (old.expand(&tolerance), new.expand(&tolerance)) else { return Ok(()) };
            let density = |sites: &[Site], lattice: &Lattice| sites.iter().map(|s| s.occupancy).sum::<f64>() / lattice.volume();
            let (one, other) = (density(&before.sites, &old.lattice), density(&after.sites, &new.lattice));
            prop_assert!((one - other).abs() < 1e-9);
            for site in &after.sites {
                let back = change.axes() * site.position + change.origin();
                let nearest = before.sites.iter().map(|s| (s.position - back).map(|x| x - x.round()).norm());
                prop_assert!(nearest.fold(f64::INFINITY, f64::min) < 1e-7);
            }
        }
    }
}
