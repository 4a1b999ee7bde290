//! Symmetry operations as a CIF writes them, such as `-x,y+1/2,-z+1/2`.

use crate::symmetry::setting::{AffineError, Motion, parse_affine};
use thiserror::Error;

/// Why a text is not a symmetry operation.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum OperationError {
    /// The text is not an affine map.
    #[error(transparent)]
    Text(#[from] AffineError),
    /// A coordinate has a coefficient that is not a small whole number.
    #[error("a coefficient of x, y or z is not a small whole number")]
    Coefficient,
    /// The map does not keep volumes.
    #[error("its determinant is {determinant}, not 1 or -1")]
    Determinant {
        /// The determinant of the matrix.
        determinant: i32,
    },
}

/// Reads a symmetry operation in any usual spelling; see [`parse_affine`] for how decimals become fractions.
/// The translation is exact, and reduced to [0, 1).
///
/// # Errors
/// The text is not an affine map with whole coefficients and determinant ±1.
///
/// ```
/// use cosetta::cif::parse_operation;
/// assert_eq!(parse_operation("-X+1/2, Y, 0.5-z")?, parse_operation("1/2-x,y,1/2-z")?);
/// assert!(parse_operation("2x,y,z").is_err());
/// # Ok::<(), cosetta::cif::OperationError>(())
/// ```
pub fn parse_operation(text: &str) -> Result<Motion, OperationError> {
    let affine = parse_affine(text)?;
    let motion = Motion::from_affine(&affine).ok_or(OperationError::Coefficient)?;
    match motion.determinant() {
        1 | -1 => Ok(motion),
        determinant => Err(OperationError::Determinant { determinant }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn matrices_and_translations() {
        let operation = parse_operation("-y, x-y, z+0.3333").expect("an operation").to_operation();
        assert_eq!(operation.rotation, nalgebra::Matrix3::new(0, -1, 0, 1, -1, 0, 0, 0, 1));
        assert!((operation.translation - nalgebra::Vector3::new(0.0, 0.0, 1.0 / 3.0)).norm() < 1e-15);
        let wrapped = parse_operation("x-1/4,y+5/4,z").expect("an operation").to_operation();
        assert!((wrapped.translation - nalgebra::Vector3::new(0.75, 0.25, 0.0)).norm() < 1e-15);
    }

    #[test]
    fn faults_are_told_apart() {
        assert_eq!(parse_operation("2x,y,z"), Err(OperationError::Determinant { determinant: 2 }));
        assert_eq!(parse_operation("x,x,z"), Err(OperationError::Determinant { determinant: 0 }));
        assert_eq!(parse_operation("1/2x,y,z"), Err(OperationError::Coefficient));
        assert!(matches!(parse_operation("x,y"), Err(OperationError::Text(_))));
    }
}
