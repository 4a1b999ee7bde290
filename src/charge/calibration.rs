//! How often is an answer of a stated probability right?
//!
//! The share of an arrangement among the best ones is turned into a probability by `logit p = A + B logit share`, with
//! A and B fitted to the fitted part of the labelled oxides, and kept below [`MOST`]: labels and parameters have errors
//! of their own. The table of how well that holds on the other part is in DEVELOPERS.md.

/// Intercept.
const A: f64 = 0.5;

/// Slope.
const B: f64 = 0.6;

/// No assignment is given a higher probability.
const MOST: f64 = 0.999;

/// The same where bond-valence parameters come from a rule, as in most compounds that are neither oxides nor halides:
/// there the calibration was not measured.
pub(super) const MOST_UNMEASURED: f64 = 0.95;

/// The probability that goes with a share.
pub(super) fn calibrated(share: f64) -> f64 {
    let share = share.clamp(1e-12, 1.0 - 1e-12);
    let logit = A + B * (share / (1.0 - share)).ln();
    (1.0 / (1.0 + (-logit).exp())).min(MOST)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn probabilities_rise_with_the_share() {
        let shares = [0.0, 1e-6, 0.1, 0.5, 0.9, 0.999, 1.0];
        let found = shares.map(calibrated);
        assert!(found.windows(2).all(|pair| pair[0] < pair[1]), "{found:?}");
        assert!(found.iter().all(|&probability| (0.0..=MOST).contains(&probability)), "{found:?}");
    }
}
