//! Hall symbols: a grammar that brings the spellings found in files into one, and the group they generate.
//!
//! Grammar: Hall, Acta Cryst. A37 (1981) 517, with the changes of International Tables, volume B (2010), A1.4.2.3.
//! The matrices and translations of the operators come from the symmetry library; only symbols that passed the grammar
//! here are handed to it, and the group is closed here with a limit, because not every well-formed symbol means a finite
//! group.

use super::affine::{UNIT, parse_affine};
use super::group::{Group, Motion};
use moyo::data::HallSymbol;
use nalgebra::{Matrix3, Vector3};
use nom::character::complete::{char, one_of, satisfy};
use nom::combinator::{all_consuming, opt, recognize};
use nom::multi::{many_m_n, many0};
use nom::{IResult, Parser};

/// No space group has more operations in a cell with at most four lattice points.
const MAX_ORDER: usize = 192;

/// The symbol in one spelling, and the change of origin or basis that follows it.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Spelled {
    /// Lattice and operators, one blank between them, primes as `^` and `=`.
    pub(super) core: String,
    /// What stood between the parentheses.
    pub(super) change: Option<String>,
}

/// Brings a symbol into one spelling. `None` when it does not follow the grammar.
pub(super) fn spell(symbol: &str) -> Option<Spelled> {
    let (front, change) = match symbol.split_once('(') {
        Some((front, rest)) => {
            let inner = rest.trim_end().strip_suffix(')')?;
            (front, Some(inner.split_whitespace().collect::<Vec<_>>().join(" ")))
        }
        None => (symbol, None),
    };
    let mut core = String::with_capacity(front.len() + 8);
    for (count, word) in
        front.split(|c: char| c.is_whitespace() || c == '_').filter(|w| !w.is_empty()).enumerate()
    {
        let word: String = word
            .chars()
            .map(|c| match c {
                '\'' => '^',
                '"' => '=',
                _ => c,
            })
            .collect();
        let mut rest = word.as_str();
        if count == 0 {
            let (after, lattice) = lattice(rest).ok()?;
            core.push_str(&lattice);
            rest = after;
        }
        let (_, operators) = all_consuming(many0(operator)).parse(rest).ok()?;
        for operator in operators {
            core.push(' ');
            core.push_str(&operator);
        }
    }
    core.contains(' ').then_some(Spelled { core, change })
}

fn lattice(input: &str) -> IResult<&str, String> {
    let (rest, (minus, letter)) = (opt(char('-')), satisfy(|c| "PABCIRFpabcirf".contains(c))).parse(input)?;
    let minus = if minus.is_some() { "-" } else { "" };
    Ok((rest, format!("{minus}{}", letter.to_ascii_uppercase())))
}

/// One operator: sign, order, axis, translations.
fn operator(input: &str) -> IResult<&str, String> {
    let (rest, (sign, order)) = (opt(char('-')), one_of("12346")).parse(input)?;
    let (rest, axis) = many_m_n(0, 2, one_of("xyz*^=")).parse(rest)?;
    // At most one prime and one letter; the library does not bear more.
    let (primes, letters): (String, String) = axis.iter().partition(|c| matches!(c, '^' | '='));
    if primes.len() > 1 || letters.len() > 1 {
        return Err(nom::Err::Error(nom::error::Error::new(input, nom::error::ErrorKind::Verify)));
    }
    // A screw component is a digit directly after the order, and acts along z. The screws 42 and 63 are written 4c and 6c
    // (Hall 1981, table 2), so a missing blank as in F423 can only be one thing.
    let (rest, screw) = if primes.is_empty() && (letters.is_empty() || letters == "z") {
        let screws = match order {
            '3' => "12",
            '4' => "13",
            '6' => "1245",
            _ => "",
        };
        opt(one_of(screws)).parse(rest)?
    } else {
        (rest, None)
    };
    let (rest, translations) = recognize(many0(one_of("abcnuvwd"))).parse(rest)?;
    let mut spelled = String::new();
    spelled.extend(sign);
    spelled.push(order);
    spelled.push_str(&primes);
    spelled.push_str(&letters);
    spelled.extend(screw);
    spelled.push_str(translations);
    Ok((rest, spelled))
}

/// The group of a Hall symbol.
pub(super) fn parse_hall(symbol: &str) -> Option<Group> {
    let spelled = spell(symbol)?;
    let library = HallSymbol::new(&spelled.core)?;
    let generators: Vec<Motion> = library
        .generators
        .iter()
        .map(|operation| motion(&operation.rotation, &operation.translation))
        .chain(library.centering_translations.iter().map(|shift| motion(&Matrix3::identity(), shift)))
        .collect::<Option<_>>()?;
    let group = Group::generate(generators, MAX_ORDER)?;
    match &spelled.change {
        None => Some(group),
        Some(change) => changed(&group, change),
    }
}

fn motion(rotation: &Matrix3<i32>, translation: &Vector3<f64>) -> Option<Motion> {
    Motion::from_operation(&crate::crystal::Operation { rotation: *rotation, translation: *translation })
}

/// The group in other coordinates, `x' = V x + v`: matrices `V W V⁻¹`, lattice points `V t`.
fn changed(group: &Group, change: &str) -> Option<Group> {
    let (linear, shift) = parse_change(change)?;
    let inverse = linear.try_inverse()?;
    let is_whole = |x: f64| (x - x.round()).abs() < 1e-6;
    let mut generators = Vec::with_capacity(group.order() + 3);
    for motion in group.motions() {
        let operation = motion.to_operation();
        let rotation = linear * operation.rotation.cast::<f64>() * inverse;
        if !rotation.iter().all(|x| is_whole(*x)) {
            return None;
        }
        let translation = linear * operation.translation + shift - rotation * shift;
        generators.push((rotation, translation));
    }
    generators.extend([0, 1, 2].map(|i| (Matrix3::identity(), linear.column(i).into_owned())));
    let motions: Option<Vec<Motion>> =
        generators.iter().map(|(rotation, translation)| motion(&rotation.map(whole), translation)).collect();
    Group::generate(motions?, MAX_ORDER)
}

#[allow(clippy::cast_possible_truncation, reason = "entries of a symmetry matrix are small")]
fn whole(x: f64) -> i32 {
    x.round() as i32
}

/// `0 0 -1` in twelfths, or `x+1/4,y,z`.
fn parse_change(text: &str) -> Option<(Matrix3<f64>, Vector3<f64>)> {
    if text.contains(',') {
        let affine = parse_affine(text).ok()?;
        let unit = f64::from(UNIT);
        return Some((
            Matrix3::from_fn(|i, j| f64::from(affine.linear[i][j]) / unit),
            Vector3::from_fn(|i, _| f64::from(affine.shift[i]) / unit),
        ));
    }
    let numbers: Vec<i32> = text.split(' ').map(|word| word.parse().ok()).collect::<Option<_>>()?;
    let [x, y, z] = <[i32; 3]>::try_from(numbers).ok()?;
    Some((Matrix3::identity(), Vector3::new(x, y, z).map(|n| f64::from(n.rem_euclid(12)) / 12.0)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    #[test]
    fn spellings_become_one() {
        for (text, core) in [
            ("-F4cvw2vw", "-F 4cvw 2vw"),
            ("-R 3 2\"c", "-R 3 2=c"),
            ("R 3 -2\"", "R 3 -2="),
            ("P_4abw_2nw", "P 4abw 2nw"),
            ("p 31 2'", "P 31 2^"),
            ("P 3 2x'", "P 3 2^x"),
            ("P 41", "P 41"),
            ("-F423", "-F 4 2 3"),
        ] {
            assert_eq!(spell(text).map(|spelled| spelled.core).as_deref(), Some(core), "{text}");
        }
        assert_eq!(spell("P 4 (0  0 -1) ").and_then(|s| s.change).as_deref(), Some("0 0 -1"));
        assert_eq!(spell("P 4 (0 0"), None);
        assert_eq!(spell("C 2 -c"), None);
    }

    #[test]
    fn shifts_of_origin() {
        // P 2 (0 0 1) has no visible effect, P -1 moved by 1/4 along x has its centre there.
        let group = parse_hall("-P 1 (3 0 0)").expect("a symbol");
        let expected = Motion::from_affine(&parse_affine("1/2-x,-y,-z").expect("a map")).expect("whole");
        assert!(group.contains(&expected));
    }

    proptest! {
        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = parse_hall(&text);
        }

        #[test]
        fn any_symbol_is_taken(text in "-?[PABCIRF]( -?[12346][xyz*'\"=^]{0,2}[1-5]?[abcnuvwd]{0,3}){1,4}( \\([0-9 -]{0,8}\\))?") {
            let _ = parse_hall(&text);
        }
    }
}
