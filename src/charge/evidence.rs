//! How well does a state fit the bonds of a site?
//!
//! *Positive states* are judged by the bond-valence sum over the coordination shell: `ln(sum / state)` is compared with
//! its mean and width for the ion, measured on the fitted part of the labelled oxides (`bond_valence_spread.tsv`), with
//! tails wide enough for poor structures (Student's t with four degrees of freedom).
//!
//! *Negative states* are judged by the electrons that the atom's shell lacks: each bond to an atom of the same element
//! saves one electron per unit of valence, each bond to a more electronegative atom turns one around. This is −2 for
//! oxide, −1 for peroxide (O–O of valence 1), −1, +1, −1 for azide, −3 for ammonium and amide nitrogen.

use super::electronegativity::octet_need;
use super::orbit::Orbit;
use super::states::states;
use super::surroundings::{Environment, Surroundings};
use crate::crystal::Element;
use std::collections::BTreeMap;
use std::sync::LazyLock;

/// Logarithm of the likelihood of what the bonds contradict.
const FLOOR: f64 = -12.0;

/// Logarithm of the odds of an unpaired electron on a main-group atom.
const UNPAIRED: f64 = -4.0;

/// Logarithm of the odds of another charge than +1 for nitrogen without bonds.
const BARE: f64 = -5.0;

/// Width, in e, of the number of electrons that a shell lacks.
const SHELL_WIDTH: f64 = 0.22;

/// Degrees of freedom of the tails.
const FREEDOM: f64 = 4.0;

/// Mean and width of `ln(sum / state)` where an ion was not measured.
const UNMEASURED: Spread = Spread { mean: 0.0, width: 0.2 };

#[derive(Debug, Clone, Copy, PartialEq)]
struct Spread {
    mean: f64,
    width: f64,
}

static SPREADS: LazyLock<BTreeMap<(Element, i64), Spread>> = LazyLock::new(|| {
    let read = |line: &str| {
        let mut fields = line.split('\t');
        let element = Element::from_symbol(fields.next()?)?;
        let state = fields.next()?.parse().ok()?;
        let mean = fields.next()?.parse().ok()?;
        let width = fields.next()?.parse().ok()?;
        Some(((element, state), Spread { mean, width }))
    };
    include_str!("../data/bond_valence_spread.tsv").lines().filter_map(read).collect()
});

/// Weight of the evidence of the bonds: sums of neighbouring orbits share bonds, so they count less than independent
/// ones would. Fitted.
const EVIDENCE: f64 = 0.8;

/// What the bonds say about each state of each orbit.
pub(crate) struct Evidence<'a> {
    surroundings: Option<&'a Surroundings>,
    pub(crate) kinds: Vec<u64>,
    logs: Vec<Vec<(i64, f64)>>,
    /// Bond-valence sums of the orbits that can be in positive states, for each state.
    sums: Vec<(Element, Vec<(i64, f64)>)>,
}

impl<'a> Evidence<'a> {
    pub(crate) fn new(orbits: &[Orbit], surroundings: Option<&'a Surroundings>) -> Self {
        let Some(surroundings) = surroundings else {
            let logs = vec![Vec::new(); orbits.len()];
            return Self { surroundings: None, kinds: vec![0; orbits.len()], logs, sums: Vec::new() };
        };
        let log = |index: usize, state: i64| EVIDENCE * log_likelihood(surroundings, orbits, index, state);
        let of_orbit = |index: usize| {
            let list = states(orbits[index].element).iter();
            list.map(|state| (state.charge, log(index, state.charge))).collect()
        };
        let sums_of = |index: usize| {
            let element = orbits[index].element;
            let is_giver = surroundings.environments[index].giving > surroundings.environments[index].taking;
            // Sites of main-group elements in two states are bonded differently and judged each by itself.
            if !is_giver || octet_need(element).is_some() {
                return (element, Vec::new());
            }
            let positive = states(element).iter().filter(|state| state.charge > 0);
            let sum = |state: i64| surroundings.sum(orbits, index, state).filter(|&sum| sum > 0.0);
            (element, positive.filter_map(|state| Some((state.charge, sum(state.charge)?))).collect())
        };
        Self {
            surroundings: Some(surroundings),
            kinds: (0..orbits.len()).map(|index| kind(surroundings, orbits, index)).collect(),
            logs: (0..orbits.len()).map(of_orbit).collect(),
            sums: (0..orbits.len()).map(sums_of).collect(),
        }
    }

    /// The same where the group carries two states. Then both are judged by one mean and one width, without tails, so
    /// that among like sites the higher state always goes to the higher sum.
    pub(crate) fn beside(&self, index: usize, state: i64, pair: Option<(i64, i64)>) -> f64 {
        let (Some((low, high)), Some((element, sums))) = (pair, self.sums.get(index)) else {
            return self.of(index, state);
        };
        let sum_of = |state: i64| sums.iter().find(|(known, _)| *known == state).map(|(_, sum)| *sum);
        let (Some(a), Some(b)) = (sum_of(low), sum_of(high)) else { return self.of(index, state) };
        let (one, other) = (spread(*element, low), spread(*element, high));
        let spread = Spread { mean: 0.5 * (one.mean + other.mean), width: 0.5 * (one.width + other.width) };
        #[expect(clippy::cast_precision_loss, reason = "states are small")]
        let off = ((0.5 * (a + b) / state as f64).ln() - spread.mean) / spread.width;
        EVIDENCE * softened(-0.5 * off * off - (spread.width / UNMEASURED.width).ln())
    }

    /// What the bonds say about a charge of a group between two states.
    pub(crate) fn between(&self, orbits: &[Orbit], group: &[usize], pair: (i64, i64), part: f64) -> f64 {
        let Some(surroundings) = self.surroundings else { return 0.0 };
        let of_orbit = |&index: &usize| log_likelihood_between(surroundings, orbits, index, pair, part);
        EVIDENCE * group.iter().map(of_orbit).sum::<f64>()
    }

    pub(crate) fn of(&self, index: usize, state: i64) -> f64 {
        let known = self.logs.get(index).and_then(|list| list.iter().find(|(other, _)| *other == state));
        known.map_or(0.0, |(_, log)| *log)
    }
}

/// The logarithm of the likelihood of a state; 0 where the bonds say nothing.
fn log_likelihood(surroundings: &Surroundings, orbits: &[Orbit], index: usize, state: i64) -> f64 {
    let Some(environment) = surroundings.environments.get(index) else { return 0.0 };
    let Some(element) = orbits.get(index).map(|orbit| orbit.element) else { return 0.0 };
    let (giving, taking) = (environment.giving, environment.taking);
    if is_bare_ammonium(element, environment) {
        return if state == 1 { 0.0 } else { BARE };
    }
    if giving <= 0.0 && taking <= 0.0 && environment.homonuclear <= 0.0 {
        return 0.0;
    }
    let is_anion = taking > giving || (giving <= 0.0 && environment.homonuclear > 0.0);
    if let (true, Some(need)) = (is_anion || (state < 0 && giving <= 0.0), octet_need(element)) {
        let turned = if giving > 0.0 { 2.0 * giving } else { 0.0 };
        #[expect(clippy::cast_precision_loss, reason = "states are small")]
        let off = (state as f64 + need - environment.homonuclear - turned) / SHELL_WIDTH;
        return softened(-0.5 * off * off);
    }
    if state < 0 || is_anion {
        return FLOOR;
    }
    let unpaired = if is_unpaired(element, state, environment) { UNPAIRED } else { 0.0 };
    #[expect(clippy::cast_precision_loss, reason = "states are small")]
    let fit = |sum: f64| of_sum(sum, state as f64, spread(element, state)) + unpaired;
    surroundings.sum(orbits, index, state).map_or(0.0, fit)
}

/// The logarithm of the likelihood of a charge between two states, `part` of the way from `low` to `high`.
fn log_likelihood_between(
    surroundings: &Surroundings,
    orbits: &[Orbit],
    index: usize,
    (low, high): (i64, i64),
    part: f64,
) -> f64 {
    let at = |state: i64| log_likelihood(surroundings, orbits, index, state);
    let between = |low: f64, high: f64| (1.0 - part) * low + part * high;
    let sums = (surroundings.sum(orbits, index, low), surroundings.sum(orbits, index, high));
    let is_giver = surroundings.environments.get(index).is_some_and(|one| one.giving > one.taking);
    match (sums, orbits.get(index)) {
        ((Some(a), Some(b)), Some(orbit)) if low > 0 && is_giver => {
            let (one, other) = (spread(orbit.element, low), spread(orbit.element, high));
            let spread =
                Spread { mean: between(one.mean, other.mean), width: between(one.width, other.width) };
            #[expect(clippy::cast_precision_loss, reason = "states are small")]
            let state = between(low as f64, high as f64);
            of_sum(between(a, b), state, spread)
        }
        _ => between(at(low), at(high)),
    }
}

fn spread(element: Element, state: i64) -> Spread {
    SPREADS.get(&(element, state)).copied().unwrap_or(UNMEASURED)
}

fn of_sum(sum: f64, state: f64, spread: Spread) -> f64 {
    if sum <= 0.0 {
        return FLOOR;
    }
    let off = ((sum / state).ln() - spread.mean) / spread.width;
    let tails = -0.5 * (FREEDOM + 1.0) * (off * off / FREEDOM).ln_1p();
    softened(tails - (spread.width / UNMEASURED.width).ln())
}

/// A nitrogen without any bond: what is left of ammonium where the hydrogen atoms were not found. It stands for the
/// whole ion.
pub(crate) fn is_bare_ammonium(element: Element, environment: &Environment) -> bool {
    element.symbol() == "N"
        && environment.giving <= 0.0
        && environment.taking < 0.3
        && environment.homonuclear <= 0.0
}

/// Whether a main-group atom (or gold, of which the same is true) of this state would have an unpaired electron, beside those in bonds to its like.
fn is_unpaired(element: Element, state: i64, environment: &Environment) -> bool {
    let electrons = match element.symbol() {
        "B" | "Al" | "Ga" | "In" | "Tl" => 3,
        "Si" | "Ge" | "Sn" | "Pb" => 4,
        "P" | "As" | "Sb" | "Bi" => 5,
        "S" | "Se" | "Te" => 6,
        "Cl" | "Br" | "I" => 7,
        "Zn" | "Cd" | "Hg" => 2,
        "Au" => 11,
        _ => return false,
    };
    #[expect(clippy::cast_possible_truncation, reason = "a small valence")]
    let bonds = environment.homonuclear.round() as i64;
    (electrons - state + bonds) % 2 != 0
}

/// Orbits of one element and of one kind are expected to share a state. Nonmetals that are bonded differently are of
/// different kinds: the nitrogen of ammonium and of nitrate, the oxygen of oxide and of peroxide.
fn kind(surroundings: &Surroundings, orbits: &[Orbit], index: usize) -> u64 {
    let (Some(environment), Some(orbit)) = (surroundings.environments.get(index), orbits.get(index)) else {
        return 0;
    };
    if octet_need(orbit.element).is_none() {
        return 0;
    }
    let rounded = |value: f64| {
        #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "valences are small")]
        let rounded = value.round().clamp(0.0, 99.0) as u64;
        rounded
    };
    let is_giver = u64::from(environment.giving > environment.taking);
    let given = if matches!(orbit.element.symbol(), "C" | "N") { rounded(environment.giving) } else { 0 };
    is_giver + 2 * (rounded(environment.homonuclear) + 100 * given)
}

/// Never below the floor: a mixture with a flat distribution.
fn softened(log: f64) -> f64 {
    (log.exp() + FLOOR.exp()).ln()
}
