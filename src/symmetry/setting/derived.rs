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

#[cfg(test)]
mod tests {
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
