//! Do the charges agree with the bonds?
//!
//! The valence of a bond of length `d` is `exp((r0 − d) / b)`. The valences around a site add up to about the size of
//! its charge (the valence sum rule: I. D. Brown & D. Altermatt, Acta Cryst. B41, 244 (1985)). The global instability
//! index is the root mean square of the differences over all sites: below 0.1 without strain, up to 0.2 with strain;
//! more usually means that structure or charges are wrong (Lufaso & Woodward, Acta Cryst. B57, 725 (2001)).

use super::orbit::Orbit;
use super::parameters::Parameters;
use super::surroundings::{Surroundings, global_instability};
use crate::cell::Lattice;
use crate::crystal::{Element, Site};

/// Bond-valence sums of a crystal.
#[derive(Debug, Clone, PartialEq)]
pub struct BondValences {
    /// One entry for each set of equivalent sites.
    pub orbits: Vec<OrbitValence>,
    /// Root mean square over the sites of the difference between sum and charge, in valence units.
    pub global_instability: f64,
}

/// The bond-valence sum of one set of equivalent sites.
#[derive(Debug, Clone, PartialEq)]
pub struct OrbitValence {
    /// Label of the first site.
    pub label: String,
    /// The element.
    pub element: Element,
    /// Indices of the sites.
    pub sites: Vec<usize>,
    /// The charge in e.
    pub charge: i64,
    /// Number of bonds to partners of the other sign; for anions the mean over equivalent sites.
    pub coordination: f64,
    /// The sum in valence units: positive for valence given, negative for valence taken.
    pub sum: f64,
}

/// Bond-valence sums over the first coordination shell. None where parameters are missing or the crystal has no bonds
/// between unlike elements.
#[must_use]
pub fn bond_valences(
    lattice: &Lattice,
    sites: &[Site],
    orbits: &[usize],
    charges: &[i64],
    parameters: &Parameters,
) -> Option<BondValences> {
    let orbits = Orbit::collect(sites, orbits).ok()?;
    let surroundings = Surroundings::find(lattice, sites, &orbits, parameters).ok()?;
    let states: Option<Vec<i64>> =
        orbits.iter().map(|orbit| charges.get(*orbit.sites.first()?).copied()).collect();
    of_orbits(&surroundings, &orbits, &states?)
}

/// The same where the bonds are known.
pub(super) fn of_orbits(
    surroundings: &Surroundings,
    orbits: &[Orbit],
    states: &[i64],
) -> Option<BondValences> {
    let sums = surroundings.sums(orbits, states)?;
    if sums.iter().all(|&sum| sum == 0.0) {
        return None;
    }
    let rows = orbits.iter().zip(states).zip(&sums).zip(&surroundings.environments);
    let rows = rows.map(|(((orbit, &charge), &sum), environment)| {
        let given = f64::from(u32::try_from(environment.shell.len()).unwrap_or(u32::MAX));
        OrbitValence {
            label: orbit.label.clone(),
            element: orbit.element,
            sites: orbit.sites.clone(),
            charge,
            coordination: if charge > 0 { given } else { environment.taken_bonds },
            sum,
        }
    });
    Some(BondValences {
        orbits: rows.collect(),
        global_instability: global_instability(orbits, states, &sums),
    })
}
