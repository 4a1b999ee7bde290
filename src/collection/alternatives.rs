//! Would the answer be another one with other plausible charges?

use crate::charge::{Assignment, charges_text};
use crate::crystal::Crystal;
use crate::polarization::{FormalPolarization, Label};
use crate::symmetry::{Centres, Primitive};

/// Assignments less likely than this are not plausible.
pub const PLAUSIBLE: f64 = 0.01;

/// What another assignment of charges would make of the crystal.
#[derive(Debug, Clone)]
pub struct Alternative {
    /// The charges in the form of `--charges`.
    pub text: String,
    /// The probability of the charges.
    pub probability: f64,
    /// The label they lead to; [`Label::Undefined`] where they lead to none.
    pub label: Label,
    /// Whether label and offset are those of the answer, so that facets keep their offsets too.
    pub is_same: bool,
}

/// The plausible assignments beside the one that was taken.
pub(super) fn alternatives(
    crystal: &Crystal,
    primitive: &Primitive,
    centres: Option<&Centres>,
    assignment: &Assignment,
    formal: &FormalPolarization,
) -> Vec<Alternative> {
    let Some(reasoning) = &assignment.reasoning else { return Vec::new() };
    let others = reasoning.candidates.iter().skip(1);
    others
        .filter(|candidate| candidate.probability >= PLAUSIBLE)
        .map(|candidate| {
            let charges: Vec<i64> = primitive
                .representatives
                .iter()
                .filter_map(|&site| candidate.charges.get(site).copied())
                .collect();
            let other = FormalPolarization::new(primitive, centres, &charges).ok();
            let is_same = other.as_ref().is_some_and(|other| {
                other.label == formal.label
                    && (other.label == Label::Polar || other.electron().offset == formal.electron().offset)
            });
            Alternative {
                text: charges_text(&crystal.sites, &candidate.charges),
                probability: candidate.probability,
                label: other.map_or(Label::Undefined, |other| other.label),
                is_same,
            }
        })
        .collect()
}
