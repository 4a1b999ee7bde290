//! Numbers as a CIF writes them: `4.1163(2)`, `-.25`, `5.`, `1.5e-3(2)`, and fractions such as `1/3`.

use nom::branch::alt;
use nom::bytes::complete::take_while_m_n;
use nom::character::complete::{char, digit1, i32 as signed, one_of};
use nom::combinator::{all_consuming, opt, recognize, verify};
use nom::sequence::{delimited, preceded};
use nom::{IResult, Parser};

/// A number with its standard uncertainty.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Measured {
    /// The value.
    pub value: f64,
    /// The standard uncertainty, in the units of the value.
    pub uncertainty: Option<f64>,
    /// How many decimal places were written; `None` for a fraction, which is exact.
    pub decimals: Option<u32>,
}

/// Reads a number. `None` when the text is anything else, or beyond the range of a double.
///
/// The uncertainty counts in units of the last digit written: `4.1163(2)` is 4.1163 ± 0.0002 and `120(1)` is 120 ± 1
/// (International Tables, volume G, 2.2.7.4.5). It may stand before or after an exponent. A typographic minus sign and
/// the exponent letter D are accepted.
///
/// ```
/// let a = cosetta::cif::parse_number("4.1163(2)").unwrap();
/// assert_eq!(a.value, 4.1163);
/// assert!((a.uncertainty.unwrap() - 2e-4).abs() < 1e-15);
/// assert_eq!(a.decimals, Some(4));
/// ```
#[must_use]
pub fn parse_number(text: &str) -> Option<Measured> {
    let text = text.trim();
    if text.contains('\u{2212}') {
        return parse_number(&text.replace('\u{2212}', "-"));
    }
    // Plain numbers by far outnumber all others.
    let (_, number) = all_consuming(alt((fraction, measured))).parse(text).ok()?;
    number
}

/// `1/3`, with an optional sign.
fn fraction(input: &str) -> IResult<&str, Option<Measured>> {
    let (rest, (numerator, _, denominator)) =
        (recognize((opt(one_of("+-")), digit1)), char('/'), digit1).parse(input)?;
    let value = match (numerator.parse::<f64>(), denominator.parse::<f64>()) {
        (Ok(numerator), Ok(denominator)) if denominator > 0.0 => Some(numerator / denominator),
        _ => None,
    };
    let number = value.filter(|value| value.is_finite()).map(|value| Measured {
        value,
        uncertainty: None,
        decimals: None,
    });
    Ok((rest, number))
}

/// A decimal number with optional exponent and uncertainty.
fn measured(input: &str) -> IResult<&str, Option<Measured>> {
    let (rest, mantissa) = recognize((opt(one_of("+-")), mantissa)).parse(input)?;
    let (rest, before) = opt(uncertainty).parse(rest)?;
    let (rest, exponent) = opt(preceded(one_of("eEdD"), signed)).parse(rest)?;
    let (rest, after) = if before.is_none() { opt(uncertainty).parse(rest)? } else { (rest, None) };
    let places = mantissa.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    Ok((rest, assemble(mantissa, places, exponent, before.or(after))))
}

/// Digits with an optional point; at least one digit. (`digit0` of nom 8.0.0 must not stand in `recognize`: at the end of
/// the input it returns a rest that begins before the digits.)
fn mantissa(input: &str) -> IResult<&str, &str> {
    verify(recognize((opt(digit1), opt((char('.'), opt(digit1))))), |text: &str| {
        text.bytes().any(|b| b.is_ascii_digit())
    })
    .parse(input)
}

fn uncertainty(input: &str) -> IResult<&str, &str> {
    delimited(char('('), take_while_m_n(1, 9, |c: char| c.is_ascii_digit()), char(')')).parse(input)
}

fn assemble(mantissa: &str, places: usize, exponent: Option<i32>, digits: Option<&str>) -> Option<Measured> {
    let value: f64 = match exponent {
        None => mantissa.parse().ok()?,
        Some(exponent) => format!("{mantissa}e{exponent}").parse().ok()?,
    };
    let exponent = exponent.unwrap_or(0);
    let last_digit = exponent.saturating_sub(i32::try_from(places).ok()?);
    let uncertainty = match digits {
        None => None,
        Some(digits) => Some(format!("{digits}e{last_digit}").parse::<f64>().ok()?),
    };
    let decimals = u32::try_from(last_digit.saturating_neg()).unwrap_or(0);
    value.is_finite().then_some(Measured { value, uncertainty, decimals: Some(decimals) })
}

#[cfg(test)]
#[allow(clippy::float_cmp, reason = "a decimal number has one nearest double")]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn usual_and_unusual_numbers() {
        // Values by hand.
        for (text, value, uncertainty, decimals) in [
            ("4.1163(2)", 4.1163, Some(2e-4), Some(4)),
            ("120(1)", 120.0, Some(1.0), Some(0)),
            ("1.5e-3(2)", 1.5e-3, Some(2e-4), Some(4)),
            ("1.5(2)e-3", 1.5e-3, Some(2e-4), Some(4)),
            ("1.5D2", 150.0, None, Some(0)),
            (".5", 0.5, None, Some(1)),
            ("-0.25", -0.25, None, Some(2)),
            ("+1", 1.0, None, Some(0)),
            ("5.", 5.0, None, Some(0)),
            ("90.(0)", 90.0, Some(0.0), Some(0)),
            (" 0.5 ", 0.5, None, Some(1)),
            ("\u{2212}.5", -0.5, None, Some(1)),
            ("-1/4", -0.25, None, None),
            ("10.25(125)", 10.25, Some(1.25), Some(2)),
        ] {
            let found = parse_number(text).unwrap_or_else(|| panic!("{text} is a number"));
            assert_eq!(found.value, value, "{text}");
            assert_eq!(found.decimals, decimals, "{text}");
            assert_eq!(found.uncertainty, uncertainty, "{text}");
        }
    }

    #[test]
    fn other_texts_are_not_numbers() {
        for text in [
            "", ".", "-", "x", "1,5", "1.2.3", "1(2", "1(x)", "1()", "nan", "inf", "1e999", "1/0", "1/",
            "e5", "0x10", "1 2", "(2)",
        ] {
            assert_eq!(parse_number(text), None, "{text}");
        }
    }

    proptest! {
        #[test]
        fn doubles_are_read_exactly(value in -1e6..1e6_f64) {
            prop_assert_eq!(parse_number(&value.to_string()).map(|m| m.value), Some(value));
            prop_assert_eq!(parse_number(&format!("{value:e}")).map(|m| m.value), Some(value));
        }

        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = parse_number(&text);
        }
    }
}
