//! Which of two bonded atoms draws the electrons?

use crate::crystal::Element;
use std::sync::LazyLock;

static TABLE: LazyLock<[Option<f64>; 119]> = LazyLock::new(|| {
    let mut table = [None; 119];
    for row in include_str!("../data/electronegativity.tsv").lines().filter(|line| !line.starts_with('#')) {
        let mut fields = row.split('\t');
        let element = fields.next().and_then(Element::from_symbol);
        if let (Some(element), Some(value)) = (element, fields.next().and_then(|text| text.parse().ok())) {
            table[usize::from(element.number())] = Some(value);
        }
    }
    table
});

/// The electronegativity on the scale that the IUPAC recommends for formal oxidation states, where there is one.
#[must_use]
pub(crate) fn electronegativity(element: Element) -> Option<f64> {
    TABLE[usize::from(element.number())]
}

/// How many electrons a main-group atom takes up to fill its shell: 1 for halogens and hydrogen, 4 for carbon. None
/// for elements that are not known as anions of that kind.
#[must_use]
pub(crate) fn octet_need(element: Element) -> Option<f64> {
    Some(match element.symbol() {
        "H" | "F" | "Cl" | "Br" | "I" | "At" | "Au" => 1.0,
        "O" | "S" | "Se" | "Te" | "Po" => 2.0,
        "N" | "P" | "As" | "Sb" | "Bi" => 3.0,
        "C" | "Si" | "Ge" | "Sn" | "Pb" => 4.0,
        "B" => 5.0,
        _ => return None,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    /// The order that textbooks give.
    #[test]
    fn the_order_of_partners() {
        let value =
            |symbol| electronegativity(Element::from_symbol(symbol).expect("known")).expect("a value");
        for (giver, taker) in [
            ("Na", "Cl"),
            ("H", "O"),
            ("H", "N"),
            ("B", "H"),
            ("Li", "H"),
            ("Ga", "As"),
            ("S", "O"),
            ("O", "F"),
        ] {
            assert!(value(giver) < value(taker), "{giver} {taker}");
        }
        let read = (1..=118).filter_map(Element::from_number).filter(|&one| electronegativity(one).is_some());
        assert!(read.count() > 95);
    }
}
