//! Sums, products and their inverses.

use super::Ratio;
use crate::exact::Overflow;
use crate::exact::gcd::gcd_magnitude;
use num_bigint::BigInt;

impl Ratio {
    /// `self + other` (Knuth, volume 2, section 4.5.1).
    ///
    /// # Errors
    /// If the sum does not fit.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// assert_eq!(Ratio::HALF.checked_add(Ratio::HALF)?, Ratio::ONE);
    /// assert_eq!(Ratio::from_integer(i128::MAX).checked_add(Ratio::HALF), Err(Overflow));
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_add(self, other: Self) -> Result<Self, Overflow> {
        self.combine(other, i128::checked_add, |a, b| a + b)
    }

    /// `self - other`.
    ///
    /// # Errors
    /// If the difference does not fit.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// assert_eq!(Ratio::ONE.checked_sub(Ratio::HALF)?, Ratio::HALF);
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_sub(self, other: Self) -> Result<Self, Overflow> {
        self.combine(other, i128::checked_sub, |a, b| a - b)
    }

    /// `self * other`, reduced crosswise before multiplying.
    ///
    /// # Errors
    /// If the product does not fit.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// let big = Ratio::from_integer(i128::MAX);
    /// assert_eq!(Ratio::new(4, i128::MAX).unwrap().checked_mul(big)?, Ratio::from_integer(4));
    /// assert_eq!(big.checked_mul(big), Err(Overflow));
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_mul(self, other: Self) -> Result<Self, Overflow> {
        self.multiply(other.numerator, other.denominator)
    }

    /// `self / other`.
    ///
    /// # Errors
    /// If the quotient does not fit, or `other` is zero (no number is the quotient then).
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// assert_eq!(Ratio::ONE.checked_div(Ratio::HALF)?, Ratio::from_integer(2));
    /// assert_eq!(Ratio::ONE.checked_div(Ratio::ZERO), Err(Overflow));
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_div(self, other: Self) -> Result<Self, Overflow> {
        self.multiply(other.denominator, other.numerator)
    }

    /// `-self`.
    ///
    /// # Errors
    /// Only if the numerator is `i128::MIN`.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// assert_eq!(Ratio::HALF.checked_neg()?.to_string(), "-1/2");
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn checked_neg(self) -> Result<Self, Overflow> {
        let numerator = self.numerator.checked_neg().ok_or(Overflow)?;
        Ok(Self { numerator, ..self })
    }

    /// `self ± other`: directly if the numerator over the common denominator fits, else by way of big integers.
    fn combine(
        self,
        other: Self,
        small: impl Fn(i128, i128) -> Option<i128>,
        big: impl Fn(BigInt, BigInt) -> BigInt,
    ) -> Result<Self, Overflow> {
        let (left, right) = self.codenominators(other);
        let numerator = self
            .numerator
            .checked_mul(left)
            .zip(other.numerator.checked_mul(right))
            .and_then(|(a, b)| small(a, b))
            .zip(self.denominator.checked_mul(left));
        if let Some((numerator, denominator)) = numerator {
            return Self::new(numerator, denominator).ok_or(Overflow);
        }
        let left = BigInt::from(left);
        let numerator = big(&left * self.numerator, BigInt::from(right) * other.numerator);
        Self::from_big(&numerator, &(left * self.denominator))
    }

    /// `self * (numerator / denominator)` for a second factor in lowest terms, its sign on either side.
    fn multiply(self, numerator: i128, denominator: i128) -> Result<Self, Overflow> {
        let is_negative = (self.numerator < 0) != ((numerator < 0) != (denominator < 0));
        let (n, d) = (self.numerator.unsigned_abs(), self.denominator.unsigned_abs());
        let (m, e) = (numerator.unsigned_abs(), denominator.unsigned_abs());
        let product = |a: u128, b: u128, c: u128, d: u128| {
            let (first, second) = (gcd_magnitude(a, b), gcd_magnitude(c, d));
            a.checked_div(first)?.checked_mul(c.checked_div(second)?)
        };
        product(n, e, m, d)
            .zip(product(d, m, e, n))
            .and_then(|(n, d)| Self::from_reduced(is_negative, n, d))
            .ok_or(Overflow)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{big, expected_ratio, parts, ratio};
    use proptest::prelude::*;

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(1000))]

        #[test]
        fn arithmetic_agrees_with_big_integers(x in ratio(), y in ratio()) {
            let ((a, b), (c, d)) = (big(x), big(y));
            prop_assert_eq!(parts(x.checked_add(y)), expected_ratio(&a * &d + &c * &b, &b * &d));
            prop_assert_eq!(parts(x.checked_sub(y)), expected_ratio(&a * &d - &c * &b, &b * &d));
            prop_assert_eq!(parts(x.checked_mul(y)), expected_ratio(&a * &c, &b * &d));
            prop_assert_eq!(parts(x.checked_div(y)), expected_ratio(&a * &d, &b * &c));
            prop_assert_eq!(parts(x.checked_neg()), expected_ratio(-a, b));
        }

        #[test]
        fn field_laws(x in small(), y in small(), z in small()) {
            prop_assert_eq!(x.checked_add(y), y.checked_add(x));
            let left = x.checked_add(y).and_then(|s| s.checked_mul(z));
            let right = x.checked_mul(z).and_then(|p| p.checked_add(y.checked_mul(z)?));
            prop_assert_eq!(left, right);
            prop_assert_eq!(x.checked_sub(x), Ok(Ratio::ZERO));
            if !y.is_zero() {
                prop_assert_eq!(x.checked_div(y).and_then(|q| q.checked_mul(y)), Ok(x));
            }
        }
    }

    fn small() -> impl Strategy<Value = Ratio> {
        (-1000_i128..1000, 1_i128..1000).prop_filter_map("fits", |(n, d)| Ratio::new(n, d))
    }

    #[test]
    fn the_ends_of_the_range() {
        let least = Ratio::from_integer(i128::MIN);
        let most = Ratio::from_integer(i128::MAX);
        assert_eq!(least.checked_neg(), Err(Overflow));
        assert_eq!(least.checked_sub(least), Ok(Ratio::ZERO));
        assert_eq!(least.checked_div(least), Ok(Ratio::ONE));
        assert_eq!(least.checked_add(most), Ok(Ratio::from_integer(-1)));
        assert_eq!(most.checked_add(Ratio::ONE), Err(Overflow));
    }

    #[test]
    fn a_sum_that_fits_is_found_although_its_terms_do_not() {
        // a/p + (1 - a/p) = 1 with numerators and denominators near 2^127 (by hand).
        let p = i128::MAX;
        let x = Ratio::new(p - 1, p).expect("coprime neighbours");
        let y = Ratio::new(1, p).expect("in lowest terms");
        assert_eq!(x.checked_add(y), Ok(Ratio::ONE));
        // (2^126 + 1)/2 + (2^126 + 1)/2 = 2^126 + 1.
        let half = Ratio::new((1 << 126) + 1, 2).expect("odd numerator");
        assert_eq!(half.checked_add(half), Ok(Ratio::from_integer((1 << 126) + 1)));
        // 2^126/3 + 2^126/5 = 2^129/15: the numerator does not fit.
        let third = Ratio::new(1 << 126, 3).expect("coprime");
        let fifth = Ratio::new(1 << 126, 5).expect("coprime");
        assert_eq!(third.checked_add(fifth), Err(Overflow));
    }
}
