//! Charges that are shared between equivalent sites, as rivals of whole ones.

use super::evidence::Evidence;
use super::inferred::{MAX_MIXED_ORBITS, SLACK, groups};
use super::neutral::{Choice, Wanted, best_picks};
use super::orbit::Orbit;
use super::prior::log_prior;
use super::states::{neighbours, share, states};
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;

/// Odds against a charge that is shared between equivalent sites, beside those of mixed valence.
const AVERAGE_ODDS: f64 = 30.0;

/// A fractional charge of one element that makes the cell neutral.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Average {
    /// Indices of the orbits of the element.
    group: Vec<usize>,
    /// Numerator and denominator.
    value: (i64, i64),
    pub(crate) score: f64,
}

impl Average {
    /// Indices of the sites that share the charge.
    pub(crate) fn sites(&self, orbits: &[Orbit]) -> Vec<usize> {
        self.group.iter().flat_map(|&index| orbits[index].sites.iter().copied()).collect()
    }

    /// The refusal that names the average.
    pub(crate) fn refusal(&self, orbits: &[Orbit]) -> Diagnostic {
        let labels = self.group.iter().map(|&index| orbits[index].label.as_str());
        let (numerator, denominator) = self.value;
        let limit = if self.group.len() > MAX_MIXED_ORBITS {
            format!("; an element on more than {MAX_MIXED_ORBITS} sets is given one charge")
        } else {
            String::new()
        };
        Diagnostic::error(
            Code::ChargeAveraged,
            format!(
                "a neutral cell needs an average charge of {numerator}/{denominator} on {} ({} of equivalent sites: {}), \
                 and equivalent sites must carry one whole charge{limit}",
                self.group.first().map_or("", |&index| orbits[index].element.symbol()),
                plural(self.group.len(), "set"),
                super::listing(labels),
            ),
        )
    }
}

/// The most likely fractional charge of one group between two neighbouring states of one sign that makes the cell
/// neutral when every other group has one whole state, between states of at least this share.
pub(super) fn average_of(orbits: &[Orbit], evidence: &Evidence<'_>, least_share: f64) -> Option<Average> {
    let groups = groups(orbits, &evidence.kinds);
    let whole: Vec<Vec<Choice>> = groups.iter().map(|group| whole_choices(orbits, group, evidence)).collect();
    let found = (0..groups.len()).flat_map(|index| {
        let others: Vec<Vec<Choice>> =
            (0..whole.len()).filter(|&one| one != index).map(|one| whole[one].clone()).collect();
        let picks = best_picks(&others, 1, Wanted::Any).into_iter();
        let sums: Vec<Choice> = picks
            .filter_map(|(amount, picks)| picks.first().map(|pick| Choice { amount, score: pick.score }))
            .collect();
        averages(orbits, &groups[index], &sums, evidence, least_share)
    });
    found.max_by(|a, b| a.score.total_cmp(&b.score))
}

fn count(orbits: &[Orbit], group: &[usize]) -> i64 {
    group.iter().fold(0, |sum, &index| sum.saturating_add(orbits[index].count()))
}

/// The logarithm of the likelihood that a whole group is in a state.
fn log_group(group: &[usize], evidence: &Evidence<'_>, state: i64) -> f64 {
    group.iter().map(|&index| evidence.of(index, state)).sum()
}

fn whole_choices(orbits: &[Orbit], group: &[usize], evidence: &Evidence<'_>) -> Vec<Choice> {
    let Some(element) = group.first().map(|&index| orbits[index].element) else { return Vec::new() };
    let choice = |charge: i64| {
        let amount = charge.checked_mul(count(orbits, group))?;
        let score = log_prior(element, &[charge])? + log_group(group, evidence, charge);
        Some(Choice { amount, score })
    };
    let mut list: Vec<Choice> = states(element).iter().filter_map(|state| choice(state.charge)).collect();
    let best = list.iter().map(|choice| choice.score).fold(f64::NEG_INFINITY, f64::max);
    list.retain(|choice| choice.score >= best - SLACK);
    list
}

/// Groups of more orbits than this are averaged as a whole only.
const MAX_AVERAGED_ORBITS: usize = 4;

/// The averages of a whole group, and of one of its orbits while the others carry whole charges. `sums` holds the total
/// charges of everything else.
fn averages(
    orbits: &[Orbit],
    group: &[usize],
    sums: &[Choice],
    evidence: &Evidence<'_>,
    least_share: f64,
) -> Vec<Average> {
    let Some(element) = group.first().map(|&first| orbits[first].element) else { return Vec::new() };
    let mut found = Vec::new();
    // An average of a positive and a negative state is no mixed valence.
    let is_common = |state: i64| share(element, state).is_some_and(|share| share >= least_share);
    let pairs = neighbours(element).into_iter().filter(|(low, high)| low.signum() == high.signum());
    for pair in pairs.filter(|&(low, high)| is_common(low) && is_common(high)) {
        let nothing = Choice { amount: 0, score: 0.0 };
        found.extend(average(orbits, group, sums, evidence, pair, nothing));
        if !(2..=MAX_AVERAGED_ORBITS).contains(&group.len()) {
            continue;
        }
        for &index in group {
            let rest = group.iter().copied().filter(|&other| other != index);
            for states in rest.clone().map(|_| [pair.0, pair.1]).multi_cartesian_product() {
                let pairs = || rest.clone().zip(&states);
                let amount = pairs().fold(0_i64, |sum, (one, &state)| {
                    sum.saturating_add(state.saturating_mul(orbits[one].count()))
                });
                let score = pairs().map(|(one, &state)| evidence.of(one, state)).sum();
                found.extend(average(orbits, &[index], sums, evidence, pair, Choice { amount, score }));
            }
        }
    }
    found
}

/// The most likely average of these orbits between two states. `sums` and `rest` are what everything else may add.
#[expect(clippy::cast_precision_loss, reason = "charges and counts of sites are far below 2^52")]
fn average(
    orbits: &[Orbit],
    group: &[usize],
    sums: &[Choice],
    evidence: &Evidence<'_>,
    (low, high): (i64, i64),
    rest: Choice,
) -> Option<Average> {
    let element = group.first().map(|&first| orbits[first].element)?;
    let number = count(orbits, group);
    let prior = log_prior(element, &[low, high])? - AVERAGE_ODDS.ln() + rest.score;
    // No charge of an orbit fits better than this.
    let most = 1.5 * group.len() as f64;
    let mut best: Option<Average> = None;
    for sum in sums {
        let Some(needed) = sum.amount.checked_add(rest.amount).and_then(i64::checked_neg) else { continue };
        let part = (needed as f64 / number as f64 - low as f64) / (high - low) as f64;
        if needed % number == 0 || !(0.0..=1.0).contains(&part) {
            continue;
        }
        let least = best.as_ref().map_or(f64::NEG_INFINITY, |best| best.score);
        if sum.score + prior + most < least {
            continue;
        }
        let score = sum.score + prior + evidence.between(orbits, group, (low, high), part);
        if score > least {
            let divisor = num_integer::gcd(needed, number);
            let value = (needed / divisor, number / divisor);
            best = Some(Average { group: group.to_vec(), value, score });
        }
    }
    best
}

fn plural(count: usize, noun: &str) -> String {
    if count == 1 { format!("1 {noun}") } else { format!("{count} {noun}s") }
}
