//! How the offset is to be read: modulo one electron, one pair of electrons, or what whole ions reach.

use super::formal::Component;
use crate::exact::{Overflow, Ratio};
use std::fmt;

/// What is allowed to move.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Modulus {
    /// Single electrons: `m = 1`, the polarization quantum of the modern theory.
    Electron,
    /// Electrons of a closed-shell crystal two at a time: `m = gcd(2, all Z_i)`.
    Pair,
    /// Whole ions only: `m = gcd(all Z_i)`.
    Ion,
}

impl Modulus {
    /// All three, the headline first.
    pub const ALL: [Self; 3] = [Self::Electron, Self::Pair, Self::Ion];

    /// The value `m` for charges of a greatest common divisor `gcd`, in e.
    ///
    /// ```
    /// use cosetta::polarization::Modulus;
    /// // MgO, charges ±2; CeO2, charges 4 and −2; TaO2+ and KO− planes hold 5, 1 and −2.
    /// assert_eq!([2, 2, 1].map(|gcd| Modulus::Pair.value(gcd)), [2, 2, 1]);
    /// ```
    #[must_use]
    pub fn value(self, gcd: i64) -> i64 {
        match self {
            Self::Electron => 1,
            Self::Pair => num_integer::gcd(2, gcd).max(1),
            Self::Ion => gcd.max(1),
        }
    }
}

impl fmt::Display for Modulus {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Electron => "electron",
            Self::Pair => "pair",
            Self::Ion => "ion",
        })
    }
}

/// The polarization lattice for one modulus: `m (offset + Z³)` in units of `e a_i / V`.
#[derive(Debug, Clone, PartialEq)]
pub struct Coset {
    /// What is allowed to move.
    pub modulus: Modulus,
    /// The value `m`, in e.
    pub value: i64,
    /// The offset in units of `m`, components in [0, 1).
    pub offset: [Component; 3],
    /// Whether zero is one of the values.
    pub contains_zero: bool,
}

impl Coset {
    /// Reduces an unreduced polarization, in units of `e a_i / V`, by a modulus. A component that symmetry leaves free
    /// counts as zero when `is_zero` says so of its distance, in units of `m`, from the next whole number.
    pub(super) fn new(
        modulus: Modulus,
        gcd: i64,
        polarization: &[Component; 3],
        is_zero: impl Fn(usize, f64) -> bool,
    ) -> Result<Self, Overflow> {
        let value = modulus.value(gcd);
        let mut offset = [Component::Exact(Ratio::ZERO); 3];
        let mut contains_zero = true;
        for (axis, component) in polarization.iter().enumerate() {
            offset[axis] = component.modulo(value)?;
            contains_zero &= match offset[axis] {
                Component::Exact(ratio) => ratio.is_zero(),
                Component::Free(x) => is_zero(axis, (x - x.round()).abs()),
            };
        }
        Ok(Self { modulus, value, offset, contains_zero })
    }
}
