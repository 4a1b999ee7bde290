//! Rational numbers as text.

use super::Ratio;
use serde::de::{Error, Visitor};
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use std::fmt;
use std::str::FromStr;

/// Why a text is no [`Ratio`]; each case names the text.
#[derive(thiserror::Error, Debug, Clone, PartialEq, Eq)]
#[non_exhaustive]
pub enum ParseRatioError {
    /// It is not written like one.
    #[error("{text:?} is not a rational number such as -3, 1/2 or 0.25")]
    Syntax {
        /// What was read.
        text: String,
    },
    /// The denominator is zero.
    #[error("{text:?} has a zero denominator")]
    ZeroDenominator {
        /// What was read.
        text: String,
    },
    /// A number as written does not fit.
    #[error("{text:?} is out of the range of 128-bit integers")]
    OutOfRange {
        /// What was read.
        text: String,
    },
}

impl fmt::Display for Ratio {
    /// `n/d`, or `n` for an integer.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!(Ratio::new(-6, 4).unwrap().to_string(), "-3/2");
    /// assert_eq!(Ratio::ZERO.to_string(), "0");
    /// ```
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.is_integer() {
            write!(f, "{}", self.numerator)
        } else {
            write!(f, "{}/{}", self.numerator, self.denominator)
        }
    }
}

impl FromStr for Ratio {
    type Err = ParseRatioError;

    /// Reads an integer, a fraction or a decimal, each exactly; a sign may come first, and nothing else may.
    ///
    /// Numerator and denominator must fit as written, a decimal without its trailing zeros counting as
    /// digits / 10^decimals: up to 38 digits always do.
    ///
    /// ```
    /// use cosetta::exact::Ratio;
    ///
    /// assert_eq!("0.25".parse(), Ok(Ratio::new(1, 4).unwrap()));
    /// assert_eq!("-2/4".parse(), Ok(Ratio::new(-1, 2).unwrap()));
    /// assert_eq!("0.3333".parse(), Ok(Ratio::new(3333, 10_000).unwrap()));
    /// let error = "1/x".parse::<Ratio>().unwrap_err();
    /// assert_eq!(error.to_string(), "\"1/x\" is not a rational number such as -3, 1/2 or 0.25");
    /// ```
    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let unsigned = text.strip_prefix(['+', '-']).unwrap_or(text);
        let is_negative = text.starts_with('-');
        let range = || ParseRatioError::OutOfRange { text: text.to_owned() };
        let is_number = |digits: &str| !digits.is_empty() && digits.bytes().all(|b| b.is_ascii_digit());
        if let Some((numerator, denominator)) = unsigned.split_once('/') {
            if !is_number(numerator) || !is_number(denominator) {
                return Err(ParseRatioError::Syntax { text: text.to_owned() });
            }
            if denominator.bytes().all(|b| b == b'0') {
                return Err(ParseRatioError::ZeroDenominator { text: text.to_owned() });
            }
            let numerator = append_digits(0, numerator, is_negative).ok_or_else(range)?;
            let denominator = append_digits(0, denominator, false).ok_or_else(range)?;
            return Self::new(numerator, denominator).ok_or_else(range);
        }
        let (whole, decimals) = unsigned.split_once('.').unwrap_or((unsigned, ""));
        let is_digits = |part: &str| part.is_empty() || is_number(part);
        if whole.len() + decimals.len() == 0 || !is_digits(whole) || !is_digits(decimals) {
            return Err(ParseRatioError::Syntax { text: text.to_owned() });
        }
        let decimals = decimals.trim_end_matches('0');
        let digits =
            append_digits(0, whole, is_negative).and_then(|n| append_digits(n, decimals, is_negative));
        let power = u32::try_from(decimals.len()).ok().and_then(|places| 10_i128.checked_pow(places));
        digits.zip(power).and_then(|(n, d)| Self::new(n, d)).ok_or_else(range)
    }
}

/// Writes decimal digits behind those of `number`, away from zero in the direction of the sign so that the least
/// integer is read too.
fn append_digits(number: i128, digits: &str, is_negative: bool) -> Option<i128> {
    digits.bytes().try_fold(number, |n, digit| {
        let digit = i128::from(digit.checked_sub(b'0')?);
        let n = n.checked_mul(10)?;
        if is_negative { n.checked_sub(digit) } else { n.checked_add(digit) }
    })
}

impl Serialize for Ratio {
    /// As the string that [`Display`](fmt::Display) writes.
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Ratio {
    /// From a string that [`FromStr`] reads.
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        deserializer.deserialize_str(RatioText)
    }
}

struct RatioText;

impl Visitor<'_> for RatioText {
    type Value = Ratio;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a string with a rational number such as \"1/2\"")
    }

    fn visit_str<E: Error>(self, text: &str) -> Result<Ratio, E> {
        text.parse().map_err(E::custom)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::exact::oracle::ratio;
    use proptest::prelude::*;

    fn parse(text: &str) -> Result<Ratio, ParseRatioError> {
        text.parse()
    }

    #[test]
    fn reads_what_people_write() {
        // By hand.
        for (text, n, d) in [
            ("0", 0, 1),
            ("-0", 0, 1),
            ("3", 3, 1),
            ("+1/2", 1, 2),
            ("-3/4", -3, 4),
            ("0.25", 1, 4),
            ("1.5", 3, 2),
            ("-0.125", -1, 8),
            (".5", 1, 2),
            ("5.", 5, 1),
            ("007/021", 1, 3),
            ("0.50000000000000000000000000000000000000000000000000", 1, 2),
            ("-170141183460469231731687303715884105728", i128::MIN, 1),
        ] {
            let found = parse(text).map(|x| (x.numerator(), x.denominator()));
            assert_eq!(found, Ok((n, d)), "{text}");
        }
    }

    #[test]
    fn refuses_and_names_the_text() {
        for text in [
            "", "-", ".", "/", "1/", "/2", "1/-2", "--1", "1e3", " 1", "1 ", "1/2/3", "1.5/2", "1.+2", "½",
            "nan",
        ] {
            assert_eq!(parse(text), Err(ParseRatioError::Syntax { text: text.to_owned() }), "{text:?}");
        }
        assert!(matches!(parse("1/00"), Err(ParseRatioError::ZeroDenominator { text }) if text == "1/00"));
        let long = "170141183460469231731687303715884105728";
        assert!(matches!(parse(long), Err(ParseRatioError::OutOfRange { text }) if text == long));
        let fine = format!("0.{}1", "0".repeat(40));
        assert!(matches!(parse(&fine), Err(ParseRatioError::OutOfRange { .. })));
    }

    proptest! {
        #[test]
        fn text_round_trip(x in ratio()) {
            prop_assert_eq!(parse(&x.to_string()), Ok(x));
            let json = serde_json::to_string(&x).expect("a string");
            prop_assert_eq!(&json, &format!("\"{x}\""));
            prop_assert_eq!(serde_json::from_str::<Ratio>(&json).expect("the same string"), x);
        }

        #[test]
        fn decimals_are_exact(n in -9_999_999_i128..=9_999_999) {
            let text = format!("{}{}.{:04}", if n < 0 { "-" } else { "" }, n.abs() / 10_000, n.abs() % 10_000);
            prop_assert_eq!(parse(&text).ok(), Ratio::new(n, 10_000));
        }

        #[test]
        fn any_text_is_read_or_refused(text in "[-+0-9./e ]{0,12}") {
            let _ = parse(&text);
        }
    }

    #[test]
    fn json_numbers_are_refused() {
        assert!(serde_json::from_str::<Ratio>("0.5").is_err());
        let error = serde_json::from_str::<Ratio>("\"a\"").expect_err("not a number").to_string();
        assert!(error.starts_with("\"a\" is not a rational number"), "{error}");
    }
}
