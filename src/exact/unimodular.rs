//! Unimodular matrices: changes of basis of a lattice.

use super::gcd::nearest_quotient;
use super::matrix::subtract_product;
use super::{IntMatrix, Overflow};

/// Whether the matrix is square with determinant ±1.
///
/// ```
/// use cosetta::exact::{IntMatrix, is_unimodular};
///
/// assert!(is_unimodular(&IntMatrix::from_rows([[2, 1], [1, 1]])));
/// assert!(!is_unimodular(&IntMatrix::from_rows([[2, 0], [0, 1]])));
/// ```
#[must_use]
pub fn is_unimodular(a: &IntMatrix) -> bool {
    // A determinant that does not fit is not ±1.
    a.rows() == a.cols() && a.determinant().is_ok_and(|determinant| determinant.unsigned_abs() == 1)
}

/// A unimodular matrix whose first row is `h`; `None` if the greatest common divisor of `h` is not 1.
///
/// Its determinant is +1 if `h` has more than one entry. Euclid's algorithm turns `h` into `w = (1, 0, …, 0)` while a
/// matrix `b`, at first 1, takes the inverse steps, so that `w b = h` throughout; at the end the first row of `b` is
/// `h` (existence: M. Newman, *Integral Matrices* (Academic Press, 1972), theorem II.1).
///
/// With `h` the Miller indices of a plane in a primitive basis, the inverse of the matrix has as its columns 1 and 2
/// (counted from 0) a basis of the lattice vectors in the plane, `h · t = 0`, and as its column 0 a vector to the next
/// plane, `h · t = 1`.
///
/// # Errors
/// If a number on the way does not fit.
///
/// ```
/// use cosetta::exact::{Overflow, complete_to_basis};
///
/// let basis = complete_to_basis(&[2, 3, 6])?.unwrap();
/// assert_eq!(basis.row(0), [2, 3, 6]);
/// assert_eq!(basis.determinant()?, 1);
/// assert_eq!(complete_to_basis(&[2, 4, 6])?, None);
/// # Ok::<(), Overflow>(())
/// ```
pub fn complete_to_basis(h: &[i128]) -> Result<Option<IntMatrix>, Overflow> {
    let n = h.len();
    let mut w = h.to_vec();
    let mut b = IntMatrix::identity(n);
    let mut is_reflected = false;
    loop {
        let smallest = (0..n).filter(|&j| w[j] != 0).min_by_key(|&j| w[j].unsigned_abs());
        let Some(smallest) = smallest else {
            return Ok(None);
        };
        if smallest != 0 {
            w.swap(0, smallest);
            b.swap_rows(0, smallest);
            is_reflected = !is_reflected;
        }
        if w[0] < 0 {
            w[0] = w[0].checked_neg().ok_or(Overflow)?;
            b.negate_row(0)?;
            is_reflected = !is_reflected;
        }
        for j in 1..n {
            // w[j] -= q w[0] leaves w b unchanged if row 0 of b gains q times row j.
            let quotient = nearest_quotient(w[j], w[0]);
            if quotient != 0 {
                w[j] = subtract_product(w[j], quotient, w[0])?;
                b.subtract_row(0, quotient.checked_neg().ok_or(Overflow)?, j)?;
            }
        }
        if w[1..].iter().all(|&entry| entry == 0) {
            break;
        }
    }
    if w[0] != 1 {
        return Ok(None);
    }
    if is_reflected && n > 1 {
        b.negate_row(n - 1)?;
    }
    Ok(Some(b))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{is_slowly_unimodular, matrix, slow_determinant, unimodular, wide};
    use num_bigint::BigInt;
    use num_integer::Integer;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn unimodular_is_recognised(a in (1_usize..5).prop_flat_map(unimodular), b in matrix(2, 2, 3)) {
            prop_assert!(is_unimodular(&a));
            prop_assert_eq!(is_unimodular(&b), is_slowly_unimodular(&b));
        }

        #[test]
        fn first_row_and_determinant(h in prop::collection::vec(-40_i128..=40, 0..5)) {
            let divisor = h.iter().fold(0, |g: i128, x| g.gcd(x));
            let basis = complete_to_basis(&h).expect("small numbers");
            prop_assert_eq!(basis.is_some(), divisor == 1);
            if let Some(basis) = basis {
                prop_assert_eq!((basis.rows(), basis.row(0)), (h.len(), h.as_slice()));
                let expected = if h.len() > 1 { 1 } else { h[0] };
                prop_assert_eq!(slow_determinant(&basis), BigInt::from(expected));
            }
        }

        #[test]
        fn large_rows_are_completed_or_refused(h in prop::collection::vec(wide(), 1..4)) {
            if let Ok(Some(basis)) = complete_to_basis(&h) {
                prop_assert_eq!(basis.row(0), h.as_slice());
                prop_assert!(is_slowly_unimodular(&basis));
            }
        }
    }

    #[test]
    fn the_rows_of_the_inverse_lie_in_the_plane() {
        let h = [1, 1, 2];
        let basis = complete_to_basis(&h).expect("small numbers").expect("coprime");
        let inverse = basis.inverse_unimodular().expect("small numbers").expect("unimodular");
        let heights: Vec<i128> = (0..3).map(|j| (0..3).map(|i| h[i] * inverse.get(i, j)).sum()).collect();
        assert_eq!(heights, [1, 0, 0]);
    }

    #[test]
    fn not_square_is_not_unimodular() {
        assert!(!is_unimodular(&IntMatrix::zeros(2, 3)));
        assert!(is_unimodular(&IntMatrix::zeros(0, 0)));
        // The determinant, 2^254, does not fit.
        assert!(!is_unimodular(&IntMatrix::from_rows([[1 << 126, 1], [1, i128::MAX]])));
    }
}
