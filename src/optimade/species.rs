//! Which atoms may be at a site?

use crate::crystal::Element;
use crate::diagnostic::Code;
use serde::Deserialize;

/// An item of `species`.
#[derive(Deserialize)]
pub(super) struct Species {
    pub(super) name: String,
    chemical_symbols: Vec<String>,
    concentration: Vec<f64>,
    attached: Option<Vec<String>>,
    nattached: Option<Vec<u64>>,
}

/// An item of `assemblies`: groups of sites of which one at a time is there.
#[derive(Deserialize)]
pub(super) struct Assembly {
    sites_in_groups: Vec<Vec<usize>>,
    group_probabilities: Vec<f64>,
}

/// An element at a site, in this fraction of the cells.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Occupant {
    pub(super) element: Element,
    pub(super) concentration: f64,
}

impl Assembly {
    /// The sites of each group and its probability; a group without one has an impossible one.
    pub(super) fn groups(&self) -> impl Iterator<Item = (&[usize], f64)> {
        let probabilities = self.group_probabilities.iter().copied().chain(std::iter::repeat(f64::NAN));
        self.sites_in_groups.iter().map(Vec::as_slice).zip(probabilities)
    }
}

/// The elements of a species, vacancies left out.
///
/// The standard has two words that are no element: `vacancy`, which leaves a site empty, and `X`, which is something that
/// is not an element and cannot be given a charge.
pub(super) fn occupants(species: &Species) -> Result<Vec<Occupant>, (Code, String)> {
    let name = &species.name;
    let attached = species.attached.iter().flatten().next();
    if attached.is_some() || species.nattached.iter().flatten().any(|count| *count > 0) {
        let what = attached.map_or("atoms", String::as_str);
        return Err((
            Code::SiteHydrogenAttached,
            format!("the species '{name}' has {what} attached without a position"),
        ));
    }
    if species.chemical_symbols.len() != species.concentration.len() || species.concentration.is_empty() {
        return Err((
            Code::OptimadeSpecies,
            format!(
                "the species '{name}' has {} chemical symbols and {} concentrations",
                species.chemical_symbols.len(),
                species.concentration.len()
            ),
        ));
    }
    let mut found = Vec::new();
    for (symbol, &concentration) in species.chemical_symbols.iter().zip(&species.concentration) {
        if !(0.0..=1.0 + 1e-6).contains(&concentration) {
            let message = format!("the concentration of {symbol} in the species '{name}' is {concentration}");
            return Err((Code::SiteOccupancyInvalid, message));
        }
        if symbol == "vacancy" {
            continue;
        }
        let Some(element) = Element::from_symbol(symbol).filter(|element| element.symbol() == symbol) else {
            let message = format!("the species '{name}' holds '{symbol}', which is not a chemical element");
            return Err((Code::OptimadeSpecies, message));
        };
        found.push(Occupant { element, concentration: concentration.min(1.0) });
    }
    Ok(found)
}
