//! Charges given by the user, such as `Ta=5,K=1,O=-2`.

use super::MAX_CHARGE;
use crate::crystal::{Element, Formula, Site};
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;
use std::collections::BTreeMap;
use std::fmt;
use std::str::FromStr;

/// Charges given by the user: a comma-separated list of `key=charge`.
///
/// A key is an element symbol or the label of a site; a label beats an element. A key that is an element symbol in
/// its usual spelling always means the element, also where a site has it as its label: with sites `O` and `O1`,
/// `O=-2,O1=-1` gives −1 to `O1` and −2 to every other oxygen. Labels are matched letter by letter; `ta` is read as
/// `Ta` if no site has the label `ta`. A charge may be written `5`, `+5`, `5+`, `-2`, `2-`, `3.5` or `7/2`; the last two
/// are understood, and refused when they are used, because a polarization with averaged charges is not quantized.
///
/// ```
/// use cosetta::charge::Given;
/// let given: Given = " Fe1=2+, Fe2 = 3, O=-2".parse().unwrap();
/// assert_eq!(given.to_string(), "Fe1=2,Fe2=3,O=-2");
/// assert!("Fe".parse::<Given>().is_err());
/// ```
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Given {
    entries: Vec<(String, Value)>,
}

/// A charge as a fraction in lowest terms, the denominator above zero.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Value {
    numerator: i64,
    denominator: i64,
}

impl fmt::Display for Value {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.denominator {
            1 => write!(f, "{}", self.numerator),
            denominator => write!(f, "{}/{denominator}", self.numerator),
        }
    }
}

impl fmt::Display for Given {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.entries.iter().map(|(key, value)| format!("{key}={value}")).join(","))
    }
}

impl FromStr for Given {
    type Err = Diagnostic;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let mut entries: Vec<(String, Value)> = Vec::new();
        for piece in text.split(',') {
            let (key, value) = parse_piece(piece).map_err(|fault| fault.diagnostic(text, piece))?;
            if entries.iter().any(|(known, _)| *known == key) {
                return Err(Fault::new(format!("'{key}' is there twice")).diagnostic(text, piece));
            }
            entries.push((key, value));
        }
        Ok(Self { entries })
    }
}

/// What is wrong with a piece, and how it was probably meant.
struct Fault {
    reason: String,
    meant: Option<String>,
}

impl Fault {
    fn new(reason: impl Into<String>) -> Self {
        Self { reason: reason.into(), meant: None }
    }

    fn diagnostic(self, text: &str, piece: &str) -> Diagnostic {
        let message =
            format!("cannot read '{}' in the charges '{}': {}", piece.trim(), text.trim(), self.reason);
        let hint = self.meant.unwrap_or_else(|| "Ta=5,K=1,O=-2".into());
        Diagnostic::error(Code::ChargeSyntax, message).hint(format!("--charges '{hint}'"))
    }
}

fn parse_piece(piece: &str) -> Result<(String, Value), Fault> {
    let piece = piece.trim();
    if piece.is_empty() {
        return Err(Fault::new("there is nothing between the commas"));
    }
    let Some((key, value)) = piece.split_once('=') else {
        return Err(Fault { reason: "there is no '='".into(), meant: guess(piece) });
    };
    let key = key.trim();
    if key.is_empty() {
        return Err(Fault::new("there is no element or label before '='"));
    }
    let value = parse_value(value).map_err(Fault::new)?;
    Ok((key.to_owned(), value))
}

/// Reads `Ta5`, `Ta 5`, `O-2` and `Ta:5` the way they were probably meant.
fn guess(piece: &str) -> Option<String> {
    let start = piece.find(|c: char| !c.is_ascii_alphabetic())?;
    let key = Element::from_symbol(&piece[..start])?;
    let value = parse_value(piece[start..].trim_start_matches([':', ' '])).ok()?;
    Some(format!("{key}={value}"))
}

fn parse_value(text: &str) -> Result<Value, String> {
    let text = text.trim().replace('\u{2212}', "-");
    if text.is_empty() {
        return Err("there is no charge after '='".into());
    }
    let unsigned = text.trim_start_matches(['+', '-']).trim_end_matches(['+', '-']).trim();
    let signs: String = text.chars().filter(|c| matches!(c, '+' | '-')).collect();
    let is_negative = match signs.as_str() {
        "" | "+" => false,
        "-" => true,
        _ => return Err(format!("'{text}' has more than one sign")),
    };
    let value = parse_unsigned(unsigned).ok_or_else(|| format!("'{text}' is not a charge"))?;
    if value.numerator > i64::from(MAX_CHARGE).saturating_mul(value.denominator) {
        return Err(format!("'{text}' is above the limit of {MAX_CHARGE}"));
    }
    Ok(if is_negative { Value { numerator: -value.numerator, ..value } } else { value })
}

/// `5`, `3.5` or `7/2`, exactly.
fn parse_unsigned(text: &str) -> Option<Value> {
    let digits = |text: &str| -> Option<i64> {
        (!text.is_empty() && text.bytes().all(|byte| byte.is_ascii_digit()))
            .then(|| text.parse().ok())
            .flatten()
    };
    let (numerator, denominator) = if let Some((above, below)) = text.split_once('/') {
        (digits(above.trim())?, digits(below.trim()).filter(|&below| below > 0)?)
    } else if let Some((whole, part)) = text.split_once('.') {
        let scale = 10_i64.checked_pow(u32::try_from(part.len()).ok()?)?;
        let part = if part.is_empty() { 0 } else { digits(part)? };
        (digits(whole)?.checked_mul(scale)?.checked_add(part)?, scale)
    } else {
        (digits(text)?, 1)
    };
    let divisor = num_integer::gcd(numerator, denominator);
    Some(Value { numerator: numerator / divisor, denominator: denominator / divisor })
}

/// What a key stands for in a given cell.
enum Target<'a> {
    Element(Element),
    Label(&'a str),
}

fn target<'a>(key: &'a str, sites: &[Site]) -> Option<Target<'a>> {
    let element = Element::from_symbol(key);
    let is_usual = element.is_some_and(|element| element.symbol() == key || matches!(key, "D" | "T"));
    if !is_usual && sites.iter().any(|site| site.label == key) {
        return Some(Target::Label(key));
    }
    let is_present = |element: &Element| sites.iter().any(|site| site.element == *element);
    element.filter(is_present).map(Target::Element)
}

impl Given {
    /// The charge of each site.
    ///
    /// # Errors
    /// A key that names nothing in the cell, a site without a charge, a charge that is not whole.
    pub(super) fn charges(&self, sites: &[Site]) -> Result<Vec<i64>, Diagnostic> {
        let mut elements: BTreeMap<Element, Value> = BTreeMap::new();
        let mut labels: BTreeMap<&str, Value> = BTreeMap::new();
        for (key, value) in &self.entries {
            match target(key, sites) {
                Some(Target::Element(element)) => {
                    if let Some(other) = elements.insert(element, *value)
                        && other != *value
                    {
                        let message = format!("{element} was given the charges {other} and {value}");
                        return Err(Diagnostic::error(Code::ChargeSyntax, message));
                    }
                }
                Some(Target::Label(label)) => {
                    labels.insert(label, *value);
                }
                None => return Err(unknown(key, sites)),
            }
        }
        let values = sites.iter().map(|site| {
            let value = labels.get(site.label.as_str()).or_else(|| elements.get(&site.element));
            (site, value.copied())
        });
        let missing: Vec<&Site> =
            values.clone().filter(|(_, value)| value.is_none()).map(|pair| pair.0).collect();
        if !missing.is_empty() {
            return Err(self.missing(sites, &missing, values));
        }
        values
            .filter_map(|(site, value)| value.map(|value| (site, value)))
            .map(|(site, value)| match value {
                Value { numerator, denominator: 1 } => Ok(numerator),
                _ => Err(Diagnostic::error(
                    Code::ChargeAveraged,
                    format!(
                        "site {} was given the charge {value}, which is not a whole number; \
                         a polarization with averaged charges is not quantized",
                        site.label
                    ),
                )),
            })
            .collect()
    }

    /// The refusal for sites without a charge. If they all are of one element and one charge makes the cell neutral,
    /// the hint completes the list.
    fn missing<'a>(
        &self,
        sites: &[Site],
        missing: &[&Site],
        values: impl Iterator<Item = (&'a Site, Option<Value>)>,
    ) -> Diagnostic {
        let elements: Vec<Element> = missing.iter().map(|site| site.element).unique().collect();
        let labels = super::listing(missing.iter().map(|site| site.label.as_str()).unique());
        let message = format!("no charge was given for {} (sites {labels})", elements.iter().join(", "));
        let diagnostic = Diagnostic::error(Code::ChargeMissing, message);
        let is_whole_element =
            sites.iter().filter(|site| elements.contains(&site.element)).count() == missing.len();
        let [element] = elements[..] else { return diagnostic };
        let sum: Option<i64> = values
            .filter_map(|(_, value)| value)
            .map(|value| (value.denominator == 1).then_some(value.numerator))
            .sum();
        let count = i64::try_from(missing.len()).unwrap_or(i64::MAX);
        match sum {
            Some(sum) if is_whole_element && sum % count == 0 && sum != 0 => {
                diagnostic.hint(format!("--charges '{self},{element}={}'", -sum / count))
            }
            _ => diagnostic,
        }
    }
}

fn unknown(key: &str, sites: &[Site]) -> Diagnostic {
    let formula = Formula::from_elements(sites.iter().map(|site| site.element));
    let elements = super::listing(formula.counts().iter().map(|(element, _)| element));
    let labels = super::listing(sites.iter().map(|site| site.label.as_str()).unique());
    Diagnostic::error(
        Code::ChargeUnknownSite,
        format!(
            "'{key}' is no element or label of this structure, which has elements {elements} and labels {labels}"
        ),
    )
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::Vector3;

    fn sites(list: &[(&str, &str)]) -> Vec<Site> {
        list.iter()
            .map(|(label, symbol)| {
                Site::new(*label, Element::from_symbol(symbol).expect("known"), Vector3::zeros())
            })
            .collect()
    }

    fn perovskite() -> Vec<Site> {
        sites(&[("K1", "K"), ("Ta1", "Ta"), ("O1", "O"), ("O1", "O"), ("O1", "O")])
    }

    fn charges(text: &str, sites: &[Site]) -> Result<Vec<i64>, Diagnostic> {
        text.parse::<Given>()?.charges(sites)
    }

    #[test]
    fn spellings_of_a_charge() {
        for (text, expected) in [
            ("5", (5, 1)),
            ("+5", (5, 1)),
            ("5+", (5, 1)),
            (" 2- ", (-2, 1)),
            ("-2", (-2, 1)),
            ("\u{2212}2", (-2, 1)),
            ("- 2", (-2, 1)),
            ("0", (0, 1)),
            ("2.0", (2, 1)),
            ("3.5", (7, 2)),
            ("7/2", (7, 2)),
            ("-8/3", (-8, 3)),
            ("4/2", (2, 1)),
            ("118", (118, 1)),
        ] {
            let value = parse_value(text).expect(text);
            assert_eq!((value.numerator, value.denominator), expected, "{text}");
        }
        for text in [
            "",
            "+",
            "-",
            "+-2",
            "-2-",
            "2+3",
            "x",
            "1e3",
            "7/0",
            "7/",
            ".",
            "119",
            "99999999999999999999",
            "1.2.3",
        ] {
            assert!(parse_value(text).is_err(), "{text}");
        }
    }

    #[test]
    fn faults_name_the_piece_and_what_to_type() {
        for (text, piece, hint) in [
            ("Ta5,K=1", "'Ta5'", "--charges 'Ta=5'"),
            ("O-2", "'O-2'", "--charges 'O=-2'"),
            ("K=1,,O=-2", "''", "--charges 'Ta=5,K=1,O=-2'"),
            ("K=one", "'one'", "--charges 'Ta=5,K=1,O=-2'"),
            ("=2", "'=2'", "--charges 'Ta=5,K=1,O=-2'"),
            ("K=1,O=-2,K=2", "'K' is there twice", "--charges 'Ta=5,K=1,O=-2'"),
            ("", "''", "--charges 'Ta=5,K=1,O=-2'"),
        ] {
            let fault = text.parse::<Given>().expect_err(text);
            assert_eq!(fault.code, Code::ChargeSyntax);
            assert!(fault.message.contains(piece), "{}", fault.message);
            assert_eq!(fault.hint.as_deref(), Some(hint), "{text}");
        }
    }

    #[test]
    fn elements_and_labels() {
        assert_eq!(charges("Ta=5,K=1,O=-2", &perovskite()), Ok(vec![1, 5, -2, -2, -2]));
        assert_eq!(charges("ta=5,K1=1,O1=-2", &perovskite()), Ok(vec![1, 5, -2, -2, -2]));
        // A label beats an element; an element symbol means the element even where it is a label.
        let oxygens = sites(&[("O", "O"), ("O1", "O"), ("O2", "O")]);
        assert_eq!(charges("O=-2,O1=-1", &oxygens), Ok(vec![-2, -1, -2]));
        // "CO" is a label here, not cobalt; without the label it is read as cobalt.
        let carbonyl = sites(&[("CO", "C"), ("Co", "Co")]);
        assert_eq!(charges("CO=2,Co=0", &carbonyl), Ok(vec![2, 0]));
        let deuteride = sites(&[("Li1", "Li"), ("D1", "D")]);
        assert_eq!(charges("Li=1,D=-1", &deuteride), Ok(vec![1, -1]));
    }

    #[test]
    fn refusals_list_what_exists() {
        let refusal = charges("Ta=5,K=1,S=-2", &perovskite()).expect_err("no sulfur");
        assert_eq!(refusal.code, Code::ChargeUnknownSite);
        assert!(refusal.message.contains("elements K, Ta, O and labels K1, Ta1, O1"), "{}", refusal.message);

        let refusal = charges("Ta=5,K=1", &perovskite()).expect_err("no charge for O");
        assert_eq!(refusal.code, Code::ChargeMissing);
        assert_eq!(refusal.message, "no charge was given for O (sites O1)");
        assert_eq!(refusal.hint.as_deref(), Some("--charges 'Ta=5,K=1,O=-2'"));

        let refusal = charges("Ta=5", &perovskite()).expect_err("no charge for K, O");
        assert_eq!((refusal.code, refusal.hint), (Code::ChargeMissing, None));

        for text in ["Ta=7/2,K=1,O=-2", "Ta=3.5,K=1,O=-2"] {
            let refusal = charges(text, &perovskite()).expect_err("averaged");
            assert_eq!(refusal.code, Code::ChargeAveraged);
            assert!(refusal.message.contains("site Ta1 was given the charge 7/2"), "{}", refusal.message);
        }
    }
}
