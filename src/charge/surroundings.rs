//! Which bonds does a site of each orbit make, and how strong are they?
//!
//! A bond runs from the less to the more electronegative partner (L. C. Allen's scale, which the IUPAC recommends for
//! formal oxidation states: Karen et al., Pure Appl. Chem. 88, 831 (2016)). The *coordination shell* of the
//! less electronegative site holds the partners whose bond has at least 0.015 of the valence that the stronger bonds
//! make together. This keeps all twelve oxygen atoms around calcium in tilted perovskites, the weakest at 0.016, and
//! leaves out the second shell everywhere else (0.01 and less in rutile, calcite, quartz, spinel). Altermatt & Brown,
//! Acta Cryst. B41, 240 (1985), draw the line at 0.038 of the formal valence (from memory), which is not known yet here.
//!
//! Only anions count as partners: elements that have negative states, on sites that make no bonds to still more
//! electronegative ones. Strong bonds are covalent and count in any case, such as that of H to C in a molecule.

use super::electronegativity::{electronegativity, octet_need};
use super::orbit::Orbit;
use super::parameters::{Origin, Pair, Parameters, single_bond};
use super::states::states;
use crate::cell::{Lattice, LatticeError, neighbours_of};
use crate::crystal::{Element, Site};
use itertools::Itertools;
use std::collections::BTreeMap;

/// The least part of the valence of the stronger bonds that a bond of the shell has.
const SHELL_PART: f64 = 0.015;

/// Bonds below this valence are not looked at.
const LEAST_VALENCE: f64 = 0.02;

/// A contact with a site that is no anion is a covalent bond from here on.
const COVALENT: f64 = 0.6;

/// A site with more valence than this towards anions is a cation.
const CATION: f64 = 0.5;

/// Nonmetals bond to more electronegative ones by one strong bond at least, or not at all.
const NONMETAL_BOND: f64 = 0.3;

/// Electronegativity from which an element counts as a nonmetal here: As and Te do, Sb does not.
const NONMETAL: f64 = 2.1;

/// Atoms of one nonmetal are bonded if their bond valence is at least this; about 0.3 Å beyond a single bond.
const HOMONUCLEAR: f64 = 0.45;

/// A bond from a site to a more electronegative one.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Bond {
    /// Position of the partner in the list of orbits.
    pub(crate) partner: usize,
    /// Length in Å.
    pub(crate) distance: f64,
}

/// The bonds of one site of an orbit.
#[derive(Debug, Clone, PartialEq, Default)]
pub(crate) struct Environment {
    /// The coordination shell: bonds to more electronegative sites, shortest first.
    pub(crate) shell: Vec<Bond>,
    /// Valence given to more electronegative sites, by parameters that do not depend on the state.
    pub(crate) giving: f64,
    /// Valence taken from less electronegative sites.
    pub(crate) taking: f64,
    /// Number of bonds to less electronegative sites.
    pub(crate) taken_bonds: f64,
    /// Valence of the bonds to sites of the same element.
    pub(crate) homonuclear: f64,
    /// Shortest distance in Å to a site of the same element, if it was seen.
    pub(crate) nearest_like: Option<f64>,
}

/// The bonds of all orbits of a cell.
#[derive(Debug, Clone, PartialEq)]
pub(crate) struct Surroundings {
    pub(crate) environments: Vec<Environment>,
    pub(crate) parameters: Parameters,
}

impl Surroundings {
    /// Finds the bonds of the orbits.
    pub(crate) fn find(
        lattice: &Lattice,
        sites: &[Site],
        orbits: &[Orbit],
        parameters: &Parameters,
    ) -> Result<Self, LatticeError> {
        let pairs = generic_pairs(orbits, parameters);
        let positions: Vec<_> = sites.iter().map(|site| site.position).collect();
        let mut orbit_of = vec![0; sites.len()];
        for (index, orbit) in orbits.iter().enumerate() {
            for &site in &orbit.sites {
                if let Some(place) = orbit_of.get_mut(site) {
                    *place = index;
                }
            }
        }
        let centres: Vec<usize> = orbits.iter().filter_map(|orbit| orbit.sites.first().copied()).collect();
        let reach = pairs.values().map(|pair| pair.length(LEAST_VALENCE)).fold(1.0, f64::max);
        let around = neighbours_of(lattice, &positions, &centres, reach)?;
        let mut environments = vec![Environment::default(); orbits.len()];
        for group in by_falling_electronegativity(orbits) {
            for &index in &group {
                let near = || around[index].iter().map(|&(site, distance)| (orbit_of[site], distance));
                homonuclear_bonds(orbits, index, near(), &mut environments);
                give(orbits, index, near(), &pairs, &mut environments);
            }
        }
        Ok(Self { environments, parameters: parameters.clone() })
    }

    /// The bond-valence sum of a site of an orbit in a positive state; 0 if it makes no bonds. None if there are no
    /// parameters for them.
    pub(crate) fn sum(&self, orbits: &[Orbit], index: usize, state: i64) -> Option<f64> {
        let environment = self.environments.get(index)?;
        let element = orbits.get(index)?.element;
        let mut sum = 0.0;
        for (partner, bonds) in &environment.shell.iter().chunk_by(|bond| orbits[bond.partner].element) {
            let pair = self.parameters.pair(element, state, partner)?;
            sum += bonds.map(|bond| pair.valence(bond.distance)).sum::<f64>();
        }
        Some(sum)
    }

    /// Whether the parameters of all bonds are published ones, if of another state.
    pub(crate) fn is_published(&self, orbits: &[Orbit], charges: &[i64]) -> bool {
        let rows = orbits.iter().zip(charges).zip(&self.environments);
        rows.flat_map(|((orbit, &charge), environment)| {
            let partners = environment.shell.iter().map(|bond| orbits[bond.partner].element).dedup();
            partners.map(move |partner| self.parameters.pair(orbit.element, charge.abs(), partner))
        })
        .all(|pair| pair.is_some_and(|pair| pair.origin != Origin::Rule))
    }

    /// Signed bond-valence sums of all orbits in these states: positive for what a site gives, negative for what it
    /// takes. None where a parameter is missing.
    #[expect(clippy::cast_precision_loss, reason = "counts of sites are far below 2^52")]
    pub(crate) fn sums(&self, orbits: &[Orbit], charges: &[i64]) -> Option<Vec<f64>> {
        let mut sums = vec![0.0; orbits.len()];
        for (index, (orbit, environment)) in orbits.iter().zip(&self.environments).enumerate() {
            let state = charges.get(index)?.abs();
            for bond in &environment.shell {
                let partner = orbits.get(bond.partner)?;
                let valence =
                    self.parameters.pair(orbit.element, state, partner.element)?.valence(bond.distance);
                sums[index] += valence;
                sums[bond.partner] -= valence * orbit.count() as f64 / partner.count().max(1) as f64;
            }
        }
        Some(sums)
    }
}

/// Root mean square over all sites of the difference of bond-valence sum and charge, in valence units (Salinas-Sanchez
/// et al., J. Solid State Chem. 100, 201 (1992)).
#[must_use]
#[expect(clippy::cast_precision_loss, reason = "counts of sites are far below 2^52")]
pub(crate) fn global_instability(orbits: &[Orbit], charges: &[i64], sums: &[f64]) -> f64 {
    let mut total = 0.0;
    let mut number = 0.0;
    for ((orbit, &charge), sum) in orbits.iter().zip(charges).zip(sums) {
        let count = orbit.count() as f64;
        total += count * (sum - charge as f64).powi(2);
        number += count;
    }
    if number > 0.0 { (total / number).sqrt() } else { 0.0 }
}

/// Parameters that do not depend on the state, for each pair of elements that may be bonded.
fn generic_pairs(orbits: &[Orbit], parameters: &Parameters) -> BTreeMap<(Element, Element), Pair> {
    let elements: Vec<Element> = orbits.iter().map(|orbit| orbit.element).dedup().collect();
    let mut pairs = BTreeMap::new();
    for (&one, &other) in elements.iter().cartesian_product(&elements) {
        let (Some(x), Some(y)) = (electronegativity(one), electronegativity(other)) else { continue };
        if x >= y || !is_anion_maker(other) {
            continue;
        }
        let usual = states(one).iter().filter(|state| state.charge > 0).max_by_key(|state| state.reports);
        if let Some(pair) = parameters.pair(one, usual.map_or(1, |state| state.charge), other) {
            pairs.insert((one, other), pair);
        }
    }
    pairs
}

/// Whether the element is known in negative states, by filling its shell.
fn is_anion_maker(element: Element) -> bool {
    octet_need(element).is_some() && states(element).iter().any(|state| state.charge < 0)
}

fn by_falling_electronegativity(orbits: &[Orbit]) -> Vec<Vec<usize>> {
    let value = |index: usize| electronegativity(orbits[index].element).unwrap_or(0.0);
    let mut order: Vec<usize> = (0..orbits.len()).collect();
    order.sort_by(|&a, &b| value(b).total_cmp(&value(a)).then(a.cmp(&b)));
    order.chunk_by(|&a, &b| orbits[a].element == orbits[b].element).map(<[usize]>::to_vec).collect()
}

fn homonuclear_bonds(
    orbits: &[Orbit],
    index: usize,
    near: impl Iterator<Item = (usize, f64)>,
    environments: &mut [Environment],
) {
    let element = orbits[index].element;
    let like = near.filter(|&(partner, _)| orbits[partner].element == element).map(|(_, distance)| distance);
    let distances: Vec<f64> = like.collect();
    environments[index].nearest_like = distances.first().copied();
    if element == Element::HYDROGEN || (octet_need(element).is_none() && !pairs_up(element)) {
        return;
    }
    let Some(pair) = single_bond(element) else { return };
    let valences = distances.iter().map(|&distance| pair.valence(distance));
    // Long single bonds are bonds too; only between oxygen atoms are there halves (superoxide).
    let order = |valence: f64| if element == Element::OXYGEN { valence } else { valence.round().max(1.0) };
    environments[index].homonuclear = valences.take_while(|&valence| valence >= HOMONUCLEAR).map(order).sum();
}

/// Metals that bond to their like in pairs, as in `Hg2Cl2` and `GaSe`.
fn pairs_up(element: Element) -> bool {
    matches!(element.symbol(), "Ga" | "In" | "Tl" | "Hg" | "Cd" | "Zn")
}

/// Finds the coordination shell of an orbit and books its bonds on both sides.
#[expect(clippy::cast_precision_loss, reason = "counts of sites are far below 2^52")]
fn give(
    orbits: &[Orbit],
    index: usize,
    near: impl Iterator<Item = (usize, f64)>,
    pairs: &BTreeMap<(Element, Element), Pair>,
    environments: &mut [Environment],
) {
    let element = orbits[index].element;
    let mut bonds: Vec<(f64, Bond)> = near
        .filter_map(|(partner, distance)| {
            let valence = pairs.get(&(element, orbits[partner].element))?.valence(distance);
            let is_partner = environments[partner].giving < CATION || valence >= COVALENT;
            (valence >= LEAST_VALENCE && is_partner).then_some((valence, Bond { partner, distance }))
        })
        .collect();
    bonds.sort_by(|a, b| b.0.total_cmp(&a.0));
    let is_nonmetal = electronegativity(element).is_some_and(|value| value >= NONMETAL);
    if is_nonmetal && bonds.first().is_none_or(|(valence, _)| *valence < NONMETAL_BOND) {
        return;
    }
    let mut sum = 0.0;
    let mut kept = 0;
    for (valence, _) in &bonds {
        if *valence < SHELL_PART * sum {
            break;
        }
        sum += valence;
        kept += 1;
    }
    bonds.truncate(kept);
    let own = orbits[index].count() as f64;
    for (valence, bond) in &bonds {
        let share = own / orbits[bond.partner].count().max(1) as f64;
        environments[bond.partner].taking += valence * share;
        environments[bond.partner].taken_bonds += share;
    }
    environments[index].giving = sum;
    environments[index].shell = bonds.into_iter().map(|(_, bond)| bond).collect();
}
