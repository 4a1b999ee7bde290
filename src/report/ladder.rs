//! The values of a polarization lattice along one direction, on one line.
//!
//! ```text
//! −2 |···●···|···●···0···●···|···●···| +2
//! ```
//! Each step is an eighth of a quantum; `●` is a value the crystal allows, `0` is zero, `◉` is zero when it is allowed.

/// Steps per quantum.
const STEPS: i32 = 8;

/// The ladder from −2 to +2 quanta for values `offset + n`, with `offset` in units of the quantum.
///
/// ```
/// assert_eq!(cosetta::report::ladder::ladder(0.0), "−2 ●·······●·······◉·······●·······● +2");
/// assert_eq!(cosetta::report::ladder::ladder(0.5), "−2 |···●···|···●···0···●···|···●···| +2");
/// ```
#[must_use]
pub fn ladder(offset: f64) -> String {
    let fraction = offset - offset.floor();
    #[allow(clippy::cast_possible_truncation, reason = "a fraction of eight steps")]
    let shift = (fraction * f64::from(STEPS)).round() as i32;
    // A value that rounds onto a whole quantum without being one keeps a step of distance, so that no zero appears.
    let is_whole = fraction < 1e-9;
    let shift = if !is_whole && shift == 0 {
        1
    } else if !is_whole && shift == STEPS {
        STEPS - 1
    } else {
        shift % STEPS
    };
    let marks: String = (-2 * STEPS..=2 * STEPS)
        .map(|step| {
            let is_value = (step - shift).rem_euclid(STEPS) == 0;
            match (is_value, step) {
                (true, 0) => '◉',
                (true, _) => '●',
                (false, 0) => '0',
                (false, step) if step % STEPS == 0 => '|',
                _ => '·',
            }
        })
        .collect();
    format!("−2 {marks} +2")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn zero_is_shown_only_when_it_is_a_value() {
        for offset in [0.01, 0.24, 0.5, 0.75, 0.99] {
            assert!(!ladder(offset).contains('◉'), "{offset}");
            assert_eq!(ladder(offset).matches('●').count(), 4, "{offset}");
        }
        assert_eq!(ladder(0.0).matches('◉').count(), 1);
    }
}
