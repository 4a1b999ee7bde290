//! Greatest common divisors and their cofactors.

use super::Overflow;

/// Greatest common divisor of `a` and `b`, never negative; `gcd(a, 0) = |a|`.
///
/// # Errors
/// The one value that does not fit, `2^127`, arises only if both numbers are `i128::MIN` or zero.
///
/// ```
/// use cosetta::exact::{Overflow, gcd};
///
/// assert_eq!(gcd(-12, 18)?, 6);
/// assert_eq!(gcd(0, -5)?, 5);
/// assert_eq!(gcd(0, 0)?, 0);
/// assert_eq!(gcd(i128::MIN, 0), Err(Overflow));
/// # Ok::<(), Overflow>(())
/// ```
pub fn gcd(a: i128, b: i128) -> Result<i128, Overflow> {
    signed(gcd_magnitude(a.unsigned_abs(), b.unsigned_abs()))
}

/// Greatest common divisor of any number of integers; zero if there are none.
///
/// # Errors
/// As for [`gcd`]: only if every number is `i128::MIN` or zero.
///
/// ```
/// use cosetta::exact::{Overflow, gcd_all};
///
/// assert_eq!(gcd_all([4, -2, 6])?, 2);
/// assert_eq!(gcd_all([])?, 0);
/// # Ok::<(), Overflow>(())
/// ```
pub fn gcd_all(numbers: impl IntoIterator<Item = i128>) -> Result<i128, Overflow> {
    signed(numbers.into_iter().fold(0, |g, n| gcd_magnitude(g, n.unsigned_abs())))
}

/// Least common multiple, never negative: `lcm(a, b) gcd(a, b) = |a b|`; zero if either number is.
///
/// # Errors
/// If the multiple does not fit.
///
/// ```
/// use cosetta::exact::{Overflow, lcm};
///
/// assert_eq!(lcm(-4, 6)?, 12);
/// assert_eq!(lcm(0, 6)?, 0);
/// # Ok::<(), Overflow>(())
/// ```
pub fn lcm(a: i128, b: i128) -> Result<i128, Overflow> {
    let (a, b) = (a.unsigned_abs(), b.unsigned_abs());
    let Some(quotient) = a.checked_div(gcd_magnitude(a, b)) else {
        return Ok(0);
    };
    signed(quotient.checked_mul(b).ok_or(Overflow)?)
}

/// A greatest common divisor with its cofactors; see [`extended_gcd`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct ExtendedGcd {
    /// `gcd(a, b)`, never negative.
    pub gcd: i128,
    /// Factor of `a`.
    pub x: i128,
    /// Factor of `b`.
    pub y: i128,
}

/// Bézout's identity: `a x + b y = gcd(a, b)`.
///
/// The cofactors are small: `|x| <= max(1, |b| / g)` and `|y| <= max(1, |a| / g)`. Euclid's algorithm (Cohen 1993,
/// Algorithm 1.3.6).
///
/// # Errors
/// As for [`gcd`]; the cofactors always fit.
///
/// ```
/// use cosetta::exact::{ExtendedGcd, Overflow, extended_gcd};
///
/// let (a, b) = (240, -46);
/// let ExtendedGcd { gcd, x, y } = extended_gcd(a, b)?;
/// assert_eq!(gcd, 2);
/// assert_eq!(a * x + b * y, gcd);
/// # Ok::<(), Overflow>(())
/// ```
pub fn extended_gcd(a: i128, b: i128) -> Result<ExtendedGcd, Overflow> {
    let (mut r0, mut r1) = (a.unsigned_abs(), b.unsigned_abs());
    let (mut x0, mut x1) = (1_i128, 0_i128);
    let (mut y0, mut y1) = (0_i128, 1_i128);
    while let Some(quotient) = r0.checked_div(r1) {
        let remainder = r0 % r1;
        (r0, r1) = (r1, remainder);
        if remainder == 0 {
            // The next cofactors would be ±|b|/g and ±|a|/g; they are not needed and might not fit.
            (x0, y0) = (x1, y1);
            break;
        }
        let quotient = signed(quotient)?;
        (x0, x1) = (x1, step(x0, quotient, x1)?);
        (y0, y1) = (y1, step(y0, quotient, y1)?);
    }
    Ok(ExtendedGcd { gcd: signed(r0)?, x: x0 * sign(a), y: y0 * sign(b) })
}

/// `before - quotient * last`.
fn step(before: i128, quotient: i128, last: i128) -> Result<i128, Overflow> {
    quotient.checked_mul(last).and_then(|product| before.checked_sub(product)).ok_or(Overflow)
}

/// -1 for a negative number, else 1; unlike `signum`, zero keeps its cofactor.
fn sign(a: i128) -> i128 {
    if a < 0 { -1 } else { 1 }
}

fn signed(magnitude: u128) -> Result<i128, Overflow> {
    i128::try_from(magnitude).map_err(|_| Overflow)
}

/// Greatest common divisor without sign, hence total. Most numbers are small, and 64-bit arithmetic is much faster.
pub(super) fn gcd_magnitude(a: u128, b: u128) -> u128 {
    match (u64::try_from(a), u64::try_from(b)) {
        (Ok(a), Ok(b)) => u128::from(num_integer::gcd(a, b)),
        _ => num_integer::gcd(a, b),
    }
}

/// The integer nearest to `a / b`, for `b > 0`; a tie goes down.
///
/// With `q = nearest_quotient(a, b)`, `|a - q b| <= b / 2`.
pub(super) fn nearest_quotient(a: i128, b: i128) -> i128 {
    let (quotient, remainder) = (a.div_euclid(b), a.rem_euclid(b));
    // A remainder above b - remainder needs b >= 2, so the quotient is at most half the range and can be increased.
    if remainder > b - remainder { quotient + 1 } else { quotient }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::wide;
    use num_bigint::BigInt;
    use proptest::prelude::*;

    /// By trial division.
    fn slow_gcd(a: i128, b: i128) -> i128 {
        let limit = a.abs().max(b.abs());
        (1..=limit).rev().find(|d| a % d == 0 && b % d == 0).unwrap_or(0)
    }

    proptest! {
        #[test]
        fn gcd_and_lcm_agree_with_trial_division(a in -200_i128..200, b in -200_i128..200) {
            prop_assert_eq!(gcd(a, b), Ok(slow_gcd(a, b)));
            let multiple = (1..=(a * b).abs()).find(|m| m % a == 0 && m % b == 0).unwrap_or(0);
            prop_assert_eq!(lcm(a, b), Ok(multiple));
        }

        #[test]
        fn gcd_all_is_a_fold(numbers in prop::collection::vec(-60_i128..60, 0..5)) {
            let folded = numbers.iter().fold(0, |g, &n| slow_gcd(g, n));
            prop_assert_eq!(gcd_all(numbers), Ok(folded));
        }

        #[test]
        fn bezout_identity_and_bounds(a in wide(), b in wide()) {
            let Ok(ExtendedGcd { gcd: g, x, y }) = extended_gcd(a, b) else {
                prop_assert!([a, b].iter().all(|&n| n == 0 || n == i128::MIN));
                return Ok(());
            };
            prop_assert_eq!(Ok(g), gcd(a, b));
            prop_assert_eq!(BigInt::from(a) * x + BigInt::from(b) * y, BigInt::from(g));
            if g != 0 {
                prop_assert!(x.unsigned_abs() <= 1.max(b.unsigned_abs() / g.unsigned_abs()));
                prop_assert!(y.unsigned_abs() <= 1.max(a.unsigned_abs() / g.unsigned_abs()));
            }
        }

        #[test]
        fn nearest_quotient_leaves_at_most_half(a in wide(), b in 1..=i128::MAX) {
            let rest = BigInt::from(a) - BigInt::from(nearest_quotient(a, b)) * b;
            prop_assert!(rest.magnitude() * 2_u32 <= b.unsigned_abs().into());
        }
    }

    #[test]
    fn the_ends_of_the_range() {
        assert_eq!(gcd(i128::MIN, i128::MIN), Err(Overflow));
        assert_eq!(gcd(i128::MIN, 6), Ok(2));
        assert_eq!(gcd_all([i128::MIN, 0, i128::MIN, 12]), Ok(4));
        assert_eq!(lcm(i128::MIN, 1), Err(Overflow));
        assert_eq!(lcm(0, 0), Ok(0));
        assert_eq!(extended_gcd(i128::MIN, 1), Ok(ExtendedGcd { gcd: 1, x: 0, y: 1 }));
        assert_eq!(extended_gcd(0, 0).map(|e| e.gcd), Ok(0));
    }
}
