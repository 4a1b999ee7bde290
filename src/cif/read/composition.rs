//! Do the sites make up the formula the file states?

use crate::crystal::Element;
use std::collections::BTreeMap;
use std::fmt;

/// A count may differ from the formula by this fraction of itself, which covers rounded occupancies.
const RELATIVE_TOLERANCE: f64 = 0.02;
/// And by this many atoms per formula unit, which covers formulas rounded to two places.
const ABSOLUTE_TOLERANCE: f64 = 0.02;

/// Amounts of elements.
#[derive(Debug, Clone, PartialEq, Default)]
pub(super) struct Composition(BTreeMap<Element, f64>);

impl Composition {
    /// Reads `_chemical_formula_sum`: elements with optional counts, with or without blanks, such as `Al2 P O8 H5`.
    /// `None` for anything else, and for an empty text.
    pub(super) fn parse(text: &str) -> Option<Self> {
        let mut amounts = Self::default();
        let is_spaced = text.trim().contains(char::is_whitespace);
        for word in text.split_whitespace() {
            let mut rest = word;
            while !rest.is_empty() {
                let letters = rest.find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(rest.len());
                let next_capital =
                    rest[..letters].char_indices().skip(1).find(|(_, c)| c.is_ascii_uppercase());
                let own = next_capital.map_or(letters, |(at, _)| at);
                // A capital begins each element, but two capitals between blanks are one element, as in `SI O2`.
                let whole =
                    Element::from_symbol(&rest[..letters]).filter(|_| is_spaced && rest.len() == word.len());
                let (element, length) = match whole {
                    Some(whole) => (whole, letters),
                    None => (Element::from_symbol(&rest[..own])?, own),
                };
                rest = &rest[length..];
                let digits = rest.find(|c: char| !c.is_ascii_digit() && c != '.').unwrap_or(rest.len());
                let count = if digits == 0 { 1.0 } else { rest[..digits].parse().ok()? };
                amounts.add(element, count);
                rest = &rest[digits..];
            }
        }
        (!amounts.0.is_empty()).then_some(amounts)
    }

    /// Adds atoms of an element.
    pub(super) fn add(&mut self, element: Element, count: f64) {
        *self.0.entry(element).or_default() += count;
    }

    /// How many atoms of an element.
    pub(super) fn amount(&self, element: Element) -> f64 {
        self.0.get(&element).copied().unwrap_or(0.0)
    }

    /// The elements.
    pub(super) fn elements(&self) -> impl Iterator<Item = Element> + '_ {
        self.0.iter().filter(|(_, count)| **count > 0.0).map(|(element, _)| *element)
    }

    /// Whether every amount is a whole multiple of a number.
    pub(super) fn is_divisible_by(&self, number: f64) -> bool {
        self.0.values().map(|amount| amount / number).all(|share| (share - share.round()).abs() < 1e-6)
    }

    /// How many units of the formula `other` this is, if it is a multiple of it within the tolerances.
    pub(super) fn units_of(&self, other: &Self) -> Option<f64> {
        let units = self.0.values().sum::<f64>() / other.0.values().sum::<f64>();
        if !units.is_finite() || units <= 0.0 {
            return None;
        }
        let agrees = |element: Element| {
            let expected = other.amount(element);
            let found = self.amount(element) / units;
            (found - expected).abs() <= ABSOLUTE_TOLERANCE + RELATIVE_TOLERANCE * expected
        };
        self.elements().chain(other.elements()).all(agrees).then_some(units)
    }
}

impl fmt::Display for Composition {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for (place, (element, count)) in self.0.iter().enumerate() {
            let blank = if place > 0 { " " } else { "" };
            let count = (count * 100.0).round() / 100.0;
            if (count - 1.0).abs() < 1e-9 {
                write!(f, "{blank}{element}")?;
            } else {
                write!(f, "{blank}{element}{count}")?;
            }
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn formulas_are_read() {
        for (text, expected) in [
            ("Al2 P O8 H5", "H5 O8 Al2 P"),
            ("C4H8N2", "H8 C4 N2"),
            ("Fe1.5 O4", "O4 Fe1.5"),
            ("SI O2", "O2 Si"),
            ("CO", "C O"),
            ("D2 O", "H2 O"),
            ("K6 Mo4 O16", "O16 K6 Mo4"),
        ] {
            assert_eq!(Composition::parse(text).map(|c| c.to_string()).as_deref(), Some(expected), "{text}");
        }
        for text in ["", "(H2 O)3", "Xx2", "2O", "Fe1.2.3", "?"] {
            assert_eq!(Composition::parse(text), None, "{text}");
        }
    }

    #[test]
    fn multiples_are_found() {
        let formula = |text| Composition::parse(text).expect("a formula");
        assert_eq!(formula("Na4 Cl4").units_of(&formula("Na Cl")), Some(4.0));
        assert_eq!(formula("Na4 Cl3").units_of(&formula("Na Cl")), None);
        assert!(formula("Fe1.86 O2").units_of(&formula("Fe0.93 O")).is_some());
        assert_eq!(formula("Na4 Cl4 O").units_of(&formula("Na Cl")), None);
    }

    proptest! {
        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = Composition::parse(&text);
        }
    }
}
