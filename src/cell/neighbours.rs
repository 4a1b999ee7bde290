//! Pairs of points that are near each other in a periodic lattice.

use super::lattice::{Lattice, LatticeError};
use super::reduce::Reduced;
use nalgebra::Vector3;

/// Two points, the second possibly in another cell, and how far apart they are.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Contact {
    /// Index of the first point.
    pub first: usize,
    /// Index of the second point, not below `first`.
    pub second: usize,
    /// Cartesian vector from the first to the second, in Å.
    pub vector: Vector3<f64>,
}

impl Contact {
    /// Distance in Å.
    #[must_use]
    pub fn distance(&self) -> f64 {
        self.vector.norm()
    }
}

/// All pairs of points at most `cutoff` Å apart, each pair once, sorted by `(first, second, distance)`.
///
/// `positions` are fractional. A point's own images count when they are that near; a point and itself does not.
/// Points are sorted into a grid of bins, so the work grows with the number of points times the number of neighbours.
///
/// # Errors
/// As [`Lattice::from_basis`], should the lattice turn out to be degenerate.
pub fn contacts_within(
    lattice: &Lattice,
    positions: &[Vector3<f64>],
    cutoff: f64,
) -> Result<Vec<Contact>, LatticeError> {
    let found = contacts_up_to(lattice, positions, cutoff, usize::MAX)?;
    Ok(found.unwrap_or_default())
}

/// As [`contacts_within`], unless some point has more than `limit` contacts with points after it: then the index of the
/// first such point is the error, and the search ends there, so that a crowd of points costs neither time nor memory.
///
/// # Errors
/// As [`contacts_within`].
pub fn contacts_up_to(
    lattice: &Lattice,
    positions: &[Vector3<f64>],
    cutoff: f64,
    limit: usize,
) -> Result<Result<Vec<Contact>, usize>, LatticeError> {
    let reduced = Reduced::new(lattice)?;
    let frame = reduced.lattice();
    let grid = Grid::new(frame, lattice, positions, cutoff);
    let mut contacts = Vec::new();
    for (first, home) in grid.points.iter().enumerate() {
        let before = contacts.len();
        let is_complete = grid.visit(home, |second, vector| {
            let is_self = second == first && vector.norm_squared() < 1e-12;
            let counted = second > first || (second == first && is_upper_half(&vector));
            if counted && !is_self && vector.norm_squared() <= cutoff * cutoff {
                contacts.push(Contact { first, second, vector });
            }
            contacts.len() - before <= limit
        });
        if !is_complete {
            return Ok(Err(first));
        }
    }
    contacts.sort_by(|a, b| {
        (a.first, a.second).cmp(&(b.first, b.second)).then(a.distance().total_cmp(&b.distance()))
    });
    Ok(Ok(contacts))
}

/// The neighbours of one point: index and distance in Å of every point at most `cutoff` Å away, nearest first.
pub type Neighbours = Vec<(usize, f64)>;

/// The neighbours of some of the points, in the order of `centres`. Own images count; a point itself does not.
///
/// # Errors
/// As [`contacts_within`].
pub fn neighbours_of(
    lattice: &Lattice,
    positions: &[Vector3<f64>],
    centres: &[usize],
    cutoff: f64,
) -> Result<Vec<Neighbours>, LatticeError> {
    let reduced = Reduced::new(lattice)?;
    let frame = reduced.lattice();
    let grid = Grid::new(frame, lattice, positions, cutoff);
    let around = |&centre: &usize| {
        let mut found = Neighbours::new();
        let Some(home) = grid.points.get(centre) else { return found };
        grid.visit(home, |other, vector| {
            let squared = vector.norm_squared();
            if squared <= cutoff * cutoff && (other != centre || squared >= 1e-12) {
                found.push((other, squared.sqrt()));
            }
            true
        });
        found.sort_by(|a, b| a.1.total_cmp(&b.1).then(a.0.cmp(&b.0)));
        found
    };
    Ok(centres.iter().map(around).collect())
}

/// The nearest pair of points no further apart than `cutoff` Å, if there is one.
///
/// # Errors
/// As [`contacts_within`].
pub fn closest_contact(
    lattice: &Lattice,
    positions: &[Vector3<f64>],
    cutoff: f64,
) -> Result<Option<Contact>, LatticeError> {
    let contacts = contacts_within(lattice, positions, cutoff)?;
    Ok(contacts.into_iter().min_by(|a, b| a.distance().total_cmp(&b.distance())))
}

/// One of each pair of opposite vectors.
fn is_upper_half(v: &Vector3<f64>) -> bool {
    const SMALL: f64 = 1e-9;
    if v.z.abs() > SMALL {
        v.z > 0.0
    } else if v.y.abs() > SMALL {
        v.y > 0.0
    } else {
        v.x > 0.0
    }
}

struct Point {
    fractional: Vector3<f64>,
    bin: [i64; 3],
}

struct Grid<'a> {
    frame: &'a Lattice,
    points: Vec<Point>,
    counts: [i64; 3],
    reach: [i64; 3],
    bins: Vec<Vec<usize>>,
}

impl<'a> Grid<'a> {
    #[allow(clippy::cast_possible_truncation, reason = "bin numbers are small: lengths are limited to 1e4 Å")]
    #[allow(clippy::cast_precision_loss, reason = "bin counts are far below 2^52")]
    fn new(frame: &'a Lattice, given: &Lattice, positions: &[Vector3<f64>], cutoff: f64) -> Self {
        let distances = frame.face_distances();
        let most = (positions.len() as f64).cbrt().ceil().max(1.0);
        let counts: [i64; 3] =
            [0, 1, 2].map(|i| (distances[i] / cutoff.max(1e-3)).floor().clamp(1.0, most) as i64);
        let reach: [i64; 3] = [0, 1, 2].map(|i| (cutoff * counts[i] as f64 / distances[i]).ceil() as i64);
        let change = frame.inverse() * given.basis();
        let points: Vec<Point> = positions
            .iter()
            .map(|position| {
                let fractional = (change * position).map(|x| x - x.floor());
                let bin =
                    [0, 1, 2].map(|i| ((fractional[i] * counts[i] as f64) as i64).clamp(0, counts[i] - 1));
                Point { fractional, bin }
            })
            .collect();
        let mut bins = vec![Vec::new(); usize::try_from(counts[0] * counts[1] * counts[2]).unwrap_or(1)];
        for (index, point) in points.iter().enumerate() {
            bins[bin_index(&counts, &point.bin)].push(index);
        }
        Self { frame, points, counts, reach, bins }
    }

    /// Calls `found` for the points in the bins around one, as long as it returns true. Returns whether it always did.
    #[allow(clippy::cast_precision_loss, reason = "cell numbers are far below 2^52")]
    fn visit(&self, home: &Point, mut found: impl FnMut(usize, Vector3<f64>) -> bool) -> bool {
        let ranges = [0, 1, 2].map(|i| (home.bin[i] - self.reach[i])..=(home.bin[i] + self.reach[i]));
        for i in ranges[0].clone() {
            for j in ranges[1].clone() {
                for k in ranges[2].clone() {
                    let bin = [i, j, k];
                    let wrapped = [0, 1, 2].map(|a| bin[a].rem_euclid(self.counts[a]));
                    let shift = Vector3::from_fn(|a, _| bin[a].div_euclid(self.counts[a]) as f64);
                    for &other in &self.bins[bin_index(&self.counts, &wrapped)] {
                        let difference = self.points[other].fractional + shift - home.fractional;
                        if !found(other, self.frame.to_cartesian(&difference)) {
                            return false;
                        }
                    }
                }
            }
        }
        true
    }
}

fn bin_index(counts: &[i64; 3], bin: &[i64; 3]) -> usize {
    usize::try_from((bin[0] * counts[1] + bin[1]) * counts[2] + bin[2]).unwrap_or(0)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::cell::CellParameters;
    use proptest::prelude::*;

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(64))]
        #[test]
        fn equals_all_pairs_in_a_block_of_cells(
            lengths in [2.5..7.0_f64, 2.5..7.0, 2.5..7.0],
            angles in [70.0..110.0_f64, 70.0..110.0, 70.0..110.0],
            points in proptest::collection::vec([0.0..1.0_f64, 0.0..1.0, 0.0..1.0], 1..6),
            cutoff in 1.0..4.0_f64,
        ) {
            let Ok(lattice) = Lattice::from_parameters(&CellParameters { lengths, angles }) else { return Ok(()) };
            let positions: Vec<_> = points.into_iter().map(Vector3::from).collect();
            // Oracle: every pair in a block of 9 x 9 x 9 cells, halved because each pair appears in both directions.
            let mut directed = 0;
            for a in &positions { for b in &positions {
                for i in -4..=4 { for j in -4..=4 { for k in -4..=4 {
                    let shift = Vector3::new(f64::from(i), f64::from(j), f64::from(k));
                    let distance = lattice.to_cartesian(&(b + shift - a)).norm();
                    if distance > 1e-6 && distance <= cutoff { directed += 1; }
                }}}
            }}
            let found = contacts_within(&lattice, &positions, cutoff).expect("a good lattice");
            prop_assert_eq!(found.len() * 2, directed);
            let all: Vec<usize> = (0..positions.len()).collect();
            let around = neighbours_of(&lattice, &positions, &all, cutoff).expect("a good lattice");
            prop_assert_eq!(around.iter().map(Vec::len).sum::<usize>(), directed);
        }
    }
}
