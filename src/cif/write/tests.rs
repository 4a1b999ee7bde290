use super::*;
use crate::cif::{Dialect, parse, parse_number};
use proptest::prelude::*;

fn one(text: &str) -> Result<String, WriteError> {
    let mut cif = CifText::new();
    cif.block("x")?;
    cif.pair("_a", &Datum::text(text))?;
    Ok(cif.finish())
}

#[test]
fn delimiters_are_those_of_the_standard() {
    // International Tables, volume G, 2.2.7.1 (from memory).
    for (text, expected) in [
        ("abc", "abc"),
        ("a'b", "a'b"),
        ("a b", "'a b'"),
        ("it's so", "\"it's so\""),
        ("", "''"),
        ("_a", "'_a'"),
        ("#1", "'#1'"),
        ("$1", "'$1'"),
        ("[1]", "'[1]'"),
        (";x", "';x'"),
        ("data_x", "'data_x'"),
        ("LOOP_", "'LOOP_'"),
        ("loop_x", "loop_x"),
        (".", "'.'"),
        ("?", "'?'"),
        ("'\"", "\n;'\"\n;"),
        ("a\nb", "\n;a\nb\n;"),
    ] {
        let line = if expected.starts_with('\n') {
            format!("_a{expected}")
        } else {
            format!("_a{:32}{expected}", "")
        };
        assert_eq!(one(text), Ok(format!("#\\#CIF_1.1\ndata_x\n{line}\n")), "{text}");
    }
}

#[test]
fn what_a_text_field_cannot_hold_goes_to_the_second_edition() {
    for text in ["a\n;b", "\\\nfolded", "Å", "naïve text", "> \\\n> x"] {
        let written = one(text).expect("can be written");
        assert!(written.starts_with("#\\#CIF_2.0\n"), "{written}");
        let (document, found) = parse(written.as_bytes());
        assert!(found.is_empty() && document.dialect == Dialect::Two);
        assert_eq!(
            document.block(0).and_then(|block| block.value("_a")).map(|value| value.text),
            Some(text.into())
        );
    }
    assert_eq!(one("a\n;'''\"\"\""), Err(WriteError::Delimiters));
    assert_eq!(one("\u{7}"), Err(WriteError::Character { code: 7 }));
    assert!(matches!(one(&"x".repeat(3000)), Err(WriteError::LongLine { .. })));
}

#[test]
fn long_lines_are_broken_between_values() {
    let mut cif = CifText::new();
    cif.block("x").expect("a name");
    let long = "word ".repeat(14);
    cif.pair("_a_long_tag", &Datum::text(long.as_str())).expect("written");
    let row = |text: &str| vec![Datum::text("A1"), Datum::text(text), Datum::text(long.as_str())];
    cif.table(&["_b", "_c", "_d"], &[row("1"), row("two\nlines"), row("longer")]).expect("written");
    let text = cif.finish();
    assert!(text.lines().all(|line| line.len() <= LINE), "{text}");
    let (document, found) = parse(text.as_bytes());
    assert!(found.is_empty(), "{found:?}");
    let table = document.block(0).expect("a block").table(&[&["_b"], &["_c"], &["_d"]]).expect("a loop");
    assert_eq!(table.rows(), 3);
    assert_eq!(
        table.row(1).and_then(|row| row.into_value(1)).map(|value| value.text),
        Some("two\nlines".into())
    );
    assert_eq!(
        table.row(2).and_then(|row| row.into_value(2)).map(|value| value.text),
        Some(long.as_str().into())
    );
}

#[test]
fn columns_are_aligned() {
    let mut cif = CifText::new();
    cif.block("x").expect("a name");
    let row = |label: &str, x: f64| vec![Datum::text(label), Datum::number(x, 4), Datum::Unknown];
    cif.table(&["_a", "_b", "_c"], &[row("O1", 0.25), row("Ca12", -1.0 / 3.0)]).expect("written");
    assert_eq!(
        cif.finish(),
        "#\\#CIF_1.1\ndata_x\nloop_\n  _a\n  _b\n  _c\nO1   0.25    ?\nCa12 -0.3333 ?\n"
    );
}

#[test]
fn uncertainties_count_in_the_last_digit() {
    // By hand.
    for (value, uncertainty, expected) in [
        (4.1163, 2e-4, "4.1163(2)"),
        (120.0, 1.0, "120(1)"),
        (10.25, 1.25, "10.25(125)"),
        (0.0, 1e-3, "0.000(1)"),
        (-1e-9, 1e-3, "0.000(1)"),
        (0.1234 - 1.0 / 3.0, 2e-4, "-0.209933(200)"),
        (5.0, 0.0, "5"),
        (5.0, f64::NAN, "5"),
    ] {
        assert_eq!(Datum::measured(value, Some(uncertainty)), Datum::Number(expected.into()));
    }
}

proptest! {
    #[test]
    fn any_text_written_is_read_back(text in "[ -~\n\tåÅ€]{0,60}|[;'\"\\\\\n a_#]{0,24}|.{0,40}") {
        if let Ok(written) = one(&text) {
            let (document, found) = parse(written.as_bytes());
            prop_assert!(found.is_empty(), "{found:?}\n{written}");
            prop_assert_eq!(document.block(0).and_then(|block| block.value("_a")).map(|value| value.text), Some(text.as_str().into()));
            let value = document.block(0).and_then(|block| block.value("_a")).expect("there");
            prop_assert!(value.stated().is_some() || text.trim().is_empty());
        }
    }

    #[test]
    fn any_loop_written_is_read_back(texts in proptest::collection::vec("[ -~\n]{0,30}|[;'\"\n a_#]{0,12}", 1..12)) {
        let mut cif = CifText::new();
        cif.block("x").expect("a name");
        let rows: Vec<Vec<Datum>> = texts.iter().map(|text| vec![Datum::text("l"), Datum::text(text.as_str())]).collect();
        if cif.table(&["_a", "_b"], &rows).is_ok() {
            let written = cif.finish();
            let (document, found) = parse(written.as_bytes());
            prop_assert!(found.is_empty(), "{found:?}\n{written}");
            let table = document.block(0).expect("a block").table(&[&["_b"]]).expect("a loop");
            let back: Vec<_> = table.iter().filter_map(|row| row.into_value(0)).map(|v| v.text.to_string()).collect();
            prop_assert_eq!(back, texts);
        }
    }

    #[test]
    fn numbers_keep_value_and_uncertainty(value in -100.0..100.0_f64, digits in 1..99_u32, places in 1..7_i32) {
        let uncertainty = f64::from(digits) * 10_f64.powi(-places);
        let Datum::Number(text) = Datum::measured(value, Some(uncertainty)) else { panic!("a number") };
        let read = parse_number(&text).expect("a number");
        prop_assert!((read.value - value).abs() <= uncertainty / 2.0);
        prop_assert!((read.uncertainty.expect("there") - uncertainty).abs() <= 1e-6 * uncertainty);
    }
}
