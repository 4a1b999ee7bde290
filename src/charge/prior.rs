//! How likely are the states of an element before its bonds are looked at?

use super::electronegativity::octet_need;
use super::states::share;
use crate::crystal::Element;

/// Prior odds against a second state of one element; one oxide in twenty is of mixed valence, more among
/// those whose elements allow it. Fitted.
const MIXED_VALENCE_ODDS: f64 = 10.0;

/// Further odds against two states of a metal with a known one between them.
const GAP_ODDS: f64 = 5.0;

/// Odds against states of rare earths that chemistry does not know.
const MISREPORTED_ODDS: f64 = 50.0;

/// How much more than their logarithm the shares below [`UNCOMMON_SHARE`] count.
const RARE: f64 = 1.0;

/// A state with a smaller part of its element's reports is called uncommon.
pub(super) const UNCOMMON_SHARE: f64 = 0.01;

/// The logarithm of the prior probability that a group of orbits has these states and no others.
pub(super) fn log_prior(element: Element, used: &[i64]) -> Option<f64> {
    let log = |&state: &i64| {
        let odds = if is_misreported(element, state) { MISREPORTED_ODDS } else { 1.0 };
        share(element, state).map(|share| discounted(share) - odds.ln())
    };
    let logs: Vec<f64> = used.iter().map(log).collect::<Option<_>>()?;
    let mean = logs.iter().sum::<f64>() / f64::from(u32::try_from(logs.len()).ok()?.max(1));
    let odds = match used[..] {
        [low, high] if has_gap(element, low, high) => MIXED_VALENCE_ODDS * GAP_ODDS,
        [_, _] => MIXED_VALENCE_ODDS,
        _ => 1.0,
    };
    Some(mean - odds.ln())
}

/// The logarithm of a share. Reports of very rare states are mostly errors, so they count less than their number.
fn discounted(share: f64) -> f64 {
    let log = share.ln();
    log + RARE * (log - UNCOMMON_SHARE.ln()).min(0.0)
}

/// Rare earths are +3 in solids but for Sm, Eu, Tm and Yb, which are also +2, and Ce, Pr and Tb, which are also +4;
/// thorium is +4 (Greenwood & Earnshaw, Chemistry of the Elements, from memory). Other states are reported for
/// compounds whose other cations have averaged charges.
fn is_misreported(element: Element, state: i64) -> bool {
    match element.number() {
        62 | 63 | 69 | 70 => !matches!(state, 2 | 3),
        58 | 59 | 65 => !matches!(state, 3 | 4),
        21 | 39 | 57..=71 => state != 3,
        90 => state != 4,
        _ => false,
    }
}

/// Whether the states skip one that the element has: +4 and +6 of tungsten. Not for main-group metals and nonmetals,
/// whose odd states do not exist, nor for Pd, Pt, Ag and Au, which like to go in steps of two.
fn has_gap(element: Element, low: i64, high: i64) -> bool {
    high - low > 1
        && octet_need(element).is_none()
        && !matches!(element.symbol(), "Pd" | "Pt" | "Ag" | "Au" | "Tl" | "In" | "Ga")
}
