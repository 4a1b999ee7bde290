//! The 530 usual settings, from the symmetry library, with their groups made on first use.

use super::group::Group;
use super::hall::{parse_hall, spell};
use super::symbol::compact;
use super::{Hint, Setting};
use moyo::data::hall_symbol_entry;
use std::collections::HashMap;
use std::sync::{Arc, LazyLock, OnceLock};

/// Number of settings in the list.
const COUNT: u16 = 530;

/// Symbols from before the letter e was introduced for double glide planes (de Wolff et al., Acta Cryst. A48 (1992)
/// 727), by number of the setting: International Tables, volume A (1983), table 4.3.1.
#[rustfmt::skip]
const OLD_SYMBOLS: &[(u16, &str)] = &[
    (191, "A b m 2"), (192, "B m a 2"), (193, "B 2 c m"), (194, "C 2 m b"), (195, "C m 2 a"), (196, "A c 2 m"),
    (203, "A b a 2"), (204, "B b a 2"), (205, "B 2 c b"), (206, "C 2 c b"), (207, "C c 2 a"), (208, "A c 2 a"),
    (304, "C m c a"), (305, "C c m b"), (306, "A b m a"), (307, "A c a m"), (308, "B b c m"), (309, "B m a b"),
    (316, "C m m a"), (317, "C m m b"), (318, "A b m m"), (319, "A c m m"), (320, "B m c m"), (321, "B m a m"),
    (322, "C c c a"), (323, "C c c a"), (324, "C c c b"), (325, "C c c b"), (326, "A b a a"), (327, "A b a a"),
    (328, "A c a a"), (329, "A c a a"), (330, "B b c b"), (331, "B b c b"), (332, "B b a b"), (333, "B b a b"),
];

/// One of the usual settings.
#[derive(Debug)]
pub(super) struct Entry {
    pub(super) hall_number: u16,
    pub(super) number: u16,
    /// Code of the choice of axes and origin, such as `b1`, `cab`, `2` or `H`; empty for the only one.
    pub(super) code: &'static str,
    hall: &'static str,
    hm: String,
    group: OnceLock<Option<Arc<Group>>>,
}

impl Entry {
    /// The operations as a group.
    pub(super) fn group(&self) -> Option<&Arc<Group>> {
        self.group.get_or_init(|| parse_hall(self.hall).map(Arc::new)).as_ref()
    }

    pub(super) fn setting(&self) -> Option<Setting> {
        let group = self.group()?;
        Some(Setting {
            hall_number: Some(self.hall_number),
            number: Some(self.number),
            hall: self.hall.replace('=', "\"").replace('^', "'"),
            hm: self.hm.clone(),
            group: Arc::clone(group),
        })
    }

    /// Whether the entry is of the number and code of a hint, where it gives them.
    pub(super) fn agrees(&self, hint: &Hint<'_>) -> bool {
        hint.number.is_none_or(|number| number == self.number)
            && hint.code.is_none_or(|code| self.has_code(code))
    }

    fn has_code(&self, code: &str) -> bool {
        let own = self.code.to_ascii_lowercase();
        let code = code.to_ascii_lowercase();
        match code.as_str() {
            "1" | "2" => own.starts_with(&code),
            "a" | "b" | "c" => own.trim_start_matches('-').starts_with(&code),
            _ => own == code,
        }
    }
}

struct Table {
    entries: Vec<Entry>,
    by_hall: HashMap<String, usize>,
    /// Entries by symbol without blanks; those under their own symbol first.
    by_symbol: HashMap<String, Vec<usize>>,
    /// Entries by the short symbol of their type, where that is not their own symbol.
    by_type: HashMap<String, Vec<usize>>,
}

static TABLE: LazyLock<Table> = LazyLock::new(|| {
    let mut table = Table {
        entries: Vec::new(),
        by_hall: HashMap::new(),
        by_symbol: HashMap::new(),
        by_type: HashMap::new(),
    };
    for hall_number in 1..=COUNT {
        let Some(found) = hall_symbol_entry(i32::from(hall_number)) else { continue };
        let Ok(number) = u16::try_from(found.number) else { continue };
        let index = table.entries.len();
        let is_monoclinic = (3..=15).contains(&number);
        let full = found.hm_full.replace('_', "");
        let short = found.hm_short.replace('_', "");
        let mut keys = vec![compact(&full)];
        if is_monoclinic {
            keys.push(compact(&full.split(' ').filter(|word| *word != "1").collect::<String>()));
            table.by_type.entry(compact(&short)).or_default().push(index);
        } else {
            keys.push(compact(&short));
        }
        if let Some((_, old)) = OLD_SYMBOLS.iter().find(|(of, _)| *of == hall_number) {
            keys.push(compact(old));
            keys.push(compact(&with_old_glide(&full, old)));
        }
        if number >= 195 {
            let without_bars: Vec<String> = keys.iter().map(|key| key.replace("-3", "3")).collect();
            keys.extend(without_bars);
        }
        keys.sort();
        keys.dedup();
        for key in keys {
            table.by_symbol.entry(key).or_default().push(index);
        }
        if let Some(spelled) = spell(found.hall_symbol) {
            table.by_hall.entry(hall_key(&spelled.core, spelled.change.as_deref())).or_insert(index);
        }
        let hm = match found.setting.chars().next() {
            Some(c @ ('1' | '2' | 'H' | 'R')) => format!("{short} :{c}"),
            _ if is_monoclinic => full,
            _ => short,
        };
        table.entries.push(Entry {
            hall_number,
            number,
            code: found.setting,
            hall: found.hall_symbol,
            hm,
            group: OnceLock::new(),
        });
    }
    table
});

/// A full symbol with the letters of the old short symbol in place of e.
fn with_old_glide(full: &str, old: &str) -> String {
    full.split(' ')
        .zip(old.split(' '))
        .map(|(word, letter)| match word.strip_suffix('e') {
            Some(front) => format!("{front}{letter} "),
            None => format!("{word} "),
        })
        .collect()
}

fn hall_key(core: &str, change: Option<&str>) -> String {
    format!("{core} ({})", change.unwrap_or_default())
}

/// The entry of a Hall symbol that is in the list.
pub(super) fn by_hall(symbol: &str) -> Option<&'static Entry> {
    let spelled = spell(symbol)?;
    let index = TABLE.by_hall.get(&hall_key(&spelled.core, spelled.change.as_deref()))?;
    TABLE.entries.get(*index)
}

/// The first entry with the same operations.
pub(super) fn by_group(group: &Group) -> Option<&'static Entry> {
    TABLE.entries.iter().find(|entry| entry.group().is_some_and(|own| own.equals(group)))
}

/// The entries of a symbol without blanks.
pub(super) fn by_symbol(key: &str) -> Vec<&'static Entry> {
    select(TABLE.by_symbol.get(key))
}

/// The entries of the monoclinic types whose standard short symbol this is, whatever their axes.
pub(super) fn by_type(key: &str) -> Vec<&'static Entry> {
    select(TABLE.by_type.get(key))
}

fn select(indices: Option<&Vec<usize>>) -> Vec<&'static Entry> {
    indices.into_iter().flatten().filter_map(|index| TABLE.entries.get(*index)).collect()
}

/// The entry of the standard setting of a number.
pub(super) fn standard(number: u16) -> Option<&'static Entry> {
    let hall_number = moyo::data::Setting::Standard.hall_number(i32::from(number).max(1))?;
    let index = usize::try_from(hall_number).ok()?.checked_sub(1)?;
    TABLE.entries.get(index).filter(|entry| entry.number == number)
}

/// The entries of a number of the International Tables.
pub(super) fn by_number(number: u16) -> Vec<&'static Entry> {
    TABLE.entries.iter().filter(|entry| entry.number == number).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_entry_generates_its_group() {
        for entry in &TABLE.entries {
            let group = entry.group().unwrap_or_else(|| panic!("{} generates a group", entry.hall));
            let library = moyo::data::HallSymbol::new(entry.hall).expect("in the list");
            let expected = library.traverse().len() * library.centering.order();
            assert_eq!(group.order(), expected, "{}", entry.hall);
            assert!(library.traverse().iter().all(|operation| {
                let operation = crate::crystal::Operation {
                    rotation: operation.rotation,
                    translation: operation.translation,
                };
                crate::symmetry::setting::Motion::from_operation(&operation)
                    .is_some_and(|m| group.contains(&m))
            }));
        }
        assert_eq!(TABLE.entries.len(), 530);
    }

    #[test]
    fn standard_settings_are_those_listed_first() {
        for number in 1..=230 {
            let listed = super::super::from_number(number, &Hint::default());
            let hall_number = super::super::standard(number).and_then(|setting| setting.hall_number);
            assert_eq!(listed.settings[0].hall_number, hall_number, "{number}");
        }
        assert!(standard(0).is_none() && standard(231).is_none() && standard(u16::MAX).is_none());
    }

    #[test]
    fn settings_of_one_symbol_are_of_one_type() {
        for (key, indices) in &TABLE.by_symbol {
            let numbers: std::collections::BTreeSet<_> =
                indices.iter().map(|index| TABLE.entries[*index].number).collect();
            assert_eq!(numbers.len(), 1, "{key}");
        }
    }

    #[test]
    fn old_symbols_differ_from_new_ones_in_the_letter_e_alone() {
        for (hall_number, old) in OLD_SYMBOLS {
            let entry = hall_symbol_entry(i32::from(*hall_number)).expect("in the list");
            let new: Vec<&str> = entry.hm_short.split(' ').collect();
            let old: Vec<&str> = old.split(' ').collect();
            for (new, old) in new.iter().zip(&old) {
                // The list has one entry, number 331, with an old letter in its new symbol.
                assert!(new == old || *new == "e" || *hall_number == 331, "{hall_number}");
            }
        }
    }
}
