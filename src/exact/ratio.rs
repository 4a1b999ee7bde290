//! Rational numbers.

mod arithmetic;
mod order;
mod text;

pub use text::ParseRatioError;

use super::Overflow;
use super::gcd::gcd_magnitude;
use num_bigint::BigInt;
use num_integer::Integer;

/// A rational number `n / d` with `d > 0` and `gcd(n, d) = 1`.
///
/// Each value has one representation, so `==` and hashing are those of the numbers, and the order is exact even where
/// cross products would overflow. There are no `+ - * /`: the checked methods fail, and fail only, if the exact result
/// has a numerator or denominator outside `i128`.
///
/// ```
/// use cosetta::exact::{Overflow, Ratio};
///
/// let third: Ratio = "1/3".parse().unwrap();
/// let sum = third.checked_add(Ratio::HALF)?;
/// assert_eq!((sum.numerator(), sum.denominator()), (5, 6));
/// assert_eq!(sum.to_string(), "5/6");
/// assert!(sum < Ratio::ONE);
/// # Ok::<(), Overflow>(())
/// ```
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
pub struct Ratio {
    numerator: i128,
    denominator: i128,
}

impl Ratio {
    /// 0
    pub const ZERO: Self = Self::from_integer(0);
    /// 1
    pub const ONE: Self = Self::from_integer(1);
    /// 1/2
    pub const HALF: Self = Self { numerator: 1, denominator: 2 };

    /// `numerator / denominator` in lowest terms; `None` if the denominator is zero or the reduced number does not fit.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!(Ratio::new(2, -4).map(|r| r.to_string()).as_deref(), Some("-1/2"));
    /// assert_eq!(Ratio::new(1, 0), None);
    /// assert_eq!(Ratio::new(1, i128::MIN), None);
    /// ```
    #[must_use]
    pub fn new(numerator: i128, denominator: i128) -> Option<Self> {
        let is_negative = (numerator < 0) != (denominator < 0);
        let (n, d) = (numerator.unsigned_abs(), denominator.unsigned_abs());
        let divisor = gcd_magnitude(n, d);
        Self::from_reduced(is_negative, n.checked_div(divisor)?, d.checked_div(divisor)?)
    }

    /// `n / 1`.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!(Some(Ratio::from_integer(3)), Ratio::new(6, 2));
    /// ```
    #[must_use]
    pub const fn from_integer(n: i128) -> Self {
        Self { numerator: n, denominator: 1 }
    }

    /// The numerator in lowest terms; it carries the sign.
    #[must_use]
    pub const fn numerator(self) -> i128 {
        self.numerator
    }

    /// The denominator in lowest terms, always positive.
    #[must_use]
    pub const fn denominator(self) -> i128 {
        self.denominator
    }

    /// Whether this is 0.
    #[must_use]
    pub const fn is_zero(self) -> bool {
        self.numerator == 0
    }

    /// Whether the denominator is 1.
    #[must_use]
    pub const fn is_integer(self) -> bool {
        self.denominator == 1
    }

    /// The largest integer not above `self`.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!(Ratio::new(-1, 2).unwrap().floor(), -1);
    /// assert_eq!(Ratio::new(7, 2).unwrap().floor(), 3);
    /// ```
    #[must_use]
    pub const fn floor(self) -> i128 {
        self.numerator.div_euclid(self.denominator)
    }

    /// `self - floor(self)`, the representative of `self + Z` in `[0, 1)`.
    ///
    /// Total: `n mod d` and `d` are coprime because `n` and `d` are.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!(Ratio::new(-1, 4).unwrap().fract(), Ratio::new(3, 4).unwrap());
    /// assert_eq!(Ratio::from_integer(-3).fract(), Ratio::ZERO);
    /// ```
    #[must_use]
    pub const fn fract(self) -> Self {
        Self { numerator: self.numerator.rem_euclid(self.denominator), denominator: self.denominator }
    }

    /// The representative of the coset `self + m Z` in `[0, |m|)`; `self` if `m` is zero.
    ///
    /// # Errors
    /// If the representative does not fit.
    ///
    /// ```
    /// use cosetta::exact::{Overflow, Ratio};
    ///
    /// let x = Ratio::new(-1, 2).unwrap();
    /// assert_eq!(x.modulo(Ratio::from_integer(2))?.to_string(), "3/2");
    /// assert_eq!(x.modulo(Ratio::new(1, 3).unwrap())?.to_string(), "1/6");
    /// # Ok::<(), Overflow>(())
    /// ```
    pub fn modulo(self, m: Self) -> Result<Self, Overflow> {
        if m.is_zero() {
            return Ok(self);
        }
        if let Some(small) = self.small_modulo(m) {
            return Ok(small);
        }
        let numerator = BigInt::from(self.numerator) * m.denominator;
        let modulus = BigInt::from(m.numerator.unsigned_abs()) * self.denominator;
        Self::from_big(&numerator.mod_floor(&modulus), &(BigInt::from(self.denominator) * m.denominator))
    }

    /// [`Ratio::modulo`] over the common denominator, if every number on the way fits; `m` is not zero.
    fn small_modulo(self, m: Self) -> Option<Self> {
        let (left, right) = self.codenominators(m);
        let numerator = self.numerator.checked_mul(left)?;
        let modulus = m.numerator.checked_abs()?.checked_mul(right)?;
        Self::new(numerator.checked_rem_euclid(modulus)?, self.denominator.checked_mul(left)?)
    }

    /// `(e/g, d/g)` for the denominators `d` of `self` and `e` of `other`, `g` their greatest common divisor.
    fn codenominators(self, other: Self) -> (i128, i128) {
        // A divisor of numbers below 2^127 is below 2^127, so the fallback is never taken; it would be right, too.
        let divisor = gcd_magnitude(self.denominator.unsigned_abs(), other.denominator.unsigned_abs());
        let divisor = i128::try_from(divisor).unwrap_or(1);
        (other.denominator / divisor, self.denominator / divisor)
    }

    /// `±n / d` from coprime magnitudes; `None` if `d` is zero or either does not fit.
    fn from_reduced(is_negative: bool, n: u128, d: u128) -> Option<Self> {
        let denominator = i128::try_from(d).ok().filter(|&d| d > 0)?;
        let numerator = if is_negative { 0_i128.checked_sub_unsigned(n)? } else { i128::try_from(n).ok()? };
        Some(Self { numerator, denominator })
    }

    /// `n / d` in lowest terms, for `d > 0`.
    fn from_big(n: &BigInt, d: &BigInt) -> Result<Self, Overflow> {
        let divisor = n.gcd(d);
        let numerator = i128::try_from(n / &divisor).map_err(|_| Overflow)?;
        let denominator = i128::try_from(d / &divisor).map_err(|_| Overflow)?;
        Ok(Self { numerator, denominator })
    }
}

impl Default for Ratio {
    fn default() -> Self {
        Self::ZERO
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::{big, expected_ratio, parts, ratio, wide};
    use proptest::prelude::*;

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(1000))]

        #[test]
        fn new_reduces(n in wide(), d in wide()) {
            let found = Ratio::new(n, d).map(|x| (x.numerator(), x.denominator()));
            prop_assert_eq!(found, expected_ratio(n.into(), d.into()));
        }

        #[test]
        fn floor_and_fract_split(x in ratio()) {
            let (n, d) = big(x);
            let (floor, fract) = (BigInt::from(x.floor()), x.fract());
            prop_assert!(&floor * &d <= n && n < (&floor + 1) * &d);
            prop_assert!(Ratio::ZERO <= fract && fract < Ratio::ONE);
            prop_assert_eq!(parts(Ok(fract)), expected_ratio(n - floor * &d, d));
        }

        #[test]
        fn modulo_is_a_representative(x in ratio(), m in ratio()) {
            let ((a, b), (c, d)) = (big(x), big(m));
            let Ok(found) = x.modulo(m) else {
                let magnitude = if c < BigInt::ZERO { -&c } else { c.clone() };
                // x - |m| floor(x / |m|), written out.
                let quotient = (&a * &d).div_floor(&(&magnitude * &b));
                prop_assert_eq!(expected_ratio(a * &d - quotient * magnitude * &b, b * d), None);
                return Ok(());
            };
            if m.is_zero() {
                prop_assert_eq!(found, x);
                return Ok(());
            }
            let (n, e) = big(found);
            prop_assert!(n >= BigInt::ZERO && &n * &d < BigInt::from(c.magnitude().clone()) * &e);
            // (x - found) / m is an integer.
            prop_assert_eq!(((a * &e - n * &b) * d) % (b * e * c), BigInt::ZERO);
        }
    }

    #[test]
    fn the_ends_of_the_range() {
        assert_eq!(Ratio::new(i128::MIN, i128::MIN), Some(Ratio::ONE));
        assert_eq!(Ratio::new(i128::MIN, -1), None);
        assert_eq!(Ratio::default(), Ratio::ZERO);
    }
}
