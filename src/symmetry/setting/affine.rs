//! Affine maps of coordinates as text, such as `-x+1/2, y, 0.5-z`.

use nom::branch::alt;
use nom::character::complete::{char, digit1, one_of};
use nom::combinator::{map, opt, recognize, value, verify};
use nom::multi::many0;
use nom::sequence::{pair, preceded, terminated};
use nom::{IResult, Parser};
use thiserror::Error;

/// Fractions are counted in units of 1/720720, the least common multiple of 1 to 16; it holds all n/24 exactly.
pub const UNIT: i32 = 720_720;

/// Texts longer than this, without blanks, are not read.
const MAX_LENGTH: usize = 200;
/// Decimal fractions are taken as n/24 when they are this near, whatever their number of digits.
const SNAP: f64 = 2e-3;
/// Two-digit decimals such as 0.33 are taken as n/24 when they are this near.
const SNAP_TWO_DIGITS: f64 = 5.1e-3;

/// A map `x -> W x + w`, every coefficient counted in units of 1/[`UNIT`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Affine {
    /// The matrix, row by row.
    pub linear: [[i32; 3]; 3],
    /// The vector.
    pub shift: [i32; 3],
}

/// Why a text is not an affine map.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum AffineError {
    /// Not three expressions between commas.
    #[error("it has {found} expressions between commas instead of 3")]
    Count {
        /// How many there are.
        found: usize,
    },
    /// An expression that cannot be read.
    #[error("'{expression}' is not a sum of x, y, z and numbers")]
    Expression {
        /// The expression.
        expression: String,
    },
    /// A number that is not a fraction with a small denominator.
    #[error("'{expression}' holds a number that is not a fraction with a denominator of at most 16 or of 24")]
    Fraction {
        /// The expression.
        expression: String,
    },
}

/// Reads an affine map: three expressions between commas, each a sum of `x`, `y`, `z` in either case, with whole or
/// fractional coefficients, and of numbers. Blanks and quotes are passed over.
///
/// Fractions are exact. A decimal is taken as the nearest n/24 when it is within 0.002 of it, or within 0.0051 when it is
/// written with two digits (0.33 and 0.17 are 1/3 and 1/6); else as the fraction with a denominator of at most 16 that it
/// rounds, if it has at least three digits or equals it.
///
/// # Errors
/// The text is not such a map, or holds a number that is none of these fractions.
pub fn parse_affine(text: &str) -> Result<Affine, AffineError> {
    let compact: String = text
        .chars()
        .filter(|c| !c.is_whitespace() && !matches!(c, '\'' | '"'))
        .map(|c| if c == '\u{2212}' { '-' } else { c.to_ascii_lowercase() })
        .take(MAX_LENGTH + 1)
        .collect();
    let found = compact.split(',').count();
    if found != 3 || compact.len() > MAX_LENGTH {
        return Err(AffineError::Count { found });
    }
    let mut affine = Affine { linear: [[0; 3]; 3], shift: [0; 3] };
    for (row, expression) in compact.split(',').enumerate() {
        let unreadable = || AffineError::Expression { expression: expression.to_owned() };
        let (rest, terms) = sum(expression).map_err(|_| unreadable())?;
        if !rest.is_empty() || terms.is_empty() {
            return Err(unreadable());
        }
        for term in terms {
            let fraction = || AffineError::Fraction { expression: expression.to_owned() };
            let units = term.units.ok_or_else(fraction)?;
            let target = match term.axis {
                Some(axis) => &mut affine.linear[row][axis],
                None => &mut affine.shift[row],
            };
            *target = target.checked_add(units).ok_or_else(fraction)?;
        }
    }
    Ok(affine)
}

/// A coefficient, `None` if it is no fraction we accept, with the coordinate it belongs to.
#[derive(Debug, Clone, Copy)]
struct Term {
    units: Option<i32>,
    axis: Option<usize>,
}

fn sum(input: &str) -> IResult<&str, Vec<Term>> {
    let signed = map(pair(one_of("+-"), term), |(sign, term)| negated_if(sign == '-', term));
    let (rest, first) = pair(opt(one_of("+-")), term).parse(input)?;
    let (rest, mut others) = many0(signed).parse(rest)?;
    others.insert(0, negated_if(first.0 == Some('-'), first.1));
    Ok((rest, others))
}

fn negated_if(negative: bool, term: Term) -> Term {
    if negative { Term { units: term.units.map(|units| -units), ..term } } else { term }
}

fn term(input: &str) -> IResult<&str, Term> {
    let scaled = map((number, opt(preceded(opt(char('*')), axis))), |(units, axis)| Term { units, axis });
    let divided = map((axis, opt(preceded(char('/'), digit1))), |(axis, divisor): (_, Option<&str>)| Term {
        units: fraction("1", divisor.unwrap_or("1")),
        axis: Some(axis),
    });
    alt((divided, scaled)).parse(input)
}

fn axis(input: &str) -> IResult<&str, usize> {
    alt((value(0, char('x')), value(1, char('y')), value(2, char('z')))).parse(input)
}

fn number(input: &str) -> IResult<&str, Option<i32>> {
    let ratio = map((terminated(digit1, char('/')), digit1), |(numerator, denominator)| {
        fraction(numerator, denominator)
    });
    let digits = verify(recognize((opt(digit1), opt((char('.'), opt(digit1))))), |text: &str| {
        text.bytes().any(|byte| byte.is_ascii_digit())
    });
    alt((ratio, map(digits, decimal))).parse(input)
}

fn fraction(numerator: &str, denominator: &str) -> Option<i32> {
    let numerator: i64 = numerator.parse().ok().filter(|n| *n < 1_000)?;
    let denominator: i64 = denominator.parse().ok().filter(|n| (1..1_000).contains(n))?;
    let units = i64::from(UNIT) * numerator;
    (units % denominator == 0).then_some(units / denominator).and_then(|units| i32::try_from(units).ok())
}

/// The fraction a decimal stands for, in units.
fn decimal(text: &str) -> Option<i32> {
    let value: f64 = text.parse().ok().filter(|value| *value < 1_000.0)?;
    let digits = text.split_once('.').map_or(0, |(_, decimals)| decimals.len());
    let nearest = |denominator: f64| {
        let numerator = (value * denominator).round();
        (numerator, (numerator / denominator - value).abs())
    };
    let (numerator, distance) = nearest(24.0);
    let snap = if digits == 2 { SNAP_TWO_DIGITS } else { SNAP };
    if distance <= snap {
        return to_units(numerator, 24.0);
    }
    let half_of_last = 0.501 * 10_f64.powi(-i32::try_from(digits).ok()?);
    let limit = if digits >= 3 { half_of_last } else { 1e-9 };
    (1..=16_u8).map(f64::from).find_map(|denominator| {
        let (numerator, distance) = nearest(denominator);
        if distance <= limit.max(1e-9) { to_units(numerator, denominator) } else { None }
    })
}

#[allow(clippy::cast_possible_truncation, reason = "the value was limited to 1000")]
fn to_units(numerator: f64, denominator: f64) -> Option<i32> {
    i32::try_from((numerator * f64::from(UNIT) / denominator).round() as i64).ok()
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn usual_spellings() {
        let expected = Affine {
            linear: [[-UNIT, 0, 0], [UNIT, -UNIT, 0], [0, 0, UNIT]],
            shift: [UNIT / 2, 0, UNIT / 3],
        };
        for text in [
            "-x+1/2,x-y,z+1/3",
            "1/2-X, X-Y, 1/3+Z",
            "'-x + .5 , -y + x , 0.333 + z'",
            "0.5-x,x-y,z+0.33",
            "+.5-1*x,x-1y,+z+1/3",
            "1/2-x,x-y,z+2/6",
            "\u{2212}x+1/2,x\u{2212}y,z+0.3333",
        ] {
            assert_eq!(parse_affine(text).as_ref(), Ok(&expected), "{text}");
        }
    }

    #[test]
    fn decimals_are_snapped() {
        for (text, units) in [
            ("0.6667", UNIT / 3 * 2),
            ("0.67", UNIT / 3 * 2),
            ("0.17", UNIT / 6),
            ("0.8333", UNIT / 6 * 5),
            ("0.125", UNIT / 8),
            ("0.2", UNIT / 5),
            ("0.1429", UNIT / 7),
            ("0.04167", UNIT / 24),
        ] {
            assert_eq!(decimal(text), Some(units), "{text}");
        }
        assert_eq!(decimal("0.3456"), None);
        assert_eq!(decimal("0.36"), None);
    }

    #[test]
    fn faults_are_told_apart() {
        assert_eq!(parse_affine("x,y"), Err(AffineError::Count { found: 2 }));
        for text in ["x,=y,z", "x,,z", "x,y,z-", "x,2 + q,z", "x,y,-z*1/2*2", "a,b,c", "x,y81/2,z", "x,yz,z"]
        {
            assert!(matches!(parse_affine(text), Err(AffineError::Expression { .. })), "{text}");
        }
        assert!(matches!(parse_affine("x+0.3456,y,z"), Err(AffineError::Fraction { .. })));
        assert!(matches!(parse_affine("x+1/0,y,z"), Err(AffineError::Fraction { .. })));
    }

    proptest! {
        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = parse_affine(&text);
        }

        #[test]
        fn any_expression_is_taken(text in "[xyz0-9+/.,*-]{0,30}") {
            let _ = parse_affine(&text);
        }
    }
}
