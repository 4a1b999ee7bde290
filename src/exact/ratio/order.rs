//! The order of the rationals.

use super::Ratio;
use std::cmp::Ordering;

impl Ord for Ratio {
    /// `a/b < c/d` if `a d < c b`; where a product does not fit, by comparing continued fractions term by term.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// let x = Ratio::new(i128::MAX - 1, i128::MAX).unwrap();
    /// let y = Ratio::new(i128::MAX - 2, i128::MAX - 1).unwrap();
    /// assert!(y < x && x < Ratio::ONE);
    /// ```
    fn cmp(&self, other: &Self) -> Ordering {
        let left = self.numerator.checked_mul(other.denominator);
        let right = other.numerator.checked_mul(self.denominator);
        match left.zip(right) {
            Some((left, right)) => left.cmp(&right),
            None => {
                compare_fractions((self.numerator, self.denominator), (other.numerator, other.denominator))
            }
        }
    }
}

impl PartialOrd for Ratio {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

/// Compares numerator / denominator of two fractions with positive denominators.
///
/// With `a = q b + r` and `c = q d + s`, `a/b < c/d` exactly if `d/s < b/r`: Euclid's algorithm on both at once.
fn compare_fractions(mut left: (i128, i128), mut right: (i128, i128)) -> Ordering {
    loop {
        let order = left.0.div_euclid(left.1).cmp(&right.0.div_euclid(right.1));
        if order.is_ne() {
            return order;
        }
        let (r, s) = (left.0.rem_euclid(left.1), right.0.rem_euclid(right.1));
        if r == 0 || s == 0 {
            return r.cmp(&s);
        }
        (left, right) = ((right.1, s), (left.1, r));
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::ratio;
    use num_bigint::BigInt;
    use proptest::prelude::*;

    fn expected(x: Ratio, y: Ratio) -> Ordering {
        (BigInt::from(x.numerator) * y.denominator).cmp(&(BigInt::from(y.numerator) * x.denominator))
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(1000))]

        #[test]
        fn order_agrees_with_big_integers(x in ratio(), y in ratio()) {
            prop_assert_eq!(x.cmp(&y), expected(x, y));
            prop_assert_eq!(x.cmp(&y).is_eq(), x == y);
        }

        #[test]
        fn continued_fractions_agree_with_cross_products(
            a in -300_i128..300, b in 1_i128..300, c in -300_i128..300, d in 1_i128..300,
        ) {
            prop_assert_eq!(compare_fractions((a, b), (c, d)), (a * d).cmp(&(c * b)));
        }

        #[test]
        fn near_neighbours(n in 2_i128..i128::MAX, step in 1_i128..5) {
            let x = Ratio::new(n, n - 1).expect("coprime neighbours");
            if let Some(y) = n.checked_add(step).and_then(|m| Ratio::new(m, n + step - 1)) {
                prop_assert_eq!(x.cmp(&y), expected(x, y));
            }
        }
    }
}
