//! How an inference went: the candidates, their probabilities, their bonds.

use super::assignment::per_site;
use super::bond_valence::{self, BondValences};
use super::inferred::Inferred;
use super::orbit::Orbit;
use super::surroundings::Surroundings;
use crate::diagnostic::Diagnostic;

/// Why no charges were inferred, and which ones came into question.
#[derive(Debug, Clone, PartialEq)]
pub struct Refusal {
    /// The reason.
    pub diagnostic: Diagnostic,
    /// The most likely assignments, best first.
    pub candidates: Vec<Candidate>,
}

impl From<Diagnostic> for Box<Refusal> {
    fn from(diagnostic: Diagnostic) -> Self {
        Self::new(Refusal { diagnostic, candidates: Vec::new() })
    }
}

/// How an inference went.
#[derive(Debug, Clone, PartialEq)]
pub struct Reasoning {
    /// The probability of the charges.
    pub probability: f64,
    /// The most likely assignments, the one that was taken first.
    pub candidates: Vec<Candidate>,
    /// The probability that some sites share an averaged charge, and those sites.
    pub averaged: Option<(f64, Vec<usize>)>,
    /// Bond-valence sums of the charges, where the positions were used.
    pub bonds: Option<BondValences>,
}

/// One possible assignment.
#[derive(Debug, Clone, PartialEq)]
pub struct Candidate {
    /// Charge of each site in units of e.
    pub charges: Vec<i64>,
    /// Its probability.
    pub probability: f64,
}

impl Reasoning {
    /// Candidates less likely than this are left out.
    const LEAST: f64 = 1e-4;

    pub(super) fn new(orbits: &[Orbit], found: &Inferred, surroundings: Option<&Surroundings>) -> Self {
        let pairs = found.arrangements.iter().zip(&found.probabilities).enumerate();
        let kept = pairs.filter(|(rank, (_, probability))| *rank < 2 || **probability >= Self::LEAST);
        Self {
            probability: found.probability(),
            candidates: kept
                .map(|(_, (arrangement, &probability))| Candidate {
                    charges: per_site(orbits, &arrangement.states),
                    probability,
                })
                .collect(),
            averaged: found
                .average
                .as_ref()
                .map(|(average, probability)| (*probability, average.sites(orbits))),
            bonds: surroundings
                .and_then(|surroundings| bond_valence::of_orbits(surroundings, orbits, &found.best().states)),
        }
    }

    /// The probability that a site carries a charge, as far as the candidates tell. Where other sites share an averaged
    /// charge, this one is taken to carry what it carries in the best candidate.
    #[must_use]
    pub fn site_probability(&self, site: usize, charge: i64) -> f64 {
        let like = self.candidates.iter().filter(|candidate| candidate.charges.get(site) == Some(&charge));
        let sum: f64 = like.map(|candidate| candidate.probability).sum();
        let is_best = self.candidates.first().is_some_and(|best| best.charges.get(site) == Some(&charge));
        match &self.averaged {
            Some((probability, sites)) if is_best && !sites.contains(&site) => (sum + probability).min(1.0),
            _ => sum.min(1.0),
        }
    }
}
