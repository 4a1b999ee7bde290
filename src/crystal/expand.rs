//! From the sites and operations a file lists to all atoms of one cell.

use super::{Operation, Site};
use crate::cell::{Lattice, LatticeError, contacts_up_to};
use crate::diagnostic::{Code, Diagnostic};
use nalgebra::Vector3;
use std::collections::BTreeSet;

/// More contacts of one site than this are not looked into. A file that lists every atom of a general position, and the
/// operations too, makes at most 192 of them.
const MAX_CONTACTS: usize = 200;

/// What a file states: a lattice, the sites it lists, and the operations that make the rest.
#[derive(Debug, Clone)]
pub struct AsymmetricUnit {
    /// Lattice vectors.
    pub lattice: Lattice,
    /// Listed sites, each with an occupancy above zero.
    pub sites: Vec<Site>,
    /// Operations of the space group in the axes of the lattice, centring translations included.
    /// An empty list stands for the identity alone.
    pub operations: Vec<Operation>,
}

/// All atoms of one cell.
#[derive(Debug, Clone)]
pub struct Crystal {
    /// Lattice vectors.
    pub lattice: Lattice,
    /// All sites of the cell, positions in [0, 1).
    pub sites: Vec<Site>,
    /// For each site, the index of the listed site it was made from.
    pub origins: Vec<usize>,
}

/// Distances, in Å, that decide which images are one atom and which atoms cannot be.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ExpandTolerance {
    /// Images of one listed site nearer than this are the same atom on a special position; their mean is taken.
    pub merge: f64,
    /// The same for a partly occupied site, whose images may be the alternatives of an atom that is split about the
    /// special position.
    pub merge_partial: f64,
    /// Different fully occupied atoms nearer than this are refused.
    pub min_distance: f64,
    /// More sites than this in one cell are refused.
    pub max_sites: usize,
}

impl Default for ExpandTolerance {
    /// Merge below 0.1 Å, refuse below 0.5 Å (the shortest bond, H–H in H2, is 0.74 Å), at most 20,000 sites.
    ///
    /// Partly occupied: merge below 0.02 Å. Two digits of 1/3 in an axis of 5 Å are wrong by 0.017 Å, while atoms that were
    /// refined as split are hardly ever less than 0.05 Å from each other (the resolution of the data forbids it).
    fn default() -> Self {
        Self { merge: 0.1, merge_partial: 0.02, min_distance: 0.5, max_sites: 20_000 }
    }
}

impl ExpandTolerance {
    /// The merge distance for a site.
    #[must_use]
    pub fn merge_of(&self, site: &Site) -> f64 {
        if site.is_full() { self.merge } else { self.merge_partial.min(self.merge) }
    }
}

/// Moves onto a special position up to this, in Å, are rounding of doubles and are not reported.
const SILENT_MOVE: f64 = 1e-6;
/// Moves above this, in Å, are more than rounding to four digits explains.
const LARGE_MOVE: f64 = 0.01;
/// So many moved sites are reported one by one, the others by a number.
const MOVES_NAMED: usize = 8;

impl AsymmetricUnit {
    /// Applies the operations, merges coincident images, and tests the distances.
    ///
    /// Images of one site that coincide within the merge distance are replaced by their mean, which projects a
    /// rounded coordinate such as 0.3333 onto the special position. A listed site that coincides with an image of an
    /// earlier one of the same element is dropped with a warning.
    ///
    /// # Errors
    /// No sites, too many sites, two atoms closer than possible, or a position shared beyond full occupancy. On
    /// success the second value holds what was noticed.
    pub fn expand(&self, tolerance: &ExpandTolerance) -> Result<(Crystal, Vec<Diagnostic>), Diagnostic> {
        if self.sites.is_empty() {
            return Err(Diagnostic::error(Code::SitesMissing, "there are no atom sites"));
        }
        let mut noticed = Vec::new();
        let mut moves = Vec::new();
        let mut sites = Vec::new();
        let mut origins = Vec::new();
        for (origin, site) in self.sites.iter().enumerate() {
            if !site.position.iter().all(|x| x.is_finite()) {
                return Err(Diagnostic::error(
                    Code::SitePositionInvalid,
                    format!("site {} has a coordinate that is not a finite number", site.label),
                ));
            }
            let merge = tolerance.merge_of(site);
            moves.extend(self.report_move(origin, merge));
            for position in self.images(site, merge) {
                sites.push(Site { position, ..site.clone() });
                origins.push(origin);
            }
            if sites.len() > tolerance.max_sites {
                return Err(Diagnostic::error(
                    Code::SiteTooMany,
                    format!(
                        "the cell holds more than {} sites, the limit of --max-sites",
                        tolerance.max_sites
                    ),
                )
                .about(origin)
                .hint(format!("--max-sites {}", tolerance.max_sites * 10)));
            }
        }
        let mut crystal = Crystal { lattice: self.lattice.clone(), sites, origins };
        noticed.extend(shortened(moves));
        crystal.resolve_contacts(tolerance, &mut noticed)?;
        Ok((crystal, noticed))
    }

    /// What is to be said about a listed site near a special position: it is set to it.
    fn report_move(&self, origin: usize, merge: f64) -> Option<Diagnostic> {
        let site = &self.sites[origin];
        let limits = self.lattice.face_distances().map(|d| merge / d);
        let (mut sum, mut count) = (Vector3::zeros(), 0_u32);
        for operation in &self.operations {
            let offset = (operation.apply(&site.position) - site.position).map(|x| x - x.round());
            let inside = (0..3).all(|i| offset[i].abs() <= limits[i]);
            if inside && self.lattice.to_cartesian(&offset).norm() <= merge {
                sum += offset;
                count += 1;
            }
        }
        let moved = sum / f64::from(count.max(1));
        let distance = self.lattice.to_cartesian(&moved).norm();
        if distance <= SILENT_MOVE {
            return None;
        }
        let used = site.position + moved;
        let message = format!(
            "site {} lies {distance:.2e} Å from a special position and was set to it: {} was read, {} is used",
            site.label,
            coordinates(&site.position),
            coordinates(&used)
        );
        let found = if distance > LARGE_MOVE {
            Diagnostic::warning(Code::SiteRounded, message)
        } else {
            Diagnostic::note(Code::SiteRounded, message)
        };
        Some(found.about(origin).hint(coordinates(&used)))
    }

    /// Distinct images of a site in [0, 1), coincident ones averaged, in the order of the operations.
    fn images(&self, site: &Site, merge: f64) -> Vec<Vector3<f64>> {
        if self.operations.is_empty() {
            return vec![wrap(&site.position)];
        }
        let limits = self.lattice.face_distances().map(|d| merge / d);
        // Position of the first image of each cluster, sum of the offsets of the others from it, and their number.
        let mut clusters: Vec<(Vector3<f64>, Vector3<f64>, u32)> = Vec::new();
        for operation in &self.operations {
            let image = operation.apply(&site.position);
            let near = clusters.iter_mut().find_map(|cluster| {
                let offset = (image - cluster.0).map(|x| x - x.round());
                let inside = (0..3).all(|i| offset[i].abs() <= limits[i]);
                (inside && self.lattice.to_cartesian(&offset).norm() <= merge).then_some((cluster, offset))
            });
            match near {
                Some((cluster, offset)) => {
                    cluster.1 += offset;
                    cluster.2 += 1;
                }
                None => clusters.push((image, Vector3::zeros(), 1)),
            }
        }
        clusters.iter().map(|(first, sum, count)| wrap(&(first + sum / f64::from(*count)))).collect()
    }
}

impl Crystal {
    /// A crystal from all sites of its cell, each its own origin; distances are tested as in
    /// [`AsymmetricUnit::expand`].
    ///
    /// # Errors
    /// As [`AsymmetricUnit::expand`].
    pub fn from_sites(
        lattice: Lattice,
        sites: Vec<Site>,
        tolerance: &ExpandTolerance,
    ) -> Result<(Self, Vec<Diagnostic>), Diagnostic> {
        AsymmetricUnit { lattice, sites, operations: Vec::new() }.expand(tolerance)
    }

    /// Whether every site is fully occupied.
    #[must_use]
    pub fn is_ordered(&self) -> bool {
        self.sites.iter().all(Site::is_full)
    }

    fn refuse_crowd(&self, site: usize, cutoff: f64) -> Diagnostic {
        let message = format!(
            "more than {MAX_CONTACTS} sites lie within {cutoff} Å of site {}, which is no crystal",
            self.sites[site].label
        );
        Diagnostic::error(Code::SitesTooClose, message).about(self.origins[site])
    }

    /// Drops duplicates, refuses contacts that are too short. Contacts of partly occupied sites are left alone
    /// unless their occupancies on one position add up to more than one.
    fn resolve_contacts(
        &mut self,
        tolerance: &ExpandTolerance,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<(), Diagnostic> {
        let positions: Vec<_> = self.sites.iter().map(|site| site.position).collect();
        let cutoff = tolerance.min_distance.max(tolerance.merge);
        let contacts = contacts_up_to(&self.lattice, &positions, cutoff, MAX_CONTACTS)
            .map_err(|error| lattice_refusal(&error))?
            .map_err(|crowded| self.refuse_crowd(crowded, cutoff))?;
        let mut dropped = BTreeSet::new();
        for contact in &contacts {
            let (first, second) = (&self.sites[contact.first], &self.sites[contact.second]);
            let is_shared = !first.is_full() || !second.is_full();
            let merge = tolerance.merge_of(first).min(tolerance.merge_of(second));
            let is_same_position = contact.distance() <= merge && contact.first != contact.second;
            if is_shared && (!is_same_position || first.occupancy + second.occupancy <= 1.0 + 1e-3) {
                continue;
            }
            if is_same_position && first.element == second.element && first.is_full() {
                dropped.insert(self.origins[contact.second].max(self.origins[contact.first]));
                continue;
            }
            if is_shared {
                return Err(Diagnostic::error(
                    Code::SiteOverfull,
                    format!(
                        "sites {} and {} share a position and their occupancies add up to {:.4}, above 1",
                        first.label,
                        second.label,
                        first.occupancy + second.occupancy
                    ),
                )
                .about(self.origins[contact.second]));
            }
            if contact.distance() < tolerance.min_distance {
                return Err(Diagnostic::error(
                    Code::SitesTooClose,
                    format!(
                        "sites {} and {} are {:.3} Å apart, below --min-distance {}",
                        first.label,
                        second.label,
                        contact.distance(),
                        tolerance.min_distance
                    ),
                )
                .about(self.origins[contact.second])
                .hint(format!("--min-distance {:.3}", contact.distance() / 2.0)));
            }
        }
        if !dropped.is_empty() {
            let mut names: Vec<&str> = Vec::new();
            let mut seen = BTreeSet::new();
            for (site, origin) in self.sites.iter().zip(&self.origins) {
                if dropped.contains(origin) && seen.insert(site.label.as_str()) {
                    names.push(&site.label);
                }
            }
            let message = format!("listed more than once, the repetition was dropped: {}", names.join(", "));
            let found = Diagnostic::warning(Code::SiteListedTwice, message);
            noticed.push(match dropped.first() {
                Some(first) => found.about(*first),
                None => found,
            });
            let keep: Vec<bool> = self.origins.iter().map(|origin| !dropped.contains(origin)).collect();
            let mut kept = keep.iter();
            self.sites.retain(|_| *kept.next().unwrap_or(&true));
            let mut kept = keep.iter();
            self.origins.retain(|_| *kept.next().unwrap_or(&true));
        }
        Ok(())
    }
}

/// The refusal that a faulty lattice becomes.
pub(crate) fn lattice_refusal(error: &LatticeError) -> Diagnostic {
    let code = match error {
        LatticeError::NotFinite { .. } => Code::CellNotFinite,
        _ => Code::CellDegenerate,
    };
    Diagnostic::error(code, error.to_string())
}

/// The first few of the findings about moved sites, and the number of the others.
fn shortened(mut moves: Vec<Diagnostic>) -> Vec<Diagnostic> {
    let rest = moves.split_off(moves.len().min(MOVES_NAMED));
    if let Some(first) = rest.first() {
        let message = format!("{} more sites were set to special positions near them", rest.len());
        let severity = rest.iter().map(|found| found.severity).max().unwrap_or(first.severity);
        let more = Diagnostic::new(severity, Code::SiteRounded, message);
        moves.push(match first.site {
            Some(site) => more.about(site),
            None => more,
        });
    }
    moves
}

/// Fractional coordinates as a file writes them, to eight places.
fn coordinates(position: &Vector3<f64>) -> String {
    let number = |x: &f64| {
        let text = format!("{x:.8}");
        let text = text.trim_end_matches('0').trim_end_matches('.');
        if text == "-0" { "0".to_owned() } else { text.to_owned() }
    };
    position.iter().map(number).collect::<Vec<_>>().join(" ")
}

fn wrap(position: &Vector3<f64>) -> Vector3<f64> {
    // The second step takes care of tiny negative numbers, for which x - floor(x) rounds to 1.
    position.map(|x| x - x.floor()).map(|x| if x >= 1.0 { 0.0 } else { x })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cell::CellParameters;
    use crate::crystal::Element;
    use nalgebra::Matrix3;

    fn hexagonal() -> Lattice {
        let parameters = CellParameters { lengths: [3.25, 3.25, 5.2], angles: [90.0, 90.0, 120.0] };
        Lattice::from_parameters(&parameters).expect("a good cell")
    }

    fn threefold() -> Vec<Operation> {
        let one = Matrix3::new(0, -1, 0, 1, -1, 0, 0, 0, 1);
        [Matrix3::identity(), one, one * one]
            .map(|rotation| Operation { rotation, translation: Vector3::zeros() })
            .to_vec()
    }

    fn site(label: &str, symbol: &str, position: [f64; 3]) -> Site {
        Site::new(label, Element::from_symbol(symbol).expect("known"), Vector3::from(position))
    }

    #[test]
    fn a_crowd_of_sites_is_refused_at_once() {
        // With all pairs in memory this would take 16 bytes × 2e8.
        let lattice = Lattice::from_parameters(&CellParameters { lengths: [4.0; 3], angles: [90.0; 3] })
            .expect("cubic");
        let sites = vec![Site { occupancy: 1e-5, ..site("O1", "O", [0.1, 0.2, 0.3]) }; 20_000];
        let refusal =
            Crystal::from_sites(lattice, sites, &ExpandTolerance::default()).expect_err("no crystal");
        assert_eq!(refusal.code, Code::SitesTooClose);
    }

    #[test]
    fn rounded_special_position_is_projected() {
        let unit = AsymmetricUnit {
            lattice: hexagonal(),
            sites: vec![site("Zn1", "Zn", [0.3333, 0.6667, 0.0])],
            operations: threefold(),
        };
        let (crystal, noticed) = unit.expand(&ExpandTolerance::default()).expect("one atom");
        let hints: Vec<_> = noticed.iter().map(|found| (found.code, found.hint.as_deref())).collect();
        assert_eq!(hints, [(Code::SiteRounded, Some("0.33333333 0.66666667 0"))]);
        assert_eq!(crystal.sites.len(), 1);
        let exact = Vector3::new(1.0 / 3.0, 2.0 / 3.0, 0.0);
        assert!((crystal.sites[0].position - exact).norm() < 1e-9);
    }

    #[test]
    fn split_sites_are_kept_apart() {
        // 0.02 of an axis of 3.25 Å is 0.065 Å: a full atom is on the axis, a third of an atom is beside it.
        for (occupancy, expected) in [(1.0, 1), (0.3333, 3)] {
            let mut zinc = site("Zn1", "Zn", [0.0, 0.01, 0.0]);
            zinc.occupancy = occupancy;
            let unit = AsymmetricUnit { lattice: hexagonal(), sites: vec![zinc], operations: threefold() };
            let (crystal, noticed) = unit.expand(&ExpandTolerance::default()).expect("no clash");
            assert_eq!(crystal.sites.len(), expected);
            assert_eq!(noticed.iter().any(|found| found.code == Code::SiteRounded), expected == 1);
        }
    }

    #[test]
    fn general_position_gives_three() {
        let unit = AsymmetricUnit {
            lattice: hexagonal(),
            sites: vec![site("O1", "O", [0.3, 0.1, 0.2])],
            operations: threefold(),
        };
        let (crystal, _) = unit.expand(&ExpandTolerance::default()).expect("three atoms");
        assert_eq!(crystal.origins, [0, 0, 0]);
    }

    #[test]
    fn duplicates_are_dropped_and_clashes_refused() {
        let twice = vec![site("O1", "O", [0.3, 0.1, 0.2]), site("O2", "O", [-0.1, 0.2, 0.2])];
        let unit = AsymmetricUnit { lattice: hexagonal(), sites: twice, operations: threefold() };
        let (crystal, noticed) = unit.expand(&ExpandTolerance::default()).expect("three atoms");
        assert_eq!(crystal.sites.len(), 3);
        assert_eq!(noticed[0].code, Code::SiteListedTwice);

        let clash = vec![site("O1", "O", [0.3, 0.1, 0.2]), site("Zn1", "Zn", [0.3, 0.1, 0.25])];
        let unit = AsymmetricUnit { lattice: hexagonal(), sites: clash, operations: threefold() };
        let refusal = unit.expand(&ExpandTolerance::default()).expect_err("too close");
        assert_eq!(refusal.code, Code::SitesTooClose);
    }
}
