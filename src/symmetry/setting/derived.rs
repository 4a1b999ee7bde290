//! Hermann-Mauguin symbols that are not in the list of settings, but follow from ones that are.

use super::affine::{UNIT, parse_affine};
use super::table::{self, Entry};
use super::{Candidates, Hint, Setting, from_hall, from_hm};
use nalgebra::{Matrix3, Vector3};

/// Settings of a symbol with a change of basis and origin after it, such as `P 42/m m c (a,b+1/2,c)`: the new basis vectors
/// in terms of the old ones, with the new origin. Programs differ in the sign of the origin, so a symbol is known only
/// if both signs give the same operations.
pub(super) fn with_change(symbol: &str, hint: &Hint<'_>) -> Candidates {
    let changed = |front: &str, words: &str| -> Option<Candidates> {
        let text = words.trim().strip_suffix(')')?.to_lowercase();
        if !text.contains('a') || text.contains(['x', 'y', 'z']) {
            return None;
        }
        let change = parse_affine(&text.replace('a', "x").replace('b', "y").replace('c', "z")).ok()?;
        let unit = f64::from(UNIT);
        let basis = Matrix3::from_fn(|i, j| f64::from(change.linear[j][i]) / unit);
        let inverse = basis.try_inverse()?;
        let origin = inverse * Vector3::from_fn(|i, _| f64::from(change.shift[i]) / unit);
        let as_text = |sign: f64| {
            let row = |i: usize| {
                let [x, y, z] = [0, 1, 2].map(|j| inverse[(i, j)]);
                format!("{x:+.6}*x{y:+.6}*y{z:+.6}*z{:+.6}", sign * origin[i])
            };
            [row(0), row(1), row(2)].join(",")
        };
        let known = from_hm(front, &Hint { lattice: None, ..*hint }).settings;
        let settings = known.iter().filter(|setting| !setting.hall.contains('(')).filter_map(|setting| {
            let made = |sign| from_hall(&format!("{} ({})", setting.hall, as_text(sign)));
            let (one, other) = (made(-1.0)?, made(1.0)?);
            one.group().equals(other.group()).then_some(one)
        });
        let settings: Vec<Setting> = settings.collect();
        let fits = hint.lattice.is_none_or(|lattice| settings.iter().any(|s| s.group().fits(lattice)));
        Some(Candidates { settings, fits })
    };
    symbol.split_once('(').and_then(|(front, words)| changed(front, words)).unwrap_or_default()
}

/// Settings of a symbol that is not in the list, but whose elements are there with a primitive lattice, such as
/// `F 4/m m m`, `I 1 21 1` or `B 1 1 2/m`: the operations of the primitive symbol and the translations of the letter.
///
/// The elements of a symbol keep the places they have without the centring. A test compares the rule with all centred
/// symbols of the list that have such a partner.
pub(super) fn in_unusual_cell(key: &str, hint: &Hint<'_>) -> Candidates {
    let centred = |entry: &'static Entry| -> Option<Setting> {
        let setting = entry.setting()?;
        let letter = key.get(..1).filter(|letter| matches!(*letter, "a" | "b" | "c" | "f" | "i"))?;
        let hall = setting.hall.replacen('P', &letter.to_uppercase(), 1);
        let found = from_hall(&hall)?;
        let points = if letter == "f" { 4 } else { 2 };
        let group = found.group();
        let is_sound = group.translations() == points && group.order() == points * setting.group().order();
        is_sound.then_some(found)
    };
    let rest = key.get(1..).unwrap_or_default();
    let entries = table::by_symbol(&format!("p{rest}"));
    let agreed: Vec<&Entry> = entries.iter().copied().filter(|entry| entry.agrees(hint)).collect();
    let settings: Vec<Setting> =
        if agreed.is_empty() { entries } else { agreed }.into_iter().filter_map(centred).collect();
    let fits_lattice = |setting: &&Setting| hint.lattice.is_none_or(|lattice| setting.group().fits(lattice));
    let fitting: Vec<Setting> = settings.iter().filter(fits_lattice).cloned().collect();
    let fits = !fitting.is_empty();
    Candidates { settings: if fits { fitting } else { settings }, fits }
}

/// `A 1`, `I -1` and the like, which are not in the list of settings.
pub(super) fn centred_triclinic(key: &str) -> Option<Setting> {
    let (letter, rest) = key.split_at_checked(1)?;
    if !matches!(letter, "a" | "b" | "c" | "f" | "i" | "r") {
        return None;
    }
    match rest {
        "1" => from_hall(&format!("{letter} 1")),
        "-1" => from_hall(&format!("-{letter} 1")),
        _ => None,
    }
}

/// Settings of a tetragonal symbol in the cell of twice the volume, such as `C 4 2 21` for `P 4 21 2`: axes a − b, a + b, c, so that the second and third place of the symbol change (International
/// Tables, volume A, extended symbols of the tetragonal groups).
pub(super) fn in_double_cell(key: &str, hint: &Hint<'_>) -> Candidates {
    let Some((letter, rest)) = key.split_at_checked(1) else { return Candidates::default() };
    let small = match letter {
        "c" => "P",
        "f" => "I",
        _ => return Candidates::default(),
    };
    let mut settings = Vec::new();
    for (axis, second, third) in tetragonal_places(rest) {
        let symbol = format!("{small} {axis} {third} {second}");
        let known = from_hm(&symbol, &Hint { lattice: None, ..*hint }).settings;
        let plain = known.iter().filter(|setting| !setting.hall.contains('('));
        settings.extend(
            plain.filter_map(|setting| from_hall(&format!("{} (0.5*x-0.5*y,0.5*x+0.5*y,z)", setting.hall))),
        );
    }
    let fits = hint.lattice.is_none_or(|lattice| settings.iter().any(|s| s.group().fits(lattice)));
    Candidates { settings, fits }
}

/// The ways to divide a tetragonal symbol without blanks into its three places.
fn tetragonal_places(rest: &str) -> Vec<(&str, &str, &str)> {
    const PLACES: [&str; 9] = ["2", "21", "m", "a", "b", "c", "d", "n", "g"];
    const AXES: [&str; 7] = ["4", "41", "42", "43", "-4", "4/m", "4/n"];
    let is_axis = |text: &str| {
        AXES.contains(&text)
            || text.split_once('/').is_some_and(|(axis, plane)| {
                ["4", "41", "42"].contains(&axis) && ["m", "n", "a", "b", "c", "d"].contains(&plane)
            })
    };
    let mut found = Vec::new();
    for third in PLACES {
        for second in PLACES {
            let axis = rest.strip_suffix(third).and_then(|rest| rest.strip_suffix(second));
            if let Some(axis) = axis.filter(|axis| is_axis(axis)) {
                let at = axis.len();
                found.push((axis, &rest[at..at + second.len()], &rest[at + second.len()..]));
            }
        }
    }
    found
}

#[cfg(test)]
mod tests {
    use super::super::group::Motion;
    use super::super::symbol::compact;
    use super::*;

    #[test]
    fn unusual_cells_have_the_operations_of_their_primitive_symbol() {
        // Hall symbols by hand: the letter of the lattice before the elements of the primitive symbol.
        for (symbol, hall) in [
            ("F 4/m m m", "-F 4 2"),
            ("C 4 2 2", "C 4 2"),
            ("C -4 2 m", "C -4 2"),
            ("I 1 21 1", "I 2yb"),
            ("C 1 21 1", "C 2yb"),
            ("C 1 1 21", "C 2c"),
            ("F 1 2/m 1", "-F 2y"),
            ("A b a m", "-A 2 2ab"),
        ] {
            let found = from_hm(symbol, &Hint::default());
            let expected = from_hall(hall).expect("a Hall symbol");
            assert_eq!(found.settings.len(), 1, "{symbol}");
            assert!(found.settings[0].group().equals(expected.group()), "{symbol}");
        }
        assert!(from_hm("F 41/d d m q", &Hint::default()).settings.is_empty());
    }

    #[test]
    fn tetragonal_symbols_of_the_double_cell() {
        // By hand: the fourfold operation −y+½, x+½, z of P 4 21 2 in the axes a − b, a + b, c.
        let found = from_hm("C 4 2 21", &Hint::default()).settings;
        let fourfold = Motion::from_affine(&parse_affine("-y,x+1/2,z").expect("a map")).expect("whole");
        assert_eq!(found.len(), 1);
        assert!(found[0].group().contains(&fourfold));
        assert_eq!((found[0].group().order(), found[0].group().translations()), (16, 2));
        assert_eq!(from_hm("C -4 2 b", &Hint::default()).settings.len(), 1);
        // Every symbol with three places and a small cell, against the change of basis.
        let mut compared = 0;
        for entry in (75..=142).flat_map(table::by_number) {
            let Some(listed) = entry.setting() else { continue };
            let symbol = listed.hm.split(':').next().unwrap_or_default();
            let words: Vec<&str> = symbol.split_whitespace().collect();
            let (letter, [axis, second, third]) = match words[..] {
                ["P", a, b, c] => ("c", [a, b, c]),
                ["I", a, b, c] => ("f", [a, b, c]),
                _ => continue,
            };
            let found = in_double_cell(&compact(&format!("{letter}{axis}{third}{second}")), &Hint::default());
            let changed = from_hm(&format!("{symbol} (a-b,a+b,c)"), &Hint::default());
            assert!(!found.settings.is_empty(), "{symbol}");
            for setting in &changed.settings {
                assert!(found.settings.iter().any(|own| own.group().equals(setting.group())), "{symbol}");
            }
            compared += 1;
        }
        assert!(compared > 40, "{compared}");
    }

    #[test]
    fn a_change_of_basis_is_carried_out() {
        for (symbol, hall) in [
            ("P 42/m m c (a,b+1/2,c)", "-P 4c 2 (x,y+1/2,z)"),
            // A cell of twice the volume; by hand: International Tables, volume A, group 139, extended symbols.
            ("I 4/m m m (a-b,a+b,c)", "-F 4 2"),
            // The glide by c/2 becomes one by (a + c)/2, and one by a/2, of the new axes. By hand.
            ("P 1 21/c 1 (-a-c,b,a)", "-P 2yn"),
            ("P 1 21/c 1 (c,b,-a-c)", "-P 2yab"),
        ] {
            let found = from_hm(symbol, &Hint::default()).settings;
            assert_eq!(found.len(), 1, "{symbol}");
            let expected = from_hall(hall).expect("a Hall symbol");
            assert!(found[0].group().equals(expected.group()), "{symbol}");
        }
    }

    #[test]
    fn the_rule_for_unusual_cells_holds_for_the_usual_ones() {
        let mut compared = 0;
        let mut wrong = Vec::new();
        for entry in (1..=230).flat_map(table::by_number) {
            let Some(listed) = entry.setting() else { continue };
            let symbol = listed.hm.split(':').next().unwrap_or_default();
            let key = compact(symbol);
            if !key.starts_with(['a', 'b', 'c', 'f', 'i']) {
                continue;
            }
            let hint = Hint::default();
            let derived = in_unusual_cell(&key, &hint).settings;
            if derived.is_empty() {
                continue;
            }
            compared += 1;
            let is_same = |own: &Setting| own.group().equals_up_to_origin(listed.group());
            if !derived.iter().all(is_same) {
                wrong.push(format!("{} {}", listed.hm, derived[0].hall));
            }
        }
        assert!(compared > 100, "{compared}");
        assert!(wrong.is_empty(), "{} of {compared}: {wrong:?}", wrong.len());
    }
}
