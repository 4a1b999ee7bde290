//! Determinants.

use super::IntMatrix;
use crate::exact::Overflow;
use num_bigint::BigInt;

impl IntMatrix {
    /// The determinant; 1 for the matrix without entries.
    ///
    /// Fraction-free elimination (Bareiss, Math. Comp. 22 (1968) 565; Cohen 1993, Algorithm 2.2.6), repeated with
    /// big integers where an intermediate product does not fit.
    ///
    /// # Errors
    /// If the determinant does not fit.
    ///
    /// # Panics
    /// If the matrix is not square.
    ///
    /// ```
    /// use cosetta::exact::{IntMatrix, Overflow};
    ///
    /// assert_eq!(IntMatrix::from_rows([[0, 1, 1], [1, 0, 1], [1, 1, 0]]).determinant()?, 2);
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn determinant(&self) -> Result<i128, Overflow> {
        assert_eq!(self.rows, self.cols, "only a square matrix has a determinant");
        let small = bareiss(self.rows, self.entries.clone(), 1, |[p, a, b, c, last]: [&i128; 5]| {
            p.checked_mul(*a)?.checked_sub(b.checked_mul(*c)?)?.checked_div(*last)
        });
        if let Some(determinant) =
            small.and_then(|(odd, value)| if odd { value.checked_neg() } else { Some(value) })
        {
            return Ok(determinant);
        }
        let entries = self.entries.iter().map(|&x| BigInt::from(x)).collect();
        let big = bareiss(self.rows, entries, BigInt::from(1), |[p, a, b, c, last]: [&BigInt; 5]| {
            Some((p * a - b * c) / last)
        });
        let (odd, value) = big.ok_or(Overflow)?;
        i128::try_from(if odd { -value } else { value }).map_err(|_| Overflow)
    }
}

/// Bareiss elimination of an `n` x `n` matrix: whether rows were exchanged an odd number of times, and the last pivot.
///
/// `step([p, a, b, c, last])` is `(p a - b c) / last`, a division without remainder; `None` stops the elimination.
fn bareiss<T: Clone + Default + PartialEq>(
    n: usize,
    mut entries: Vec<T>,
    one: T,
    step: impl Fn([&T; 5]) -> Option<T>,
) -> Option<(bool, T)> {
    let zero = T::default();
    let (mut is_odd, mut last) = (false, one);
    for k in 0..n {
        let Some(pivot_row) = (k..n).find(|i| entries[i * n + k] != zero) else {
            return Some((false, zero));
        };
        if pivot_row != k {
            is_odd = !is_odd;
            for j in 0..n {
                entries.swap(pivot_row * n + j, k * n + j);
            }
        }
        let pivot = entries[k * n + k].clone();
        for i in k + 1..n {
            for j in k + 1..n {
                let value =
                    step([&pivot, &entries[i * n + j], &entries[i * n + k], &entries[k * n + j], &last])?;
                entries[i * n + j] = value;
            }
        }
        last = pivot;
    }
    Some((is_odd, last))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{slow_determinant, wide};
    use proptest::prelude::*;

    fn square(n: usize, entry: impl Strategy<Value = i128>) -> impl Strategy<Value = IntMatrix> {
        prop::collection::vec(entry, n * n)
            .prop_map(move |entries| IntMatrix::from_row_major(n, n, entries).expect("square"))
    }

    proptest! {
        #[test]
        fn determinant_agrees_with_expansion(a in (0_usize..5).prop_flat_map(|n| square(n, -4_i128..=4))) {
            prop_assert_eq!(a.determinant().map(BigInt::from), Ok(slow_determinant(&a)));
        }

        #[test]
        fn determinant_fails_only_if_it_does_not_fit(a in (1_usize..4).prop_flat_map(|n| square(n, wide()))) {
            prop_assert_eq!(a.determinant().ok(), i128::try_from(slow_determinant(&a)).ok());
        }
    }

    #[test]
    fn determinant_at_the_end_of_the_range() {
        // By hand: diag(2^64, 2^63) has 2^127; with one sign turned it is the least integer and fits.
        let mut a = IntMatrix::from_rows([[1 << 64, 0], [0, 1 << 63]]);
        assert_eq!(a.determinant(), Err(Overflow));
        a.set(0, 0, -(1 << 64));
        assert_eq!(a.determinant(), Ok(i128::MIN));
        let turned = IntMatrix::from_rows([[0, 1 << 63], [1 << 64, 0]]);
        assert_eq!(turned.determinant(), Ok(i128::MIN));
    }
}
