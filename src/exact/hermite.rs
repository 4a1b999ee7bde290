//! Hermite normal form.

use super::gcd::nearest_quotient;
use super::{IntMatrix, Overflow};

/// The Hermite normal form of a matrix; see [`hermite`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Hermite {
    /// The normal form: `a * u = h`.
    pub h: IntMatrix,
    /// The unimodular transformation of the columns; its last `cols - rank` columns span the integer kernel of `a`.
    pub u: IntMatrix,
    /// The row of the pivot of each nonzero column of `h`, increasing.
    pub pivots: Vec<usize>,
}

impl Hermite {
    /// The rank of the matrix: how many columns of `h` are not zero.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.pivots.len()
    }
}

/// Column-style Hermite normal form: `a * u = h` with `det u = ±1` and `h` in reduced column echelon form.
///
/// With `p[k]` the pivot rows, `p[0] < p[1] < …`, and `r` the rank:
/// - columns `r..` of `h` are zero;
/// - `h[i][k] = 0` for `i < p[k]`, and `h[p[k]][k] > 0`, for `k < r`;
/// - `0 <= h[p[k]][j] < h[p[k]][k]` for `j < k`.
///
/// So if the rows of `a` are independent, `p[k] = k`, and `h` is lower triangular with `0 <= h[i][j] < h[i][i]` for
/// `j < i`. Matrices whose columns span the same lattice have the same nonzero columns in `h`.
///
/// Elimination by nearest quotients on the entry of smallest magnitude (Cohen 1993, section 2.4.2, Algorithm 2.4.4,
/// with rows taken from the top and columns from the left).
///
/// # Errors
/// If a number on the way does not fit.
///
/// ```
/// use cosetta::exact::{Hermite, IntMatrix, Overflow, hermite};
///
/// let a = IntMatrix::from_rows([[2, 4], [1, 5]]);
/// let Hermite { h, u, pivots } = hermite(&a)?;
/// assert_eq!(a.checked_mul(&u)?, h);
/// assert_eq!(h, IntMatrix::from_rows([[2, 0], [1, 3]]));
/// assert_eq!(pivots, [0, 1]);
/// # Ok::<(), Overflow>(())
/// ```
pub fn hermite(a: &IntMatrix) -> Result<Hermite, Overflow> {
    let (rows, cols) = (a.rows(), a.cols());
    // Columns of a, each followed by its column of u, as rows: one operation serves both.
    let mut columns = IntMatrix::zeros(cols, rows + cols);
    for j in 0..cols {
        for i in 0..rows {
            columns.set(j, i, a.get(i, j));
        }
        columns.set(j, rows + j, 1);
    }
    let mut pivots = Vec::with_capacity(rows.min(cols));
    for i in 0..rows {
        if eliminate(&mut columns, i, pivots.len())? {
            reduce_left(&mut columns, i, pivots.len())?;
            pivots.push(i);
        }
    }
    let (mut h, mut u) = (IntMatrix::zeros(rows, cols), IntMatrix::zeros(cols, cols));
    for j in 0..cols {
        for i in 0..rows {
            h.set(i, j, columns.get(j, i));
        }
        for i in 0..cols {
            u.set(i, j, columns.get(j, rows + i));
        }
    }
    Ok(Hermite { h, u, pivots })
}

/// Gathers coordinate `i` of columns `k..` in column `k`, positive; false if it is zero in all of them.
fn eliminate(columns: &mut IntMatrix, i: usize, k: usize) -> Result<bool, Overflow> {
    loop {
        let smallest = (k..columns.rows())
            .filter(|&j| columns.get(j, i) != 0)
            .min_by_key(|&j| columns.get(j, i).unsigned_abs());
        let Some(smallest) = smallest else {
            return Ok(false);
        };
        columns.swap_rows(k, smallest);
        if columns.get(k, i) < 0 {
            columns.negate_row(k)?;
        }
        let pivot = columns.get(k, i);
        let mut is_done = true;
        for j in k + 1..columns.rows() {
            let quotient = nearest_quotient(columns.get(j, i), pivot);
            if quotient != 0 {
                columns.subtract_row(j, quotient, k)?;
            }
            is_done &= columns.get(j, i) == 0;
        }
        if is_done {
            return Ok(true);
        }
    }
}

/// Brings coordinate `i` of the columns left of the pivot column `k` into `[0, pivot)`.
fn reduce_left(columns: &mut IntMatrix, i: usize, k: usize) -> Result<(), Overflow> {
    let pivot = columns.get(k, i);
    for j in 0..k {
        let quotient = columns.get(j, i).div_euclid(pivot);
        if quotient != 0 {
            columns.subtract_row(j, quotient, k)?;
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{
        any_matrix, determinantal_divisor, is_slowly_unimodular, matrix, unimodular, wide_matrix,
    };
    use num_bigint::BigInt;
    use proptest::prelude::*;

    /// The echelon conditions in the words of [`hermite`].
    fn is_echelon(h: &IntMatrix, pivots: &[usize]) -> bool {
        let increasing = pivots.windows(2).all(|pair| pair[0] < pair[1]);
        let columns = pivots.iter().enumerate().all(|(k, &p)| {
            let pivot = h.get(p, k);
            pivot > 0 && (0..p).all(|i| h.get(i, k) == 0) && (0..k).all(|j| (0..pivot).contains(&h.get(p, j)))
        });
        let zeros = (pivots.len()..h.cols()).all(|k| (0..h.rows()).all(|i| h.get(i, k) == 0));
        increasing && columns && zeros
    }

    proptest! {
        #[test]
        fn equation_and_echelon_form(a in any_matrix(4, 5, 9)) {
            let form = hermite(&a).expect("small numbers");
            prop_assert_eq!(a.checked_mul(&form.u), Ok(form.h.clone()));
            prop_assert!(is_slowly_unimodular(&form.u));
            prop_assert!(is_echelon(&form.h, &form.pivots), "{:?}", form);
            // The rank is the size of the largest minor that is not zero.
            let rank = (0..=a.rows().min(a.cols())).rev().find(|&k| determinantal_divisor(&a, k) != BigInt::ZERO);
            prop_assert_eq!(Some(form.rank()), rank);
        }

        #[test]
        fn large_numbers_are_reduced_or_refused(a in wide_matrix(3)) {
            if let Ok(form) = hermite(&a) {
                prop_assert_eq!(a.checked_mul(&form.u), Ok(form.h.clone()));
                prop_assert!(is_slowly_unimodular(&form.u));
                prop_assert!(is_echelon(&form.h, &form.pivots), "{:?}", form);
            }
        }

        #[test]
        fn depends_only_on_the_column_lattice((a, v) in (matrix(3, 4, 6), unimodular(4))) {
            let other = a.checked_mul(&v).expect("small numbers");
            prop_assert_eq!(hermite(&a).map(|form| form.h), hermite(&other).map(|form| form.h));
        }
    }

    #[test]
    fn rank_deficient_by_hand() {
        // Columns (0,2,4), (0,4,8), (0,0,0): the lattice of (0,2,4), pivot in row 1.
        let a = IntMatrix::from_rows([[0, 0, 0], [2, 4, 0], [4, 8, 0]]);
        let form = hermite(&a).expect("small numbers");
        assert_eq!(form.h, IntMatrix::from_rows([[0, 0, 0], [2, 0, 0], [4, 0, 0]]));
        assert_eq!((form.pivots.as_slice(), form.rank()), (&[1][..], 1));
    }

    #[test]
    fn face_centred_lattice_by_hand() {
        // Columns (0,1,1), (1,0,1), (1,1,0) span the integer vectors of even sum: index 2.
        let a = IntMatrix::from_rows([[0, 1, 1], [1, 0, 1], [1, 1, 0]]);
        let form = hermite(&a).expect("small numbers");
        assert_eq!(form.h, IntMatrix::from_rows([[1, 0, 0], [0, 1, 0], [1, 1, 2]]));
    }

    #[test]
    fn overflow_is_reported() {
        let a = IntMatrix::from_rows([[i128::MIN, 0]]);
        assert_eq!(hermite(&a), Err(Overflow));
    }
}
