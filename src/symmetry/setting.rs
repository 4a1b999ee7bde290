//! Which operations does a space-group name stand for?
//!
//! A *setting* is a space-group type with a choice of axes and origin, given by the full list of its operations in that
//! choice. Names come as Hall symbols (Hall, Acta Cryst. A37 (1981) 517), which fix the setting, as Hermann-Mauguin
//! symbols, which often leave the origin or the axes open, or as numbers of the International Tables, which leave
//! everything open but the type.
//!
//! # When a name leaves a choice
//! [`from_hm`] and [`from_number`] return every setting the name may mean, best first, and say whether there is a choice
//! left after the [`Hint`] was used. Settings whose operations do not preserve the metric of the hinted lattice are
//! dropped as long as one remains; that decides between hexagonal and rhombohedral axes, and between unique axes of
//! monoclinic groups. The order of the others is that of the International Tables: unique axis b, cell choice 1, standard
//! orthorhombic axes, hexagonal axes. Of two origins the second, which lies on the inversion centre, comes first: it is the
//! one that present-day programs write (of 19 public files that list operations besides a symbol without origin, 16 use
//! it). The caller should prefer whichever makes the formula, the stated multiplicities and the distances come out right,
//! and say so.

mod affine;
mod derived;
mod group;
mod hall;
mod symbol;
mod table;

pub use affine::{Affine, AffineError, UNIT, parse_affine};
pub use group::{Group, Motion};
pub use symbol::{from_hm, from_number};

use crate::cell::Lattice;
use crate::crystal::Operation;
use std::sync::Arc;

/// A space group in one choice of axes and origin.
#[derive(Debug, Clone)]
pub struct Setting {
    /// Number of the setting in the usual list of 530; `None` for a choice that is not in the list.
    pub hall_number: Option<u16>,
    /// Number of the space-group type in the International Tables; `None` when it was not looked up.
    pub number: Option<u16>,
    /// Hall symbol.
    pub hall: String,
    /// Hermann-Mauguin symbol, followed by `:1`, `:2`, `:H` or `:R` where the symbol alone is not enough.
    pub hm: String,
    group: Arc<Group>,
}

impl Setting {
    /// All operations, centring translations included, the identity first.
    #[must_use]
    pub fn operations(&self) -> Vec<Operation> {
        self.group.operations()
    }

    /// The operations as a group.
    #[must_use]
    pub fn group(&self) -> &Group {
        &self.group
    }
}

/// What is known besides the name.
#[derive(Debug, Clone, Copy, Default)]
pub struct Hint<'a> {
    /// The cell of the file.
    pub lattice: Option<&'a Lattice>,
    /// A code for the coordinate system, such as `2`, `h` or `-b1` (`_space_group_IT_coordinate_system_code`).
    pub code: Option<&'a str>,
    /// The number of the space-group type, to choose among settings that share a symbol.
    pub number: Option<u16>,
}

/// The settings a name may mean.
#[derive(Debug, Clone, Default)]
pub struct Candidates {
    /// Settings with different operations, best first. Empty when the name is not known.
    pub settings: Vec<Setting>,
    /// Whether the operations of the first fit the metric of the hinted lattice; true without a hint.
    pub fits: bool,
}

impl Candidates {
    /// Whether the name and the hints leave a choice.
    #[must_use]
    pub fn is_ambiguous(&self) -> bool {
        self.settings.len() > 1
    }
}

/// The standard setting of a number of the International Tables; see [`from_number`].
#[must_use]
pub fn standard(number: u16) -> Option<Setting> {
    table::standard(number).and_then(table::Entry::setting)
}

/// The setting of a Hall symbol.
///
/// Blanks may be missing, underscores stand for blanks, the two kinds of prime are written `'` and `"`, and a change
/// of origin or basis may follow as `(0 0 1)`, in twelfths, or as `(x+1/4,y,z)`.
///
/// ```
/// let setting = cosetta::symmetry::setting::from_hall("-R 3 2\"c").unwrap();
/// assert_eq!((setting.number, setting.group().order()), (Some(167), 36));
/// ```
#[must_use]
pub fn from_hall(symbol: &str) -> Option<Setting> {
    if let Some(entry) = table::by_hall(symbol) {
        return entry.setting();
    }
    let group = Arc::new(hall::parse_hall(symbol)?);
    if let Some(entry) = table::by_group(&group) {
        return entry.setting();
    }
    let without_change = symbol.split('(').next().unwrap_or_default();
    let number = if without_change.len() < symbol.len() {
        from_hall(without_change).and_then(|setting| setting.number)
    } else {
        match group.order() / group.translations() {
            1 => Some(1),
            2 if group.has_inversion() => Some(2),
            _ => None,
        }
    };
    let hall = symbol.trim().to_owned();
    Some(Setting { hall_number: None, number, hm: String::new(), hall, group })
}

/// The setting whose operations these are, if it is one of the 530 usual ones.
///
/// ```
/// use cosetta::symmetry::setting::{from_group, from_hall};
/// let spinel = from_hall("-F4vw2vw3").unwrap();
/// assert_eq!(from_group(spinel.group()).map(|setting| setting.hm), Some("F d -3 m :2".to_owned()));
/// ```
#[must_use]
pub fn from_group(group: &Group) -> Option<Setting> {
    table::by_group(group).and_then(table::Entry::setting)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn hall_symbols_give_numbers_and_orders() {
        // Order of the point group times the number of lattice points: International Tables, volume A.
        for (symbol, number, order) in [
            ("P 1", 1, 1),
            ("-P 1", 2, 2),
            ("-P 2ybc", 14, 4),
            ("-C 2yc", 15, 8),
            ("-P 2ac 2n", 62, 8),
            ("P 4w 2c", 91, 8),
            ("P 31 2 (0 0 4)", 151, 6),
            ("P 62 2c (0 0 1)", 180, 12),
            ("-R 3 2\"c", 167, 36),
            ("-P 3* 2n", 167, 12),
            ("-F 4 2 3", 225, 192),
            ("-F4vw2vw3", 227, 192),
            ("F 4d 2 3 -1d", 227, 192),
            ("-I 4bd 2c 3", 230, 96),
            ("-I_4bd_2c_3", 230, 96),
            ("-C 2bc 2", 64, 16),
            ("-P 4bc 2bc 3 (x+1/4,y+1/4,z+1/4)", 224, 48),
            ("R 3 (-y+z,x+z,-x+y+z)", 146, 3),
        ] {
            let setting = from_hall(symbol).unwrap_or_else(|| panic!("{symbol} is a Hall symbol"));
            assert_eq!((setting.number, setting.group().order()), (Some(number), order), "{symbol}");
        }
    }

    #[test]
    fn centred_cells_of_triclinic_groups() {
        let setting = from_hall("-I 1").expect("a Hall symbol");
        assert_eq!((setting.number, setting.hall_number, setting.group().order()), (Some(2), None, 4));
    }

    #[test]
    fn other_texts_are_not_hall_symbols() {
        for text in [
            "",
            "-",
            "P",
            "X 2",
            "C 2 -c",
            "P 4z 3x 6y 3*",
            "P 21/c",
            "(0 0 1)",
            "P 2 (1",
            "P 3'* 2",
            "P 7",
            "é",
        ] {
            assert!(from_hall(text).is_none(), "{text}");
        }
    }
}
