//! The parent cell: the smaller cell of which a crystal is a distorted multiple.
//!
//! A pseudo-translation is a vector that takes every atom near an atom of its kind. It is a fraction of a lattice vector:
//! applied often enough it has to become one. Candidates are the vectors between atoms of one kind, set to the nearest
//! fraction; each is tried on all atoms by an optimal assignment (Kuhn, Nav. Res. Logist. Q. 2, 83 (1955)). The
//! accepted ones are closed to a group, and the atoms that the group joins are averaged.

use super::primitive::Primitive;
use crate::cell::{Lattice, Reduced};
use crate::crystal::{Crystal, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, RowLattice};
use nalgebra::{Matrix3, Vector3};
use pathfinding::kuhn_munkres::kuhn_munkres_min;
use pathfinding::matrix::Matrix;
use std::collections::BTreeSet;

/// Fractions of lattice vectors with denominators up to this are tried.
const MAX_ORDER: i64 = 6;
/// Cells with more atoms than this are not searched.
const MAX_ATOMS: usize = 400;

/// The averaged structure in the cell of the pseudo-translations.
#[derive(Debug, Clone)]
pub struct Parent {
    /// The averaged structure, one site for each atom of the parent cell.
    pub crystal: Crystal,
    /// For each site of the averaged structure, the atoms of the primitive cell it stands for.
    pub members: Vec<Vec<usize>>,
    /// For each atom of the primitive cell, its place in the undistorted structure, in primitive axes.
    pub ideal: Vec<Vector3<f64>>,
    /// How many parent cells make a primitive cell.
    pub cells: usize,
    /// Largest distance in Å of an atom from its averaged position.
    pub max_displacement: f64,
    /// Root mean square of these distances in Å.
    pub rms_displacement: f64,
}

/// A pseudo-translation in units of 1/order of the primitive vectors, and where it takes each atom.
#[derive(Clone)]
struct Pseudo {
    vector: Vector3<f64>,
    targets: Vec<usize>,
    largest: f64,
}

impl Parent {
    /// Searches for the averaged structures of a primitive cell, one for each group of pseudo-translations on the way
    /// to the largest, the largest first; none where the cell has no pseudo-translations. Atoms of different `kinds` are
    /// never joined. No atom is further than `tolerance` Å from its averaged position.
    ///
    /// An averaged structure is a parent only if it has all the rotations of the crystal; that is for the caller to ask
    /// of its symmetry.
    ///
    /// # Errors
    /// `cell-003` or `polarization-003` when the parent lattice is degenerate or a number overflows.
    pub fn find(
        primitive: &Primitive,
        crystal: &Crystal,
        kinds: &[i32],
        tolerance: f64,
    ) -> Result<Vec<Self>, Diagnostic> {
        let count = primitive.positions.len();
        if !(2..=MAX_ATOMS).contains(&count) {
            return Ok(Vec::new());
        }
        let reduced =
            Reduced::new(&primitive.lattice).map_err(|error| crate::crystal::lattice_refusal(&error))?;
        let search = Search::new(primitive, &reduced, kinds, tolerance);
        let mut accepted: Vec<Pseudo> =
            search.candidates().into_iter().filter_map(|vector| search.try_vector(vector)).collect();
        accepted.sort_by(|a, b| a.largest.total_cmp(&b.largest));
        let mut group =
            vec![Pseudo { vector: Vector3::zeros(), targets: (0..count).collect(), largest: 0.0 }];
        let mut parents = Vec::new();
        for pseudo in accepted {
            if group.iter().any(|member| is_lattice_vector(&(member.vector - pseudo.vector))) {
                continue;
            }
            let Some(larger) = search.closed(&group, &pseudo) else { continue };
            if let Some(parent) = search.average(&larger, crystal)? {
                group = larger;
                parents.push(parent);
            }
        }
        parents.reverse();
        Ok(parents)
    }
}

struct Search<'a> {
    primitive: &'a Primitive,
    reduced: &'a Reduced,
    kinds: &'a [i32],
    tolerance: f64,
    /// Positions in the reduced vectors, and the change of axes that leads there.
    places: Vec<Vector3<f64>>,
    change: Matrix3<f64>,
    /// Twice the tolerance over the face distances of the reduced cell.
    reach: Vector3<f64>,
    /// Atoms of each kind, the rarest kind first.
    by_kind: Vec<Vec<usize>>,
}

impl<'a> Search<'a> {
    fn new(primitive: &'a Primitive, reduced: &'a Reduced, kinds: &'a [i32], tolerance: f64) -> Self {
        let change = reduced.lattice().inverse() * primitive.lattice.basis();
        let distinct: BTreeSet<i32> = kinds.iter().copied().collect();
        let mut by_kind: Vec<Vec<usize>> = distinct
            .into_iter()
            .map(|kind| (0..kinds.len()).filter(|&atom| kinds[atom] == kind).collect())
            .collect();
        by_kind.sort_by_key(Vec::len);
        Self {
            primitive,
            reduced,
            kinds,
            tolerance,
            places: primitive.positions.iter().map(|position| change * position).collect(),
            change,
            reach: reduced.lattice().face_distances().map(|distance| 2.0 * tolerance / distance),
            by_kind,
        }
    }

    /// Vectors from the first atom of each kind to the others of it, as fractions of lattice vectors.
    fn candidates(&self) -> Vec<Vector3<f64>> {
        // The order of a translation divides the number of atoms of each kind.
        let divides = |order: &i64| {
            usize::try_from(*order).is_ok_and(|n| self.by_kind.iter().all(|members| members.len() % n == 0))
        };
        let orders: Vec<i64> = (2..=MAX_ORDER).filter(divides).collect();
        let positions = &self.primitive.positions;
        let mut found: Vec<Vector3<f64>> = Vec::new();
        let firsts = self.by_kind.iter().filter_map(|members| members.split_first());
        let pairs = firsts.flat_map(|(first, others)| others.iter().map(|other| (*first, *other)));
        for (first, other) in pairs {
            let step = positions[other] - positions[first];
            for &order in &orders {
                #[allow(clippy::cast_precision_loss, reason = "orders are small")]
                let order = order as f64;
                let vector = (step * order).map(f64::round) / order;
                let miss = self.primitive.lattice.to_cartesian(&(step - vector)).norm();
                let is_new =
                    !is_lattice_vector(&vector) && !found.iter().any(|v| is_lattice_vector(&(v - vector)));
                if miss <= 2.0 * self.tolerance && is_new {
                    found.push(vector);
                }
            }
        }
        found
    }

    /// Distance in Å between two places in the reduced vectors, or infinity where it is above twice the tolerance.
    fn distance(&self, from: &Vector3<f64>, to: &Vector3<f64>) -> f64 {
        let offset = (to - from).map(|x| x - x.round());
        // A wrapped coordinate beyond the reach puts every image beyond it: the planes of atoms are that far apart.
        if (0..3).any(|axis| offset[axis].abs() > self.reach[axis]) {
            return f64::INFINITY;
        }
        self.reduced.shortest_image(&self.reduced.lattice().to_cartesian(&offset)).norm()
    }

    /// Where a vector takes every atom, by an assignment of the least sum of squared distances within each kind. `None`
    /// when some atom is further from its target than twice the tolerance.
    fn try_vector(&self, vector: Vector3<f64>) -> Option<Pseudo> {
        let limit = 2.0 * self.tolerance;
        let step = self.change * vector;
        let mut targets = vec![usize::MAX; self.places.len()];
        let mut largest = 0.0_f64;
        for members in &self.by_kind {
            let mut table: Vec<Vec<f64>> = Vec::with_capacity(members.len());
            for &from in members {
                let place = self.places[from] + step;
                let row: Vec<f64> =
                    members.iter().map(|&to| self.distance(&place, &self.places[to])).collect();
                if row.iter().all(|distance| *distance > limit) {
                    return None;
                }
                table.push(row);
            }
            for (row, to) in assign(&table, limit)?.into_iter().enumerate() {
                let distance = table[row][to];
                if distance > limit {
                    return None;
                }
                largest = largest.max(distance);
                targets[members[row]] = members[to];
            }
        }
        Some(Pseudo { vector, targets, largest })
    }

    /// The group generated by a group and one more translation, or `None` when a product is not acceptable.
    fn closed(&self, group: &[Pseudo], extra: &Pseudo) -> Option<Vec<Pseudo>> {
        let mut larger = group.to_vec();
        let mut power = extra.clone();
        while !larger.iter().any(|member| is_lattice_vector(&(member.vector - power.vector))) {
            for member in group {
                larger.push(self.try_vector(member.vector + power.vector)?);
            }
            power = self.try_vector(power.vector + extra.vector)?;
            if larger.len() > self.kinds.len() {
                return None;
            }
        }
        Some(larger)
    }

    /// The averaged structure, or `None` when atoms are joined inconsistently or move too far.
    fn average(&self, group: &[Pseudo], crystal: &Crystal) -> Result<Option<Parent>, Diagnostic> {
        let positions = &self.primitive.positions;
        let lattice = self.parent_lattice(group)?;
        let back = lattice.inverse() * self.primitive.lattice.basis();
        let mut owner = vec![usize::MAX; positions.len()];
        let mut members: Vec<Vec<usize>> = Vec::new();
        let mut sites = Vec::new();
        let mut ideal = positions.clone();
        let (mut largest, mut squares) = (0.0_f64, 0.0);
        for first in 0..positions.len() {
            if owner[first] != usize::MAX {
                continue;
            }
            // Each member, taken back by its translation, in Å from the first.
            let images: Vec<(usize, Vector3<f64>)> = group
                .iter()
                .map(|pseudo| {
                    let target = pseudo.targets[first];
                    let offset = positions[target] - pseudo.vector - positions[first];
                    (target, self.reduced.shortest_image(&self.primitive.lattice.to_cartesian(&offset)))
                })
                .collect();
            for (target, _) in &images {
                if std::mem::replace(&mut owner[*target], members.len()) != usize::MAX {
                    return Ok(None);
                }
            }
            #[allow(clippy::cast_precision_loss, reason = "numbers of atoms are far below 2^52")]
            let mean = images.iter().map(|(_, offset)| offset).sum::<Vector3<f64>>() / images.len() as f64;
            for (target, offset) in &images {
                ideal[*target] = positions[*target] - self.primitive.lattice.to_fractional(&(offset - mean));
                let displacement = (offset - mean).norm();
                largest = largest.max(displacement);
                squares += displacement * displacement;
            }
            let position = back * (positions[first] + self.primitive.lattice.to_fractional(&mean));
            let site = &crystal.sites[self.primitive.representatives[first]];
            sites.push(Site { position: position.map(|x| x - x.floor()), ..site.clone() });
            members.push(images.into_iter().map(|(target, _)| target).collect());
        }
        if largest > self.tolerance {
            return Ok(None);
        }
        #[allow(clippy::cast_precision_loss, reason = "numbers of atoms are far below 2^52")]
        let rms_displacement = (squares / positions.len() as f64).sqrt();
        let origins = (0..sites.len()).collect();
        Ok(Some(Parent {
            crystal: Crystal { lattice, sites, origins },
            members,
            ideal,
            cells: group.len(),
            max_displacement: largest,
            rms_displacement,
        }))
    }

    /// The lattice of the primitive vectors and the pseudo-translations, with reduced vectors.
    fn parent_lattice(&self, group: &[Pseudo]) -> Result<Lattice, Diagnostic> {
        const UNIT: f64 = 60.0; // every order up to six divides it
        let overflow = |_: Overflow| Diagnostic::error(Code::PolarizationOverflow, Overflow.to_string());
        let mut rows = RowLattice::new(3);
        for axis in 0..3 {
            let mut row = [0_i128; 3];
            row[axis] = 60;
            rows.insert(&row).map_err(overflow)?;
        }
        for pseudo in group {
            #[allow(clippy::cast_possible_truncation, reason = "fractions of one cell")]
            let row = [0, 1, 2].map(|axis| (pseudo.vector[axis] * UNIT).round() as i128);
            rows.insert(&row).map_err(overflow)?;
        }
        let basis = rows.basis();
        #[allow(clippy::cast_precision_loss, reason = "entries are at most sixty")]
        let change = Matrix3::from_fn(|row, column| basis.get(column, row) as f64 / UNIT);
        let refuse = |error| crate::crystal::lattice_refusal(&error);
        let plain = self.primitive.lattice.transformed(&change).map_err(refuse)?;
        Ok(Reduced::new(&plain).map_err(refuse)?.lattice().clone())
    }
}

fn is_lattice_vector(vector: &Vector3<f64>) -> bool {
    vector.iter().all(|x| (x - x.round()).abs() < 1e-6)
}

/// For each row the column assigned to it: the nearest where that is a permutation, else the assignment of the least sum
/// of squares. `None` when some row has no column within the limit.
fn assign(table: &[Vec<f64>], limit: f64) -> Option<Vec<usize>> {
    let nearest: Vec<usize> = table
        .iter()
        .map(|row| (0..row.len()).min_by(|&a, &b| row[a].total_cmp(&row[b])))
        .collect::<Option<_>>()?;
    if nearest.iter().zip(table).any(|(&column, row)| row[column] > limit) {
        return None;
    }
    let distinct: BTreeSet<usize> = nearest.iter().copied().collect();
    if distinct.len() == nearest.len() {
        return Some(nearest);
    }
    // Squared distances in units of 1e-6 Å², cut off far above the limit.
    #[allow(clippy::cast_possible_truncation, reason = "cut off at a hundred Å")]
    let weights = Matrix::from_fn(table.len(), table.len(), |(row, column)| {
        (table[row][column].min(100.0).powi(2) * 1e6).round() as i64
    });
    Some(kuhn_munkres_min(&weights).1)
}
