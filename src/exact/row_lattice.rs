//! Lattices of integer row vectors, grown one vector at a time.

use super::gcd::{ExtendedGcd, extended_gcd};
use super::matrix::subtract_product;
use super::{IntMatrix, Overflow};

/// The lattice spanned by the integer rows inserted so far, in a fixed dimension `n`.
///
/// It squeezes any number of rows into at most `n`: the basis is kept in row Hermite form, so equal lattices have
/// equal bases, and a vector already in the lattice costs at most `n` row subtractions and no allocation.
///
/// ```
/// use cosetta::exact::{IntMatrix, Overflow, RowLattice};
///
/// let mut lattice = RowLattice::new(2);
/// assert!(lattice.insert(&[2, 0])?);
/// assert!(lattice.insert(&[1, 1])?);
/// assert!(!lattice.insert(&[3, -1])?);
/// assert_eq!(lattice.basis(), IntMatrix::from_rows([[1, 1], [0, 2]]));
/// assert_eq!(lattice.index()?, Some(2));
/// # Ok::<(), Overflow>(())
/// ```
#[derive(Debug, Clone)]
pub struct RowLattice {
    /// Row `j` is the basis vector with its first nonzero entry in column `j`, or zero if there is none.
    basis: IntMatrix,
    scratch: Vec<i128>,
}

impl RowLattice {
    /// The lattice `{0}` in dimension `n`.
    #[must_use]
    pub fn new(n: usize) -> Self {
        Self { basis: IntMatrix::zeros(n, n), scratch: vec![0; n] }
    }

    /// The number of coordinates of a vector.
    #[must_use]
    pub fn dimension(&self) -> usize {
        self.basis.cols()
    }

    /// Adds a vector and its multiples; true if the lattice grew.
    ///
    /// # Errors
    /// If a number on the way does not fit; the lattice is then as it was before.
    ///
    /// # Panics
    /// If the vector has not `n` entries.
    pub fn insert(&mut self, vector: &[i128]) -> Result<bool, Overflow> {
        self.scratch.copy_from_slice(vector);
        match first_remainder(&self.basis, &mut self.scratch)? {
            None => Ok(false),
            Some(column) => {
                self.basis = grown(&self.basis, &mut self.scratch, column)?;
                Ok(true)
            }
        }
    }

    /// Whether the vector is an integer combination of the rows inserted so far.
    ///
    /// # Errors
    /// If a number on the way does not fit.
    ///
    /// # Panics
    /// If the vector has not `n` entries.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, RowLattice};
    ///
    /// let mut lattice = RowLattice::new(2);
    /// lattice.insert(&[2, 4])?;
    /// assert!(lattice.contains(&[-4, -8])?);
    /// assert!(!lattice.contains(&[1, 2])?);
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn contains(&self, vector: &[i128]) -> Result<bool, Overflow> {
        let mut rest = vec![0; self.dimension()];
        rest.copy_from_slice(vector);
        Ok(first_remainder(&self.basis, &mut rest)?.is_none())
    }

    /// The basis in row Hermite form, `rank` x `n`: the transpose of the nonzero columns of
    /// [`hermite`](super::hermite()) of the transposed rows.
    ///
    /// The first nonzero entry of each row, its pivot, is positive and right of the pivot above; the entries above a
    /// pivot are in `[0, pivot)`.
    #[must_use]
    pub fn basis(&self) -> IntMatrix {
        let n = self.dimension();
        let entries = self.pivots().flat_map(|j| self.basis.row(j).iter().copied()).collect();
        // The shape is right by construction.
        IntMatrix::from_row_major(self.rank(), n, entries).unwrap_or_else(|| IntMatrix::zeros(0, n))
    }

    /// The number of independent rows.
    #[must_use]
    pub fn rank(&self) -> usize {
        self.pivots().count()
    }

    /// The index of the lattice in `Z^n`, the product of the pivots; `None` if the rank is below `n`.
    ///
    /// # Errors
    /// If the index does not fit.
    pub fn index(&self) -> Result<Option<i128>, Overflow> {
        let n = self.dimension();
        if self.rank() < n {
            return Ok(None);
        }
        let index = (0..n).try_fold(1_i128, |product, j| product.checked_mul(self.basis.get(j, j)));
        index.map(Some).ok_or(Overflow)
    }

    /// The pivot columns, increasing.
    fn pivots(&self) -> impl Iterator<Item = usize> {
        (0..self.dimension()).filter(|&j| self.basis.get(j, j) != 0)
    }
}

/// Two lattices are equal if they have the same vectors.
impl PartialEq for RowLattice {
    fn eq(&self, other: &Self) -> bool {
        self.basis == other.basis
    }
}

impl Eq for RowLattice {}

/// Subtracts basis rows from the vector as far as they divide it; the first column where they do not, if any.
///
/// Allocates nothing.
fn first_remainder(basis: &IntMatrix, vector: &mut [i128]) -> Result<Option<usize>, Overflow> {
    for column in 0..vector.len() {
        let value = vector[column];
        if value == 0 {
            continue;
        }
        let row = basis.row(column);
        let pivot = row[column];
        // Pivots are mostly 1, and a division of 128 bits is slow.
        let quotient = if pivot == 1 { value } else { value.checked_div(pivot).unwrap_or(0) };
        if pivot != 1 && quotient * pivot != value {
            return Ok(Some(column));
        }
        for (entry, &step) in vector[column..].iter_mut().zip(&row[column..]) {
            if step != 0 {
                *entry = subtract_product(*entry, quotient, step)?;
            }
        }
    }
    Ok(None)
}

/// The basis of the lattice with one more vector, whose entries before `column` are zero already.
fn grown(basis: &IntMatrix, vector: &mut [i128], column: usize) -> Result<IntMatrix, Overflow> {
    let mut basis = basis.clone();
    for column in column..vector.len() {
        merge(&mut basis, vector, column)?;
    }
    reduce_above_pivots(&mut basis)?;
    Ok(basis)
}

/// Replaces row `r` of the basis and the vector `v` by `x r + y v` and `(p v - s r) / g`, where `p` and `s` are their
/// entries in the column and `p x + s y = g = gcd(p, s)`: a unimodular step that leaves zero in the vector.
fn merge(basis: &mut IntMatrix, vector: &mut [i128], column: usize) -> Result<(), Overflow> {
    let (pivot, value) = (basis.get(column, column), vector[column]);
    if value == 0 {
        return Ok(());
    }
    let ExtendedGcd { gcd, x, y } = extended_gcd(pivot, value)?;
    // The divisor is not zero because the value is not; the quotients fit because it is positive.
    let (pivot, value) = (pivot / gcd, value / gcd);
    for (j, entry) in vector.iter_mut().enumerate().skip(column) {
        let row = basis.get(column, j);
        let combined = x.checked_mul(row).zip(y.checked_mul(*entry)).and_then(|(a, b)| a.checked_add(b));
        let rest = pivot.checked_mul(*entry).zip(value.checked_mul(row)).and_then(|(a, b)| a.checked_sub(b));
        basis.set(column, j, combined.ok_or(Overflow)?);
        *entry = rest.ok_or(Overflow)?;
    }
    Ok(())
}

/// Brings the entries above each pivot into `[0, pivot)`, from the last row to the first.
fn reduce_above_pivots(basis: &mut IntMatrix) -> Result<(), Overflow> {
    for i in (0..basis.rows()).rev() {
        for j in i + 1..basis.cols() {
            let quotient = basis.get(i, j).checked_div_euclid(basis.get(j, j)).unwrap_or(0);
            if quotient != 0 {
                basis.subtract_row(i, quotient, j)?;
            }
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::hermite;
    use crate::exact::oracle::{any_matrix, determinantal_divisor, matrix, wide_matrix};
    use num_bigint::BigInt;
    use proptest::prelude::*;

    fn lattice<'a>(n: usize, rows: impl IntoIterator<Item = &'a [i128]>) -> RowLattice {
        let mut lattice = RowLattice::new(n);
        for row in rows {
            let is_known = lattice.contains(row).expect("small numbers");
            let before = lattice.clone();
            assert_eq!(lattice.insert(row), Ok(!is_known));
            assert_eq!(lattice == before, is_known);
            assert_eq!(lattice.contains(row), Ok(true));
        }
        lattice
    }

    fn rows(a: &IntMatrix) -> Vec<&[i128]> {
        (0..a.rows()).map(|i| a.row(i)).collect()
    }

    proptest! {
        #[test]
        fn basis_is_the_hermite_form_of_the_stack(a in any_matrix(7, 4, 9)) {
            let lattice = lattice(a.cols(), rows(&a));
            let form = hermite(&a.transpose()).expect("small numbers");
            let transposed = form.h.transpose();
            let entries = (0..form.rank()).flat_map(|i| transposed.row(i).to_vec()).collect();
            prop_assert_eq!(Some(lattice.basis()), IntMatrix::from_row_major(form.rank(), a.cols(), entries));
            prop_assert_eq!(lattice.rank(), form.rank());
        }

        #[test]
        fn order_of_insertion_does_not_matter(
            (order, a) in any_matrix(6, 3, 9)
                .prop_flat_map(|a| (Just((0..a.rows()).collect::<Vec<_>>()).prop_shuffle(), Just(a))),
        ) {
            let shuffled = lattice(a.cols(), order.iter().map(|&i| a.row(i)));
            prop_assert_eq!(shuffled, lattice(a.cols(), rows(&a)));
        }

        #[test]
        fn index_is_the_divisor_of_the_maximal_minors(a in any_matrix(5, 3, 9)) {
            // The index of a lattice of full rank is the greatest common divisor of the n x n minors.
            let expected = if a.rows() < a.cols() { BigInt::ZERO } else { determinantal_divisor(&a, a.cols()) };
            let index = lattice(a.cols(), rows(&a)).index().expect("small numbers");
            prop_assert_eq!(BigInt::from(index.unwrap_or(0)), expected);
        }

        #[test]
        fn large_numbers_are_taken_or_refused(a in wide_matrix(3)) {
            let mut lattice = RowLattice::new(a.cols());
            let all_fit = rows(&a).into_iter().all(|row| {
                let before = lattice.clone();
                let outcome = lattice.insert(row);
                assert!(outcome == Ok(true) || lattice == before);
                outcome.is_ok()
            });
            if let (true, Ok(form)) = (all_fit, hermite(&a.transpose())) {
                prop_assert_eq!(lattice.rank(), form.rank());
                let basis = lattice.basis();
                for i in 0..form.rank() {
                    for j in 0..a.cols() {
                        prop_assert_eq!(basis.get(i, j), form.h.get(j, i));
                    }
                }
            }
        }

        #[test]
        fn membership_agrees_with_a_search(a in matrix(2, 2, 4), x in -6_i128..=6, y in -6_i128..=6) {
            let determinant = a.get(0, 0) * a.get(1, 1) - a.get(0, 1) * a.get(1, 0);
            if determinant == 0 {
                return Ok(());
            }
            // Cramer's rule bounds the coefficients by 2 * 6 * 4 at |determinant| = 1.
            let found = (-48..=48).any(|s| (-48..=48).any(|t| {
                s * a.get(0, 0) + t * a.get(1, 0) == x && s * a.get(0, 1) + t * a.get(1, 1) == y
            }));
            prop_assert_eq!(lattice(2, rows(&a)).contains(&[x, y]), Ok(found));
        }
    }

    #[test]
    fn overflow_leaves_the_lattice_alone() {
        let mut lattice = RowLattice::new(2);
        assert_eq!(lattice.insert(&[1, i128::MAX]), Ok(true));
        let before = lattice.clone();
        assert_eq!(lattice.insert(&[3, 0]), Err(Overflow));
        assert_eq!(lattice.insert(&[0, i128::MIN]), Err(Overflow));
        assert_eq!(lattice, before);
        assert_eq!(lattice.basis(), IntMatrix::from_rows([[1, i128::MAX]]));
    }

    #[test]
    fn no_rows_and_no_columns() {
        assert_eq!(RowLattice::new(3).basis(), IntMatrix::zeros(0, 3));
        assert_eq!(RowLattice::new(3).index(), Ok(None));
        let mut point = RowLattice::new(0);
        assert_eq!(point.insert(&[]), Ok(false));
        assert_eq!(point.index(), Ok(Some(1)));
    }
}
