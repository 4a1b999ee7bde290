//! The small languages inside a CIF and on the command line. The first byte picks one, `0` to `8`; the rest is its text.
//! Besides panics, this looks for answers that do not hold what they promise.

#![no_main]

use cosetta::cell::{CellParameters, Lattice};
use cosetta::charge::Given;
use cosetta::cif::{Lexer, parse_number, parse_operation};
use cosetta::symmetry::setting::{Hint, from_hall, from_hm, from_number, parse_affine};
use libfuzzer_sys::{Corpus, fuzz_target};

fuzz_target!(|bytes: &[u8]| -> Corpus {
    let Some((&picked, rest)) = bytes.split_first() else { return Corpus::Reject };
    let picked = picked.wrapping_sub(b'0') % 9;
    if picked == 8 {
        lex(rest);
        return Corpus::Keep;
    }
    let Ok(text) = std::str::from_utf8(rest) else { return Corpus::Reject };
    match picked {
        0 => number(text),
        1 => operation(text),
        2 => hall(text),
        3 => drop(from_hm(text, &Hint::default())),
        4 => hinted_symbol(text),
        5 => hinted_number(text),
        6 => drop(parse_affine(text)),
        _ => charges(text),
    }
    Corpus::Keep
});

fn lex(bytes: &[u8]) {
    let mut end = 0;
    for token in Lexer::new(bytes) {
        let span = token.span;
        assert!(
            end <= span.start && span.start < span.end && span.end <= bytes.len(),
            "{span:?} after {end}"
        );
        assert!(span.start <= token.start && token.start <= token.end && token.end <= span.end, "{token:?}");
        end = span.end;
    }
}

fn number(text: &str) {
    if let Some(found) = parse_number(text) {
        assert!(found.value.is_finite());
        assert!(found.uncertainty.is_none_or(|uncertainty| uncertainty >= 0.0));
    }
}

fn operation(text: &str) {
    if let Ok(motion) = parse_operation(text) {
        assert_eq!(motion.determinant().abs(), 1);
        let shift = motion.to_operation().translation;
        assert!(shift.iter().all(|part| (0.0..1.0).contains(part)), "{shift}");
    }
}

fn hall(text: &str) {
    if let Some(setting) = from_hall(text) {
        let group = setting.group();
        assert!(group.order() > 0 && group.order() % group.translations() == 0);
    }
}

/// `lattice,code,symbol`; the first is a digit, the others may be empty.
fn hinted_symbol(text: &str) {
    let mut parts = text.splitn(3, ',');
    let (Some(lattice), Some(code), Some(symbol)) = (parts.next(), parts.next(), parts.next()) else {
        return;
    };
    let lattice = hinted_lattice(lattice);
    let code = Some(code).filter(|code| !code.is_empty());
    drop(from_hm(symbol, &Hint { lattice: lattice.as_ref(), code, number: None }));
}

/// `lattice,code,number`.
fn hinted_number(text: &str) {
    let mut parts = text.splitn(3, ',');
    let (Some(lattice), Some(code), Some(number)) = (parts.next(), parts.next(), parts.next()) else {
        return;
    };
    let Ok(number) = number.parse() else { return };
    let lattice = hinted_lattice(lattice);
    let code = Some(code).filter(|code| !code.is_empty());
    let found = from_number(number, &Hint { lattice: lattice.as_ref(), code, number: None });
    assert_eq!(found.settings.is_empty(), !(1..=230).contains(&number), "space group {number}");
}

fn hinted_lattice(text: &str) -> Option<Lattice> {
    let (lengths, angles) = match text {
        "1" => ([4.0, 4.0, 4.0], [90.0, 90.0, 90.0]),
        "2" => ([5.0, 5.0, 13.0], [90.0, 90.0, 120.0]),
        "3" => ([5.0, 5.0, 5.0], [55.0, 55.0, 55.0]),
        "4" => ([5.0, 6.0, 7.0], [90.0, 99.0, 90.0]),
        "5" => ([5.0, 6.0, 7.0], [90.0, 90.0, 99.0]),
        "6" => ([5.0, 6.0, 7.0], [80.0, 85.0, 99.0]),
        _ => return None,
    };
    Lattice::from_parameters(&CellParameters { lengths, angles }).ok()
}

fn charges(text: &str) {
    if let Ok(given) = text.parse::<Given>() {
        assert_eq!(given.to_string().parse(), Ok(given), "what is shown is read back");
    }
}
