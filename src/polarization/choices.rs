//! All ways of choosing a basis, and the polarization each gives.
//!
//! Two families. *Sweep*: a window of the shape of the cell is moved through the crystal; each time a plane of atoms
//! crosses its faces, a new basis appears and `p` jumps by the charge of the plane. *Free*: each ion is taken from any
//! of the `(2w+1)³` cells within `w` of its own. Free choices are counted, not listed: the three axes are independent,
//! so the number of choices that reach a value is the product of three one-dimensional counts, and the count along one
//! axis is the coefficient of the product over ions of `Σ_{n=−w}^{w} x^{Z_i n}`.

use super::formal::{Component, FormalPolarization};
use crate::cell::group_cyclic;
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::Ratio;
use crate::symmetry::Primitive;
use num_bigint::BigUint;
use std::collections::BTreeMap;

/// Largest number of additions a count of free choices may take.
const MAX_ADDITIONS: u128 = 2_000_000_000;

/// The free choices: how many there are, and how many reach each value along an axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Choices {
    /// Cells within this distance of an ion's own may be chosen.
    pub window: u32,
    /// Number of choices, `(2w+1)^(3N)`.
    pub total: BigUint,
    /// For each change of one component of `p`, in e, the number of choices of that component's cell numbers that
    /// make it. The same table holds for each axis.
    pub counts: BTreeMap<i64, BigUint>,
}

impl Choices {
    /// Counts the free choices of a list of charges, in e.
    ///
    /// # Errors
    /// `polarization-004` when the count would take too long.
    ///
    /// ```
    /// use cosetta::polarization::Choices;
    /// let choices = Choices::count(&[1, -1], 1)?; // nine choices along one axis
    /// let ways: Vec<String> = choices.counts.values().map(|n| n.to_string()).collect();
    /// assert_eq!(ways, ["1", "2", "3", "2", "1"]); // changes of −2, −1, 0, 1, 2
    /// # Ok::<(), cosetta::diagnostic::Diagnostic>(())
    /// ```
    pub fn count(charges: &[i64], window: u32) -> Result<Self, Diagnostic> {
        let width = 2 * u128::from(window) + 1;
        let weight: u128 = charges.iter().map(|charge| u128::from(charge.unsigned_abs())).sum();
        let additions = charges.len() as u128 * (2 * u128::from(window) * weight + 1) * width;
        let too_long = || {
            Diagnostic::error(
                Code::PolarizationWindow,
                format!(
                    "counting the choices of {} ions in a window of {window} takes {additions} additions, above the \
                     limit of {MAX_ADDITIONS}",
                    charges.len()
                ),
            )
            .hint("--window 1")
        };
        if additions > MAX_ADDITIONS {
            return Err(too_long());
        }
        let reach = usize::try_from(u128::from(window) * weight).map_err(|_| too_long())?;
        let mut counts = vec![BigUint::ZERO; 2 * reach + 1];
        counts[reach] = BigUint::from(1_u32);
        let mut filled = 0_usize;
        let steps = i64::from(window);
        for &charge in charges {
            let mut next = vec![BigUint::ZERO; counts.len()];
            for (index, ways) in counts.iter().enumerate().take(reach + filled + 1).skip(reach - filled) {
                if *ways == BigUint::ZERO {
                    continue;
                }
                for n in -steps..=steps {
                    // Stays inside: |index − reach| ≤ w Σ|Z| of the ions so far.
                    if let Some(target) =
                        isize::try_from(charge * n).ok().and_then(|by| index.checked_add_signed(by))
                    {
                        next[target] += ways;
                    }
                }
            }
            counts = next;
            filled += usize::try_from(charge.unsigned_abs() * u64::from(window)).map_err(|_| too_long())?;
        }
        let start = -i64::try_from(reach).map_err(|_| too_long())?;
        let counts = (start..).zip(counts).filter(|(_, ways)| *ways != BigUint::ZERO).collect();
        let exponent = u32::try_from(3 * charges.len()).map_err(|_| too_long())?;
        Ok(Self { window, total: BigUint::from(width).pow(exponent), counts })
    }

    /// The number of choices that change `p` by a whole vector, in e.
    #[must_use]
    pub fn ways(&self, change: [i64; 3]) -> BigUint {
        let zero = BigUint::ZERO;
        change.iter().map(|component| self.counts.get(component).unwrap_or(&zero)).product()
    }
}

/// A plane of atoms that crosses the face of the window together.
#[derive(Debug, Clone, PartialEq)]
pub struct SweepPlane {
    /// Mean fractional coordinate along the axis, in [0, 1).
    pub coordinate: f64,
    /// Atoms of the primitive cell in the plane.
    pub atoms: Vec<usize>,
    /// Their charge in e.
    pub charge: i64,
    /// The component of `p` along the axis when the window starts just below this plane.
    pub value: Component,
}

/// All bases that a window moved along one primitive vector passes through.
#[derive(Debug, Clone, PartialEq)]
pub struct Sweep {
    /// Which primitive vector, 0 to 2.
    pub axis: usize,
    /// One basis for each plane, by coordinate.
    pub planes: Vec<SweepPlane>,
}

impl Sweep {
    /// Sweeps a window along one primitive vector. Atoms whose coordinates differ by less than `tolerance` Å, measured
    /// across the plane, cross together.
    ///
    /// # Errors
    /// `polarization-003` when an exact number overflows.
    pub fn along(
        axis: usize,
        primitive: &Primitive,
        charges: &[i64],
        formal: &FormalPolarization,
        tolerance: f64,
    ) -> Result<Self, Diagnostic> {
        let gap = tolerance / primitive.lattice.face_distances()[axis];
        let coordinates: Vec<f64> = primitive.positions.iter().map(|position| position[axis]).collect();
        let (groups, lifts) = group_cyclic(&coordinates, gap);
        let overflow = |_| Diagnostic::error(Code::PolarizationOverflow, crate::exact::Overflow.to_string());
        let mut lifted: i128 =
            lifts.iter().zip(charges).map(|(&lift, &charge)| i128::from(lift) * i128::from(charge)).sum();
        let mut planes = Vec::with_capacity(groups.len());
        for atoms in groups {
            let charge: i64 = atoms.iter().map(|&atom| charges[atom]).sum();
            let mean = mean_coordinate(&atoms, &coordinates, &lifts);
            let value = match formal.polarization[axis] {
                Component::Exact(ratio) => {
                    Component::Exact(ratio.checked_add(Ratio::from_integer(lifted)).map_err(overflow)?)
                }
                Component::Free(value) => Component::Free(value + float(lifted)),
            };
            planes.push(SweepPlane { coordinate: mean - mean.floor(), atoms, charge, value });
            lifted += i128::from(charge);
        }
        planes.sort_by(|a, b| a.coordinate.total_cmp(&b.coordinate));
        Ok(Self { axis, planes })
    }
}

#[allow(clippy::cast_precision_loss, reason = "numbers of atoms and cells are far below 2^52")]
fn mean_coordinate(atoms: &[usize], coordinates: &[f64], lifts: &[i64]) -> f64 {
    atoms.iter().map(|&atom| coordinates[atom] + lifts[atom] as f64).sum::<f64>() / atoms.len() as f64
}

#[allow(clippy::cast_precision_loss, reason = "sums of charges of one cell are far below 2^52")]
fn float(value: i128) -> f64 {
    value as f64
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Oracle: lists every choice along one axis.
    fn list(charges: &[i64], window: i64) -> BTreeMap<i64, u64> {
        let mut reached = BTreeMap::from([(0, 1)]);
        for charge in charges {
            let mut next = BTreeMap::new();
            for (value, ways) in &reached {
                for n in -window..=window {
                    *next.entry(value + charge * n).or_default() += ways;
                }
            }
            reached = next;
        }
        reached
    }

    proptest! {
        #[test]
        fn counts_equal_a_listing(charges in proptest::collection::vec(-6..=6_i64, 1..9), window in 0..3_u32) {
            let choices = Choices::count(&charges, window).expect("small");
            let slow: BTreeMap<i64, BigUint> =
                list(&charges, i64::from(window)).into_iter().map(|(v, n)| (v, BigUint::from(n))).collect();
            prop_assert_eq!(&choices.counts, &slow);
            let sum: BigUint = choices.counts.values().sum();
            prop_assert_eq!(sum.pow(3), choices.total);
        }
    }

    #[test]
    fn too_long_is_refused() {
        let refusal = Choices::count(&vec![4; 100_000], 9).expect_err("too long");
        assert_eq!(refusal.code, Code::PolarizationWindow);
    }
}
