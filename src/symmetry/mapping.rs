//! Which site an operation takes each site to.

use crate::cell::Lattice;
use crate::crystal::Operation;
use nalgebra::Vector3;
use std::cmp::Ordering;

/// Sites sorted so that the one nearest to a point is found without looking at all of them.
#[derive(Debug)]
pub(crate) struct SiteIndex<'a> {
    lattice: &'a Lattice,
    positions: &'a [Vector3<f64>],
    kinds: &'a [i32],
    /// Wrapped first coordinate and site, sorted by kind and coordinate.
    order: Vec<(i32, f64, usize)>,
    limit: f64,
    reach: Vector3<f64>,
}

/// What an operation does to the sites of a cell: `W x_i + w = x_target(i) + shift(i) + small`.
#[derive(Debug, Clone)]
pub struct Mapping {
    /// Index of the site each site is taken to.
    pub targets: Vec<usize>,
    /// The lattice vector between the image and the target as stored.
    pub shifts: Vec<Vector3<i64>>,
    /// Largest distance in Å between an image and its target.
    pub largest_miss: f64,
}

impl<'a> SiteIndex<'a> {
    /// Indexes sites for searches up to `limit` Å, which has to be well below half the face distances of the lattice.
    pub(crate) fn new(
        lattice: &'a Lattice,
        positions: &'a [Vector3<f64>],
        kinds: &'a [i32],
        limit: f64,
    ) -> Self {
        let mut order: Vec<_> = positions
            .iter()
            .zip(kinds)
            .enumerate()
            .map(|(site, (position, &kind))| (kind, position.x - position.x.floor(), site))
            .collect();
        order.sort_by(|a, b| compare(a.0, a.1, b.0, b.1));
        let reach = lattice.face_distances().map(|distance| limit / distance);
        Self { lattice, positions, kinds, order, limit, reach }
    }

    /// The nearest site of a kind within the limit, and its distance in Å.
    pub(crate) fn nearest(&self, point: &Vector3<f64>, kind: i32) -> Option<(usize, f64)> {
        let x = point.x - point.x.floor();
        let mut best: Option<(usize, f64)> = None;
        // A window that leaves [0, 1) is continued from the other side.
        for shift in [-1.0, 0.0, 1.0] {
            let (low, high) = (x - self.reach.x + shift, x + self.reach.x + shift);
            if high < 0.0 || low > 1.0 {
                continue;
            }
            let start = self.order.partition_point(|entry| compare(entry.0, entry.1, kind, low).is_lt());
            for &(entry_kind, coordinate, site) in &self.order[start..] {
                if entry_kind != kind || coordinate > high {
                    break;
                }
                let offset = (self.positions[site] - point).map(|value| value - value.round());
                if (1..3).any(|axis| offset[axis].abs() > self.reach[axis]) {
                    continue;
                }
                let distance = self.lattice.to_cartesian(&offset).norm();
                if distance <= self.limit && best.is_none_or(|(_, least)| distance < least) {
                    best = Some((site, distance));
                }
            }
        }
        best
    }

    /// Where an operation takes every site, or the first site it takes nowhere.
    #[allow(
        clippy::cast_possible_truncation,
        reason = "coordinates of one cell and its neighbours are small"
    )]
    pub(crate) fn map(&self, operation: &Operation) -> Result<Mapping, usize> {
        let count = self.positions.len();
        let mut mapping = Mapping {
            targets: Vec::with_capacity(count),
            shifts: Vec::with_capacity(count),
            largest_miss: 0.0,
        };
        let mut taken = vec![false; count];
        for (site, position) in self.positions.iter().enumerate() {
            let image = operation.apply(position);
            let (target, distance) = self.nearest(&image, self.kinds[site]).ok_or(site)?;
            if std::mem::replace(&mut taken[target], true) {
                return Err(site);
            }
            mapping.targets.push(target);
            mapping.shifts.push((image - self.positions[target]).map(|x| x.round() as i64));
            mapping.largest_miss = mapping.largest_miss.max(distance);
        }
        Ok(mapping)
    }
}

fn compare(kind_a: i32, a: f64, kind_b: i32, b: f64) -> Ordering {
    kind_a.cmp(&kind_b).then(a.total_cmp(&b))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cell::{CellParameters, Reduced};
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn nearest_equals_a_look_at_all(
            points in proptest::collection::vec([-1.0..2.0_f64, -1.0..2.0, -1.0..2.0], 1..30),
            probe in [-1.0..2.0_f64, -1.0..2.0, -1.0..2.0],
        ) {
            let parameters = CellParameters { lengths: [5.0, 6.0, 7.0], angles: [80.0, 95.0, 110.0] };
            let lattice = Lattice::from_parameters(&parameters).expect("a good cell");
            let positions: Vec<_> = points.into_iter().map(Vector3::from).collect();
            let kinds: Vec<i32> = (0..positions.len()).map(|i| i32::from(i % 2 == 0)).collect();
            let probe = Vector3::from(probe);
            let reduced = Reduced::new(&lattice).expect("reducible");
            let slow = (0..positions.len())
                .filter(|&i| kinds[i] == 1)
                .map(|i| (i, reduced.shortest_image(&lattice.to_cartesian(&(positions[i] - probe))).norm()))
                .filter(|&(_, distance)| distance <= 1.0)
                .min_by(|a, b| a.1.total_cmp(&b.1));
            let fast = SiteIndex::new(&lattice, &positions, &kinds, 1.0).nearest(&probe, 1);
            prop_assert_eq!(fast.map(|f| f.0), slow.map(|s| s.0));
        }
    }
}
