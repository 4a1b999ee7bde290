//! Slow, independent routines and random inputs for the tests of this module.

use super::{IntMatrix, Overflow, Ratio};
use num_bigint::BigInt;
use num_integer::Integer;
use proptest::prelude::*;

/// Integers of every size, with weight on small ones and on the ends of the range.
pub(super) fn wide() -> impl Strategy<Value = i128> {
    prop_oneof![
        4 => -12_i128..=12,
        2 => any::<i64>().prop_map(i128::from),
        2 => any::<i128>(),
        1 => (0_i128..4).prop_map(|k| i128::MAX - k),
        1 => (0_i128..4).prop_map(|k| i128::MIN + k),
        1 => (0_u32..127, -1_i128..=1).prop_map(|(shift, k)| (1_i128 << shift) + k),
    ]
}

/// Rationals of every size.
pub(super) fn ratio() -> impl Strategy<Value = Ratio> {
    (wide(), wide()).prop_filter_map("is a ratio", |(n, d)| Ratio::new(n, d))
}

/// `n / d` reduced by big integers; `None` where it is no [`Ratio`]. Independent of the 128-bit code.
pub(super) fn expected_ratio(n: BigInt, d: BigInt) -> Option<(i128, i128)> {
    if d == BigInt::ZERO {
        return None;
    }
    let (n, d) = if d < BigInt::ZERO { (-n, -d) } else { (n, d) };
    let g = n.gcd(&d);
    Some((i128::try_from(n / &g).ok()?, i128::try_from(d / g).ok()?))
}

/// Numerator and denominator as big integers.
pub(super) fn big(x: Ratio) -> (BigInt, BigInt) {
    (x.numerator().into(), x.denominator().into())
}

/// Numerator and denominator of a result, to compare with [`expected_ratio`].
pub(super) fn parts(x: Result<Ratio, Overflow>) -> Option<(i128, i128)> {
    x.ok().map(|x| (x.numerator(), x.denominator()))
}

/// A matrix of the given shape with entries in `-limit..=limit`.
pub(super) fn matrix(rows: usize, cols: usize, limit: i128) -> impl Strategy<Value = IntMatrix> {
    prop::collection::vec(-limit..=limit, rows * cols)
        .prop_filter_map("has the shape", move |entries| IntMatrix::from_row_major(rows, cols, entries))
}

/// A matrix with up to `n` x `n` entries of every size.
pub(super) fn wide_matrix(n: usize) -> impl Strategy<Value = IntMatrix> {
    (1..=n, 1..=n).prop_flat_map(|(rows, cols)| {
        prop::collection::vec(wide(), rows * cols)
            .prop_filter_map("has the shape", move |entries| IntMatrix::from_row_major(rows, cols, entries))
    })
}

/// A matrix with up to `rows` x `cols` entries, often of low rank (a product through a thinner matrix).
pub(super) fn any_matrix(rows: usize, cols: usize, limit: i128) -> impl Strategy<Value = IntMatrix> {
    (0..=rows, 0..=cols, 0..=rows.min(cols)).prop_flat_map(move |(m, n, k)| {
        prop_oneof![
            matrix(m, n, limit),
            (matrix(m, k, 3), matrix(k, n, 3)).prop_filter_map("fits", |(a, b)| a.checked_mul(&b).ok()),
        ]
    })
}

/// A random product of elementary matrices: unimodular by construction.
pub(super) fn unimodular(n: usize) -> impl Strategy<Value = IntMatrix> {
    prop::collection::vec((0..n, 0..n, -2_i128..=2), 0..8).prop_map(move |steps| {
        let mut rows: Vec<Vec<i128>> = (0..n).map(|i| (0..n).map(|j| i128::from(i == j)).collect()).collect();
        for (i, j, q) in steps {
            if i == j {
                rows[i].iter_mut().for_each(|x| *x = -*x);
            } else {
                let source = rows[j].clone();
                rows[i].iter_mut().zip(source).for_each(|(x, y)| *x += q * y);
            }
        }
        IntMatrix::from_row_major(n, n, rows.concat()).expect("square")
    })
}

/// Determinant by expansion along the first row.
pub(super) fn slow_determinant(a: &IntMatrix) -> BigInt {
    let all: Vec<usize> = (0..a.rows()).collect();
    minor(a, &all, &all)
}

/// The minor of the given rows and columns, by expansion.
fn minor(a: &IntMatrix, rows: &[usize], cols: &[usize]) -> BigInt {
    let Some((&first, rest)) = rows.split_first() else {
        return BigInt::from(1);
    };
    (0..cols.len())
        .map(|k| {
            let mut others = cols.to_vec();
            let col = others.remove(k);
            let term = minor(a, rest, &others) * a.get(first, col);
            if k % 2 == 0 { term } else { -term }
        })
        .sum()
}

/// The greatest common divisor of all `k` x `k` minors; 1 for `k = 0`.
pub(super) fn determinantal_divisor(a: &IntMatrix, k: usize) -> BigInt {
    let mut divisor = BigInt::ZERO;
    for rows in subsets(a.rows(), k) {
        for cols in subsets(a.cols(), k) {
            divisor = divisor.gcd(&minor(a, &rows, &cols));
        }
    }
    divisor
}

/// All `k`-element subsets of `0..n`.
fn subsets(n: usize, k: usize) -> Vec<Vec<usize>> {
    (0..1_u32 << n)
        .filter(|bits| bits.count_ones() as usize == k)
        .map(|bits| (0..n).filter(|i| bits >> i & 1 == 1).collect())
        .collect()
}

/// Whether the determinant is ±1, by expansion.
pub(super) fn is_slowly_unimodular(a: &IntMatrix) -> bool {
    a.rows() == a.cols() && *slow_determinant(a).magnitude() == 1_u32.into()
}
