//! The charge of every site, and where it comes from.

use super::bond_valence::OrbitValence;
use super::evidence::is_bare_ammonium;
use super::given::Given;
use super::inferred::{self, Inferred, MIN_LIKELIHOOD_RATIO, MIN_PROBABILITY};
use super::orbit::Orbit;
use super::parameters::Parameters;
use super::reasoning::{Reasoning, Refusal};
use super::sense;
use super::stated::{self, Stated};
use super::surroundings::Surroundings;
use crate::cell::Lattice;
use crate::crystal::{Element, Formula, Site};
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;
use serde::Serialize;
use std::fmt;

/// Where the charges come from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, schemars::JsonSchema)]
pub enum Source {
    /// Given by the user.
    #[serde(rename = "given")]
    Given,
    /// Stated by the file.
    #[serde(rename = "file")]
    Stated,
    /// Inferred from composition and bonds.
    #[serde(rename = "inferred")]
    Inferred,
}

impl Source {
    /// The source in words.
    #[must_use]
    pub fn describe(self) -> &'static str {
        match self {
            Self::Given => "given on the command line",
            Self::Stated => "stated by the file",
            Self::Inferred => "inferred; --charges fixes them",
        }
    }
}

impl fmt::Display for Source {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Given => "given",
            Self::Stated => "file",
            Self::Inferred => "inferred",
        })
    }
}

/// A whole charge for every site: equal on equivalent sites, adding up to zero, not all zero.
#[derive(Debug, Clone, PartialEq)]
pub struct Assignment {
    /// Charge of each site in units of e.
    pub charges: Vec<i64>,
    /// Where they come from.
    pub source: Source,
    /// What was noticed on the way.
    pub diagnostics: Vec<Diagnostic>,
    /// How the inference went, where there was one.
    pub reasoning: Option<Reasoning>,
    /// The second most likely charges of each site, if charges were inferred and there was a choice.
    pub runner_up: Option<Vec<i64>>,
    /// How many times as likely the charges are as the runner-up.
    pub margin: Option<f64>,
}

/// The charge of every site of one cell. Sites with equal numbers in `orbits` are symmetry-equivalent.
///
/// Charges given by the user come first, then those stated by the file, then those inferred from the composition. A file
/// that states whole charges which are not neutral is refused and not overruled: see the hint of the refusal.
///
/// # Errors
/// No sites, or sites that are partly occupied; charges that are not whole, not neutral, all zero, missing, or different
/// on equivalent sites; without charges given or stated also cells of metals or of one element alone, elements without
/// tabulated oxidation states, compositions without a neutral assignment or with two about equally likely ones.
///
/// ```
/// use cosetta::charge::{Source, assign, charges_text};
/// use cosetta::crystal::{Element, Site};
/// use nalgebra::Vector3;
///
/// let site = |label: &str, element| Site::new(label, element, Vector3::zeros());
/// let magnesium = Element::from_symbol("Mg").unwrap();
/// let sites = [site("Mg1", magnesium), site("O1", Element::OXYGEN)];
/// let assignment = assign(&sites, &[0, 1], None)?;
/// assert_eq!(assignment.charges, [2, -2]);
/// assert_eq!(assignment.source, Source::Inferred);
/// assert_eq!(charges_text(&sites, &assignment.charges), "Mg=2,O=-2");
/// # Ok::<(), cosetta::diagnostic::Diagnostic>(())
/// ```
pub fn assign(sites: &[Site], orbits: &[usize], given: Option<&Given>) -> Result<Assignment, Diagnostic> {
    match known(sites, orbits, given)? {
        Known::Settled(assignment) => Ok(assignment),
        Known::Open(remark) => infer(sites, orbits, None, remark).map_err(|refusal| refusal.diagnostic),
    }
}

/// What is known about the charges before anything is inferred.
#[derive(Debug, Clone)]
pub enum Known {
    /// The charges, given or stated.
    Settled(Assignment),
    /// Nothing that can be used; the file's statement may have been set aside with a remark.
    Open(Option<Diagnostic>),
}

/// The charges that the user gives or the file states. They can be asked for before the symmetry is known, with the
/// sites the file lists as orbits.
///
/// # Errors
/// As [`assign`], but for the inference.
pub fn known(sites: &[Site], orbits: &[usize], given: Option<&Given>) -> Result<Known, Diagnostic> {
    let orbits = Orbit::collect(sites, orbits)?;
    let settled = |charges: Vec<i64>, source| {
        check(sites, &orbits, &charges)?;
        Ok(Known::Settled(Assignment {
            charges,
            source,
            diagnostics: Vec::new(),
            reasoning: None,
            runner_up: None,
            margin: None,
        }))
    };
    let proposed = |refusal| propose(refusal, sites, &orbits);
    if let Some(given) = given {
        return given.charges(sites).and_then(|charges| settled(charges, Source::Given)).map_err(proposed);
    }
    match stated::read(sites).map_err(proposed)? {
        Stated::Charges(charges) => settled(charges, Source::Stated).map_err(proposed),
        Stated::Nothing => Ok(Known::Open(None)),
        Stated::SetAside(remark) => Ok(Known::Open(Some(remark))),
    }
}

/// Equal charges on equivalent sites, not all zero, adding up to zero.
fn check(sites: &[Site], orbits: &[Orbit], charges: &[i64]) -> Result<(), Diagnostic> {
    for orbit in orbits {
        let pairs = orbit.sites.iter().filter_map(|&site| Some((sites.get(site)?, *charges.get(site)?)));
        for ((first, one), (second, other)) in pairs.tuple_windows() {
            if one != other {
                let message = format!(
                    "sites {} and {} are equivalent by symmetry but carry {one:+} and {other:+}",
                    first.label, second.label
                );
                return Err(Diagnostic::error(Code::ChargeBroken, message));
            }
        }
    }
    if charges.iter().all(|&charge| charge == 0) {
        let message = format!(
            "all charges are 0 in {}; formal polarization is defined for insulators made of ions",
            formula(sites)
        );
        return Err(Diagnostic::error(Code::ChargeMetal, message));
    }
    let sum = charges.iter().try_fold(0_i64, |sum, &charge| sum.checked_add(charge));
    if sum == Some(0) { Ok(()) } else { Err(not_neutral(sites, charges, sum.unwrap_or(i64::MAX))) }
}

fn formula(sites: &[Site]) -> Formula {
    Formula::from_elements(sites.iter().map(|site| site.element))
}

fn not_neutral(sites: &[Site], charges: &[i64], sum: i64) -> Diagnostic {
    let formula = formula(sites);
    let units = i64::try_from(formula.units()).unwrap_or(1);
    let divisor = num_integer::gcd(sum, units).max(1);
    let per_unit = match units / divisor {
        1 => format!("{:+}", sum / divisor),
        below => format!("{:+}/{below}", sum / divisor),
    };
    let parts = formula.counts().iter().map(|(element, _)| {
        let of_element = charges_of(sites, charges, *element).map(|(_, charge)| charge);
        format!("{element} {:+}", of_element.fold(0_i64, i64::saturating_add))
    });
    Diagnostic::error(
        Code::ChargeNotNeutral,
        format!(
            "the charges add up to {sum:+} per cell, {per_unit} per formula unit {formula}, and must add up to 0; \
             per cell: {}",
            parts.collect::<Vec<_>>().join(", ")
        ),
    )
}

fn charges_of<'a>(
    sites: &'a [Site],
    charges: &'a [i64],
    element: Element,
) -> impl Iterator<Item = (&'a str, i64)> + Clone {
    let pairs = sites.iter().zip(charges).filter(move |(site, _)| site.element == element);
    pairs.map(|(site, charge)| (site.label.as_str(), *charge))
}

pub(super) fn per_site(orbits: &[Orbit], states: &[i64]) -> Vec<i64> {
    let mut charges = vec![0; orbits.iter().map(|orbit| orbit.sites.len()).sum()];
    for (orbit, &state) in orbits.iter().zip(states) {
        for &site in &orbit.sites {
            if let Some(charge) = charges.get_mut(site) {
                *charge = state;
            }
        }
    }
    charges
}

/// The charges as an option to type, unless they cannot be typed, as when sites of one label differ.
fn option_text(sites: &[Site], charges: &[i64]) -> Option<String> {
    let text = charges_text(sites, charges);
    let read_back = text.parse::<Given>().and_then(|given| given.charges(sites));
    read_back.is_ok_and(|read_back| read_back == charges).then(|| format!("--charges '{text}'"))
}

/// The refusal with what inference would say as something to type, unless it has a hint.
fn propose(refusal: Diagnostic, sites: &[Site], orbits: &[Orbit]) -> Diagnostic {
    if refusal.hint.is_some() {
        return refusal;
    }
    let found = inferred::infer(orbits, None).ok();
    match found.and_then(|found| option_text(sites, &per_site(orbits, &found.best().states))) {
        Some(option) => refusal.hint(option),
        None => refusal,
    }
}

/// Charges from the composition of the orbits and, with positions, from the bonds. A remark made before is passed on.
///
/// # Errors
/// As [`assign`], for the inference; with positions also a probability below [`MIN_PROBABILITY`], an averaged charge that
/// is more likely than whole ones, and oxygen of charge −1 without a bond to another oxygen.
pub fn infer(
    sites: &[Site],
    orbits: &[usize],
    positions: Option<(&Lattice, &Parameters)>,
    remark: Option<Diagnostic>,
) -> Result<Assignment, Box<Refusal>> {
    let orbits = &Orbit::collect(sites, orbits)?;
    check_not_metal(sites, orbits).map_err(|refusal| propose(refusal, sites, orbits))?;
    let surroundings = positions
        .and_then(|(lattice, parameters)| Surroundings::find(lattice, sites, orbits, parameters).ok());
    let found = inferred::infer(orbits, surroundings.as_ref())?;
    let charges = per_site(orbits, &found.best().states);
    let runner_up = found.second().map(|second| per_site(orbits, &second.states));
    let margin = found.ratio();
    let refused = |diagnostic: Diagnostic| {
        let candidates = Reasoning::new(orbits, &found, surroundings.as_ref()).candidates;
        Err(Box::new(Refusal { diagnostic, candidates }))
    };
    if let (Some(_), Some((average, probability))) = (&surroundings, &found.average)
        && *probability > found.probability()
    {
        return refused(average.refusal(orbits));
    }
    if let Some(refusal) = surroundings.as_ref().and_then(|bonds| lone_oxygen(orbits, bonds, &found)) {
        return refused(refusal);
    }
    let is_settled = match margin {
        Some(margin) if surroundings.is_none() => margin >= MIN_LIKELIHOOD_RATIO,
        _ => found.probability() >= MIN_PROBABILITY,
    };
    if let (Some(runner_up), Some(margin), false) = (&runner_up, margin, is_settled) {
        let limit = match &surroundings {
            Some(_) => {
                format!("and has a probability of {:.2}, below {MIN_PROBABILITY}", found.probability())
            }
            None => format!("and the limit is {MIN_LIKELIHOOD_RATIO} times"),
        };
        return refused(ambiguous(sites, &charges, runner_up, margin, &found, &limit));
    }
    let mut diagnostics: Vec<Diagnostic> = remark.into_iter().collect();
    diagnostics.extend(inferred::remarks(orbits, found.best(), surroundings.is_some()));
    if let (Some(_), Some((average, probability))) = (&surroundings, &found.average)
        && *probability >= PLAUSIBLE_AVERAGE
    {
        let message = format!("with a probability of {probability:.2} {}", average.refusal(orbits).message);
        diagnostics.push(Diagnostic::warning(Code::ChargeAveraged, message));
    }
    if !found.is_exact {
        let message = "the search for charges was cut short: a better assignment may exist";
        diagnostics.push(Diagnostic::warning(Code::ChargeSearch, message));
    }
    if let Some(surroundings) = &surroundings {
        diagnostics.extend(bare_ammonium(orbits, surroundings));
    }
    diagnostics.extend(sense::remarks(orbits, &found.best().states));
    let reasoning = Reasoning::new(orbits, &found, surroundings.as_ref());
    if surroundings.as_ref().is_some_and(|bonds| bonds.is_published(orbits, &found.best().states)) {
        diagnostics.extend(poor_fit(&reasoning));
    }
    let reasoning = Some(reasoning);
    Ok(Assignment { charges, source: Source::Inferred, diagnostics, reasoning, runner_up, margin })
}

/// An averaged charge is mentioned from this probability on.
const PLAUSIBLE_AVERAGE: f64 = 0.05;

/// Structures whose global instability index is above this, in valence units, are hardly what the file says: strained
/// crystals stay below 0.5 (0.44 in cubic `KTaO3`).
const DOUBTFUL_INSTABILITY: f64 = 0.6;

/// The refusal where oxygen would be −1 without a bond to another oxygen: atoms are missing, most often hydrogen.
fn lone_oxygen(orbits: &[Orbit], surroundings: &Surroundings, found: &Inferred) -> Option<Diagnostic> {
    let rows = orbits.iter().zip(&found.best().states).zip(&surroundings.environments);
    let lone = rows.filter(|((orbit, state), environment)| {
        orbit.element == Element::OXYGEN && **state == -1 && environment.homonuclear <= 0.0
    });
    let labels: Vec<&str> = lone.map(|((orbit, _), _)| orbit.label.as_str()).collect();
    if labels.is_empty() {
        return None;
    }
    let message = format!(
        "a neutral cell needs oxygen of charge -1 where there is no bond to another oxygen: {}; atoms are missing, most \
         often hydrogen",
        super::listing(labels)
    );
    Some(Diagnostic::error(Code::ChargeHydrogen, message))
}

/// A warning where the bonds do not fit the charges, naming the site that fits worst.
fn poor_fit(reasoning: &Reasoning) -> Option<Diagnostic> {
    let bonds = reasoning.bonds.as_ref().filter(|bonds| bonds.global_instability > DOUBTFUL_INSTABILITY)?;
    #[expect(clippy::cast_precision_loss, reason = "charges are small")]
    let off = |orbit: &OrbitValence| (orbit.sum - orbit.charge as f64).abs();
    let worst = bonds.orbits.iter().max_by(|a, b| off(a).total_cmp(&off(b)))?;
    let message = format!(
        "bond-valence sums are far from the charges: global instability index {:.2}, above {DOUBTFUL_INSTABILITY}; \
         {} has {:+.2} for {:+}",
        bonds.global_instability, worst.label, worst.sum, worst.charge
    );
    Some(Diagnostic::warning(Code::ChargeBonds, message))
}

/// A warning where ammonium ions lack their hydrogen atoms.
fn bare_ammonium(orbits: &[Orbit], surroundings: &Surroundings) -> Option<Diagnostic> {
    let pairs = orbits.iter().zip(&surroundings.environments);
    let bare = pairs.filter(|(orbit, environment)| is_bare_ammonium(orbit.element, environment));
    let labels: Vec<&str> = bare.map(|(orbit, _)| orbit.label.as_str()).collect();
    if labels.is_empty() {
        return None;
    }
    let message = format!(
        "nitrogen without any bond was taken for an ammonium ion of charge +1 whose hydrogen atoms are missing: {}",
        super::listing(labels)
    );
    Some(Diagnostic::warning(Code::ChargeHydrogen, message))
}

fn check_not_metal(sites: &[Site], orbits: &[Orbit]) -> Result<(), Diagnostic> {
    let elements: Vec<Element> = orbits.iter().map(|orbit| orbit.element).dedup().collect();
    let reason = if let [element] = elements[..] {
        format!("{element} is the only element, so its formal charge is 0")
    } else if elements.iter().all(|element| element.is_metal()) {
        format!("all elements of {} are metals", formula(sites))
    } else {
        return Ok(());
    };
    let message = format!("{reason}; formal polarization is defined for insulators made of ions");
    Err(Diagnostic::error(Code::ChargeMetal, message))
}

fn ambiguous(
    sites: &[Site],
    charges: &[i64],
    runner_up: &[i64],
    margin: f64,
    found: &Inferred,
    limit: &str,
) -> Diagnostic {
    let best = charges_text(sites, charges);
    let second = charges_text(sites, runner_up);
    let how = if margin < 1.005 {
        "no more likely than".into()
    } else {
        format!("only {margin:.2} times as likely as")
    };
    let only_swapped = found.second().is_some_and(|second| {
        second.states.iter().sorted().eq(found.best().states.iter().sorted()) && margin < 1.005
    });
    let reason = if only_swapped { "; nothing tells which site carries which charge" } else { "" };
    let refusal =
        Diagnostic::error(Code::ChargeAmbiguous, format!("{best} is {how} {second} {limit}{reason}"));
    match option_text(sites, charges) {
        Some(option) => refusal.hint(option),
        None => refusal,
    }
}

/// The formula in its usual order, which goes by the mean charge of each element.
#[must_use]
pub fn charged_formula(sites: &[Site], charges: &[i64]) -> Formula {
    formula(sites).by_charge(|element| {
        let of_element = charges_of(sites, charges, element).map(|(_, charge)| charge);
        let (sum, count) =
            of_element.fold((0_i64, 0_u32), |(sum, count), charge| (sum.saturating_add(charge), count + 1));
        #[expect(clippy::cast_precision_loss, reason = "sums of charges of one cell are far below 2^52")]
        let sum = sum as f64;
        sum / f64::from(count.max(1))
    })
}

/// Charges in the form that [`Given`] reads: by element where all its sites agree, else by label.
///
/// Where sites of one label differ the charges cannot be typed; they are then joined by `|`, as in `Co=2|3`.
#[must_use]
pub fn charges_text(sites: &[Site], charges: &[i64]) -> String {
    let mut parts: Vec<String> = Vec::new();
    for (element, _) in charged_formula(sites, charges).counts() {
        let pairs = || charges_of(sites, charges, *element);
        if pairs().map(|(_, charge)| charge).all_equal() {
            parts.extend(pairs().next().map(|(_, charge)| format!("{element}={charge}")));
            continue;
        }
        for label in pairs().map(|(label, _)| label).unique() {
            let of_label = pairs().filter(|(other, _)| *other == label).map(|(_, charge)| charge).unique();
            parts.push(format!("{label}={}", of_label.sorted().join("|")));
        }
    }
    parts.join(",")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostic::Severity;
    use nalgebra::Vector3;
    use proptest::prelude::*;

    /// Sites and orbits from labels such as `Fe1` with their number in the cell; one orbit per label.
    fn cell(list: &[(&str, usize)]) -> (Vec<Site>, Vec<usize>) {
        let mut sites = Vec::new();
        let mut orbits = Vec::new();
        for (orbit, (label, count)) in list.iter().enumerate() {
            let element = Element::from_symbol(label.trim_end_matches(|c: char| c.is_ascii_digit()));
            for _ in 0..*count {
                sites.push(Site::new(*label, element.expect("known"), Vector3::zeros()));
                orbits.push(orbit);
            }
        }
        (sites, orbits)
    }

    fn run(list: &[(&str, usize)], given: Option<&str>) -> Result<Assignment, Diagnostic> {
        let (sites, orbits) = cell(list);
        let given = given.map(str::parse::<Given>).transpose()?;
        assign(&sites, &orbits, given.as_ref())
    }

    /// Whether the answer is the one expected, written as charges or as the code of a refusal.
    fn is_answered(list: &[(&str, usize)], expected: &str) -> bool {
        match (run(list, None), expected.parse::<Given>()) {
            (Ok(found), Ok(given)) => given.charges(&cell(list).0) == Ok(found.charges),
            (Err(refusal), Err(_)) => refusal.code.as_str() == expected,
            _ => false,
        }
    }

    const KTAO3: &[(&str, usize)] = &[("K1", 1), ("Ta1", 1), ("O1", 3)];

    /// Textbook oxidation states: Greenwood & Earnshaw, Chemistry of the Elements (from memory).
    #[test]
    fn textbook_compounds() {
        for (list, expected) in [
            (&[("Na", 1), ("Cl", 1)][..], "Na=1,Cl=-1"),
            (&[("Mg", 1), ("O", 1)], "Mg=2,O=-2"),
            (&[("Al", 2), ("O", 3)], "Al=3,O=-2"),
            (&[("Si", 1), ("O", 2)], "Si=4,O=-2"),
            (&[("Ti", 1), ("O", 2)], "Ti=4,O=-2"),
            (&[("Fe", 1), ("O", 1)], "Fe=2,O=-2"),
            (&[("Fe", 2), ("O", 3)], "Fe=3,O=-2"),
            (&[("Cu", 2), ("O", 1)], "Cu=1,O=-2"),
            (&[("Cu", 1), ("O", 1)], "Cu=2,O=-2"),
            (&[("Mn", 1), ("O", 2)], "Mn=4,O=-2"),
            (&[("Cr", 1), ("O", 3)], "Cr=6,O=-2"),
            (&[("V", 2), ("O", 5)], "V=5,O=-2"),
            (&[("W", 1), ("O", 3)], "W=6,O=-2"),
            (&[("Ce", 1), ("O", 2)], "Ce=4,O=-2"),
            (&[("La", 2), ("O", 3)], "La=3,O=-2"),
            (&[("U", 1), ("O", 2)], "U=4,O=-2"),
            (&[("Pb", 1), ("O", 2)], "Pb=4,O=-2"),
            (&[("Bi", 2), ("O", 3)], "Bi=3,O=-2"),
            (&[("Ba", 1), ("O", 2)], "Ba=2,O=-1"),
            (&[("Na", 2), ("O", 2)], "Na=1,O=-1"),
            (&[("K", 1), ("Ta", 1), ("O", 3)], "K=1,Ta=5,O=-2"),
            (&[("La", 1), ("Al", 1), ("O", 3)], "La=3,Al=3,O=-2"),
            (&[("Pb", 1), ("Ti", 1), ("O", 3)], "Pb=2,Ti=4,O=-2"),
            (&[("Bi", 1), ("Fe", 1), ("O", 3)], "Bi=3,Fe=3,O=-2"),
            (&[("Li", 1), ("Nb", 1), ("O", 3)], "Li=1,Nb=5,O=-2"),
            (&[("Cu", 1), ("Al", 1), ("O", 2)], "Cu=1,Al=3,O=-2"),
            (&[("Ca", 1), ("C", 1), ("O", 3)], "Ca=2,C=4,O=-2"),
            (&[("Ca", 1), ("S", 1), ("O", 4)], "Ca=2,S=6,O=-2"),
            (&[("K", 1), ("N", 1), ("O", 3)], "K=1,N=5,O=-2"),
            (&[("K", 1), ("Cl", 1), ("O", 4)], "K=1,Cl=7,O=-2"),
            (&[("Al", 1), ("P", 1), ("O", 4)], "Al=3,P=5,O=-2"),
            (&[("Mg", 1), ("H", 2), ("O", 2)], "Mg=2,H=1,O=-2"),
            (&[("Li", 1), ("H", 1)], "Li=1,H=-1"),
            (&[("Na", 1), ("Al", 1), ("H", 4)], "Na=1,Al=3,H=-1"),
            (&[("Ga", 1), ("N", 1)], "Ga=3,N=-3"),
            (&[("Si", 3), ("N", 4)], "Si=4,N=-3"),
            (&[("Ga", 1), ("As", 1)], "Ga=3,As=-3"),
            (&[("Al", 1), ("Sb", 1)], "Al=3,Sb=-3"),
            (&[("Li", 3), ("Bi", 1)], "charge-006"),
            (&[("Si", 1), ("C", 1)], "Si=4,C=-4"),
            (&[("Zn", 1), ("S", 1)], "Zn=2,S=-2"),
            (&[("Cd", 1), ("Te", 1)], "Cd=2,Te=-2"),
            (&[("Bi", 2), ("Te", 3)], "Bi=3,Te=-2"),
            (&[("Mo", 1), ("S", 2)], "Mo=4,S=-2"),
            (&[("Mg", 2), ("Si", 1)], "Mg=2,Si=-4"),
            (&[("Ca", 1), ("F", 2)], "Ca=2,F=-1"),
            (&[("Cs", 1), ("Pb", 1), ("I", 3)], "Cs=1,Pb=2,I=-1"),
            (&[("La", 1), ("O", 1), ("F", 1)], "La=3,O=-2,F=-1"),
            (&[("Y", 1), ("Mn", 1), ("O", 3)], "Y=3,Mn=3,O=-2"),
            (&[("Y", 3), ("Al1", 2), ("Al2", 3), ("O", 12)], "Y=3,Al=3,O=-2"),
            // Mixed valence on inequivalent sites.
            (&[("Co1", 2), ("Co2", 4), ("O", 8)], "Co1=2,Co2=3,O=-2"),
            (&[("Pb1", 2), ("Pb2", 4), ("O", 8)], "Pb1=4,Pb2=2,O=-2"),
            (&[("Sb1", 4), ("Sb2", 4), ("O", 16)], "charge-008"),
            (&[("N1", 1), ("N2", 1), ("H", 4), ("O", 3)], "charge-008"),
            // Fe +2 and S −1 for textbooks, which the composition does not tell from Fe +4 and S −2.
            (&[("Fe", 1), ("S", 2)], "charge-008"),
            (&[("Eu", 1), ("Ti", 1), ("O", 3)], "Eu=2,Ti=4,O=-2"),
            // Averages, metals, elements.
            (&[("Li", 2), ("Mn", 4), ("O", 8)], "charge-005"),
            (&[("Fe", 3), ("O", 4)], "charge-005"),
            (&[("Ni", 1), ("Al", 1)], "charge-006"),
            (&[("Cu", 1)], "charge-006"),
            (&[("Si", 2)], "charge-006"),
            (&[("Xe", 1), ("Kr", 1), ("Ar", 1)], "charge-009"),
            (&[("Na", 1), ("Cl", 2), ("F", 2)], "charge-007"),
        ] {
            assert!(is_answered(list, expected), "{list:?} {expected} {:?}", run(list, None));
        }
    }

    #[test]
    fn given_beats_file_beats_inference() {
        let (mut sites, orbits) = cell(&[("Cu1", 1), ("Fe1", 1), ("S1", 2)]);
        for (site, number) in sites.iter_mut().zip([1.0, 3.0, -2.0, -2.0]) {
            site.oxidation = Some(number);
        }
        let stated = assign(&sites, &orbits, None).expect("neutral");
        assert_eq!((stated.source, stated.charges.as_slice()), (Source::Stated, &[1, 3, -2, -2][..]));
        let given = "Cu=2,Fe=2,S=-2".parse().expect("good");
        let given = assign(&sites, &orbits, Some(&given)).expect("neutral");
        assert_eq!((given.source, given.charges.as_slice()), (Source::Given, &[2, 2, -2, -2][..]));
        assert_eq!((given.runner_up, given.margin), (None, None));
        sites[0].oxidation = None;
        let refusal = assign(&sites, &orbits, None).expect_err("Cu+ Fe3+ or Cu2+ Fe2+");
        assert_eq!(refusal.code, Code::ChargeAmbiguous);
    }

    #[test]
    fn zeros_in_the_file_are_placeholders() {
        let (mut sites, orbits) = cell(KTAO3);
        for site in &mut sites {
            site.oxidation = Some(0.0);
        }
        let assignment = assign(&sites, &orbits, None).expect("inferred");
        assert_eq!(assignment.source, Source::Inferred);
        let codes: Vec<_> =
            assignment.diagnostics.iter().map(|remark| (remark.code, remark.severity)).collect();
        assert_eq!(codes, [(Code::ChargeSetAside, Severity::Note), (Code::ChargeInferred, Severity::Note)]);
    }

    #[test]
    fn a_file_that_is_not_neutral_is_refused() {
        let (mut sites, orbits) = cell(KTAO3);
        for (site, number) in sites.iter_mut().zip([1.0, 4.0, -2.0, -2.0, -2.0]) {
            site.oxidation = Some(number);
        }
        let refusal = assign(&sites, &orbits, None).expect_err("sum -1");
        assert_eq!(refusal.code, Code::ChargeNotNeutral);
        assert_eq!(
            refusal.message,
            "the charges add up to -1 per cell, -1 per formula unit KTaO3, and must add up to 0; \
             per cell: K +1, Ta +4, O -6"
        );
        assert_eq!(refusal.hint.as_deref(), Some("--charges 'K=1,Ta=5,O=-2'"));
    }

    #[test]
    fn refusals_of_given_charges() {
        let doubled: Vec<_> = KTAO3.iter().map(|(label, count)| (*label, count * 2)).collect();
        for (list, given, code, part) in [
            (
                KTAO3,
                "Ta=5,K=1,O=-1",
                Code::ChargeNotNeutral,
                "add up to +3 per cell, +3 per formula unit KTaO3",
            ),
            (
                &doubled,
                "Ta=5,K=1,O=-1",
                Code::ChargeNotNeutral,
                "add up to +6 per cell, +3 per formula unit KTaO3",
            ),
            (KTAO3, "Ta=0,K=0,O=0", Code::ChargeMetal, "all charges are 0 in KTaO3"),
            (KTAO3, "Ta=5,K=1,S=-2", Code::ChargeUnknownSite, "'S' is no element or label"),
            (KTAO3, "Ta=5,K=1,O=-3/2", Code::ChargeAveraged, "site O1 was given the charge -3/2"),
            (KTAO3, "K=1", Code::ChargeMissing, "for Ta, O (sites Ta1, O1)"),
        ] {
            let refusal = run(list, Some(given)).expect_err(given);
            assert_eq!(refusal.code, code);
            assert!(refusal.message.contains(part), "{}", refusal.message);
            assert_eq!(refusal.hint.as_deref(), Some("--charges 'K=1,Ta=5,O=-2'"));
        }
    }

    #[test]
    fn equivalent_sites_carry_equal_charges() {
        let (sites, _) = cell(&[("Fe1", 1), ("Fe2", 1), ("O1", 2), ("O2", 1)]);
        let given: Given = "Fe1=2,Fe2=4,O=-2".parse().expect("good");
        assert!(assign(&sites, &[0, 1, 2, 2, 3], Some(&given)).is_ok());
        let refusal = assign(&sites, &[0, 0, 2, 2, 3], Some(&given)).expect_err("broken");
        assert_eq!(refusal.code, Code::ChargeBroken);
        assert_eq!(refusal.message, "sites Fe1 and Fe2 are equivalent by symmetry but carry +2 and +4");
        assert_eq!(refusal.hint.as_deref(), Some("--charges 'Fe=3,O=-2'"));
    }

    #[test]
    fn ambiguity_lists_both_and_ties_say_why() {
        let refusal = run(&[("Cu1", 1), ("Fe1", 1), ("O1", 2)], None).expect_err("close");
        assert_eq!(refusal.code, Code::ChargeAmbiguous);
        assert!(refusal.message.contains("Cu=1,Fe=3,O=-2 is only 1."), "{}", refusal.message);
        assert!(refusal.message.contains("Cu=2,Fe=2,O=-2 and the limit is 2 times"), "{}", refusal.message);
        assert_eq!(refusal.hint.as_deref(), Some("--charges 'Cu=1,Fe=3,O=-2'"));
        let refusal = run(&[("Sb1", 4), ("Sb2", 4), ("O1", 16)], None).expect_err("tie");
        assert!(
            refusal.message.contains("nothing tells which site carries which charge"),
            "{}",
            refusal.message
        );
        assert!(refusal.message.contains("Sb1=3,Sb2=5,O=-2"), "{}", refusal.message);
        assert!(refusal.message.contains("Sb1=5,Sb2=3,O=-2"), "{}", refusal.message);
    }

    #[test]
    fn inference_reports_the_runner_up() {
        let list = [("Gd1", 1), ("Ti1", 1), ("O1", 3)];
        let assignment = run(&list, None).expect("GdTiO3");
        assert_eq!(charges_text(&cell(&list).0, &assignment.charges), "Gd=3,Ti=3,O=-2");
        let runner_up = assignment.runner_up.expect("Gd2 Ti4");
        assert_eq!(charges_text(&cell(&list).0, &runner_up), "Gd=2,Ti=4,O=-2");
        assert!(assignment.margin.expect("a number") >= MIN_LIKELIHOOD_RATIO);
    }

    #[test]
    fn text_by_element_or_label() {
        let (sites, _) = cell(&[("Co1", 1), ("Co2", 1), ("O", 2)]);
        assert_eq!(charges_text(&sites, &[2, 2, -2, -2]), "Co=2,O=-2");
        assert_eq!(charges_text(&sites, &[2, 3, -2, -3]), "Co1=2,Co2=3,O=-3|-2");
        assert_eq!(charges_text(&[], &[]), "");
    }

    #[test]
    fn what_cannot_be_typed_is_no_hint() {
        let (mut sites, orbits) = cell(&[("Sb1", 4), ("Sb2", 4), ("O1", 16)]);
        for site in &mut sites {
            site.label = site.element.symbol().into();
        }
        let refusal = assign(&sites, &orbits, None).expect_err("tie");
        assert_eq!((refusal.code, refusal.hint), (Code::ChargeAmbiguous, None));
    }

    #[test]
    fn sources_have_stable_names() {
        for (source, name) in
            [(Source::Given, "given"), (Source::Stated, "file"), (Source::Inferred, "inferred")]
        {
            assert_eq!(source.to_string(), name);
            assert_eq!(serde_json::to_string(&source).expect("plain"), format!("\"{name}\""));
        }
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(128))]
        /// Wherever the atoms are: whole, neutral, equal on orbits, with probabilities that are some; and no panic.
        #[test]
        fn positions_never_break_the_promises(
            atoms in proptest::collection::vec((proptest::sample::select(
                vec!["O", "S", "Fe", "Cu", "Na", "Ti", "H", "N", "La", "Au", "C", "As"]),
                [0.0..1.0_f64, 0.0..1.0, 0.0..1.0], 0..4_usize), 1..12),
            length in 1.0..9.0_f64,
        ) {
            let site = |(symbol, position, _): &(&str, [f64; 3], usize)| {
                Site::new(*symbol, Element::from_symbol(symbol).expect("known"), Vector3::from(*position))
            };
            let sites: Vec<Site> = atoms.iter().map(site).collect();
            let orbits: Vec<usize> =
                atoms.iter().map(|(symbol, _, orbit)| orbit + 100 * symbol.bytes().map(usize::from).sum::<usize>()).collect();
            let lattice = Lattice::from_basis(nalgebra::Matrix3::identity() * length).expect("a cell");
            let found = infer(&sites, &orbits, Some((&lattice, Parameters::standard())), None);
            if let Ok(found) = found {
                prop_assert_eq!(found.charges.iter().sum::<i64>(), 0);
                for (one, other) in (0..sites.len()).tuple_combinations() {
                    prop_assert!(orbits[one] != orbits[other] || found.charges[one] == found.charges[other]);
                }
                let reasoning = found.reasoning.expect("reasons");
                let sum: f64 = reasoning.candidates.iter().map(|candidate| candidate.probability).sum();
                prop_assert!((0.0..1.0 + 1e-9).contains(&sum), "{}", sum);
                prop_assert!(reasoning.candidates.iter().all(|one| one.charges.iter().sum::<i64>() == 0));
                let index = reasoning.bonds.map_or(0.0, |bonds| bonds.global_instability);
                prop_assert!(index.is_finite() && index >= 0.0);
            }
        }

        /// Whatever the cell: whole, equal on orbits, neutral; and the text reads back to the same charges. Nothing
        /// changes when the cell is doubled or its sites are listed in reverse.
        #[test]
        fn answers_hold_what_they_promise(
            counts in proptest::collection::vec((proptest::sample::select(
                vec!["O", "S", "Fe", "Cu", "Na", "Ti", "H", "N", "La"]), 1..5_usize), 1..6),
        ) {
            let labels: Vec<String> =
                counts.iter().enumerate().map(|(index, (symbol, _))| format!("{symbol}{index}")).collect();
            let list: Vec<(&str, usize)> =
                labels.iter().zip(&counts).map(|(label, (_, count))| (label.as_str(), *count)).collect();
            let (sites, orbits) = cell(&list);
            let reversed_sites: Vec<_> = sites.iter().rev().cloned().collect();
            let reversed_orbits: Vec<_> = orbits.iter().rev().copied().collect();
            let reversed = assign(&reversed_sites, &reversed_orbits, None);
            let doubled = assign(&[sites.clone(), sites.clone()].concat(), &[orbits.clone(), orbits.clone()].concat(), None);
            match assign(&sites, &orbits, None) {
                Ok(found) => {
                    prop_assert_eq!(found.charges.iter().sum::<i64>(), 0);
                    prop_assert_eq!(found.charges.len(), sites.len());
                    let given: Given = charges_text(&sites, &found.charges).parse().expect("typeable");
                    let again = assign(&sites, &orbits, Some(&given)).expect("accepted");
                    prop_assert_eq!(&again.charges, &found.charges);
                    let backwards: Vec<_> = found.charges.iter().rev().copied().collect();
                    prop_assert_eq!(reversed.expect("the same cell").charges, backwards);
                    let twice = [found.charges.clone(), found.charges].concat();
                    prop_assert_eq!(doubled.expect("the same crystal").charges, twice);
                }
                Err(refusal) => {
                    prop_assert_eq!(reversed.expect_err("the same cell").code, refusal.code);
                    prop_assert_eq!(doubled.expect_err("the same crystal").code, refusal.code);
                }
            }
        }
    }
}
