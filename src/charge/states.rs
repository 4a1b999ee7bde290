//! Which oxidation states an element is known in, and how often each is reported.

use crate::crystal::Element;
use std::collections::BTreeMap;
use std::sync::LazyLock;

/// One oxidation state of an element.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct State {
    /// Charge in units of e.
    pub charge: i64,
    /// How many crystal structures were reported with it.
    pub reports: u32,
}

static TABLE: LazyLock<BTreeMap<Element, Vec<State>>> =
    LazyLock::new(|| parse(include_str!("../data/oxidation_states.tsv")));

/// The tabulated states of an element in order of charge; empty if there are none, as for most noble gases.
///
/// ```
/// use cosetta::charge::states;
/// use cosetta::crystal::Element;
/// assert!(states(Element::OXYGEN).iter().map(|state| state.charge).eq([-2, -1]));
/// ```
#[must_use]
pub fn states(element: Element) -> &'static [State] {
    TABLE.get(&element).map_or(&[], Vec::as_slice)
}

/// The part of all reports of the element that have this charge, above 0 and at most 1.
#[must_use]
pub fn share(element: Element, charge: i64) -> Option<f64> {
    let states = states(element);
    let found = states.iter().find(|state| state.charge == charge)?;
    let total: f64 = states.iter().map(|state| f64::from(state.reports)).sum();
    Some(f64::from(found.reports) / total)
}

/// Pairs of states that one element may carry side by side: no state between them is reported more often than the
/// rarer of the two. So Fe +2 and +3 are neighbours, Sb +3 and +5 as well (+4 is rare), Co +2 and +4 are not.
pub(crate) fn neighbours(element: Element) -> Vec<(i64, i64)> {
    let states = states(element);
    let mut pairs = Vec::new();
    for (i, low) in states.iter().enumerate() {
        for (j, high) in states.iter().enumerate().skip(i + 1) {
            let rarer = low.reports.min(high.reports);
            let skips_odd = goes_by_twos(element) && (high.charge - low.charge) == 2;
            if skips_odd || states[i + 1..j].iter().all(|between| between.reports <= rarer) {
                pairs.push((low.charge, high.charge));
            }
        }
    }
    pairs
}

/// Elements whose states of odd electron count do not exist or are rare, whatever is reported: those between are
/// averages. Main-group elements, and Ag, Au, Pd and Pt (Greenwood & Earnshaw, from memory).
fn goes_by_twos(element: Element) -> bool {
    const SYMBOLS: [&str; 14] =
        ["Ga", "In", "Tl", "Ge", "Sn", "Pb", "As", "Sb", "Bi", "Te", "Au", "Ag", "Pt", "Pd"];
    SYMBOLS.contains(&element.symbol())
}

/// Rows that cannot be read are left out; a test makes sure that there are none.
fn parse(table: &str) -> BTreeMap<Element, Vec<State>> {
    let mut states: BTreeMap<Element, Vec<State>> = BTreeMap::new();
    for (element, state) in rows(table).filter_map(parse_row) {
        states.entry(element).or_default().push(state);
    }
    for list in states.values_mut() {
        list.sort_by_key(|state| state.charge);
    }
    states
}

fn rows(table: &str) -> impl Iterator<Item = &str> {
    table.lines().filter(|line| !line.starts_with('#') && !line.is_empty()).skip(1)
}

fn parse_row(row: &str) -> Option<(Element, State)> {
    let mut fields = row.split('\t');
    let element = Element::from_symbol(fields.next()?)?;
    let charge = fields.next()?.parse().ok()?;
    let reports = fields.next()?.parse().ok().filter(|&reports| reports > 0)?;
    Some((element, State { charge, reports }))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn element(symbol: &str) -> Element {
        Element::from_symbol(symbol).expect("known")
    }

    #[test]
    fn every_row_is_read_and_none_is_repeated() {
        let table = include_str!("../data/oxidation_states.tsv");
        assert!(rows(table).all(|row| parse_row(row).is_some()));
        let read: usize = parse(table).values().map(Vec::len).sum();
        assert_eq!(read, rows(table).count());
        for list in parse(table).values() {
            assert!(list.windows(2).all(|pair| pair[0].charge < pair[1].charge));
            assert!(list.iter().all(|state| (-9..=9).contains(&state.charge) && state.charge != 0));
        }
    }

    #[test]
    fn anions_are_there() {
        for (symbol, charge) in [
            ("N", -3),
            ("C", -4),
            ("H", -1),
            ("S", -2),
            ("P", -3),
            ("As", -3),
            ("Si", -4),
            ("Sb", -3),
            ("Te", -2),
        ] {
            assert!(share(element(symbol), charge).is_some(), "{symbol} {charge}");
        }
        assert!(states(element("Ar")).is_empty());
    }

    #[test]
    fn neighbouring_states() {
        // By hand from the counts in the table.
        for (symbol, pair, expected) in [
            ("Fe", (2, 3), true),
            ("Fe", (2, 4), false),
            ("Sb", (3, 5), true),
            ("Co", (2, 4), false),
            ("Pb", (2, 4), true),
            ("N", (-3, 5), true),
        ] {
            assert_eq!(neighbours(element(symbol)).contains(&pair), expected, "{symbol} {pair:?}");
        }
    }
}
