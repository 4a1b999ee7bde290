//! Bond-valence parameters of pairs of elements.
//!
//! A bond of length `d` has the valence `s = exp((r0 − d) / b)`. The values of `r0` and `b` come, in this order of trust,
//!
//! 1. from a table that the user loads;
//! 2. from the published pairs in `src/data/bond_valence.tsv` (Brown & Altermatt 1985; Brese & O'Keeffe 1991);
//! 3. from the element parameters of O'Keeffe & Brese, J. Am. Chem. Soc. 113, 3226 (1991).

use crate::cif;
use crate::crystal::Element;
use crate::diagnostic::{Code, Diagnostic};
use std::collections::BTreeMap;
use std::sync::LazyLock;

/// The width that goes with the element parameters, in Å.
const USUAL_B: f64 = 0.37;

/// Where a parameter comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Origin {
    /// Loaded by the user.
    User,
    /// A published pair of this state.
    Published,
    /// A published pair of the same elements in another state.
    OtherState,
    /// The element-parameter rule.
    Rule,
}

/// Parameters of one bond.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pair {
    /// Length in Å of a bond of valence 1.
    pub r0: f64,
    /// Width in Å.
    pub b: f64,
    /// Where they come from.
    pub origin: Origin,
}

impl Pair {
    /// The valence of a bond of length `distance` Å.
    #[must_use]
    pub fn valence(&self, distance: f64) -> f64 {
        ((self.r0 - distance) / self.b).exp()
    }

    /// The length in Å of a bond of this valence.
    #[must_use]
    pub fn length(&self, valence: f64) -> f64 {
        self.r0 - self.b * valence.ln()
    }
}

type Table = BTreeMap<(Element, Element), Vec<(i64, Pair)>>;

/// All parameters that may be used.
#[derive(Debug, Clone, PartialEq)]
pub struct Parameters {
    pairs: Table,
}

static STANDARD: LazyLock<Parameters> = LazyLock::new(|| Parameters { pairs: published() });
static ELEMENTS: LazyLock<BTreeMap<Element, (f64, f64)>> = LazyLock::new(element_parameters);

impl Parameters {
    /// The built-in tables.
    #[must_use]
    pub fn standard() -> &'static Self {
        &STANDARD
    }

    /// The built-in tables with the pairs of a CIF put first: the loop of `_valence_param_atom_1`, `…_atom_1_valence`,
    /// `…_atom_2`, `…_atom_2_valence`, `…_Ro` and `…_B` of the bond-valence dictionary. Of several rows for a pair
    /// the first counts. A valence of 9 stands for every state.
    ///
    /// # Errors
    /// No such loop, or a row that cannot be read.
    pub fn from_cif(bytes: &[u8]) -> Result<Self, Diagnostic> {
        let mut pairs = published();
        let loaded = cif_rows(bytes)?;
        let mut seen: Table = Table::new();
        for (key, state, pair) in loaded {
            let list = seen.entry(key).or_default();
            if !list.iter().any(|(known, _)| *known == state) {
                list.push((state, pair));
            }
        }
        for (key, list) in seen {
            let known = pairs.entry(key).or_default();
            for (state, pair) in list {
                known.retain(|(other, _)| state != ANY_STATE && *other != state);
                known.push((state, pair));
            }
            known.sort_by_key(|(state, _)| *state);
        }
        Ok(Self { pairs })
    }

    /// The parameters of a bond between a cation in a state and an anion; those of the nearest state if there are none
    /// for this one, of two equally near the lower. None where even the rule lacks an element.
    #[must_use]
    pub fn pair(&self, cation: Element, state: i64, anion: Element) -> Option<Pair> {
        let list = self.pairs.get(&(cation, anion)).map_or(&[][..], Vec::as_slice);
        let nearest = list.iter().min_by_key(|(known, _)| (*known == ANY_STATE, (known - state).abs()));
        match nearest {
            Some((known, pair)) if *known == state || *known == ANY_STATE => Some(*pair),
            Some((_, pair)) => Some(Pair { origin: Origin::OtherState, ..*pair }),
            None => rule(cation, anion),
        }
    }
}

/// The state that stands for every state, as in the open tables.
const ANY_STATE: i64 = 9;

/// The rule of O'Keeffe & Brese: `r0 = r_i + r_j − r_i r_j (√c_i − √c_j)² / (c_i r_i + c_j r_j)`.
fn rule(one: Element, other: Element) -> Option<Pair> {
    let ((r1, c1), (r2, c2)) = (ELEMENTS.get(&one)?, ELEMENTS.get(&other)?);
    let difference = c1.sqrt() - c2.sqrt();
    let r0 = r1 + r2 - r1 * r2 * difference * difference / (c1 * r1 + c2 * r2);
    Some(Pair { r0, b: USUAL_B, origin: Origin::Rule })
}

/// The length in Å of a single bond between two atoms of one nonmetal: twice the radius of O'Keeffe & Brese, but for
/// O and F, whose radii are those of ions: 1.48 Å in peroxides, 1.42 Å in F2 (textbook values, from memory).
pub(crate) fn single_bond(element: Element) -> Option<Pair> {
    let r0 = match element.symbol() {
        "O" => 1.48,
        "F" => 1.42,
        _ => 2.0 * ELEMENTS.get(&element)?.0,
    };
    Some(Pair { r0, b: USUAL_B, origin: Origin::Rule })
}

fn rows(table: &str) -> impl Iterator<Item = Vec<&str>> {
    let lines = table.lines().filter(|line| !line.starts_with('#') && !line.is_empty()).skip(1);
    lines.map(|line| line.split('\t').collect())
}

fn published() -> Table {
    let mut table = Table::new();
    for row in rows(include_str!("../data/bond_valence.tsv")) {
        let Some((cation, state, anion, pair)) = published_row(&row) else { continue };
        table.entry((cation, anion)).or_default().push((state, pair));
    }
    table
}

fn published_row(row: &[&str]) -> Option<(Element, i64, Element, Pair)> {
    let [cation, state, anion, _, r0, b, _, _] = row else { return None };
    let pair = Pair { r0: r0.parse().ok()?, b: b.parse().ok()?, origin: Origin::Published };
    Some((Element::from_symbol(cation)?, state.parse().ok()?, Element::from_symbol(anion)?, pair))
}

fn element_parameters() -> BTreeMap<Element, (f64, f64)> {
    let read = |row: &Vec<&str>| {
        let [symbol, r, c] = row[..] else { return None };
        Some((Element::from_symbol(symbol)?, (r.parse().ok()?, c.parse().ok()?)))
    };
    rows(include_str!("../data/element_parameters.tsv")).filter_map(|row| read(&row)).collect()
}

type LoadedRow = ((Element, Element), i64, Pair);

/// The columns of the loop, each with its spellings in the two dictionary styles.
const COLUMNS: [&[&str]; 6] = [
    &["_valence_param_atom_1", "_valence_param.atom_1"],
    &["_valence_param_atom_1_valence", "_valence_param.atom_1_valence"],
    &["_valence_param_atom_2", "_valence_param.atom_2"],
    &["_valence_param_atom_2_valence", "_valence_param.atom_2_valence"],
    &["_valence_param_Ro", "_valence_param.Ro"],
    &["_valence_param_B", "_valence_param.B"],
];

fn cif_rows(bytes: &[u8]) -> Result<Vec<LoadedRow>, Diagnostic> {
    let (document, _) = cif::parse(bytes);
    let mut found = Vec::new();
    for table in document.blocks().filter_map(|block| block.table(&COLUMNS)) {
        if let Some(fault) = table.fault() {
            return Err(fault.clone());
        }
        for (number, row) in table.iter().enumerate() {
            let text = |column: usize| row.stated(column);
            let bad = || {
                let shown: Vec<&str> = (0..COLUMNS.len()).map(|column| text(column).unwrap_or("?")).collect();
                let message = format!(
                    "row {} of the bond-valence parameters cannot be read: {}",
                    number + 1,
                    shown.join(" ")
                );
                Diagnostic::error(Code::BondValenceTable, message)
            };
            found.push(cif_row(&text).ok_or_else(bad)?);
        }
    }
    if found.is_empty() {
        let message = "the file has no loop of _valence_param_atom_1, _valence_param_atom_2, _valence_param_Ro, \
                       _valence_param_B";
        return Err(Diagnostic::error(Code::BondValenceTable, message));
    }
    Ok(found)
}

/// One row. The first atom is the cation; where its valence is negative the two change places.
fn cif_row<'a>(text: &impl Fn(usize) -> Option<&'a str>) -> Option<LoadedRow> {
    let number = |column: usize| cif::parse_number(text(column)?).map(|measured| measured.value);
    let whole = |column: usize| text(column).and_then(|text| text.parse::<i64>().ok());
    let (one, other) = (Element::from_symbol(text(0)?)?, Element::from_symbol(text(2)?)?);
    let (r0, b) = (number(4)?, number(5)?);
    if !(0.1..=5.0).contains(&r0) || !(0.05..=2.0).contains(&b) {
        return None;
    }
    let pair = Pair { r0, b, origin: Origin::User };
    let (state, partner) = (whole(1)?, whole(3).unwrap_or(-1));
    if state < 0 { Some(((other, one), partner, pair)) } else { Some(((one, other), state, pair)) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_row_is_read() {
        let table = include_str!("../data/bond_valence.tsv");
        assert!(rows(table).all(|row| published_row(&row).is_some()));
        let read: usize = published().values().map(Vec::len).sum();
        assert_eq!(read, rows(table).count(), "a pair is there twice");
        assert_eq!(element_parameters().len(), rows(include_str!("../data/element_parameters.tsv")).count());
        for row in rows(table) {
            assert!(
                row[6].starts_with("Brown & Altermatt") || row[6].starts_with("Brese & O'Keeffe"),
                "{row:?}"
            );
            assert!(matches!(row[7], "checked" | "from memory"), "{row:?}");
        }
    }

    #[test]
    fn valence_and_length_are_inverse() {
        let pair = Pair { r0: 1.815, b: 0.37, origin: Origin::Published };
        assert!((pair.valence(1.815) - 1.0).abs() < 1e-12);
        assert!((pair.length(pair.valence(2.0)) - 2.0).abs() < 1e-12);
    }

    #[test]
    fn the_nearest_state_stands_in() {
        let element = |symbol| Element::from_symbol(symbol).expect("known");
        let pair = Parameters::standard().pair(element("Mo"), 5, element("O")).expect("Mo +6");
        assert_eq!(pair.origin, Origin::OtherState);
        let rule = Parameters::standard().pair(element("Mo"), 5, element("S")).expect("by rule");
        assert_eq!(rule.origin, Origin::Rule);
        assert_eq!(Parameters::standard().pair(element("Ar"), 1, element("O")), None);
    }
}
