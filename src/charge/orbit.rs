//! Symmetry-equivalent sites, which carry one charge.

use crate::crystal::{Element, Site};
use crate::diagnostic::{Code, Diagnostic};
use std::collections::BTreeMap;

/// A set of symmetry-equivalent sites of one cell.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Orbit {
    pub(crate) element: Element,
    /// Label of the first site.
    pub(crate) label: String,
    /// Indices of the sites.
    pub(crate) sites: Vec<usize>,
}

impl Orbit {
    /// The orbits of a cell, ordered by element, then by first site.
    pub(crate) fn collect(sites: &[Site], orbits: &[usize]) -> Result<Vec<Self>, Diagnostic> {
        if sites.is_empty() {
            return Err(Diagnostic::error(Code::SitesMissing, "there are no atom sites"));
        }
        if sites.len() != orbits.len() {
            let message = format!("{} sites were given with the orbits of {}", sites.len(), orbits.len());
            return Err(Diagnostic::error(Code::SymmetryNotFound, message));
        }
        let mut position: BTreeMap<usize, usize> = BTreeMap::new();
        let mut found: Vec<Self> = Vec::new();
        for (index, (site, orbit)) in sites.iter().zip(orbits).enumerate() {
            if !site.is_full() {
                let message = format!(
                    "site {} has occupancy {}, below {}; charges of shared sites are averages",
                    site.label,
                    site.occupancy,
                    Site::FULL_OCCUPANCY
                );
                return Err(Diagnostic::error(Code::SiteShared, message));
            }
            let at = *position.entry(*orbit).or_insert(found.len());
            match found.get_mut(at) {
                Some(known) if known.element == site.element => known.sites.push(index),
                Some(known) => {
                    let message = format!(
                        "sites {} ({}) and {} ({}) are said to be equivalent",
                        known.label, known.element, site.label, site.element
                    );
                    return Err(Diagnostic::error(Code::SymmetryNotFound, message));
                }
                None => {
                    found.push(Self { element: site.element, label: site.label.clone(), sites: vec![index] });
                }
            }
        }
        found.sort_by_key(|orbit| orbit.element);
        Ok(found)
    }

    /// How many sites the orbit has in the cell.
    pub(crate) fn count(&self) -> i64 {
        i64::try_from(self.sites.len()).unwrap_or(i64::MAX)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use nalgebra::Vector3;

    fn site(label: &str, symbol: &str) -> Site {
        Site::new(label, Element::from_symbol(symbol).expect("known"), Vector3::zeros())
    }

    #[test]
    fn sites_are_collected_by_orbit() {
        let sites = [site("O1", "O"), site("Co1", "Co"), site("O2", "O"), site("Co2", "Co")];
        let orbits = Orbit::collect(&sites, &[7, 3, 7, 5]).expect("good");
        let seen: Vec<_> =
            orbits.iter().map(|orbit| (orbit.label.as_str(), orbit.sites.as_slice())).collect();
        assert_eq!(seen, [("O1", &[0, 2][..]), ("Co1", &[1]), ("Co2", &[3])]);
    }

    #[test]
    fn nonsense_is_refused() {
        let sites = [site("O1", "O"), site("Co1", "Co")];
        let code =
            |sites: &[Site], orbits: &[usize]| Orbit::collect(sites, orbits).map_err(|error| error.code);
        assert_eq!(code(&[], &[]), Err(Code::SitesMissing));
        assert_eq!(code(&sites, &[0]), Err(Code::SymmetryNotFound));
        assert_eq!(code(&sites, &[0, 0]), Err(Code::SymmetryNotFound));
        for occupancy in [0.5, f64::NAN] {
            let shared = [Site { occupancy, ..site("O1", "O") }];
            assert_eq!(code(&shared, &[0]), Err(Code::SiteShared));
        }
    }
}
