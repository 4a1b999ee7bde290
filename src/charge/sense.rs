//! Do these charges make an insulator?
//!
//! Formal charges do not show a band gap. Two things can be said: cations with partly filled d shells are insulators
//! only where their electrons stay apart (Mott insulators), and some states are known from metals in most of their
//! simple oxides.

use super::orbit::Orbit;
use crate::crystal::Element;
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;

/// States that are metallic in well-known oxides, with an example (textbook knowledge: P. A. Cox, Transition Metal
/// Oxides, 1992; from memory).
const METALLIC: &[(&str, i64, &str)] = &[
    ("Ti", 2, "TiO"),
    ("V", 2, "VO"),
    ("Cr", 4, "CrO2"),
    ("Fe", 4, "SrFeO3"),
    ("Co", 4, "SrCoO3"),
    ("Ni", 3, "LaNiO3"),
    ("Nb", 4, "SrNbO3"),
    ("Nb", 2, "NbO"),
    ("Mo", 4, "MoO2"),
    ("Mo", 5, "K0.3MoO3"),
    ("Tc", 4, "TcO2"),
    ("Ru", 4, "RuO2"),
    ("Rh", 4, "RhO2"),
    ("W", 4, "WO2"),
    ("W", 5, "the tungsten bronzes"),
    ("Re", 6, "ReO3"),
    ("Re", 4, "ReO2"),
    ("Os", 4, "OsO2"),
    ("Ir", 4, "IrO2"),
    ("Pd", 1, "PdCoO2"),
    ("Pt", 1, "PtCoO2"),
];

/// Electrons in the d shell of a transition-metal ion; none for other elements.
fn d_electrons(element: Element, state: i64) -> Option<i64> {
    let group = match element.number() {
        number @ 21..=30 => i64::from(number) - 18,
        number @ 39..=48 => i64::from(number) - 36,
        number @ 72..=80 => i64::from(number) - 68,
        _ => return None,
    };
    Some(group - state)
}

/// Whether an ion's d shell is neither empty nor full, nor that of a low-spin ion that is always closed: d8 in planes
/// (Pd, Pt, Au) and d6 of the 4d and 5d series.
fn is_open_shell(element: Element, state: i64) -> bool {
    let heavy = element.number() > 30;
    match d_electrons(element, state) {
        Some(6 | 8) if heavy => false,
        Some(1..=9) => true,
        _ => false,
    }
}

/// Borides, carbides, silicides, germanides and stannides of transition metals and rare earths are mostly metals.
fn interstitial(ions: &[(Element, i64)]) -> Option<String> {
    let mut anions = ions.iter().filter(|(_, state)| *state < 0).map(|(element, _)| *element);
    let is_poor = |element: Element| matches!(element.symbol(), "B" | "C" | "Si" | "Ge" | "Sn" | "Pb");
    let has_metal = ions.iter().any(|&(element, state)| {
        state > 0
            && (d_electrons(element, state).is_some_and(|count| count != 10)
                || matches!(element.number(), 57..=71))
    });
    let first = anions.next()?;
    let is_likely = has_metal && is_poor(first) && anions.all(is_poor);
    is_likely.then(|| {
        format!("this may be a metal: most compounds of transition metals or rare earths with {first} are")
    })
}

/// A warning for states known from metals, a note for open shells.
pub(super) fn remarks(orbits: &[Orbit], states: &[i64]) -> Vec<Diagnostic> {
    let ions: Vec<(Element, i64)> =
        orbits.iter().zip(states).map(|(orbit, &state)| (orbit.element, state)).unique().collect();
    let example = |element: Element, state: i64| {
        METALLIC.iter().find(|(symbol, known, _)| *symbol == element.symbol() && *known == state)
    };
    let metallic = ions.iter().filter_map(|&(element, state)| {
        example(element, state).map(|(_, _, oxide)| format!("{element} {state:+} (as in {oxide})"))
    });
    let metallic: Vec<String> = metallic.collect();
    let open = ions.iter().filter(|&&(element, state)| is_open_shell(element, state));
    let open =
        open.filter(|&&(element, state)| example(element, state).is_none()).map(|&(element, state)| {
            format!("{element} {state:+} (d{})", d_electrons(element, state).unwrap_or_default())
        });
    let open: Vec<String> = open.collect();
    let mut found = Vec::new();
    if !metallic.is_empty() {
        let message =
            format!("this may be a metal: {} is known mostly from metals", super::listing(metallic));
        found.push(Diagnostic::warning(Code::ChargeLikelyMetal, message));
    }
    if let Some(message) = interstitial(&ions) {
        found.push(Diagnostic::warning(Code::ChargeLikelyMetal, message));
    }
    if !open.is_empty() {
        let message =
            format!("open d shells: {}; an insulator only if its electrons localise", super::listing(open));
        found.push(Diagnostic::note(Code::ChargeOpenShell, message));
    }
    found
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Electron counts by hand from the periodic table.
    #[test]
    fn shells_are_counted() {
        for (symbol, state, open) in [
            ("Ti", 4, false),
            ("Ti", 3, true),
            ("Fe", 3, true),
            ("Cu", 1, false),
            ("Cu", 2, true),
            ("Zn", 2, false),
            ("Zr", 4, false),
            ("Pd", 2, false),
            ("Rh", 3, false),
            ("W", 6, false),
            ("Re", 6, true),
            ("La", 3, false),
            ("O", -2, false),
        ] {
            let element = Element::from_symbol(symbol).expect("known");
            assert_eq!(is_open_shell(element, state), open, "{symbol} {state}");
        }
    }
}
