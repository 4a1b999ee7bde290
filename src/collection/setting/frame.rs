//! What is needed to move a structure: its symmetry, primitive cell and centres, searched with shared sites as one kind.

use super::Axes;
use super::source::scaled;
use crate::cell::{Reduced, contacts_within};
use crate::collection::classification::{Classification, Settings};
use crate::crystal::{AsymmetricUnit, Crystal, ExpandTolerance};
use crate::diagnostic::{Code, Diagnostic};
use crate::symmetry::setting::{Group, Motion, UNIT};
use crate::symmetry::{Centres, Primitive, Symmetry, analyse};
use nalgebra::{Matrix3, Vector3};
use std::borrow::Cow;
use std::collections::BTreeMap;

/// Origins further than this from a fraction of the cell, in fractions, are not taken for one.
const FRACTION: f64 = 1e-6;

/// The symmetry of a structure, and which sites stand on each position.
pub(super) struct Frame<'a> {
    pub(super) symmetry: Cow<'a, Symmetry>,
    pub(super) primitive: Cow<'a, Primitive>,
    pub(super) centres: Cow<'a, Option<Centres>>,
    /// For each position of the search, the sites of the crystal on it.
    pub(super) members: Vec<Vec<usize>>,
}

impl<'a> Frame<'a> {
    /// Takes what the classification found, or searches where it did not get so far.
    pub(super) fn find(
        crystal: &Crystal,
        work: &'a Classification,
        settings: &Settings,
    ) -> Result<Self, Diagnostic> {
        if let (Some(symmetry), Some(primitive)) = (&work.symmetry, &work.primitive) {
            return Ok(Self {
                symmetry: Cow::Borrowed(symmetry),
                primitive: Cow::Borrowed(primitive),
                centres: Cow::Borrowed(&work.centres),
                members: (0..crystal.sites.len()).map(|site| vec![site]).collect(),
            });
        }
        let members = shared_positions(crystal)?;
        let kinds = kinds(crystal, &members);
        let first = members.iter().map(|sites| sites[0]);
        let merged = Crystal {
            lattice: crystal.lattice.clone(),
            sites: first.clone().map(|site| crystal.sites[site].clone()).collect(),
            origins: first.map(|site| crystal.origins[site]).collect(),
        };
        let (symmetry, primitive) = analyse(&merged, &kinds, settings.engine, settings.symmetry_tolerance)?;
        let centres = Centres::find(&primitive)?;
        Ok(Self {
            symmetry: Cow::Owned(symmetry),
            primitive: Cow::Owned(primitive),
            centres: Cow::Owned(centres),
            members,
        })
    }

    /// The new vectors in primitive axes, one a column, and their own origin, if they have one, in the axes of the file.
    pub(super) fn target(&self, axes: Axes) -> Result<(Matrix3<i64>, Option<Vector3<f64>>), Diagnostic> {
        match axes {
            Axes::Primitive => Ok((Matrix3::identity(), None)),
            Axes::File => Ok((self.in_primitive_axes(&Matrix3::identity())?, None)),
            Axes::Standard => {
                let standard = self.symmetry.standard.as_ref().ok_or_else(|| {
                    let message = "this engine gives no standardised cell";
                    Diagnostic::error(Code::BuildStandard, message).hint("--engine moyo")
                })?;
                Ok((self.in_primitive_axes(&standard.axes)?, Some(standard.origin)))
            }
        }
    }

    /// Possible origins in the axes of the file: its own origin where that is a centre, or where there are no centres; else
    /// all centres, the ones of the highest site symmetry first, and the nearest of these.
    pub(super) fn origins(&self) -> Vec<Vector3<f64>> {
        let Some(centres) = self.centres.as_ref() else { return vec![Vector3::zeros()] };
        let distance = |origin: &Vector3<f64>| {
            self.primitive.lattice.to_cartesian(&self.primitive.from_cell(origin)).norm()
        };
        let chosen = self.nearest_image(&centres.origin().position);
        if distance(&chosen) <= self.primitive.tolerance {
            return vec![chosen];
        }
        let mut found: Vec<_> = centres
            .classes
            .iter()
            .map(|centre| (centre.order, self.nearest_image(&centre.position)))
            .collect();
        // Distances that differ by rounding only are equal; the order of the classes is kept then.
        let rounded = |origin: &Vector3<f64>| (distance(origin) * 1e3).round();
        found.sort_by(|a, b| b.0.cmp(&a.0).then(rounded(&a.1).total_cmp(&rounded(&b.1))));
        found.into_iter().map(|(_, origin)| origin).collect()
    }

    /// Of a position in primitive axes and its lattice translations the one nearest to the origin, in the axes of the file.
    fn nearest_image(&self, position: &Vector3<f64>) -> Vector3<f64> {
        let lattice = &self.primitive.lattice;
        let nearest = Reduced::new(lattice)
            .map(|reduced| reduced.shortest_image(&lattice.to_cartesian(position)))
            .map_or_else(|_| position.map(|x| x - x.round()), |vector| lattice.to_fractional(&vector));
        self.primitive.to_cell(&nearest)
    }

    /// Lattice vectors in primitive axes, which are whole numbers.
    fn in_primitive_axes(&self, axes: &Matrix3<f64>) -> Result<Matrix3<i64>, Diagnostic> {
        let columns = [0, 1, 2].map(|axis| self.primitive.from_cell(&axes.column(axis).into_owned()));
        let exact = Matrix3::from_columns(&columns);
        let whole = exact.map(f64::round);
        if (exact - whole).abs().max() > 1e-3 {
            return Err(Diagnostic::error(
                Code::SymmetryNotFound,
                "the vectors of the cell are no lattice vectors",
            ));
        }
        #[allow(
            clippy::cast_possible_truncation,
            reason = "lattice vectors of one cell in another are small"
        )]
        Ok(whole.map(|entry| entry as i64))
    }

    /// Whether the operations of the file are all there are in these axes.
    pub(super) fn is_stated_in_full(&self, unit: &AsymmetricUnit, axes: Axes) -> bool {
        let Some(group) = file_group(unit) else { return false };
        let translations =
            self.symmetry.operations.iter().filter(|operation| operation.is_translation()).count();
        match axes {
            Axes::File => group.order() >= self.symmetry.operations.len(),
            Axes::Standard | Axes::Primitive => {
                group.translations() == translations
                    && point_group_order(&group) >= self.primitive.operations.len()
            }
        }
    }

    /// The origin as an exact fraction of the file's cell, in units of 1/[`UNIT`]: by the inversion of the file's own group
    /// where it has one, else as it is if it is a fraction.
    pub(super) fn exact_origin(&self, group: &Group, origin: &Vector3<f64>) -> Option<[i64; 3]> {
        let unit = f64::from(UNIT);
        #[allow(clippy::cast_possible_truncation, reason = "a few times UNIT at most")]
        let whole = |v: Vector3<f64>| <[i64; 3]>::from(v.map(|x| x.round() as i64));
        if self.centres.is_none() {
            let scaled = origin * 24.0;
            let miss = (scaled - scaled.map(f64::round)).abs().max() / 24.0;
            return (miss < FRACTION).then(|| whole(scaled.map(f64::round) * (unit / 24.0)));
        }
        let limit = self.wide_reach();
        let inversions = group.motions().iter().filter(|motion| motion.to_operation().is_inversion());
        let candidates = inversions.filter_map(|motion| {
            let translation = Vector3::from(motion.translation().map(f64::from)) / unit;
            let cells = (origin * 2.0 - translation).map(f64::round);
            let miss = (translation + cells) / 2.0 - origin;
            let doubled = whole((translation + cells) * unit);
            let distance = self.primitive.lattice.to_cartesian(&self.primitive.from_cell(&miss)).norm();
            let is_exact = doubled.iter().all(|units| units % 2 == 0);
            (distance <= limit && is_exact).then(|| (distance, doubled.map(|units| units / 2)))
        });
        candidates.min_by(|a, b| a.0.total_cmp(&b.0)).map(|(_, shift)| shift)
    }

    /// Translations within this of a fraction, in Å, are taken for one: a thousandth is what four digits of a coordinate
    /// leave open, and the tolerance of the search what the user does.
    pub(super) fn reach(&self) -> f64 {
        self.primitive.tolerance.max(1e-3)
    }

    /// The same where a fraction is known to be meant.
    pub(super) fn wide_reach(&self) -> f64 {
        (4.0 * self.primitive.tolerance).clamp(0.02, 0.24)
    }

    /// The number of the space group, if the operations of a structure in new axes are all of those found.
    pub(super) fn number(&self, unit: &AsymmetricUnit, axes: &Matrix3<f64>) -> Option<u16> {
        let group = file_group(unit)?;
        let (numerators, denominator) = self.primitive.vectors();
        #[allow(clippy::cast_precision_loss, reason = "small whole numbers")]
        let primitive = numerators.map(|entry| entry as f64 / denominator as f64);
        let points = scaled(1, axes.determinant() / primitive.determinant());
        let is_whole =
            group.translations() == points && point_group_order(&group) == self.primitive.operations.len();
        is_whole.then_some(self.symmetry.number)
    }
}

/// The operations of a structure as a group, if they are one.
pub(super) fn file_group(unit: &AsymmetricUnit) -> Option<Group> {
    let motions: Vec<Motion> = unit.operations.iter().map(Motion::from_operation).collect::<Option<_>>()?;
    Group::generate(motions.iter().copied(), motions.len().max(1))
}

/// Sites of a crystal grouped by position: partly occupied ones that coincide share one.
fn shared_positions(crystal: &Crystal) -> Result<Vec<Vec<usize>>, Diagnostic> {
    let mut leader: Vec<usize> = (0..crystal.sites.len()).collect();
    if !crystal.is_ordered() {
        let positions: Vec<_> = crystal.sites.iter().map(|site| site.position).collect();
        let contacts =
            contacts_within(&crystal.lattice, &positions, ExpandTolerance::default().merge_partial)
                .map_err(|error| crate::crystal::lattice_refusal(&error))?;
        for contact in contacts {
            let (one, other) = (leader[contact.first], leader[contact.second]);
            let (low, high) = (one.min(other), one.max(other));
            leader.iter_mut().filter(|entry| **entry == high).for_each(|entry| *entry = low);
        }
    }
    let mut groups: BTreeMap<usize, Vec<usize>> = BTreeMap::new();
    for (site, leader) in leader.into_iter().enumerate() {
        groups.entry(leader).or_default().push(site);
    }
    Ok(groups.into_values().collect())
}

/// One number for each content of a position: elements, occupancies, stated oxidation numbers.
#[allow(clippy::cast_possible_truncation, reason = "occupancies and oxidation numbers are small")]
fn kinds(crystal: &Crystal, members: &[Vec<usize>]) -> Vec<i32> {
    let mut known = BTreeMap::new();
    members
        .iter()
        .map(|sites| {
            let content = |&site: &usize| {
                let site = &crystal.sites[site];
                let oxidation = site.oxidation.map(|number| (number * 1e3).round() as i64);
                (site.element, (site.occupancy * 1e4).round() as i64, oxidation)
            };
            let mut content: Vec<_> = sites.iter().map(content).collect();
            content.sort_unstable();
            let next = i32::try_from(known.len()).unwrap_or(i32::MAX);
            *known.entry(content).or_insert(next)
        })
        .collect()
}

/// How many rotations there are.
fn point_group_order(group: &Group) -> usize {
    group.order() / group.translations().max(1)
}
