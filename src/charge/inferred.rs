//! Which charges do composition and bonds suggest?
//!
//! Every orbit (set of symmetry-equivalent sites) takes one whole state. An arrangement of states over the orbits is
//! scored by
//!
//! ```text
//! score = Σ_groups [ mean over the states of the group of ln p(state) − ln(odds) · (states − 1) ] + w Σ_orbits ln L(orbit, state)
//! ```
//!
//! where p is the part of the element's published reports that have the state, and L the likelihood of what is seen of
//! the bonds of the orbit (see `evidence`; without positions the last sum is left out). A group is the orbits of one
//! element, of nonmetals those that are bonded alike. Its atoms share their surroundings and are not independent
//! witnesses of how common a state is, so each state counts once and not once for every atom. A group may carry two
//! states, which must be neighbours (see `neighbours`), at odds of [`MIXED_VALENCE_ODDS`]; states more than one apart
//! at longer odds where the element is known to have the one between.
//!
//! Of all neutral arrangements the best are found by dynamic programming over the total charge (see `neutral`): the work
//! grows with orbits × states × distinct totals. Groups of more than [`MAX_MIXED_ORBITS`] orbits are given one state
//! throughout; what else is left out to bound the time is known to score below a bound, and where the best found
//! does not reach that bound the answer says so. The probability of an arrangement is its share
//! among the [`KEPT`] best, with the case that one element has no whole charge at all as one more; how well it holds
//! is measured, see DEVELOPERS.md.

use super::average::{Average, average_of};
use super::calibration;
use super::evidence::Evidence;
use super::neutral::{Choice, Pick, Wanted, best_picks};
use super::orbit::Orbit;
use super::prior::{UNCOMMON_SHARE, log_prior};
use super::states::{neighbours, share, states};
use super::surroundings::Surroundings;
use crate::crystal::Element;
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;
use std::collections::BTreeSet;

/// An assignment is refused below this probability.
pub const MIN_PROBABILITY: f64 = 0.4;

/// Without bond lengths the best arrangement of states must be this many times as likely as the second best.
pub const MIN_LIKELIHOOD_RATIO: f64 = 2.0;

/// Elements with more orbits than this are given one state throughout.
pub(super) const MAX_MIXED_ORBITS: usize = 64;

/// States of all orbits, with the logarithm of their likelihood.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Arrangement {
    pub(crate) score: f64,
    /// One per orbit, in the order of the orbits.
    pub(crate) states: Vec<i64>,
}

/// How many arrangements are kept. The probability of the others is left out of the sum.
const KEPT: usize = 12;

/// Arrangements at least this many times as likely as the best tie with it.
const TIE: f64 = 0.999;

/// What composition and bonds suggest.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Inferred {
    /// The best arrangements, best first; at least one.
    pub(crate) arrangements: Vec<Arrangement>,
    /// The probability of each.
    pub(crate) probabilities: Vec<f64>,
    /// The best case with an averaged charge, if there is one, and its probability.
    pub(crate) average: Option<(Average, f64)>,
    /// Whether no arrangement that was not looked at can be better than the best.
    pub(crate) is_exact: bool,
}

impl Inferred {
    fn new(arrangements: Vec<Arrangement>, bound: f64, average: Option<Average>, is_published: bool) -> Self {
        let top = arrangements.first().map_or(0.0, |best| best.score);
        let weights: Vec<f64> = arrangements.iter().map(|one| (one.score - top).exp()).collect();
        let shared = average.as_ref().map_or(0.0, |average| (average.score - top).exp());
        let total: f64 = weights.iter().sum::<f64>() + shared;
        let most = if is_published { 1.0 } else { calibration::MOST_UNMEASURED };
        // Arrangements that tie with the best share its probability.
        let ties = weights.iter().take_while(|&&weight| weight > TIE).count();
        let number = f64::from(u32::try_from(ties).unwrap_or(u32::MAX)).max(1.0);
        let best = calibration::calibrated(number / total).min(most) / number;
        // What is not theirs is shared among the others in proportion.
        let others = weights.iter().skip(ties).sum::<f64>() + shared;
        let rest = |weight: f64| if others > 0.0 { (1.0 - number * best) * weight / others } else { 0.0 };
        let probability = |(rank, &weight): (usize, &f64)| if rank < ties { best } else { rest(weight) };
        Self {
            arrangements,
            probabilities: weights.iter().enumerate().map(probability).collect(),
            average: average.map(|average| (average, rest(shared))),
            is_exact: top >= bound,
        }
    }

    pub(crate) fn best(&self) -> &Arrangement {
        &self.arrangements[0]
    }

    pub(crate) fn second(&self) -> Option<&Arrangement> {
        self.arrangements.get(1)
    }

    /// The probability of the best arrangement.
    pub(crate) fn probability(&self) -> f64 {
        self.probabilities.first().copied().unwrap_or(0.0)
    }

    /// How many times as likely the best arrangement is as the second.
    pub(crate) fn ratio(&self) -> Option<f64> {
        self.second().map(|second| (self.best().score - second.score).exp())
    }
}

/// The best neutral arrangements, without judging how far they are apart.
///
/// # Errors
/// An element without tabulated states; no neutral arrangement, or none without averaged charges.
pub(crate) fn infer(orbits: &[Orbit], surroundings: Option<&Surroundings>) -> Result<Inferred, Diagnostic> {
    let unknown: Vec<_> = orbits
        .iter()
        .map(|orbit| orbit.element)
        .dedup()
        .filter(|&element| states(element).is_empty())
        .collect();
    if !unknown.is_empty() {
        let message = format!("no oxidation state is tabulated for {}", unknown.iter().join(", "));
        return Err(Diagnostic::error(Code::ChargeElement, message));
    }
    let evidence = Evidence::new(orbits, surroundings);
    let (found, bound) = best_arrangements(
        orbits,
        &evidence.kinds,
        |index, state, pair| evidence.beside(index, state, pair),
        KEPT,
    );
    if found.is_empty() {
        return Err(nothing_neutral(orbits, average_of(orbits, &evidence, 0.0)));
    }
    let average = average_of(orbits, &evidence, UNCOMMON_SHARE);
    let is_published =
        surroundings.is_none_or(|surroundings| surroundings.is_published(orbits, &found[0].states));
    Ok(Inferred::new(found, bound, average, is_published))
}

/// The two states of a group of mixed valence.
type Pair = Option<(i64, i64)>;

/// The best `keep` neutral arrangements, best first, and an upper bound of the score of all that were not looked at.
/// `evidence` gives the logarithm of the likelihood of what is seen of an orbit in a state, where it is one of two also
/// with those two. Orbits of one element and of
/// equal number in `kinds` belong together.
///
/// Fillings of a group that are [`SLACK`] below its best are looked at only if the arrangements found without them could
/// be beaten; of more than [`MAX_FILLINGS`] of one group only the best for each total charge are, which bounds the time.
pub(crate) fn best_arrangements(
    orbits: &[Orbit],
    kinds: &[u64],
    evidence: impl Fn(usize, i64, Pair) -> f64,
    keep: usize,
) -> (Vec<Arrangement>, f64) {
    let groups = groups(orbits, kinds);
    let mut fillings: Vec<_> = groups.iter().map(|group| fillings(orbits, group, &evidence, keep)).collect();
    for list in &mut fillings {
        list.sort_by(|a, b| b.choice.score.total_cmp(&a.choice.score));
    }
    let (near, bound) = shortened(&fillings, SLACK);
    let found = arrangements(orbits.len(), &groups, &near, keep);
    if found.len() == keep && found.iter().all(|one| one.score >= bound) {
        return (found, bound);
    }
    let (all, bound) = shortened(&fillings, f64::INFINITY);
    (arrangements(orbits.len(), &groups, &all, keep), bound)
}

/// Fillings this far below the best of their group are set aside at first.
pub(super) const SLACK: f64 = 25.0;

/// No more fillings of one group than this are looked at.
const MAX_FILLINGS: usize = 200;

/// The fillings near the best of each group, and the highest score that an arrangement with another one can have.
/// Without slack the best filling of every total charge is there, so that whatever can be neutral is found.
fn shortened(fillings: &[Vec<Filling>], slack: f64) -> (Vec<Vec<&Filling>>, f64) {
    let best = |list: &[Filling]| list.first().map_or(f64::NEG_INFINITY, |filling| filling.choice.score);
    let sum: f64 = fillings.iter().map(|list| best(list)).sum();
    let mut bound = f64::NEG_INFINITY;
    let kept = fillings.iter().map(|list| {
        let mut amounts = BTreeSet::new();
        let mut kept: Vec<&Filling> = Vec::new();
        for filling in list {
            let is_first = amounts.insert(filling.choice.amount) && slack.is_infinite();
            let is_near = kept.len() < MAX_FILLINGS && filling.choice.score >= best(list) - slack;
            if is_first || is_near {
                kept.push(filling);
            } else {
                bound = bound.max(sum - best(list) + filling.choice.score);
            }
        }
        kept
    });
    (kept.collect(), bound)
}

fn arrangements(
    number: usize,
    groups: &[Vec<usize>],
    fillings: &[Vec<&Filling>],
    keep: usize,
) -> Vec<Arrangement> {
    let items: Vec<Vec<Choice>> =
        fillings.iter().map(|list| list.iter().map(|filling| filling.choice).collect()).collect();
    let picks = best_picks(&items, keep, Wanted::Total(0)).remove(&0).unwrap_or_default();
    picks
        .into_iter()
        .map(|pick| {
            let mut states = vec![0; number];
            for ((group, list), &choice) in groups.iter().zip(fillings).zip(&pick.choices) {
                for (&index, &state) in group.iter().zip(&list[choice].states) {
                    states[index] = state;
                }
            }
            Arrangement { score: pick.score, states }
        })
        .collect()
}

/// The orbits that belong together, by index.
pub(super) fn groups(orbits: &[Orbit], kinds: &[u64]) -> Vec<Vec<usize>> {
    let key = |index: usize| (orbits[index].element, kinds.get(index).copied().unwrap_or(0));
    let mut order: Vec<usize> = (0..orbits.len()).collect();
    order.sort_by_key(|&index| (key(index), index));
    order.chunk_by(|&a, &b| key(a) == key(b)).map(<[usize]>::to_vec).collect()
}

/// States of the orbits of one element, with their total charge and score.
struct Filling {
    choice: Choice,
    states: Vec<i64>,
}

/// All fillings of a group with one state; of those with two neighbouring states the best `keep` for each total charge.
fn fillings(
    orbits: &[Orbit],
    group: &[usize],
    evidence: &impl Fn(usize, i64, Pair) -> f64,
    keep: usize,
) -> Vec<Filling> {
    let Some(element) = group.first().map(|&index| orbits[index].element) else { return Vec::new() };
    let mut list: Vec<Filling> = states(element)
        .iter()
        .filter_map(|state| {
            let options = options(orbits, group, &[state.charge], evidence)?;
            let amount = options.iter().try_fold(0_i64, |sum, option| sum.checked_add(option[0].amount))?;
            let score = options.iter().map(|option| option[0].score).sum::<f64>();
            let score = score + log_prior(element, &[state.charge])?;
            Some(Filling { choice: Choice { amount, score }, states: vec![state.charge; group.len()] })
        })
        .collect();
    if !(2..=MAX_MIXED_ORBITS).contains(&group.len()) {
        return list;
    }
    for (low, high) in neighbours(element) {
        let prior = log_prior(element, &[low, high]);
        let (Some(options), Some(prior)) = (options(orbits, group, &[low, high], evidence), prior) else {
            continue;
        };
        for (amount, picks) in best_picks(&options, keep + 1, Wanted::Any) {
            let mixed: Vec<Pick> =
                picks.into_iter().filter(|pick| !pick.choices.iter().all_equal()).take(keep).collect();
            list.extend(
                rescored(group, (low, high), &mixed, evidence).map(|(score, states)| Filling {
                    choice: Choice { amount, score: score + prior },
                    states,
                }),
            );
        }
    }
    list
}

/// Scores of ways to spread two states over a group, best first. Which site has which state is decided by comparing the
/// sites with each other; how well the best way fits is judged site by site, as for a group with one state.
fn rescored(
    group: &[usize],
    (low, high): (i64, i64),
    picks: &[Pick],
    evidence: &impl Fn(usize, i64, Pair) -> f64,
) -> impl Iterator<Item = (f64, Vec<i64>)> {
    let states = move |pick: &Pick| -> Vec<i64> {
        pick.choices.iter().map(|&choice| [low, high][choice.min(1)]).collect()
    };
    let alone = |pick: &Pick| -> f64 {
        group.iter().zip(states(pick)).map(|(&index, state)| evidence(index, state, None)).sum()
    };
    let best = picks.iter().map(alone).fold(f64::NEG_INFINITY, f64::max);
    let first = picks.first().map_or(0.0, |pick| pick.score);
    // Where both ways of judging agree, as without positions, there is nothing to compare.
    let is_alike = picks.first().is_none_or(|pick| (alone(pick) - pick.score).abs() < 1e-9);
    let ordered = picks.first().filter(|_| !is_alike).map_or(first, |pick| {
        let highs = pick.choices.iter().filter(|&&choice| choice > 0).count();
        ordered_score(group, (low, high), highs, evidence)
    });
    picks.iter().map(move |pick| (best + pick.score - ordered, states(pick)))
}

/// The score if so many sites could have the high state that fit it best. Neutrality may ask for the opposite order:
/// +2 on the small tetrahedral site and +3 on the larger octahedral one of magnetite.
fn ordered_score(
    group: &[usize],
    (low, high): (i64, i64),
    highs: usize,
    evidence: &impl Fn(usize, i64, Pair) -> f64,
) -> f64 {
    let pair = Some((low, high));
    let lows: f64 = group.iter().map(|&index| evidence(index, low, pair)).sum();
    let gains = group.iter().map(|&index| evidence(index, high, pair) - evidence(index, low, pair));
    lows + gains.sorted_by(|a, b| b.total_cmp(a)).take(highs).sum::<f64>()
}

/// What each state adds to charge and score of each orbit; none if a charge leaves `i64`.
fn options(
    orbits: &[Orbit],
    group: &[usize],
    states: &[i64],
    evidence: &impl Fn(usize, i64, Pair) -> f64,
) -> Option<Vec<Vec<Choice>>> {
    let choice = |index: usize, state: i64| {
        let amount = state.checked_mul(orbits[index].count())?;
        let pair = states.first().copied().zip(states.get(1).copied());
        Some(Choice { amount, score: evidence(index, state, pair) })
    };
    group.iter().map(|&index| states.iter().map(|&state| choice(index, state)).collect()).collect()
}

/// The refusal when no arrangement is neutral: it names the element that an average would save, if there is one.
fn nothing_neutral(orbits: &[Orbit], average: Option<Average>) -> Diagnostic {
    if let Some(average) = average {
        return average.refusal(orbits);
    }
    let known = orbits.iter().map(|orbit| orbit.element).dedup();
    let known = known.map(|element| {
        format!("{element} ({})", states(element).iter().map(|state| format!("{:+}", state.charge)).join(" "))
    });
    let message = format!("no combination of tabulated states is neutral: {}", super::listing(known));
    Diagnostic::error(Code::ChargeNone, message)
}

/// A note that charges were inferred, a warning where a state is uncommon or an element carries several.
pub(crate) fn remarks(orbits: &[Orbit], arrangement: &Arrangement, has_bonds: bool) -> Vec<Diagnostic> {
    let pairs = || orbits.iter().zip(&arrangement.states).map(|(orbit, &state)| (orbit, state));
    let uncommon: Vec<String> = pairs()
        .map(|(orbit, state)| (orbit.element, state))
        .unique()
        .filter_map(|(element, state)| share(element, state).map(|share| (element, state, share)))
        .filter(|(_, _, share)| *share < UNCOMMON_SHARE)
        .map(|(element, state, share)| format!("{element} {state:+} ({:.2} %)", share * 100.0))
        .collect();
    let inferred = if has_bonds {
        "charges were inferred from composition and bond lengths"
    } else {
        "charges were inferred from the composition alone"
    };
    let mut remarks = vec![if uncommon.is_empty() {
        Diagnostic::note(Code::ChargeInferred, inferred)
    } else {
        Diagnostic::warning(
            Code::ChargeInferred,
            format!(
                "{inferred}, with states below {} % of the element's reports: {}",
                UNCOMMON_SHARE * 100.0,
                uncommon.join(", ")
            ),
        )
    }];
    for (element, group) in &pairs().chunk_by(|(orbit, _)| orbit.element) {
        let group: Vec<(&Orbit, i64)> = group.collect();
        if group.iter().map(|(_, state)| state).all_equal() {
            continue;
        }
        remarks.push(Diagnostic::warning(Code::ChargeMixedValence, mixed_text(element, &group)));
    }
    remarks
}

fn mixed_text(element: Element, group: &[(&Orbit, i64)]) -> String {
    let states = group.iter().map(|(_, state)| *state).unique().sorted();
    let parts = states.map(|state| {
        let labels = group.iter().filter(|(_, other)| *other == state).map(|(orbit, _)| orbit.label.as_str());
        format!("{state:+} on {}", super::listing(labels))
    });
    format!("{element} was given several charges: {}", parts.collect::<Vec<_>>().join("; "))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn orbit(symbol: &str, label: &str, count: usize) -> Orbit {
        let element = Element::from_symbol(symbol).expect("known");
        Orbit { element, label: label.into(), sites: (0..count).collect() }
    }

    fn orbits(list: &[(&str, usize)]) -> Vec<Orbit> {
        let mut orbits: Vec<_> = list
            .iter()
            .enumerate()
            .map(|(index, (symbol, count))| orbit(symbol, &format!("{symbol}{index}"), *count))
            .collect();
        orbits.sort_by_key(|orbit| orbit.element);
        orbits
    }

    /// All arrangements written out: every orbit in every state, the rules of the module applied afterwards.
    fn by_enumeration(orbits: &[Orbit], evidence: impl Fn(usize, i64) -> f64) -> Vec<Arrangement> {
        orbits
            .iter()
            .map(|orbit| states(orbit.element).iter().map(|state| state.charge))
            .multi_cartesian_product()
            .filter(|states| {
                orbits.iter().zip(states).map(|(orbit, state)| orbit.count() * state).sum::<i64>() == 0
            })
            .filter_map(|states| {
                let mut score: f64 =
                    states.iter().enumerate().map(|(index, &state)| evidence(index, state)).sum();
                for element in orbits.iter().map(|orbit| orbit.element).unique() {
                    let of_element = orbits.iter().zip(&states).filter(|(orbit, _)| orbit.element == element);
                    let used: Vec<i64> = of_element.map(|(_, state)| *state).unique().sorted().collect();
                    match used[..] {
                        [_] => {}
                        [low, high] if neighbours(element).contains(&(low, high)) => {}
                        _ => return None,
                    }
                    score += log_prior(element, &used)?;
                }
                Some(Arrangement { score, states })
            })
            .sorted_by(|a, b| b.score.total_cmp(&a.score))
            .collect()
    }

    fn crystals() -> impl Strategy<Value = Vec<Orbit>> {
        let symbol = proptest::sample::select(vec!["O", "Fe", "Cu", "Sb", "Na", "Ti", "F"]);
        proptest::collection::vec((symbol, 1..7_usize), 1..6).prop_map(|list| orbits(&list))
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(64))]
        #[test]
        fn agrees_with_enumeration(orbits in crystals(), seed in 0..1000_u32) {
            // With nothing but the published shares, and with evidence that depends on the orbit.
            let evidence = |index: usize, state: i64| {
                let number = u32::try_from(index).unwrap_or(0) * 31 + seed * 17;
                let digit = (number + u32::try_from(state.unsigned_abs()).unwrap_or(0) * 7) % 13;
                -f64::from(digit)
            };
            let pairs = [
                (best_arrangements(&orbits, &[], |_, _, _| 0.0, 3), by_enumeration(&orbits, |_, _| 0.0)),
                (best_arrangements(&orbits, &[], |index, state, _| evidence(index, state), 3), by_enumeration(&orbits, evidence)),
            ];
            for ((found, bound), all) in pairs {
                // What scores below the bound may have been left out, but for one arrangement if there is any.
                let certain = all.iter().take(3).take_while(|one| one.score >= bound).count();
                prop_assert!(found.len() >= certain && found.is_empty() == all.is_empty());
                for (found, expected) in found.iter().zip(&all).take(certain) {
                    prop_assert!((found.score - expected.score).abs() < 1e-9);
                    // Ties may come in another order, so look the arrangement up.
                    let same = all.iter().find(|other| other.states == found.states);
                    prop_assert!(same.is_some_and(|same| (same.score - found.score).abs() < 1e-9));
                }
                prop_assert!(found.iter().map(|arrangement| &arrangement.states).all_unique());
            }
        }
    }

    #[test]
    fn ten_elements_are_no_problem() {
        let list = ["Fe", "Mn", "Mo", "S", "N", "P", "C", "Cu", "Bi", "O", "H", "V"];
        let list: Vec<_> = list.iter().enumerate().map(|(index, symbol)| (*symbol, 7 + 3 * index)).collect();
        assert!(infer(&orbits(&list), None).is_ok());
    }

    #[test]
    fn averages_are_named() {
        // LiMn2O4 and Fe3O4 with all iron equivalent: 3.5 and 8/3 by hand.
        for (list, expected) in [
            (&[("Li", 2), ("Mn", 4), ("O", 8)][..], "7/2 on Mn (1 set of equivalent sites: Mn1)"),
            (&[("Fe", 3), ("O", 4)], "8/3 on Fe (1 set of equivalent sites: Fe0)"),
        ] {
            let refusal = infer(&orbits(list), None).expect_err("averaged");
            assert_eq!(refusal.code, Code::ChargeAveraged);
            assert!(refusal.message.contains(expected), "{}", refusal.message);
        }
    }

    #[test]
    fn impossible_compositions_are_named() {
        let refusal = infer(&orbits(&[("Na", 2), ("F", 1)]), None).expect_err("not neutral");
        assert_eq!(refusal.code, Code::ChargeNone);
        assert!(refusal.message.contains("F (-1), Na (+1)"), "{}", refusal.message);
        let refusal = infer(&orbits(&[("Ar", 2), ("F", 1)]), None).expect_err("noble");
        assert_eq!(refusal.code, Code::ChargeElement);
        assert!(refusal.message.ends_with("for Ar"), "{}", refusal.message);
    }

    #[test]
    fn uncommon_and_mixed_states_are_remarked() {
        let peroxide = orbits(&[("Na", 2), ("O", 2)]);
        let found = infer(&peroxide, None).expect("Na2O2");
        let said = remarks(&peroxide, found.best(), false);
        assert!(said[0].message.contains("O -1 (0.44 %)"), "{}", said[0].message);
        // Co3O4, normal spinel with +2 on the tetrahedral site (Greenwood & Earnshaw, from memory).
        let spinel = orbits(&[("Co", 2), ("Co", 4), ("O", 8)]);
        let found = infer(&spinel, None).expect("Co3O4");
        assert_eq!(found.best().states, [-2, 2, 3]);
        let said = remarks(&spinel, found.best(), false);
        assert_eq!(said[1].code, Code::ChargeMixedValence);
        assert_eq!(said[1].message, "Co was given several charges: +2 on Co0; +3 on Co1");
    }
}
