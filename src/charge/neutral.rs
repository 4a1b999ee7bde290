//! Which ways to pick one option per item add up to a wanted total, best first?
//!
//! Dynamic programming over the total, exact in integers: after each item the best `keep` picks of every total that
//! can still lead to the wanted one are kept. The work grows with items × options × distinct totals, never with the
//! product of the options.

use std::collections::BTreeMap;

/// One way to settle an item.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Choice {
    /// What it adds to the total.
    pub(crate) amount: i64,
    /// What it adds to the score; larger is better.
    pub(crate) score: f64,
}

/// One choice for each item.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Pick {
    /// Sum of the scores.
    pub(crate) score: f64,
    /// Index of the choice taken for each item.
    pub(crate) choices: Vec<usize>,
}

/// Which totals are of interest.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum Wanted {
    /// Every total.
    Any,
    /// This one alone.
    Total(i64),
}

struct Partial {
    score: f64,
    /// Total and rank of the partial pick it came from.
    previous: (i64, usize),
    choice: usize,
}

type Layer = BTreeMap<i64, Vec<Partial>>;

/// For each total the best `keep` picks, best first; picks of equal score in lexicographic order of the choices that
/// the search met first. A pick whose total leaves `i64` is left out.
pub(crate) fn best_picks(items: &[Vec<Choice>], keep: usize, wanted: Wanted) -> BTreeMap<i64, Vec<Pick>> {
    let reach = reach_after(items);
    let mut layers: Vec<Layer> = Vec::with_capacity(items.len());
    let start = [(0, vec![Partial { score: 0.0, previous: (0, 0), choice: 0 }])];
    let start: Layer = start.into_iter().collect();
    for (item, &(lowest, highest)) in items.iter().zip(&reach) {
        let mut next = Layer::new();
        for (&total, partials) in layers.last().unwrap_or(&start) {
            for (choice, option) in item.iter().enumerate() {
                let Some(sum) = total.checked_add(option.amount) else { continue };
                if let Wanted::Total(target) = wanted
                    && !(sum.saturating_add(lowest)..=sum.saturating_add(highest)).contains(&target)
                {
                    continue;
                }
                let list = next.entry(sum).or_default();
                for (rank, partial) in partials.iter().enumerate() {
                    let score = partial.score + option.score;
                    insert(list, keep, Partial { score, previous: (total, rank), choice });
                }
            }
        }
        layers.push(next);
    }
    let last = layers.last().unwrap_or(&start);
    last.iter()
        .filter(|(total, _)| wanted == Wanted::Any || wanted == Wanted::Total(**total))
        .map(|(&total, partials)| {
            let picks = (0..partials.len()).filter_map(|rank| trace(&layers, total, rank)).collect();
            (total, picks)
        })
        .collect()
}

/// Least and greatest amount that the items after each one can add.
fn reach_after(items: &[Vec<Choice>]) -> Vec<(i64, i64)> {
    let mut reach = vec![(0_i64, 0_i64); items.len()];
    for index in (1..items.len()).rev() {
        let amounts = || items[index].iter().map(|choice| choice.amount);
        let (lowest, highest) = reach[index];
        reach[index - 1] = (
            lowest.saturating_add(amounts().min().unwrap_or(0)),
            highest.saturating_add(amounts().max().unwrap_or(0)),
        );
    }
    reach
}

/// Keeps the list sorted by falling score and at most `keep` long; among equals the first to come stays first.
fn insert(list: &mut Vec<Partial>, keep: usize, partial: Partial) {
    let at = list.partition_point(|other| other.score.total_cmp(&partial.score).is_ge());
    if at < keep {
        list.insert(at, partial);
        list.truncate(keep);
    }
}

fn trace(layers: &[Layer], total: i64, rank: usize) -> Option<Pick> {
    let mut choices = Vec::with_capacity(layers.len());
    let (mut at, mut score) = ((total, rank), None);
    for layer in layers.iter().rev() {
        let partial = layer.get(&at.0)?.get(at.1)?;
        score.get_or_insert(partial.score);
        choices.push(partial.choice);
        at = partial.previous;
    }
    choices.reverse();
    Some(Pick { score: score.unwrap_or(0.0), choices })
}

#[cfg(test)]
mod tests {
    use super::*;
    use itertools::Itertools;
    use proptest::prelude::*;

    /// Every combination, written out.
    fn by_enumeration(items: &[Vec<Choice>]) -> Vec<(i64, f64)> {
        items
            .iter()
            .map(|item| item.iter())
            .multi_cartesian_product()
            .map(|choices| {
                let total = choices.iter().map(|choice| choice.amount).sum();
                (total, choices.iter().map(|choice| choice.score).sum())
            })
            .collect()
    }

    fn items() -> impl Strategy<Value = Vec<Vec<Choice>>> {
        let choice = (-6..=6_i64, -40..=0_i32)
            .prop_map(|(amount, score)| Choice { amount, score: f64::from(score) / 8.0 });
        proptest::collection::vec(proptest::collection::vec(choice, 1..5), 1..6)
    }

    proptest! {
        #[test]
        fn agrees_with_enumeration(items in items(), keep in 1..4_usize) {
            let all = by_enumeration(&items);
            let any = best_picks(&items, keep, Wanted::Any);
            let zero = best_picks(&items, keep, Wanted::Total(0));
            prop_assert_eq!(zero.get(&0), any.get(&0));
            prop_assert!(zero.keys().all(|&total| total == 0));
            prop_assert!(any.keys().copied().eq(all.iter().map(|(total, _)| *total).sorted().dedup()));
            for (&total, picks) in &any {
                let expected: Vec<f64> = all
                    .iter()
                    .filter(|(sum, _)| *sum == total)
                    .map(|(_, score)| *score)
                    .sorted_by(|a, b| b.total_cmp(a))
                    .take(keep)
                    .collect();
                prop_assert_eq!(picks.iter().map(|pick| pick.score).collect::<Vec<_>>(), expected);
                prop_assert!(picks.iter().map(|pick| &pick.choices).all_unique());
                for pick in picks {
                    let sum: i64 = pick.choices.iter().zip(&items).map(|(&at, item)| item[at].amount).sum();
                    prop_assert_eq!(sum, total);
                }
            }
        }
    }

    #[test]
    fn no_items_make_zero() {
        let picks = best_picks(&[], 2, Wanted::Total(0));
        assert!(picks.into_iter().eq([(0, vec![Pick { score: 0.0, choices: Vec::new() }])]));
    }

    #[test]
    fn totals_out_of_range_are_left_out() {
        let item = vec![Choice { amount: i64::MAX, score: 0.0 }, Choice { amount: 1, score: 0.0 }];
        let picks = best_picks(&[item.clone(), item], 2, Wanted::Any);
        assert!(picks.keys().copied().eq([2]));
    }
}
