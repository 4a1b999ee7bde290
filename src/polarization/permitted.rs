//! Which offsets does the point group permit?
//!
//! The cell is neutral, so `p` does not depend on the origin and transforms with the point group alone. It has to be a
//! fixed point of the point group acting on the torus: `(W − 1) p ∈ L` for every `W`. Stack the matrices `W − 1` to
//! `M` and take the Smith normal form `U M V = D`. With `p = V y` the condition reads `d_i y_i ∈ Z`: a divisor `d > 0`
//! gives a cyclic factor of order `d`, a zero gives a free direction.

use crate::exact::{IntMatrix, Overflow, Ratio, RowLattice, Smith, smith};
use nalgebra::Matrix3;

/// The offsets that a point group permits, in units of the modulus along the primitive vectors. The same list holds
/// for every modulus.
#[derive(Debug, Clone)]
pub struct Permitted {
    offsets: Vec<[Ratio; 3]>,
    free: Vec<[i128; 3]>,
    divisors: [i128; 3],
    witnesses: Vec<usize>,
    smith: Smith,
}

impl Permitted {
    /// The offsets permitted by a list of rotations in primitive axes.
    ///
    /// # Errors
    /// When an exact number leaves the range of 128-bit integers.
    ///
    /// ```
    /// use cosetta::polarization::Permitted;
    /// use nalgebra::Matrix3;
    /// let inversion = -Matrix3::<i32>::identity();
    /// let permitted = Permitted::by_rotations(&[Matrix3::identity(), inversion])?;
    /// assert_eq!(permitted.offsets().len(), 8); // each component 0 or ½
    /// assert!(permitted.free().is_empty());
    /// # Ok::<(), cosetta::exact::Overflow>(())
    /// ```
    pub fn by_rotations(rotations: &[Matrix3<i32>]) -> Result<Self, Overflow> {
        let mut lattice = RowLattice::new(3);
        let mut witnesses = Vec::new();
        let mut rows = Vec::new();
        for (index, rotation) in rotations.iter().enumerate() {
            let own = difference_rows(rotation);
            let mut grew = false;
            for row in &own {
                grew |= lattice.insert(row)?;
            }
            if grew {
                witnesses.push(index);
                rows.extend(own);
            }
        }
        if rows.is_empty() {
            rows.push([0; 3]);
        }
        let smith = smith(&IntMatrix::from_rows(rows))?;
        let mut divisors = [0; 3];
        for (divisor, found) in divisors.iter_mut().zip(smith.divisors()) {
            *divisor = found;
        }
        let column = |axis: usize| [0, 1, 2].map(|row| smith.v.get(row, axis));
        let free: Vec<[i128; 3]> = (0..3).filter(|&axis| divisors[axis] == 0).map(column).collect();
        let mut offsets = vec![[Ratio::ZERO; 3]];
        for axis in (0..3).filter(|&axis| divisors[axis] > 1) {
            let mut extended = Vec::new();
            for offset in &offsets {
                for step in 0..divisors[axis] {
                    let multiple = Ratio::new(step, divisors[axis]).ok_or(Overflow)?;
                    let mut next = *offset;
                    for (component, entry) in next.iter_mut().zip(column(axis)) {
                        *component =
                            component.checked_add(Ratio::from_integer(entry).checked_mul(multiple)?)?;
                    }
                    extended.push(next);
                }
            }
            offsets = extended;
        }
        let eliminate = Elimination::new(&free)?;
        for offset in &mut offsets {
            eliminate.apply(offset)?;
            for component in offset.iter_mut() {
                *component = component.fract();
            }
        }
        offsets.sort_unstable();
        Ok(Self { offsets, free, divisors, witnesses, smith })
    }

    /// The permitted offsets, components in [0, 1), sorted. Where there are free directions these are
    /// representatives, to which any multiple of those may be added.
    #[must_use]
    pub fn offsets(&self) -> &[[Ratio; 3]] {
        &self.offsets
    }

    /// Directions, in primitive vectors, along which the polarization is not fixed by symmetry. Empty unless the point
    /// group is polar.
    #[must_use]
    pub fn free(&self) -> &[[i128; 3]] {
        &self.free
    }

    /// Whether the point group leaves the polarization a free direction.
    #[must_use]
    pub fn is_polar(&self) -> bool {
        !self.free.is_empty()
    }

    /// The divisors `d_i` of the Smith normal form; zeros last.
    #[must_use]
    pub fn divisors(&self) -> [i128; 3] {
        self.divisors
    }

    /// Indices of rotations whose rows `W − 1` span those of all.
    pub(super) fn witnesses(&self) -> &[usize] {
        &self.witnesses
    }

    /// The normal form of the stacked `W − 1` of the witnesses.
    pub(super) fn smith(&self) -> &Smith {
        &self.smith
    }
}

fn difference_rows(rotation: &Matrix3<i32>) -> [[i128; 3]; 3] {
    [0, 1, 2]
        .map(|row| [0, 1, 2].map(|column| i128::from(rotation[(row, column)]) - i128::from(row == column)))
}

/// Removes from an offset the part along the free directions, so that equal classes are written alike: the free
/// directions in reduced row echelon form, and one component per direction made zero.
struct Elimination {
    rows: Vec<([Ratio; 3], usize)>,
}

impl Elimination {
    fn new(free: &[[i128; 3]]) -> Result<Self, Overflow> {
        let mut elimination = Self { rows: Vec::new() };
        for direction in free {
            let mut row = direction.map(Ratio::from_integer);
            elimination.apply(&mut row)?;
            // The last component is taken first: polar axes are by custom along c.
            let Some(pivot) = (0..3).rev().find(|&axis| !row[axis].is_zero()) else { continue };
            let scale = row[pivot];
            for entry in &mut row {
                *entry = entry.checked_div(scale)?;
            }
            elimination.rows.push((row, pivot));
        }
        Ok(elimination)
    }

    fn apply(&self, offset: &mut [Ratio; 3]) -> Result<(), Overflow> {
        for (row, pivot) in &self.rows {
            let factor = offset[*pivot];
            for (component, entry) in offset.iter_mut().zip(row) {
                *component = component.checked_sub(entry.checked_mul(factor)?)?;
            }
        }
        Ok(())
    }
}
