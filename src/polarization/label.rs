//! One word for a material, for pairing at interfaces.

use super::formal::Component;
use super::modulus::Coset;
use crate::exact::Ratio;
use std::fmt;
use std::str::FromStr;

/// What the polarization lattice of a material is like, for the modulus of single electrons.
#[derive(
    Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, serde::Serialize, schemars::JsonSchema,
)]
#[serde(rename_all = "kebab-case")]
pub enum Label {
    /// Zero is one of the values.
    ContainsZero,
    /// Not polar, and the offset has entries 0 and ½ only.
    HalfQuantum,
    /// Not polar, and neither of the two above: quarters or thirds.
    Rational,
    /// Symmetry leaves a direction free.
    Polar,
    /// No answer; the refusal says why.
    Undefined,
}

impl Label {
    /// All labels.
    pub const ALL: [Self; 5] =
        [Self::ContainsZero, Self::HalfQuantum, Self::Rational, Self::Polar, Self::Undefined];

    /// The label of a coset.
    #[must_use]
    pub fn of(coset: &Coset) -> Self {
        let mut ratios = Vec::new();
        for component in coset.offset {
            match component {
                Component::Exact(ratio) => ratios.push(ratio),
                Component::Free(_) => return Self::Polar,
            }
        }
        if ratios.iter().all(|ratio| ratio.is_zero()) {
            Self::ContainsZero
        } else if ratios.iter().all(|ratio| ratio.is_zero() || *ratio == Ratio::HALF) {
            Self::HalfQuantum
        } else {
            Self::Rational
        }
    }
}

impl fmt::Display for Label {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            Self::ContainsZero => "contains-zero",
            Self::HalfQuantum => "half-quantum",
            Self::Rational => "rational",
            Self::Polar => "polar",
            Self::Undefined => "undefined",
        })
    }
}

impl FromStr for Label {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        Self::ALL
            .into_iter()
            .find(|label| label.to_string() == text)
            .ok_or_else(|| format!("unknown label '{text}'"))
    }
}
