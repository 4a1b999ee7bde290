//! Chemical elements by atomic number.

use std::fmt;
use std::str::FromStr;

/// Symbols of the 118 named elements in order of atomic number (IUPAC periodic table, 2018).
#[rustfmt::skip]
const SYMBOLS: [&str; 118] = [
    "H", "He", "Li", "Be", "B", "C", "N", "O", "F", "Ne", "Na", "Mg", "Al", "Si", "P", "S", "Cl",
    "Ar", "K", "Ca", "Sc", "Ti", "V", "Cr", "Mn", "Fe", "Co", "Ni", "Cu", "Zn", "Ga", "Ge", "As",
    "Se", "Br", "Kr", "Rb", "Sr", "Y", "Zr", "Nb", "Mo", "Tc", "Ru", "Rh", "Pd", "Ag", "Cd", "In",
    "Sn", "Sb", "Te", "I", "Xe", "Cs", "Ba", "La", "Ce", "Pr", "Nd", "Pm", "Sm", "Eu", "Gd", "Tb",
    "Dy", "Ho", "Er", "Tm", "Yb", "Lu", "Hf", "Ta", "W", "Re", "Os", "Ir", "Pt", "Au", "Hg", "Tl",
    "Pb", "Bi", "Po", "At", "Rn", "Fr", "Ra", "Ac", "Th", "Pa", "U", "Np", "Pu", "Am", "Cm", "Bk",
    "Cf", "Es", "Fm", "Md", "No", "Lr", "Rf", "Db", "Sg", "Bh", "Hs", "Mt", "Ds", "Rg", "Cn", "Nh",
    "Fl", "Mc", "Lv", "Ts", "Og",
];

/// A chemical element.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Element(u8);

impl Element {
    /// Hydrogen, which also stands for deuterium and tritium.
    pub const HYDROGEN: Self = Self(1);
    /// Oxygen.
    pub const OXYGEN: Self = Self(8);

    /// The element of an atomic number from 1 to 118.
    #[must_use]
    pub fn from_number(number: u8) -> Option<Self> {
        (1..=118).contains(&number).then_some(Self(number))
    }

    /// The element of a symbol in any case; `D` and `T` are read as hydrogen.
    ///
    /// ```
    /// use cosetta::crystal::Element;
    /// assert_eq!(Element::from_symbol("ta").map(|e| e.symbol()), Some("Ta"));
    /// assert_eq!(Element::from_symbol("D"), Some(Element::HYDROGEN));
    /// assert_eq!(Element::from_symbol("Xx"), None);
    /// ```
    #[must_use]
    pub fn from_symbol(symbol: &str) -> Option<Self> {
        if symbol.eq_ignore_ascii_case("D") || symbol.eq_ignore_ascii_case("T") {
            return Some(Self::HYDROGEN);
        }
        let index = SYMBOLS.iter().position(|known| known.eq_ignore_ascii_case(symbol))?;
        u8::try_from(index + 1).ok().and_then(Self::from_number)
    }

    /// The atomic number.
    #[must_use]
    pub fn number(self) -> u8 {
        self.0
    }

    /// The symbol, such as `Ta`.
    #[must_use]
    pub fn symbol(self) -> &'static str {
        SYMBOLS[usize::from(self.0) - 1]
    }

    /// Whether the element is a metal. Not metals: the noble gases, the halogens, and
    /// H, B, C, N, O, Si, P, S, Ge, As, Se, Sb, Te (common practice, no single source).
    #[must_use]
    pub fn is_metal(self) -> bool {
        !matches!(
            self.0,
            1 | 2 | 5..=10 | 14..=18 | 32..=36 | 51..=54 | 85 | 86 | 117 | 118
        )
    }
}

impl fmt::Display for Element {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(self.symbol())
    }
}

impl FromStr for Element {
    type Err = String;

    fn from_str(symbol: &str) -> Result<Self, Self::Err> {
        Self::from_symbol(symbol).ok_or_else(|| format!("'{symbol}' is not an element symbol"))
    }
}
