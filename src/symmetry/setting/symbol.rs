//! Hermann-Mauguin symbols and numbers, in the spellings of files.

use super::derived::{centred_triclinic, in_double_cell, in_unusual_cell, with_change};
use super::table::{self, Entry};
use super::{Candidates, Hint, Setting};

/// The settings a Hermann-Mauguin symbol may mean.
///
/// Case, blanks and underscores do not matter; screw axes may be written `21`, `2_1` or `2(1)`, bars as a minus sign or
/// an overbar. Short and full symbols, symbols from before the glide letter e, cubic symbols without a bar (`F m 3 m`),
/// centred triclinic cells (`I -1`) and tetragonal symbols of the double cell (`C 4 2 21`) are known. The choice of origin or axes may be stated as `:1`, `:2`, `:H`, `:R`,
/// `:b1`, as a final `S`, `Z`, `H` or `R`, or in words, `(origin choice 2)`, `(hexagonal axes)`. The lattice letter H
/// means R in hexagonal axes.
///
/// ```
/// use cosetta::symmetry::setting::{Hint, from_hm};
/// let found = from_hm("P2_1/c", &Hint::default());
/// assert_eq!(found.settings[0].hm, "P 1 21/c 1");
/// assert!(from_hm("F d -3 m", &Hint::default()).is_ambiguous());
/// assert!(!from_hm("F d -3 m :2", &Hint::default()).is_ambiguous());
/// ```
#[must_use]
pub fn from_hm(symbol: &str, hint: &Hint<'_>) -> Candidates {
    let Some((key, code)) = split_code(symbol) else { return with_change(symbol, hint) };
    if let Some(setting) = centred_triclinic(&key) {
        return Candidates { settings: vec![setting], fits: true };
    }
    let stated = Hint { code: code.as_deref().or(hint.code), ..*hint };
    let mut exact = table::by_symbol(&key);
    if exact.is_empty() {
        exact = table::by_symbol(&without_axes(&key));
    }
    let of_type = table::by_type(&key);
    let all: Vec<&Entry> = exact.iter().chain(&of_type).copied().collect();
    let best_of = |entries: &[&'static Entry]| {
        let agreed: Vec<&Entry> = entries.iter().copied().filter(|entry| entry.agrees(&stated)).collect();
        let agreed = if agreed.is_empty() { entries.to_vec() } else { agreed };
        choose(&agreed, hint, false)
    };
    let found = best_of(&exact);
    if found.fits && !found.settings.is_empty() {
        return found;
    }
    let wider = best_of(&all);
    if wider.settings.is_empty() {
        let unusual = in_unusual_cell(&key, &stated);
        return if unusual.settings.is_empty() { in_double_cell(&key, &stated) } else { unusual };
    }
    if wider.fits || found.settings.is_empty() { wider } else { found }
}

/// The settings of a number of the International Tables, the standard one first: unique axis b, cell choice 1,
/// hexagonal axes, origin on the inversion centre. Unless a code is given, settings with another order of the axes
/// follow after the standard one.
///
/// ```
/// use cosetta::symmetry::setting::{Hint, from_number};
/// assert_eq!(from_number(15, &Hint::default()).settings[0].hm, "C 1 2/c 1");
/// assert!(from_number(231, &Hint::default()).settings.is_empty());
/// ```
#[must_use]
pub fn from_number(number: u16, hint: &Hint<'_>) -> Candidates {
    let entries = table::by_number(number);
    let stated = Hint { number: None, ..*hint };
    let agreed: Vec<&Entry> = entries.iter().copied().filter(|entry| entry.agrees(&stated)).collect();
    choose(if agreed.is_empty() { &entries } else { &agreed }, hint, true)
}

/// Different settings among the entries, those that fit the lattice if any does.
fn choose(entries: &[&'static Entry], hint: &Hint<'_>, standard_first: bool) -> Candidates {
    let fitting: Vec<&Entry> = entries
        .iter()
        .copied()
        .filter(|entry| {
            hint.lattice.is_none_or(|lattice| entry.group().is_some_and(|group| group.fits(lattice)))
        })
        .collect();
    let fits = !fitting.is_empty();
    let mut chosen = if fits { fitting } else { entries.to_vec() };
    // The list is in the order of the tables, but for the first origin standing before the second.
    chosen.sort_by_key(|entry| {
        let is_other_axes = standard_first && !matches!(entry.code, "" | "1" | "2" | "H" | "b" | "b1");
        (is_other_axes, entry.code.starts_with('1'))
    });
    let mut settings: Vec<Setting> = Vec::new();
    for setting in chosen.into_iter().filter_map(Entry::setting) {
        if !settings.iter().any(|known| known.group().equals(setting.group())) {
            settings.push(setting);
        }
    }
    Candidates { settings, fits }
}

/// A full symbol of three parts cut down to its planes, `P 4/m 21/b 2/m` to `P 4/m b m`: the list of settings has a few of
/// them in another form. A symbol with fewer than two slashes is returned as it is.
fn without_axes(key: &str) -> String {
    if key.matches('/').count() < 2 {
        return key.to_owned();
    }
    let mut short = String::with_capacity(key.len());
    let mut rest = key;
    while let Some(c) = rest.chars().next() {
        let is_axis = !short.ends_with(|c: char| c.is_ascii_digit());
        let after = rest.strip_prefix("21/").or_else(|| rest.strip_prefix("2/")).filter(|_| is_axis);
        rest = after.unwrap_or_else(|| {
            short.push(c);
            &rest[c.len_utf8()..]
        });
    }
    short
}

/// The symbol without blanks, and the code of axes or origin stated with it. `None` when something follows that is
/// not understood, such as a change of basis.
fn split_code(symbol: &str) -> Option<(String, Option<String>)> {
    let lower = symbol.to_lowercase();
    let (front, words) = match lower.find(['(', '{', '[']).filter(|at| {
        // A parenthesised digit is a screw axis, not a remark.
        !lower[at + 1..].trim_start().starts_with(|c: char| c.is_ascii_digit())
    }) {
        Some(at) => lower.split_at(at),
        None => (lower.as_str(), ""),
    };
    let remark: String = words.chars().filter(char::is_ascii_alphanumeric).collect();
    let mut code = match remark.as_str() {
        "" => None,
        "originchoice1" | "originat1" | "origin1" | "choice1" => Some("1"),
        "originchoice2" | "origin2" | "choice2" | "originatcentre" | "originatcenter" => Some("2"),
        "hexagonalaxes" | "hexagonal" | "hexagonalsetting" => Some("h"),
        "rhombohedralaxes" | "rhombohedral" | "rhombohedralsetting" => Some("r"),
        _ => return None,
    }
    .map(str::to_owned);
    let (front, after_colon) = match front.split_once(':') {
        Some((front, after)) => (front, after.trim()),
        None => (front, ""),
    };
    if !after_colon.is_empty() {
        code = Some(
            match after_colon {
                "s" => "1",
                "z" => "2",
                other => other,
            }
            .to_owned(),
        );
    }
    let mut key = compact(front);
    // No symbol holds these letters but as a lattice letter, so at the end they state axes or origin.
    let at_end = [('s', "1"), ('z', "2"), ('r', "r"), ('h', "h")];
    if let Some((_, stated)) = at_end.iter().find(|(letter, _)| key.len() > 1 && key.ends_with(*letter)) {
        key.pop();
        code.get_or_insert_with(|| (*stated).to_owned());
    }
    if let Some(rest) = key.strip_prefix('h') {
        key = format!("r{rest}");
        code.get_or_insert_with(|| "h".to_owned());
    }
    Some((key, code))
}

/// A symbol in lower case without blanks, underscores and the like; overbars become minus signs.
pub(super) fn compact(symbol: &str) -> String {
    let mut key = String::with_capacity(symbol.len());
    for c in symbol.to_lowercase().replace("\\bar", "-").chars() {
        match c {
            '\u{304}' | '\u{305}' => {
                let digit = key.pop();
                key.push('-');
                key.extend(digit);
            }
            '\u{2212}' | '\u{2013}' | '\u{AF}' => key.push('-'),
            '\u{2080}'..='\u{2089}' => key.extend(char::from_digit(u32::from(c) - 0x2080, 10)),
            'a'..='z' | '0'..='9' | '-' | '/' => key.push(c),
            _ => {}
        }
    }
    key
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cell::{CellParameters, Lattice};
    use proptest::prelude::*;

    fn hall_numbers(symbol: &str, hint: &Hint<'_>) -> Vec<u16> {
        from_hm(symbol, hint).settings.iter().filter_map(|setting| setting.hall_number).collect()
    }

    fn lattice(lengths: [f64; 3], angles: [f64; 3]) -> Lattice {
        Lattice::from_parameters(&CellParameters { lengths, angles }).expect("a good cell")
    }

    #[test]
    fn spellings_of_one_symbol() {
        // Numbers of settings: the list of 530 of the International Tables, volume B, table A1.4.2.7.
        for (symbols, expected) in [
            (&["P 1 21/c 1", "P 1 2_1/c 1", "P121/c1", "p_1_21/c_1", "P 1 2(1)/c 1"][..], &[81][..]),
            (&["F m -3 m", "Fm-3m", "F m 3 m", "F 4/m -3 2/m", "Fm\u{0305}", "F m 3\u{0305} m"][..4], &[523]),
            (&["F m 3\u{0305} m", "F m \\bar{3} m", "F m \u{2212}3 m"], &[523]),
            (&["F d -3 m :2", "F d -3 m Z", "Fd-3mZ", "F 41/d -3 2/m (origin choice 2)"], &[526]),
            (&["F d -3 m :1", "F d 3 m S", "Fd-3m:1"], &[525]),
            (&["F d -3 m"], &[526, 525]),
            (&["R -3 c :H", "R -3 c H", "R-3cH", "R -3 2/c (hexagonal axes)", "H -3 c"], &[460]),
            (&["R -3 c :R", "R -3 c R", "R -3 c {rhombohedral axes}"], &[461]),
            (&["C m c a", "Cmce", "C 2/m 2/c 21/a", "C 2/m 2/c 21/e"], &[304]),
            (&["B m a b"], &[309]),
            (&["I 4(1)cd", "I 41 c d", "I4_1cd"], &[387]),
            (&["P n m a", "P 21/n 21/m 21/a"], &[292]),
            (&["P 1"], &[1]),
            (&["P 4/m b m", "P 4/m 21/b 2/m"], &[406]),
            (&["I b c a", "I 21/b 21/c 21/a"], &[341]),
            (&["P 4/n 21/m 2/m (origin choice 2)"], &[409]),
            (&["P n 3 m S"], &[521]),
            (&["C 1 2/c 1 :b1"], &[90]),
        ] {
            for symbol in symbols {
                assert_eq!(hall_numbers(symbol, &Hint::default()), expected, "{symbol}");
            }
        }
    }

    #[test]
    fn unknown_symbols_have_no_settings() {
        for symbol in
            ["", "P", "Q 1", "P 42/m m c (a,b+1/4,c)", "P 42/m m c (a,b+q,c)", "P 7", "H", ":2", "P a -3 m 1"]
        {
            assert!(from_hm(symbol, &Hint::default()).settings.is_empty(), "{symbol}");
        }
    }

    #[test]
    fn the_cell_decides_axes() {
        let hexagonal = lattice([5.0, 5.0, 13.0], [90.0, 90.0, 120.0]);
        let rhombohedral = lattice([5.4; 3], [55.3; 3]);
        for (cell, expected) in [(&hexagonal, 460), (&rhombohedral, 461)] {
            let hint = Hint { lattice: Some(cell), ..Hint::default() };
            assert_eq!(hall_numbers("R -3 c", &hint), [expected]);
            assert_eq!(from_number(167, &hint).settings[0].hall_number, Some(expected));
        }
        let unique_b = lattice([5.0, 6.0, 7.0], [90.0, 105.0, 90.0]);
        let unique_c = lattice([5.0, 6.0, 7.0], [90.0, 90.0, 105.0]);
        for (symbol, cell, expected) in [
            ("P 21/n", &unique_b, 82),
            ("P 21/n", &unique_c, 85),
            ("C 2/c", &unique_b, 90),
            ("P 21/c", &unique_b, 81),
            ("B 2/m", &unique_c, 67),
        ] {
            let hint = Hint { lattice: Some(cell), ..Hint::default() };
            assert_eq!(hall_numbers(symbol, &hint)[0], expected, "{symbol}");
        }
    }

    #[test]
    fn a_cell_that_fits_no_setting_is_told() {
        let cubic = lattice([4.0; 3], [90.0; 3]);
        let hint = Hint { lattice: Some(&cubic), ..Hint::default() };
        assert!(from_hm("F m -3 m", &hint).fits);
        assert!(!from_hm("P 63/m m c", &hint).fits);
    }

    #[test]
    fn codes_and_numbers_choose() {
        let hint = Hint { code: Some("1"), ..Hint::default() };
        assert_eq!(hall_numbers("F d -3 m", &hint), [525]);
        let first = from_number(227, &hint).settings;
        assert_eq!(first.iter().map(|s| s.hall_number).collect::<Vec<_>>(), [Some(525)]);
        assert_eq!(from_number(62, &Hint::default()).settings.len(), 6);
        assert_eq!(from_number(62, &Hint::default()).settings[0].hm, "P n m a");
    }

    proptest! {
        #[test]
        fn any_text_is_taken(text in ".*") {
            let _ = from_hm(&text, &Hint::default());
        }
    }
}
