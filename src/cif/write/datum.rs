//! Values as they are given to the writer.

/// A standard uncertainty has at most this many digits more than its first, where the value needs them.
const EXTRA_DIGITS: usize = 2;
/// More decimals than this are not written.
const MAX_DECIMALS: usize = 10;

/// One value to be written.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Datum {
    /// A text; it is delimited as it needs to be.
    Text(String),
    /// A number, as written.
    Number(String),
    /// `?`: the value is not known.
    Unknown,
    /// `.`: the item does not apply.
    Inapplicable,
}

impl Datum {
    /// A text.
    #[must_use]
    pub fn text(text: impl Into<String>) -> Self {
        Self::Text(text.into())
    }

    /// A number rounded to so many decimals, without zeros at its end; unknown unless it is finite.
    #[must_use]
    pub fn number(value: f64, decimals: usize) -> Self {
        if !value.is_finite() {
            return Self::Unknown;
        }
        let text = format!("{value:.decimals$}");
        let text = if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { &text };
        Self::Number(if text == "-0" { "0".to_owned() } else { text.to_owned() })
    }

    /// A whole number.
    #[must_use]
    pub fn count(value: usize) -> Self {
        Self::Number(value.to_string())
    }

    /// A number with its standard uncertainty in units of the last digit, `4.1163(2)` (International Tables, volume G,
    /// 2.2.7.4.5). Without an uncertainty it is written to eight decimals.
    ///
    /// As many digits are written as the uncertainty has, and up to two more where the value would be rounded otherwise.
    ///
    /// ```
    /// use cosetta::cif::Datum;
    /// assert_eq!(Datum::measured(4.1163, Some(2e-4)), Datum::Number("4.1163(2)".into()));
    /// assert_eq!(Datum::measured(0.125, Some(0.01)), Datum::Number("0.125(10)".into()));
    /// assert_eq!(Datum::measured(1.0 / 3.0, None), Datum::Number("0.33333333".into()));
    /// ```
    #[must_use]
    pub fn measured(value: f64, uncertainty: Option<f64>) -> Self {
        let plain = Self::number(value, 8);
        let Some(uncertainty) = uncertainty.filter(|u| u.is_finite() && *u > 0.0 && *u < 1e6) else {
            return plain;
        };
        // The fewest decimals that hold the uncertainty to one part in a million.
        let digits_at = |decimals: usize| format!("{uncertainty:.decimals$}");
        let holds = |decimals: &usize| {
            digits_at(*decimals).parse::<f64>().is_ok_and(|u| (u - uncertainty).abs() <= 1e-6 * uncertainty)
        };
        let Some(least) = (0..=MAX_DECIMALS).find(holds) else { return plain };
        let rounds = |decimals: &usize| {
            format!("{value:.decimals$}").parse::<f64>().is_ok_and(|v| (v - value).abs() <= 1e-8)
        };
        let most = (least + EXTRA_DIGITS).min(MAX_DECIMALS);
        let decimals = (least..=most).find(rounds).unwrap_or(most);
        let digits: String = digits_at(decimals).chars().filter(char::is_ascii_digit).collect();
        let digits = digits.trim_start_matches('0');
        if !value.is_finite() || digits.is_empty() || digits.len() > 9 {
            return plain;
        }
        let text = format!("{value:.decimals$}");
        let is_zero = text.trim_start_matches('-').chars().all(|c| matches!(c, '0' | '.'));
        Self::Number(format!("{}({digits})", if is_zero { text.trim_start_matches('-') } else { &text }))
    }
}
