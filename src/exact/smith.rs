//! Smith normal form.

use super::gcd::nearest_quotient;
use super::{IntMatrix, Overflow};

/// The Smith normal form of a matrix; see [`smith`].
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Smith {
    /// The unimodular transformation of the rows.
    pub u: IntMatrix,
    /// The normal form: `u * a * v = d`.
    pub d: IntMatrix,
    /// The unimodular transformation of the columns.
    pub v: IntMatrix,
}

impl Smith {
    /// The diagonal of `d`: `min(rows, cols)` elementary divisors, each dividing the next, zeros last.
    ///
    /// ```
    /// use cosetta::exact::{IntMatrix, Overflow, smith};
    ///
    /// let a = IntMatrix::from_rows([[2, 0], [0, 3], [0, 0]]);
    /// assert_eq!(smith(&a)?.divisors(), [1, 6]);
    /// # Ok::<(), Overflow>(())
    /// ```
    #[must_use]
    pub fn divisors(&self) -> Vec<i128> {
        (0..self.d.rows().min(self.d.cols())).map(|i| self.d.get(i, i)).collect()
    }

    /// The rank of the matrix: how many divisors are not zero.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.divisors().iter().filter(|&&divisor| divisor != 0).count()
    }
}

/// Smith normal form: `u * a * v = d` with `det u = ±1`, `det v = ±1` and `d` diagonal.
///
/// The diagonal is not negative and `d[i][i]` divides `d[i + 1][i + 1]` (zero is divided by every number). It is
/// unique: `d[0][0] … d[k-1][k-1]` is the greatest common divisor of the `k` x `k` minors of `a`. The matrix need not
/// be square. (Cohen 1993, section 2.4.4, Algorithm 2.4.14, here with the transformations, and with the smallest entry
/// as pivot to keep numbers short.)
///
/// So the solutions of `a p ∈ Z^rows` are `p = v q` with `d q ∈ Z^rows`: `q[i]` is any multiple of `1 / d[i][i]`, and
/// free where `d[i][i]` is zero or absent.
///
/// # Errors
/// If a number on the way does not fit.
///
/// ```
/// use cosetta::exact::{IntMatrix, Overflow, smith};
///
/// let a = IntMatrix::from_rows([[-1, 1], [-1, -1]]);
/// let form = smith(&a)?;
/// assert_eq!(form.u.checked_mul(&a)?.checked_mul(&form.v)?, form.d);
/// assert_eq!(form.d, IntMatrix::from_rows([[1, 0], [0, 2]]));
/// # Ok::<(), Overflow>(())
/// ```
pub fn smith(a: &IntMatrix) -> Result<Smith, Overflow> {
    let mut form = Smith { u: IntMatrix::identity(a.rows()), d: a.clone(), v: IntMatrix::identity(a.cols()) };
    for k in 0..a.rows().min(a.cols()) {
        if !form.diagonalise(k)? {
            break;
        }
    }
    Ok(form)
}

impl Smith {
    /// Makes `d[k][k]` positive, alone in its row and column, and a divisor of everything right and below; false if
    /// nothing but zeros is left.
    ///
    /// Each round but the last ends with an entry smaller than its pivot, so the rounds end.
    fn diagonalise(&mut self, k: usize) -> Result<bool, Overflow> {
        loop {
            let Some((i, j)) = self.find_smallest(k) else {
                return Ok(false);
            };
            self.d.swap_rows(k, i);
            self.u.swap_rows(k, i);
            self.d.swap_cols(k, j);
            self.v.swap_cols(k, j);
            if self.d.get(k, k) < 0 {
                self.d.negate_row(k)?;
                self.u.negate_row(k)?;
            }
            if !self.clear(k)? {
                continue;
            }
            let Some(row) = self.find_indivisible(k) else {
                return Ok(true);
            };
            self.subtract_row(k, -1, row)?;
        }
    }

    /// The place of the nonzero entry of smallest magnitude at or beyond `(k, k)`, which itself wins a tie.
    fn find_smallest(&self, k: usize) -> Option<(usize, usize)> {
        (k..self.d.rows())
            .flat_map(|i| (k..self.d.cols()).map(move |j| (i, j)))
            .filter(|&(i, j)| self.d.get(i, j) != 0)
            .min_by_key(|&(i, j)| self.d.get(i, j).unsigned_abs())
    }

    /// Subtracts the nearest multiples of row and column `k` from those beyond; true if no remainder is left.
    fn clear(&mut self, k: usize) -> Result<bool, Overflow> {
        let pivot = self.d.get(k, k);
        let mut is_clear = true;
        for i in k + 1..self.d.rows() {
            self.subtract_row(i, nearest_quotient(self.d.get(i, k), pivot), k)?;
            is_clear &= self.d.get(i, k) == 0;
        }
        for j in k + 1..self.d.cols() {
            self.subtract_col(j, nearest_quotient(self.d.get(k, j), pivot), k)?;
            is_clear &= self.d.get(k, j) == 0;
        }
        Ok(is_clear)
    }

    /// A row beyond `k` with an entry that the pivot does not divide.
    fn find_indivisible(&self, k: usize) -> Option<usize> {
        let pivot = self.d.get(k, k);
        (k + 1..self.d.rows()).find(|&i| self.d.row(i)[k + 1..].iter().any(|entry| entry % pivot != 0))
    }

    fn subtract_row(&mut self, i: usize, factor: i128, k: usize) -> Result<(), Overflow> {
        if factor == 0 {
            return Ok(());
        }
        self.d.subtract_row(i, factor, k)?;
        self.u.subtract_row(i, factor, k)
    }

    fn subtract_col(&mut self, j: usize, factor: i128, k: usize) -> Result<(), Overflow> {
        if factor == 0 {
            return Ok(());
        }
        self.d.subtract_col(j, factor, k)?;
        self.v.subtract_col(j, factor, k)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{
        any_matrix, determinantal_divisor, is_slowly_unimodular, matrix, unimodular, wide_matrix,
    };
    use num_bigint::BigInt;
    use proptest::prelude::*;

    fn is_diagonal(d: &IntMatrix) -> bool {
        (0..d.rows()).all(|i| (0..d.cols()).all(|j| i == j || d.get(i, j) == 0))
    }

    /// Each divides the next; zero divides only zero.
    fn is_chain(divisors: &[i128]) -> bool {
        divisors.iter().all(|&d| d >= 0)
            && divisors.windows(2).all(
                |pair| {
                    if pair[0] == 0 { pair[1] == 0 } else { pair[1] % pair[0] == 0 }
                },
            )
    }

    proptest! {
        #[test]
        fn equation_and_divisor_chain(a in any_matrix(5, 4, 12)) {
            let form = smith(&a).expect("small numbers");
            let product = form.u.checked_mul(&a).and_then(|ua| ua.checked_mul(&form.v));
            prop_assert_eq!(product.as_ref(), Ok(&form.d));
            prop_assert!(is_slowly_unimodular(&form.u) && is_slowly_unimodular(&form.v));
            prop_assert!(is_diagonal(&form.d), "{:?}", form.d);
            prop_assert!(is_chain(&form.divisors()), "{:?}", form.d);
            prop_assert_eq!(form.divisors().len(), a.rows().min(a.cols()));
        }

        #[test]
        fn large_numbers_are_reduced_or_refused(a in wide_matrix(3)) {
            if let Ok(form) = smith(&a) {
                prop_assert!(is_slowly_unimodular(&form.u) && is_slowly_unimodular(&form.v));
                prop_assert!(is_diagonal(&form.d) && is_chain(&form.divisors()), "{:?}", form.d);
                let mut product = BigInt::from(1);
                for (k, divisor) in form.divisors().into_iter().enumerate() {
                    product *= divisor;
                    prop_assert_eq!(&product, &determinantal_divisor(&a, k + 1));
                }
            }
        }

        #[test]
        fn divisors_agree_with_minors(a in any_matrix(4, 3, 12)) {
            let form = smith(&a).expect("small numbers");
            let mut product = BigInt::from(1);
            for (k, divisor) in form.divisors().into_iter().enumerate() {
                product *= divisor;
                prop_assert_eq!(&product, &determinantal_divisor(&a, k + 1));
            }
        }

        #[test]
        fn divisors_do_not_depend_on_the_bases((a, x, y) in (matrix(3, 3, 5), unimodular(3), unimodular(3))) {
            let other = x.checked_mul(&a).and_then(|xa| xa.checked_mul(&y)).expect("small numbers");
            prop_assert_eq!(smith(&a).map(|form| form.divisors()), smith(&other).map(|form| form.divisors()));
            prop_assert_eq!(smith(&a).map(|form| form.divisors()), smith(&a.transpose()).map(|form| form.divisors()));
        }
    }

    #[test]
    fn divisors_by_hand() {
        // The greatest common divisors of the 1x1, 2x2 and 3x3 minors are 2, 4 and 624; their quotients 2, 2, 156.
        let a = IntMatrix::from_rows([[2, 4, 4], [-6, 6, 12], [10, 4, 16]]);
        assert_eq!(smith(&a).map(|form| form.divisors()), Ok(vec![2, 2, 156]));
        assert_eq!(
            smith(&IntMatrix::zeros(2, 3)).map(|form| (form.divisors(), form.rank())),
            Ok((vec![0, 0], 0))
        );
        assert_eq!(smith(&IntMatrix::zeros(0, 3)).map(|form| form.divisors()), Ok(vec![]));
        // Inversion alone: W - 1 = -2, so every offset is 0 or 1/2 on each axis.
        let inversion = IntMatrix::from_rows([[-2, 0, 0], [0, -2, 0], [0, 0, -2]]);
        assert_eq!(smith(&inversion).map(|form| form.divisors()), Ok(vec![2, 2, 2]));
    }

    #[test]
    fn overflow_is_reported() {
        assert_eq!(smith(&IntMatrix::from_rows([[i128::MIN]])), Err(Overflow));
    }
}
