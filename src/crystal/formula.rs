//! The chemical formula of a set of atoms.

use super::Element;
use num_integer::Integer;
use std::collections::BTreeMap;
use std::fmt;

/// Atomic numbers from the most electronegative to the most electropositive element, read column by column:
/// element sequence of IUPAC, Nomenclature of Inorganic Chemistry (2005), table VI (from memory).
#[rustfmt::skip]
const SEQUENCE: [u8; 118] = [
    9, 17, 35, 53, 85, 117, 8, 16, 34, 52, 84, 116, 1, 7, 15, 33, 51, 83, 115, 6, 14, 32, 50, 82, 114,
    5, 13, 31, 49, 81, 113, 30, 48, 80, 112, 29, 47, 79, 111, 28, 46, 78, 110, 27, 45, 77, 109,
    26, 44, 76, 108, 25, 43, 75, 107, 24, 42, 74, 106, 23, 41, 73, 105, 22, 40, 72, 104,
    21, 39, 57, 58, 59, 60, 61, 62, 63, 64, 65, 66, 67, 68, 69, 70, 71,
    89, 90, 91, 92, 93, 94, 95, 96, 97, 98, 99, 100, 101, 102, 103,
    4, 12, 20, 38, 56, 88, 3, 11, 19, 37, 55, 87, 2, 10, 18, 36, 54, 86, 118,
];

/// Counts of elements, divided by their common divisor and ordered from electropositive to electronegative, or, once
/// charges are known, by them.
///
/// ```
/// use cosetta::crystal::{Element, Formula};
/// let atoms = ["O", "Ba", "O", "Sn", "O"].map(|s| Element::from_symbol(s).expect("known"));
/// assert_eq!(Formula::from_elements(atoms).to_string(), "BaSnO3");
/// ```
#[derive(Debug, Clone, PartialEq, Eq, Hash)]
pub struct Formula {
    counts: Vec<(Element, usize)>,
    units: usize,
}

impl Formula {
    /// The formula of the listed atoms.
    #[must_use]
    pub fn from_elements(elements: impl IntoIterator<Item = Element>) -> Self {
        let mut tally: BTreeMap<Element, usize> = BTreeMap::new();
        for element in elements {
            *tally.entry(element).or_default() += 1;
        }
        let units = tally.values().fold(0, |divisor, count| divisor.gcd(count)).max(1);
        let mut counts: Vec<_> = tally.into_iter().map(|(element, count)| (element, count / units)).collect();
        counts.sort_by_key(|(element, _)| std::cmp::Reverse(rank(*element)));
        Self { counts, units }
    }

    /// The same formula in the order in which oxides and halides are usually written: cations by formal charge, the
    /// heavier element first among equals, then the anions (common practice, no source). `charge` gives the mean
    /// charge of an element.
    ///
    /// ```
    /// use cosetta::crystal::{Element, Formula};
    /// let atoms = ["O", "Pb", "O", "Ti", "O"].map(|s| Element::from_symbol(s).expect("known"));
    /// let charge = |element: Element| match element.symbol() { "Pb" => 2.0, "Ti" => 4.0, _ => -2.0 };
    /// assert_eq!(Formula::from_elements(atoms).by_charge(charge).to_string(), "PbTiO3");
    /// ```
    #[must_use]
    pub fn by_charge(mut self, charge: impl Fn(Element) -> f64) -> Self {
        self.counts.sort_by(|(one, _), (other, _)| {
            let (a, b) = (charge(*one), charge(*other));
            let is_anion = (a < 0.0).cmp(&(b < 0.0));
            let among = if a < 0.0 {
                rank(*other).cmp(&rank(*one))
            } else {
                a.total_cmp(&b).then(other.number().cmp(&one.number()))
            };
            is_anion.then(among)
        });
        self
    }

    /// Elements with their counts per formula unit.
    #[must_use]
    pub fn counts(&self) -> &[(Element, usize)] {
        &self.counts
    }

    /// How many formula units the atoms make.
    #[must_use]
    pub fn units(&self) -> usize {
        self.units
    }
}

fn rank(element: Element) -> usize {
    SEQUENCE.iter().position(|&number| number == element.number()).unwrap_or(SEQUENCE.len())
}

impl fmt::Display for Formula {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (element, count) in &self.counts {
            write!(f, "{element}")?;
            if *count > 1 {
                write!(f, "{count}")?;
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sequence_holds_every_element_once() {
        let mut sorted = SEQUENCE;
        sorted.sort_unstable();
        assert!(sorted.iter().copied().eq(1..=118));
    }

    #[test]
    fn usual_formulas() {
        // Common practice, no source.
        for (symbols, expected) in [
            (&["O", "Al", "Mg", "Al", "O", "O", "O"][..], "MgAl2O4"),
            (&["O", "O", "Cu", "Al"], "CuAlO2"),
            (&["Cl", "Na", "Na", "Cl"], "NaCl"),
            (&["O", "K", "Ta", "O", "O"], "KTaO3"),
        ] {
            let atoms = symbols.iter().map(|s| Element::from_symbol(s).expect("known"));
            assert_eq!(Formula::from_elements(atoms).to_string(), expected);
        }
    }
}
