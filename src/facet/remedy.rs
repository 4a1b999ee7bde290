//! What removes the bound charge of a termination.
//!
//! A termination of bound charge `σ A` (e per primitive surface cell) is neutral when the charge `−σ A` is added. Each
//! remedy is a coverage, the amount per primitive surface cell, with the smallest number of cells in which it is a whole
//! number. Coverages above what the layer holds are left out.

use super::stacking::{Stacking, Termination};
use crate::crystal::Element;
use crate::exact::Ratio;
use crate::polarization::Component;
use std::collections::BTreeMap;

/// What is changed at the surface.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum RemedyKind {
    /// Free electrons gather at the surface.
    Electrons,
    /// Holes gather at the surface.
    Holes,
    /// Ions of the top layer are taken away; in a slab they may be put on the other side.
    Remove,
    /// Ions of the layer that would come next are added.
    Add,
    /// Protons are bound, on an oxide as hydroxyl groups.
    Hydrogen,
    /// Hydroxide ions are bound.
    Hydroxide,
    /// Ions of the top layer are replaced by ions with one charge more or less.
    Substitute,
}

/// One way of making a termination neutral.
#[derive(Debug, Clone, PartialEq)]
pub struct Remedy {
    /// What is changed.
    pub kind: RemedyKind,
    /// The ion that is taken away, added or replaced, with its charge in e.
    pub ion: Option<(Element, i64)>,
    /// Charge in e of the ion that comes in its place, for a substitution.
    pub replaced_by: Option<i64>,
    /// Amount per primitive surface cell.
    pub coverage: Component,
    /// Smallest number of primitive surface cells in which the amount is a whole number; absent where the coverage is
    /// not a fraction fixed by symmetry.
    pub cells: Option<u32>,
}

impl Remedy {
    /// The remedies of a termination. `ions` gives element and charge of each atom of the primitive cell.
    #[must_use]
    pub fn list(stacking: &Stacking, termination: &Termination, ions: &[(Element, i64)]) -> Vec<Self> {
        if termination.is_neutral {
            return Vec::new();
        }
        let sigma = termination.charge;
        let is_positive = sigma.value() > 0.0;
        let magnitude = scaled(sigma, if is_positive { 1 } else { -1 });
        let Some(magnitude) = magnitude else { return Vec::new() };
        let plain = |kind| Self::new(kind, None, None, magnitude);
        let mut remedies = vec![plain(if is_positive { RemedyKind::Electrons } else { RemedyKind::Holes })];
        for (ion, count) in tally(&stacking.layers[termination.top].atoms, ions) {
            // Taking away x ions of charge Z changes the charge by −x Z.
            if (ion.1 > 0) == is_positive {
                remedies.extend(Self::within(RemedyKind::Remove, ion, None, scaled(sigma, ion.1), count));
            }
        }
        for (ion, count) in tally(&stacking.layers[termination.bottom].atoms, ions) {
            if ion.1 != 0 && (ion.1 > 0) != is_positive {
                remedies.extend(Self::within(RemedyKind::Add, ion, None, scaled(sigma, -ion.1), count));
            }
        }
        remedies.push(plain(if is_positive { RemedyKind::Hydroxide } else { RemedyKind::Hydrogen }));
        for (ion, count) in tally(&stacking.layers[termination.top].atoms, ions) {
            let other = ion.1 + if is_positive { -1 } else { 1 };
            if ion.1 > 0 && other > 0 {
                remedies.extend(Self::within(
                    RemedyKind::Substitute,
                    ion,
                    Some(other),
                    Some(magnitude),
                    count,
                ));
            }
        }
        remedies
    }

    fn new(
        kind: RemedyKind,
        ion: Option<(Element, i64)>,
        replaced_by: Option<i64>,
        coverage: Component,
    ) -> Self {
        let cells = match coverage {
            Component::Exact(ratio) => u32::try_from(ratio.denominator()).ok(),
            Component::Free(_) => None,
        };
        Self { kind, ion, replaced_by, coverage, cells }
    }

    fn within(
        kind: RemedyKind,
        ion: (Element, i64),
        replaced_by: Option<i64>,
        coverage: Option<Component>,
        most: usize,
    ) -> Option<Self> {
        let coverage = coverage?;
        #[allow(clippy::cast_precision_loss, reason = "numbers of atoms are far below 2^52")]
        let fits = coverage.value() <= most as f64 + 1e-9;
        fits.then(|| Self::new(kind, Some(ion), replaced_by, coverage))
    }

    /// The shape `n × m` of a surface cell of the smallest size, as square as can be; other cells of the same number, also
    /// rotated ones, serve as well.
    #[must_use]
    pub fn shape(&self) -> Option<[u32; 2]> {
        let cells = self.cells?;
        let n = (1..=cells).take_while(|n| n * n <= cells).filter(|n| cells % n == 0).last()?;
        Some([n, cells / n])
    }
}

/// The charge divided by a whole number.
fn scaled(charge: Component, by: i64) -> Option<Component> {
    Some(match charge {
        Component::Exact(ratio) => {
            Component::Exact(ratio.checked_div(Ratio::from_integer(i128::from(by))).ok()?)
        }
        #[allow(clippy::cast_precision_loss, reason = "formal charges are small")]
        Component::Free(value) => Component::Free(value / by as f64),
    })
}

fn tally(atoms: &[usize], ions: &[(Element, i64)]) -> BTreeMap<(Element, i64), usize> {
    let mut counts = BTreeMap::new();
    for &atom in atoms {
        *counts.entry(ions[atom]).or_default() += 1;
    }
    counts
}
