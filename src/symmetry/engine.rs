//! The symmetry search, done by a library chosen at run time.
//!
//! Only the files below this one talk to a symmetry search. They are guarded from outside: the input is validated
//! first, a panic inside the library is caught, and what comes back is checked to be a set of operations that can
//! belong to a space group. Two independent engines are the best test of this layer.

mod moyo;
#[cfg(feature = "spglib")]
mod spglib;

use crate::crystal::{Crystal, Operation};
use crate::diagnostic::{Code, Diagnostic};
use ::moyo::data::{Setting, hall_symbol_entry};
use nalgebra::{Matrix3, Vector3};
use std::cell::Cell;
use std::fmt;
use std::panic::{self, AssertUnwindSafe};
use std::str::FromStr;
use std::sync::Once;

/// A symmetry-search library.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Engine {
    /// The Rust library moyo, always available.
    #[default]
    Moyo,
    /// The C library spglib, built in with the cargo feature `spglib`.
    #[cfg(feature = "spglib")]
    Spglib,
}

impl Engine {
    /// The engines this build holds.
    #[cfg(not(feature = "spglib"))]
    pub const ALL: &'static [Self] = &[Self::Moyo];
    /// The engines this build holds.
    #[cfg(feature = "spglib")]
    pub const ALL: &'static [Self] = &[Self::Moyo, Self::Spglib];
}

impl fmt::Display for Engine {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Moyo => "moyo",
            #[cfg(feature = "spglib")]
            Self::Spglib => "spglib",
        })
    }
}

impl FromStr for Engine {
    type Err = String;

    fn from_str(name: &str) -> Result<Self, Self::Err> {
        Self::ALL.iter().copied().find(|engine| engine.to_string() == name).ok_or_else(|| {
            if name == "spglib" {
                "this build holds no spglib; build it with: cargo build --release --features spglib".into()
            } else {
                let known: Vec<_> = Self::ALL.iter().map(ToString::to_string).collect();
                format!("unknown engine '{name}'; this build holds: {}", known.join(", "))
            }
        })
    }
}

/// What a symmetry search found, in the axes of the crystal it was given.
#[derive(Debug, Clone)]
pub struct Symmetry {
    /// Space-group number, 1 to 230.
    pub number: u16,
    /// Short Hermann–Mauguin symbol of the standard setting, such as `Fd-3m`.
    pub symbol: String,
    /// Hall symbol of the standard setting (origin on an inversion centre where there is a choice).
    pub hall: String,
    /// All operations of one cell, translations included.
    pub operations: Vec<Operation>,
    /// For each site, the index of the first site of its orbit.
    pub orbits: Vec<usize>,
    /// The distance tolerance in Å that was actually used.
    pub tolerance: f64,
    /// The standardised conventional cell, if the engine gives one.
    pub standard: Option<StandardCell>,
}

/// Axes and origin of the standard setting (`symbol` and `hall` of [`Symmetry`]) in the axes of the crystal.
#[derive(Debug, Clone, PartialEq)]
pub struct StandardCell {
    /// The vectors, one a column.
    pub axes: Matrix3<f64>,
    /// The origin.
    pub origin: Vector3<f64>,
}

/// Order of the point group of a space-group number (International Tables for Crystallography, volume A, the ranges of
/// numbers of the 32 crystal classes); 0 outside 1 to 230.
#[must_use]
pub(crate) fn point_group_order(number: u16) -> usize {
    match number {
        1 => 1,
        2..=9 => 2,
        10..=46 | 75..=82 => 4,
        47..=74 | 83..=122 => 8,
        123..=142 => 16,
        143..=146 => 3,
        147..=161 | 168..=174 => 6,
        162..=167 | 175..=190 | 195..=199 => 12,
        191..=194 | 200..=220 => 24,
        221..=230 => 48,
        _ => 0,
    }
}

/// Searches for the symmetry of a crystal at a distance tolerance in Å. Sites with different `kinds` are never mapped
/// onto each other.
///
/// # Errors
/// `symmetry-004` when the engine finds nothing, fails or panics, or returns something that is not a space group.
pub fn find_symmetry(
    crystal: &Crystal,
    kinds: &[i32],
    engine: Engine,
    tolerance: f64,
) -> Result<Symmetry, Diagnostic> {
    let refuse = |why: String| {
        Diagnostic::error(
            Code::SymmetryEngine,
            format!("the symmetry search with {engine} at {tolerance} Å failed: {why}"),
        )
        .hint(format!("--symmetry-tolerance {}", tolerance / 10.0))
    };
    if crystal.sites.is_empty() || crystal.sites.len() != kinds.len() {
        return Err(refuse(format!("{} sites with {} kinds", crystal.sites.len(), kinds.len())));
    }
    if !(tolerance.is_finite() && tolerance > 0.0) {
        return Err(refuse("the tolerance has to be a positive number".into()));
    }
    if !crystal.sites.iter().all(|site| site.position.iter().all(|x| x.is_finite())) {
        return Err(refuse("a coordinate is not a finite number".into()));
    }
    let search = AssertUnwindSafe(|| match engine {
        Engine::Moyo => moyo::find(crystal, kinds, tolerance),
        #[cfg(feature = "spglib")]
        Engine::Spglib => spglib::find(crystal, kinds, tolerance),
    });
    let found = quietly(search)
        .map_err(|_| refuse("the library stopped on an internal fault".into()))?
        .map_err(&refuse)?;
    check(&found, crystal.sites.len()).map_err(&refuse)?;
    Ok(found)
}

/// Short Hermann–Mauguin symbol, without blanks, and Hall symbol of the standard setting of a space group; `None` for
/// a number outside 1 to 230. All engines take them from here, so that they name a group alike.
fn standard_symbols(number: i32) -> Option<(String, String)> {
    let number = (1..=230).contains(&number).then_some(number)?;
    let entry = hall_symbol_entry(Setting::Standard.hall_number(number)?)?;
    Some((entry.hm_short.replace(' ', ""), entry.hall_symbol.to_owned()))
}

thread_local! {
    static IS_GUARDED: Cell<bool> = const { Cell::new(false) };
}

/// Runs a closure, catching a panic without a word on stderr: it becomes a refusal, which says more.
fn quietly<T>(run: AssertUnwindSafe<impl FnOnce() -> T>) -> std::thread::Result<T> {
    static HOOK: Once = Once::new();
    HOOK.call_once(|| {
        let previous = panic::take_hook();
        panic::set_hook(Box::new(move |info| {
            if !IS_GUARDED.get() {
                previous(info);
            }
        }));
    });
    IS_GUARDED.set(true);
    let outcome = panic::catch_unwind(run);
    IS_GUARDED.set(false);
    outcome
}

/// The number of operations of a space group is that of its point group times the number of its translations, and
/// each rotation has determinant ±1.
fn check(found: &Symmetry, sites: usize) -> Result<(), String> {
    let translations = found.operations.iter().filter(|operation| operation.is_translation()).count();
    let count = found.operations.len();
    if translations == 0 || !count.is_multiple_of(translations) || !(1..=48).contains(&(count / translations))
    {
        return Err(format!("it returned {count} operations with {translations} translations"));
    }
    if let Some(operation) = found.operations.iter().find(|operation| determinant(operation).abs() != 1) {
        return Err(format!("it returned a rotation of determinant {}", determinant(operation)));
    }
    if !found.operations.iter().all(|operation| operation.translation.iter().all(|x| x.is_finite())) {
        return Err("it returned a translation that is not a finite number".into());
    }
    if found.orbits.len() != sites || found.orbits.iter().any(|&orbit| orbit >= sites) {
        return Err(format!("it returned {} orbit entries for {sites} sites", found.orbits.len()));
    }
    Ok(())
}

fn determinant(operation: &Operation) -> i64 {
    let w = operation.rotation.map(i64::from);
    w[(0, 0)] * (w[(1, 1)] * w[(2, 2)] - w[(1, 2)] * w[(2, 1)])
        - w[(0, 1)] * (w[(1, 0)] * w[(2, 2)] - w[(1, 2)] * w[(2, 0)])
        + w[(0, 2)] * (w[(1, 0)] * w[(2, 1)] - w[(1, 1)] * w[(2, 0)])
}

#[cfg(test)]
mod tests {
    use super::*;
    use ::moyo::data::{HallSymbol, Setting};

    #[test]
    fn point_group_orders_are_those_of_the_tables() {
        // Against the operations that the crate moyo lists for each group.
        for number in 1..=230 {
            let hall = Setting::Standard.hall_number(number).expect("230 groups");
            let operations = HallSymbol::from_hall_number(hall).expect("a symbol").primitive_traverse();
            assert_eq!(
                point_group_order(u16::try_from(number).expect("small")),
                operations.len(),
                "group {number}"
            );
        }
        assert_eq!((point_group_order(0), point_group_order(231)), (0, 0));
    }
}
