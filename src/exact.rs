//! Which answers are exact? Those computed here: integers and rationals of 128 bits, no floating point.
//!
//! Every operation either returns the exact result or says [`Overflow`]; nothing wraps, nothing is rounded. The
//! scalar operations ([`Ratio`], [`IntMatrix::determinant`], [`IntMatrix::checked_mul`]) fail only if the *result* does
//! not fit; the reductions ([`hermite`], [`smith`], [`RowLattice`], [`complete_to_basis`]) also fail if a number on the
//! way does not. The only panics are those of slices: an index outside a matrix, or two shapes
//! that do not fit together. Both are mistakes in the calling code and never depend on the numbers.
//!
//! | item | satisfies |
//! | --- | --- |
//! | [`gcd()`], [`gcd_all`], [`lcm`], [`extended_gcd`] | `a x + b y = g` |
//! | [`Ratio`] | `n / d`, `d > 0`, `gcd(n, d) = 1` |
//! | [`IntMatrix`] | a dynamic matrix of integers |
//! | [`hermite()`] | `a u = h`, `det u = ±1`, `h` in column echelon form |
//! | [`RowLattice`] | the same normal form for rows, one vector at a time |
//! | [`smith()`] | `u a v = d`, `det u = ±1`, `det v = ±1`, `d` diagonal, `d[i]` divides `d[i + 1]` |
//! | [`is_unimodular`], [`complete_to_basis`] | `det = ±1` |
//!
//! References: H. Cohen, *A Course in Computational Algebraic Number Theory* (Springer, 1993), chapters 1 and 2;
//! D. E. Knuth, *The Art of Computer Programming*, volume 2, section 4.5; E. H. Bareiss, Math. Comp. 22 (1968) 565.

mod gcd;
mod hermite;
mod matrix;
#[cfg(test)]
mod oracle;
mod ratio;
mod row_lattice;
mod smith;
mod unimodular;

pub use gcd::{ExtendedGcd, extended_gcd, gcd, gcd_all, lcm};
pub use hermite::{Hermite, hermite};
pub use matrix::IntMatrix;
pub use ratio::{ParseRatioError, Ratio};
pub use row_lattice::RowLattice;
pub use smith::{Smith, smith};
pub use unimodular::{complete_to_basis, is_unimodular};

/// An exact number does not fit.
///
/// ```
/// use cosetta::exact::{Overflow, lcm};
///
/// assert_eq!(lcm(i128::MAX, 2), Err(Overflow));
/// assert_eq!(Overflow.to_string(), "an exact number left the range of 128-bit integers");
/// ```
#[derive(thiserror::Error, Debug, Clone, Copy, PartialEq, Eq)]
#[error("an exact number left the range of 128-bit integers")]
pub struct Overflow;
