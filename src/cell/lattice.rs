//! Lattice vectors and the quantities that follow from them.

use nalgebra::{Matrix3, Vector3};
use thiserror::Error;

/// Lengths outside this range, in Å, are refused: no crystal has such a cell.
const LENGTH_RANGE: (f64, f64) = (0.5, 1.0e4);
/// A cell whose volume is below this fraction of `a b c` is refused as degenerate.
const MIN_VOLUME_FRACTION: f64 = 1.0e-6;

/// The six cell parameters as a file states them: lengths in Å, angles in degrees.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CellParameters {
    /// Lengths `a`, `b`, `c` in Å.
    pub lengths: [f64; 3],
    /// Angles `alpha` (b, c), `beta` (a, c), `gamma` (a, b) in degrees.
    pub angles: [f64; 3],
}

/// Why a set of lattice vectors is not a lattice.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum LatticeError {
    /// A length or angle is NaN or infinite.
    #[error("{name} is {value}, which is not a finite number")]
    NotFinite {
        /// The parameter, such as `a` or `beta`.
        name: &'static str,
        /// What was given.
        value: f64,
    },
    /// A length or angle is outside the accepted range.
    #[error("{name} is {value}, outside {low} to {high}")]
    OutOfRange {
        /// The parameter.
        name: &'static str,
        /// What was given.
        value: f64,
        /// Smallest accepted value.
        low: f64,
        /// Largest accepted value.
        high: f64,
    },
    /// The three vectors lie in a plane, or the angles contradict each other.
    #[error("the cell has no volume: {volume_fraction:.3e} of the product of its lengths, below {limit:.0e}")]
    Degenerate {
        /// Volume divided by the product of the lengths; zero when the angles cannot close.
        volume_fraction: f64,
        /// The limit.
        limit: f64,
    },
}

/// Three lattice vectors in Cartesian axes, in Å. The vectors are the *columns* of [`Lattice::basis`], here and
/// everywhere else in the crate.
#[derive(Debug, Clone, PartialEq)]
pub struct Lattice {
    basis: Matrix3<f64>,
    inverse: Matrix3<f64>,
}

impl Lattice {
    /// Lattice vectors from cell parameters, with `a` along x and `b` in the xy plane.
    ///
    /// # Errors
    /// A parameter that is not finite or out of range, or a cell without volume.
    ///
    /// ```
    /// use cosetta::cell::{CellParameters, Lattice};
    /// let cubic = CellParameters { lengths: [4.1163; 3], angles: [90.0; 3] };
    /// let lattice = Lattice::from_parameters(&cubic)?;
    /// assert!((lattice.volume() - 4.1163_f64.powi(3)).abs() < 1e-9);
    /// # Ok::<(), cosetta::cell::LatticeError>(())
    /// ```
    pub fn from_parameters(parameters: &CellParameters) -> Result<Self, LatticeError> {
        const NAMES: [&str; 6] = ["a", "b", "c", "alpha", "beta", "gamma"];
        let values = parameters.lengths.iter().chain(&parameters.angles);
        for ((name, &value), is_length) in NAMES.into_iter().zip(values).zip((0..6).map(|k| k < 3)) {
            if !value.is_finite() {
                return Err(LatticeError::NotFinite { name, value });
            }
            let (low, high) = if is_length { LENGTH_RANGE } else { (1.0, 179.0) };
            if value < low || value > high {
                return Err(LatticeError::OutOfRange { name, value, low, high });
            }
        }
        let [a, b, c] = parameters.lengths;
        let [cos_alpha, cos_beta, cos_gamma] = parameters.angles.map(cosine_of_degrees);
        let sin_gamma = (1.0 - cos_gamma * cos_gamma).sqrt();
        let skew = (cos_alpha - cos_beta * cos_gamma) / sin_gamma;
        let height_squared = 1.0 - cos_beta * cos_beta - skew * skew;
        if height_squared <= 0.0 {
            return Err(LatticeError::Degenerate { volume_fraction: 0.0, limit: MIN_VOLUME_FRACTION });
        }
        Self::from_basis(Matrix3::new(
            a,
            b * cos_gamma,
            c * cos_beta,
            0.0,
            b * sin_gamma,
            c * skew,
            0.0,
            0.0,
            c * height_squared.sqrt(),
        ))
    }

    /// Lattice vectors given as the columns of a matrix, in Å.
    ///
    /// # Errors
    /// A component that is not finite, or vectors in a plane.
    pub fn from_basis(basis: Matrix3<f64>) -> Result<Self, LatticeError> {
        const NAMES: [&str; 3] = ["a", "b", "c"];
        for (name, column) in NAMES.into_iter().zip(basis.column_iter()) {
            let value = column.norm();
            if !value.is_finite() {
                return Err(LatticeError::NotFinite { name, value });
            }
        }
        let product: f64 = basis.column_iter().map(|column| column.norm()).product();
        let volume_fraction = basis.determinant().abs() / product;
        let degenerate = LatticeError::Degenerate { volume_fraction, limit: MIN_VOLUME_FRACTION };
        if volume_fraction < MIN_VOLUME_FRACTION {
            return Err(degenerate);
        }
        let inverse = basis.try_inverse().ok_or(degenerate)?;
        Ok(Self { basis, inverse })
    }

    /// The same lattice, if its lengths and angles are in the ranges that [`Lattice::from_parameters`] accepts.
    ///
    /// # Errors
    /// The parameter that is out of range.
    pub fn in_range(self) -> Result<Self, LatticeError> {
        Self::from_parameters(&self.parameters()).map(|_| self)
    }

    /// The matrix whose columns are the lattice vectors, in Å.
    #[must_use]
    pub fn basis(&self) -> &Matrix3<f64> {
        &self.basis
    }

    /// The inverse of [`Lattice::basis`]; its rows are the reciprocal vectors without the factor 2π, in 1/Å.
    #[must_use]
    pub fn inverse(&self) -> &Matrix3<f64> {
        &self.inverse
    }

    /// Volume of the cell in Å³, positive for either handedness.
    #[must_use]
    pub fn volume(&self) -> f64 {
        self.basis.determinant().abs()
    }

    /// Cartesian vector, in Å, of fractional coordinates.
    #[must_use]
    pub fn to_cartesian(&self, fractional: &Vector3<f64>) -> Vector3<f64> {
        self.basis * fractional
    }

    /// Fractional coordinates of a Cartesian vector in Å.
    #[must_use]
    pub fn to_fractional(&self, cartesian: &Vector3<f64>) -> Vector3<f64> {
        self.inverse * cartesian
    }

    /// Distances between the three pairs of faces, in Å: `1 / |b_i*|`.
    #[must_use]
    pub fn face_distances(&self) -> Vector3<f64> {
        Vector3::from_fn(|i, _| 1.0 / self.inverse.row(i).norm())
    }

    /// The lattice with basis `B T`, for an integer or rational change of basis `T` given as floats.
    ///
    /// # Errors
    /// As [`Lattice::from_basis`].
    pub fn transformed(&self, change: &Matrix3<f64>) -> Result<Self, LatticeError> {
        Self::from_basis(self.basis * change)
    }

    /// Lengths in Å and angles in degrees.
    #[must_use]
    pub fn parameters(&self) -> CellParameters {
        let lengths = [0, 1, 2].map(|i| self.basis.column(i).norm());
        let angle = |i: usize, j: usize| {
            let cosine = self.basis.column(i).dot(&self.basis.column(j)) / (lengths[i] * lengths[j]);
            cosine.clamp(-1.0, 1.0).acos().to_degrees()
        };
        CellParameters { lengths, angles: [angle(1, 2), angle(0, 2), angle(0, 1)] }
    }
}

/// Cosine of an angle in degrees, exact at 60, 90 and 120.
#[allow(clippy::float_cmp, reason = "files state these angles as exact numbers")]
fn cosine_of_degrees(angle: f64) -> f64 {
    if angle == 90.0 {
        0.0
    } else if angle == 120.0 {
        -0.5
    } else if angle == 60.0 {
        0.5
    } else {
        angle.to_radians().cos()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn hexagonal_volume() {
        // V = a² c √3/2, from memory (any crystallography text).
        let parameters = CellParameters { lengths: [3.25, 3.25, 5.2], angles: [90.0, 90.0, 120.0] };
        let lattice = Lattice::from_parameters(&parameters).expect("a good cell");
        assert!((lattice.volume() - 3.25 * 3.25 * 5.2 * 0.75_f64.sqrt()).abs() < 1e-10);
    }

    #[test]
    fn refusals() {
        let parameters = |lengths, angles| Lattice::from_parameters(&CellParameters { lengths, angles });
        assert!(matches!(
            parameters([f64::NAN, 4.0, 4.0], [90.0; 3]),
            Err(LatticeError::NotFinite { name: "a", .. })
        ));
        assert!(matches!(
            parameters([4.0, 4.0, 0.0], [90.0; 3]),
            Err(LatticeError::OutOfRange { name: "c", .. })
        ));
        assert!(matches!(parameters([4.0; 3], [60.0, 60.0, 170.0]), Err(LatticeError::Degenerate { .. })));
        assert!(matches!(
            parameters([4.0; 3], [90.0, f64::INFINITY, 90.0]),
            Err(LatticeError::NotFinite { .. })
        ));
    }

    proptest! {
        #[test]
        fn parameters_round_trip(
            lengths in [2.0..20.0_f64, 2.0..20.0, 2.0..20.0],
            angles in [70.0..110.0_f64, 70.0..110.0, 70.0..110.0],
        ) {
            let given = CellParameters { lengths, angles };
            let back = Lattice::from_parameters(&given).expect("a good cell").parameters();
            for i in 0..3 {
                prop_assert!((back.lengths[i] - lengths[i]).abs() < 1e-9);
                prop_assert!((back.angles[i] - angles[i]).abs() < 1e-9);
            }
        }
    }
}
