//! Lattice reduction: the shortest vectors of a lattice, and the shortest image of a vector.

use super::lattice::{Lattice, LatticeError};
use nalgebra::{Matrix3, Vector3};

/// Rounds after which a reduction that has not settled is taken as it stands; each round shortens a vector.
const MAX_ROUNDS: usize = 10_000;

/// A basis of the same lattice in which each vector is as short as it can be (Minkowski reduced in three dimensions).
///
/// With `B` the basis reduced and `T` the [`Reduced::change`]: `B' = B T`, `T` unimodular.
/// Greedy algorithm of Semaev, Cryptography and Lattices (2001), p. 181.
#[derive(Debug, Clone)]
pub struct Reduced {
    lattice: Lattice,
    change: Matrix3<f64>,
}

impl Reduced {
    /// Reduces a lattice.
    ///
    /// # Errors
    /// As [`Lattice::from_basis`], should the vectors turn out to lie in a plane.
    pub fn new(lattice: &Lattice) -> Result<Self, LatticeError> {
        let mut vectors: [Vector3<f64>; 3] = [0, 1, 2].map(|i| lattice.basis().column(i).into_owned());
        for _ in 0..MAX_ROUNDS {
            vectors.sort_by(|a, b| a.norm_squared().total_cmp(&b.norm_squared()));
            if !shorten_second(&mut vectors) && !shorten_third(&mut vectors) {
                break;
            }
        }
        let basis = Matrix3::from_columns(&vectors);
        let change = (lattice.inverse() * basis).map(f64::round);
        Ok(Self { lattice: lattice.transformed(&change)?, change })
    }

    /// The reduced lattice.
    #[must_use]
    pub fn lattice(&self) -> &Lattice {
        &self.lattice
    }

    /// The unimodular matrix `T` of `B' = B T`; its entries are whole numbers.
    #[must_use]
    pub fn change(&self) -> &Matrix3<f64> {
        &self.change
    }

    /// The shortest of a Cartesian vector's images under lattice translations, in Å.
    #[must_use]
    pub fn shortest_image(&self, cartesian: &Vector3<f64>) -> Vector3<f64> {
        let fractional = self.lattice.to_fractional(cartesian).map(|x| x - x.round());
        let mut best = self.lattice.to_cartesian(&fractional);
        for i in -1..=1 {
            for j in -1..=1 {
                for k in -1..=1 {
                    let shift = Vector3::new(f64::from(i), f64::from(j), f64::from(k));
                    let image = self.lattice.to_cartesian(&(fractional + shift));
                    if image.norm_squared() < best.norm_squared() {
                        best = image;
                    }
                }
            }
        }
        best
    }
}

/// Subtracts from the second vector its rounded projection on the first. Returns whether that made it shorter.
fn shorten_second(vectors: &mut [Vector3<f64>; 3]) -> bool {
    let [a, b, _] = *vectors;
    let factor = (a.dot(&b) / a.norm_squared()).round();
    replace_if_shorter(&mut vectors[1], b - a * factor)
}

/// Subtracts from the third vector the lattice vector of the other two that is nearest to it.
fn shorten_third(vectors: &mut [Vector3<f64>; 3]) -> bool {
    let [a, b, c] = *vectors;
    let gram = nalgebra::Matrix2::new(a.dot(&a), a.dot(&b), a.dot(&b), b.dot(&b));
    let Some(inverse) = gram.try_inverse() else { return false };
    let projection = inverse * nalgebra::Vector2::new(a.dot(&c), b.dot(&c));
    let mut best = c;
    for i in -1..=1 {
        for j in -1..=1 {
            let trial =
                c - a * (projection[0].round() + f64::from(i)) - b * (projection[1].round() + f64::from(j));
            if trial.norm_squared() < best.norm_squared() {
                best = trial;
            }
        }
    }
    replace_if_shorter(&mut vectors[2], best)
}

fn replace_if_shorter(vector: &mut Vector3<f64>, trial: Vector3<f64>) -> bool {
    let shorter = trial.norm_squared() < vector.norm_squared() * (1.0 - 1e-12);
    if shorter {
        *vector = trial;
    }
    shorter
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cell::CellParameters;
    use proptest::prelude::*;

    fn any_lattice() -> impl Strategy<Value = Lattice> {
        ([2.0..12.0_f64, 2.0..12.0, 2.0..12.0], [65.0..115.0_f64, 65.0..115.0, 65.0..115.0])
            .prop_filter_map("a cell with volume", |(lengths, angles)| {
                Lattice::from_parameters(&CellParameters { lengths, angles }).ok()
            })
    }

    proptest! {
        #[test]
        fn shear_is_undone(lattice in any_lattice(), shear in [-9..9_i32, -9..9, -9..9]) {
            let [p, q, r] = shear.map(f64::from);
            let change = Matrix3::new(1.0, p, q, 0.0, 1.0, r, 0.0, 0.0, 1.0);
            let sheared = lattice.transformed(&change).expect("same volume");
            let lengths = |lattice: &Lattice| Reduced::new(lattice).expect("reducible").lattice().parameters().lengths;
            let (mut one, mut other) = (lengths(&lattice), lengths(&sheared));
            one.sort_by(f64::total_cmp);
            other.sort_by(f64::total_cmp);
            for i in 0..3 {
                prop_assert!((one[i] - other[i]).abs() < 1e-8);
            }
        }

        #[test]
        fn shortest_image_equals_a_wide_search(lattice in any_lattice(), x in [-3.0..3.0_f64, -3.0..3.0, -3.0..3.0]) {
            // Oracle: all images within four cells of the wrapped vector.
            let fractional = Vector3::from(x);
            let wrapped = fractional.map(|v| v - v.round());
            let mut best = f64::INFINITY;
            for i in -4..=4 { for j in -4..=4 { for k in -4..=4 {
                let shift = Vector3::new(f64::from(i), f64::from(j), f64::from(k));
                best = best.min(lattice.to_cartesian(&(wrapped + shift)).norm());
            }}}
            let reduced = Reduced::new(&lattice).expect("reducible");
            let found = reduced.shortest_image(&lattice.to_cartesian(&fractional)).norm();
            prop_assert!((found - best).abs() < 1e-9, "{found} against {best}");
        }
    }
}
