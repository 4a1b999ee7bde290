//! A symmetry operation acting on fractional coordinates.

use nalgebra::{Matrix3, Vector3};

/// The map `x -> W x + w` on fractional coordinates, `W` an integer matrix of determinant ±1.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Operation {
    /// The matrix `W`.
    pub rotation: Matrix3<i32>,
    /// The vector `w`.
    pub translation: Vector3<f64>,
}

impl Operation {
    /// The operation that leaves everything where it is.
    #[must_use]
    pub fn identity() -> Self {
        Self { rotation: Matrix3::identity(), translation: Vector3::zeros() }
    }

    /// Where the operation takes a fractional position.
    #[must_use]
    pub fn apply(&self, position: &Vector3<f64>) -> Vector3<f64> {
        self.rotation.cast::<f64>() * position + self.translation
    }

    /// Whether `W` is the negative of the unit matrix.
    #[must_use]
    pub fn is_inversion(&self) -> bool {
        self.rotation == -Matrix3::<i32>::identity()
    }

    /// Whether `W` is the unit matrix.
    #[must_use]
    pub fn is_translation(&self) -> bool {
        self.rotation == Matrix3::<i32>::identity()
    }
}
