//! Matrices of integers.

mod determinant;

use super::{Overflow, hermite};
use num_bigint::BigInt;
use std::fmt;

/// A matrix of integers with any number of rows and columns, either of which may be zero.
///
/// Rows and columns are counted from zero. Indices outside the matrix and shapes that do not fit panic, as slices do.
///
/// ```
/// use cosetta::exact::{IntMatrix, Overflow};
///
/// let a = IntMatrix::from_rows([[2, 1], [0, 3]]);
/// assert_eq!(a.determinant()?, 6);
/// assert_eq!(a.checked_mul_vector(&[1, -1])?, [1, -3]);
/// assert_eq!(a.to_string(), "[2 1; 0 3]");
/// # Ok::<(), Overflow>(())
/// ```
#[derive(Clone, PartialEq, Eq, Hash)]
pub struct IntMatrix {
    rows: usize,
    cols: usize,
    /// Row-major.
    entries: Vec<i128>,
}

impl IntMatrix {
    /// The matrix with the given rows.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// let a = IntMatrix::from_rows([[1, 2, 3], [4, 5, 6]]);
    /// assert_eq!((a.rows(), a.cols(), a.get(1, 2)), (2, 3, 6));
    /// ```
    #[must_use]
    pub fn from_rows<const N: usize>(rows: impl IntoIterator<Item = [i128; N]>) -> Self {
        let mut matrix = Self::zeros(0, N);
        for row in rows {
            matrix.entries.extend_from_slice(&row);
            matrix.rows += 1;
        }
        matrix
    }

    /// The matrix with the given entries, row by row; `None` if their number is not `rows * cols`.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// let a = IntMatrix::from_row_major(2, 2, vec![1, 2, 3, 4]);
    /// assert_eq!(a, Some(IntMatrix::from_rows([[1, 2], [3, 4]])));
    /// assert_eq!(IntMatrix::from_row_major(2, 2, vec![1]), None);
    /// ```
    #[must_use]
    pub fn from_row_major(rows: usize, cols: usize, entries: Vec<i128>) -> Option<Self> {
        (rows.checked_mul(cols) == Some(entries.len())).then_some(Self { rows, cols, entries })
    }

    /// All entries zero.
    #[must_use]
    pub fn zeros(rows: usize, cols: usize) -> Self {
        Self { rows, cols, entries: vec![0; rows * cols] }
    }

    /// Ones on the diagonal of a square matrix.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// assert_eq!(IntMatrix::identity(2), IntMatrix::from_rows([[1, 0], [0, 1]]));
    /// ```
    #[must_use]
    pub fn identity(n: usize) -> Self {
        let mut matrix = Self::zeros(n, n);
        for i in 0..n {
            matrix.set(i, i, 1);
        }
        matrix
    }

    /// Number of rows.
    #[must_use]
    pub fn rows(&self) -> usize {
        self.rows
    }

    /// Number of columns.
    #[must_use]
    pub fn cols(&self) -> usize {
        self.cols
    }

    /// The entry in row `i`, column `j`.
    ///
    /// # Panics
    /// If there is none.
    #[must_use]
    pub fn get(&self, i: usize, j: usize) -> i128 {
        self.row(i)[j]
    }

    /// Replaces the entry in row `i`, column `j`.
    ///
    /// # Panics
    /// If there is none.
    pub fn set(&mut self, i: usize, j: usize, value: i128) {
        self.row_mut(i)[j] = value;
    }

    /// Row `i`.
    ///
    /// # Panics
    /// If there is none.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// assert_eq!(IntMatrix::from_rows([[1, 2], [3, 4]]).row(1), [3, 4]);
    /// ```
    #[must_use]
    pub fn row(&self, i: usize) -> &[i128] {
        &self.entries[i * self.cols..(i + 1) * self.cols]
    }

    fn row_mut(&mut self, i: usize) -> &mut [i128] {
        &mut self.entries[i * self.cols..(i + 1) * self.cols]
    }

    /// Rows and columns exchanged.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// let a = IntMatrix::from_rows([[1, 2, 3]]);
    /// assert_eq!(a.transpose(), IntMatrix::from_rows([[1], [2], [3]]));
    /// ```
    #[must_use]
    pub fn transpose(&self) -> Self {
        let entries = (0..self.cols).flat_map(|j| (0..self.rows).map(move |i| self.get(i, j))).collect();
        Self { rows: self.cols, cols: self.rows, entries }
    }

    /// The rows of `self`, then those of `other`.
    ///
    /// # Panics
    /// If the numbers of columns differ.
    ///
    /// ```
    /// use cosetta::exact::IntMatrix;
    ///
    /// let a = IntMatrix::from_rows([[1, 2]]).stack(&IntMatrix::from_rows([[3, 4]]));
    /// assert_eq!(a, IntMatrix::from_rows([[1, 2], [3, 4]]));
    /// ```
    #[must_use]
    pub fn stack(&self, other: &Self) -> Self {
        assert_eq!(self.cols, other.cols, "stacked matrices have the same number of columns");
        let entries = [self.entries.as_slice(), &other.entries].concat();
        Self { rows: self.rows + other.rows, cols: self.cols, entries }
    }

    /// The matrix product: `c[i][k] = Σ_j self[i][j] other[j][k]`.
    ///
    /// # Errors
    /// If an entry of the product does not fit.
    ///
    /// # Panics
    /// If `self` has not as many columns as `other` has rows.
    ///
    /// ```
    /// use cosetta::exact::{IntMatrix, Overflow};
    ///
    /// let a = IntMatrix::from_rows([[1, 1], [0, 1]]);
    /// assert_eq!(a.checked_mul(&a)?, IntMatrix::from_rows([[1, 2], [0, 1]]));
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_mul(&self, other: &Self) -> Result<Self, Overflow> {
        assert_eq!(self.cols, other.rows, "columns of the left factor match rows of the right");
        let mut product = Self::zeros(self.rows, other.cols);
        for i in 0..self.rows {
            for k in 0..other.cols {
                let column = (0..other.rows).map(|j| other.get(j, k));
                product.set(i, k, dot(self.row(i).iter().copied().zip(column))?);
            }
        }
        Ok(product)
    }

    /// The product with a column vector: `w[i] = Σ_j self[i][j] vector[j]`.
    ///
    /// # Errors
    /// If an entry of the product does not fit.
    ///
    /// # Panics
    /// If the vector has not as many entries as `self` has columns.
    pub fn checked_mul_vector(&self, vector: &[i128]) -> Result<Vec<i128>, Overflow> {
        assert_eq!(self.cols, vector.len(), "columns of the matrix match entries of the vector");
        (0..self.rows).map(|i| dot(self.row(i).iter().copied().zip(vector.iter().copied()))).collect()
    }

    /// The integer inverse: `self * inverse = 1`; `None` if there is none, the determinant not being ±1.
    ///
    /// The Hermite form of a unimodular matrix is 1, so the inverse is the transformation `u` of `self * u = 1`.
    ///
    /// # Errors
    /// If a number on the way does not fit.
    ///
    /// ```
    /// use cosetta::exact::{IntMatrix, Overflow};
    ///
    /// let a = IntMatrix::from_rows([[2, 1], [1, 1]]);
    /// assert_eq!(a.inverse_unimodular()?, Some(IntMatrix::from_rows([[1, -1], [-1, 2]])));
    /// assert_eq!(IntMatrix::from_rows([[2, 0], [0, 1]]).inverse_unimodular()?, None);
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn inverse_unimodular(&self) -> Result<Option<Self>, Overflow> {
        if self.rows != self.cols {
            return Ok(None);
        }
        let form = hermite(self)?;
        Ok((form.h == Self::identity(self.rows)).then_some(form.u))
    }

    /// Exchanges rows `i` and `k`.
    pub(super) fn swap_rows(&mut self, i: usize, k: usize) {
        for j in 0..self.cols {
            self.entries.swap(i * self.cols + j, k * self.cols + j);
        }
    }

    /// Exchanges columns `j` and `k`.
    pub(super) fn swap_cols(&mut self, j: usize, k: usize) {
        for i in 0..self.rows {
            self.row_mut(i).swap(j, k);
        }
    }

    /// `row[i] = -row[i]`.
    pub(super) fn negate_row(&mut self, i: usize) -> Result<(), Overflow> {
        for entry in self.row_mut(i) {
            *entry = entry.checked_neg().ok_or(Overflow)?;
        }
        Ok(())
    }

    /// `row[i] -= factor * row[k]`.
    pub(super) fn subtract_row(&mut self, i: usize, factor: i128, k: usize) -> Result<(), Overflow> {
        for j in 0..self.cols {
            let value = subtract_product(self.get(i, j), factor, self.get(k, j))?;
            self.set(i, j, value);
        }
        Ok(())
    }

    /// `col[j] -= factor * col[k]`.
    pub(super) fn subtract_col(&mut self, j: usize, factor: i128, k: usize) -> Result<(), Overflow> {
        for i in 0..self.rows {
            let value = subtract_product(self.get(i, j), factor, self.get(i, k))?;
            self.set(i, j, value);
        }
        Ok(())
    }
}

/// `a - b c`.
pub(super) fn subtract_product(a: i128, b: i128, c: i128) -> Result<i128, Overflow> {
    b.checked_mul(c).and_then(|product| a.checked_sub(product)).ok_or(Overflow)
}

/// `Σ a b`; by big integers where a partial sum does not fit.
fn dot(pairs: impl Iterator<Item = (i128, i128)> + Clone) -> Result<i128, Overflow> {
    let small = pairs.clone().try_fold(0_i128, |sum, (a, b)| sum.checked_add(a.checked_mul(b)?));
    match small {
        Some(sum) => Ok(sum),
        None => i128::try_from(pairs.map(|(a, b)| BigInt::from(a) * b).sum::<BigInt>()).map_err(|_| Overflow),
    }
}

impl fmt::Display for IntMatrix {
    /// Rows on one line, `[2 1; 0 3]`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("[")?;
        for i in 0..self.rows {
            if i > 0 {
                f.write_str("; ")?;
            }
            for (j, entry) in self.row(i).iter().enumerate() {
                if j > 0 {
                    f.write_str(" ")?;
                }
                write!(f, "{entry}")?;
            }
        }
        f.write_str("]")
    }
}

impl fmt::Debug for IntMatrix {
    /// Shape and rows, `2x2 [2 1; 0 3]`.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}x{} {self}", self.rows, self.cols)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{matrix, slow_determinant, unimodular, wide};
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn product_agrees_with_big_integers(
            a in prop::collection::vec(wide(), 6), b in prop::collection::vec(wide(), 3),
        ) {
            let a = IntMatrix::from_row_major(2, 3, a).expect("2x3");
            let expected: Option<Vec<i128>> = (0..2)
                .map(|i| (0..3).map(|j| BigInt::from(a.get(i, j)) * b[j]).sum::<BigInt>())
                .map(|sum| i128::try_from(sum).ok())
                .collect();
            prop_assert_eq!(a.checked_mul_vector(&b).ok(), expected.clone());
            let column = IntMatrix::from_row_major(3, 1, b).expect("3x1");
            let product = a.checked_mul(&column).ok();
            prop_assert_eq!(product, expected.and_then(|w| IntMatrix::from_row_major(2, 1, w)));
        }

        #[test]
        fn transpose_reverses_products(a in matrix(2, 3, 9), b in matrix(3, 4, 9)) {
            let left = a.checked_mul(&b).map(|c| c.transpose());
            prop_assert_eq!(left, b.transpose().checked_mul(&a.transpose()));
            prop_assert_eq!(a.transpose().transpose(), a);
        }

        #[test]
        fn inverse_of_unimodular(a in (1_usize..5).prop_flat_map(unimodular)) {
            let inverse = a.inverse_unimodular().expect("small").expect("unimodular");
            let one = IntMatrix::identity(a.rows());
            prop_assert_eq!(a.checked_mul(&inverse), Ok(one.clone()));
            prop_assert_eq!(inverse.checked_mul(&a), Ok(one));
        }

        #[test]
        fn inverse_exists_only_for_determinant_one(a in matrix(3, 3, 2)) {
            let is_unimodular = *slow_determinant(&a).magnitude() == 1_u32.into();
            prop_assert_eq!(a.inverse_unimodular().map(|inverse| inverse.is_some()), Ok(is_unimodular));
        }
    }

    #[test]
    fn shapes_without_entries() {
        let tall = IntMatrix::zeros(3, 0);
        assert_eq!(tall.checked_mul(&IntMatrix::zeros(0, 2)), Ok(IntMatrix::zeros(3, 2)));
        assert_eq!(tall.transpose(), IntMatrix::zeros(0, 3));
        assert_eq!(IntMatrix::zeros(0, 0).determinant(), Ok(1));
        assert_eq!(IntMatrix::from_rows::<3>([]).stack(&IntMatrix::identity(3)), IntMatrix::identity(3));
        assert_eq!(tall.inverse_unimodular(), Ok(None));
        assert_eq!(format!("{tall:?}"), "3x0 [; ; ]");
    }

    #[test]
    #[should_panic(expected = "out of range")]
    fn an_index_beyond_the_row_is_not_the_next_row() {
        let a = IntMatrix::identity(2);
        let _ = a.row(2);
    }

    #[test]
    #[should_panic(expected = "out of bounds")]
    fn an_index_beyond_the_column_is_not_the_next_row() {
        let _ = IntMatrix::identity(2).get(0, 2);
    }
}
