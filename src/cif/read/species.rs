//! Which element is meant by a type symbol such as `Fe3+`, or by a label such as `O1A`?

use crate::crystal::Element;
use std::collections::BTreeSet;

/// What a type symbol says.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Species {
    /// The element.
    pub(super) element: Element,
    /// The charge after the element, in e.
    pub(super) charge: Option<f64>,
}

/// Reads a type symbol: an element in any case, then nothing, a charge (`2-`, `+3`, `3.5+`, `-`), or something that is
/// not a letter and is passed over.
///
/// The dictionary lets a file choose its symbols freely as long as they begin with the element, so a symbol whose
/// leading letters are not an element, such as `OH`, is not guessed at.
pub(super) fn parse_species(symbol: &str) -> Option<Species> {
    // A mass number before the element, as in `2H` and `13C`, changes nothing here.
    let symbol = symbol.trim_start_matches(|c: char| c.is_ascii_digit());
    let letters = leading_letters(symbol);
    let element = Element::from_symbol(letters)?;
    Some(Species { element, charge: parse_charge(&symbol[letters.len()..]) })
}

/// `2-`, `-2`, `+`, `3.5+`; `None` for anything else. A number without a sign is not a charge.
pub(super) fn parse_charge(text: &str) -> Option<f64> {
    let text = text.trim();
    let (sign, digits) = match (text.chars().next()?, text.chars().next_back()?) {
        ('+', _) => (1.0, &text[1..]),
        ('-', _) => (-1.0, &text[1..]),
        (_, '+') => (1.0, &text[..text.len() - 1]),
        (_, '-') => (-1.0, &text[..text.len() - 1]),
        _ => return None,
    };
    let is_plain = digits.bytes().all(|byte| byte.is_ascii_digit() || byte == b'.');
    match digits {
        "" => Some(sign),
        _ if is_plain => digits.parse::<f64>().ok().filter(|n| *n < 20.0).map(|n| sign * n),
        _ => None,
    }
}

/// What a label says about its element.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Guess {
    /// One element.
    One(Element),
    /// Either of two: written in capitals, and both or neither are in the formula.
    Two(Element, Element),
    /// None.
    Unknown,
}

/// The element of a label, which by the dictionary begins with it.
///
/// The leading letters are taken as a two-letter symbol if the first two are one, or as a one-letter symbol. Where both
/// exist (`Ca1` calcium or carbon A, `HO1` holmium or hydrogen of O1), the elements of the formula decide; if they do not,
/// a small second letter means the two-letter symbol, and two capitals leave the choice open. One letter out of
/// several is accepted only for elements whose sites are usually numbered by letters; it is never taken for deuterium.
pub(super) fn guess_element(label: &str, formula: Option<&BTreeSet<Element>>) -> Guess {
    let letters = leading_letters(label);
    let two = letters.get(..2).filter(|pair| !is_hydrogen_isotope(pair)).and_then(Element::from_symbol);
    let first = letters.get(..1).unwrap_or_default();
    let one = match letters.len() {
        0 => None,
        1 if first.eq_ignore_ascii_case("T") => None,
        1 => Element::from_symbol(first),
        _ if first.eq_ignore_ascii_case("D") || first.eq_ignore_ascii_case("T") => None,
        _ => Element::from_symbol(first),
    };
    let (Some(pair), Some(single)) = (two, one) else {
        return two.or(one).filter(|_| !is_dummy(letters)).map_or(Guess::Unknown, Guess::One);
    };
    let is_in = |element| formula.is_some_and(|formula| formula.contains(&element));
    match (is_in(pair), is_in(single)) {
        (true, false) => Guess::One(pair),
        (false, true) => Guess::One(single),
        _ if letters.as_bytes()[1].is_ascii_lowercase() => Guess::One(pair),
        _ => Guess::Two(pair, single),
    }
}

/// Whether a label or symbol stands for an oxygen or nitrogen with hydrogen that may not be listed: `Wat`, `OH`, `O-H`,
/// `H2O`, `OW`, `NH4`.
pub(super) fn implied_hydrogen(name: &str) -> Option<Element> {
    let letters: String =
        name.chars().filter(char::is_ascii_alphanumeric).collect::<String>().to_ascii_lowercase();
    let stem = letters.trim_end_matches(|c: char| c.is_ascii_digit());
    if letters.starts_with("nh3") || letters.starts_with("nh4") {
        return Element::from_symbol("N");
    }
    let is_water = letters.starts_with("h2o") || matches!(stem, "wat" | "water" | "ow" | "oh" | "hoh");
    is_water.then_some(Element::OXYGEN)
}

fn is_hydrogen_isotope(text: &str) -> bool {
    text.eq_ignore_ascii_case("D") || text.eq_ignore_ascii_case("T")
}

/// Names of points that are not atoms.
fn is_dummy(letters: &str) -> bool {
    ["dum", "du", "dummy", "vac", "void", "cent", "cen", "wat"]
        .iter()
        .any(|name| letters.eq_ignore_ascii_case(name))
}

fn leading_letters(text: &str) -> &str {
    let end = text.find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(text.len());
    &text[..end]
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn element(symbol: &str) -> Element {
        Element::from_symbol(symbol).expect("known")
    }

    #[test]
    fn type_symbols() {
        for (text, symbol, charge) in [
            ("O2-", "O", Some(-2.0)),
            ("Fe3+", "Fe", Some(3.0)),
            ("Ti+4", "Ti", Some(4.0)),
            ("O-2", "O", Some(-2.0)),
            ("Mn3.5+", "Mn", Some(3.5)),
            ("Na+", "Na", Some(1.0)),
            ("CL1-", "Cl", Some(-1.0)),
            ("Si0+", "Si", Some(0.0)),
            ("D", "H", None),
            ("2H", "H", None),
            ("13C", "C", None),
            ("18O2-", "O", Some(-2.0)),
            ("Fe", "Fe", None),
            ("Fe2", "Fe", None),
            ("H(SDS)", "H", None),
        ] {
            let expected = Species { element: element(symbol), charge };
            assert_eq!(parse_species(text), Some(expected), "{text}");
        }
        for text in ["", "OH", "Aa", "12", "Wat", "+2", "FeNi"] {
            assert_eq!(parse_species(text), None, "{text}");
        }
    }

    #[test]
    fn labels() {
        let formula = |symbols: &[&str]| symbols.iter().map(|s| element(s)).collect::<BTreeSet<_>>();
        for (label, expected) in [
            ("O1A", "O"),
            ("Fe2+", "Fe"),
            ("OW1", "O"),
            ("Ca1", "Ca"),
            ("SiT1", "Si"),
            ("AL1", "Al"),
            ("K(1)", "K"),
            ("MgM2", "Mg"),
            ("KA", "K"),
            ("D1", "H"),
            ("O-H(1)", "O"),
        ] {
            assert_eq!(guess_element(label, None), Guess::One(element(expected)), "{label}");
        }
        let organic = formula(&["C", "H", "O", "N"]);
        assert_eq!(guess_element("CA1", Some(&organic)), Guess::One(element("C")));
        assert_eq!(guess_element("Ho1", Some(&organic)), Guess::One(element("H")));
        assert_eq!(guess_element("CA1", Some(&formula(&["Ca", "O"]))), Guess::One(element("Ca")));
        assert_eq!(guess_element("CA1", None), Guess::Two(element("Ca"), element("C")));
        for label in ["X1", "Dum1", "M1", "T1", "1", "", "Wat1", "Q", "é1"] {
            assert_eq!(guess_element(label, None), Guess::Unknown, "{label}");
        }
    }

    #[test]
    fn labels_that_imply_hydrogen() {
        for label in ["Wat", "Wat2", "OH1", "O-H(1)", "Oh", "OW12", "H2O", "NH4"] {
            assert!(implied_hydrogen(label).is_some(), "{label}");
        }
        for label in ["O1", "Os1", "O1H", "W1", "H1", "N1"] {
            assert!(implied_hydrogen(label).is_none(), "{label}");
        }
    }

    proptest! {
        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = (parse_species(&text), guess_element(&text, None), implied_hydrogen(&text));
        }
    }
}
