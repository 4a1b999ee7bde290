//! The symmetry-distinct planes of a crystal up to an index.

use crate::symmetry::Primitive;
use nalgebra::{Matrix3, RowVector3};
use std::collections::BTreeSet;

/// One plane for each set of symmetry-equivalent planes, with indices in the axes of the file of at most `limit`.
///
/// Planes that differ only in the direction of the normal are one where an operation turns the normal round, and two in
/// a crystal that tells them apart. Sorted by the largest index, then by the sum of the indices without sign, then by
/// the indices, larger ones first; the plane with the fewest minus signs stands for its set.
#[must_use]
pub fn distinct_planes(primitive: &Primitive, limit: i64) -> Vec<[i64; 3]> {
    let mut candidates: Vec<[i64; 3]> = itertools::iproduct!(-limit..=limit, -limit..=limit, -limit..=limit)
        .map(|(h, k, l)| [h, k, l])
        .filter(|plane| plane.iter().fold(0, |divisor, index| num_integer::gcd(divisor, *index)) == 1)
        .collect();
    candidates.sort_by_key(|plane| {
        let largest = plane.iter().map(|index| index.abs()).max();
        let sum: i64 = plane.iter().map(|index| index.abs()).sum();
        let minus = plane.iter().filter(|index| **index < 0).count();
        (largest, sum, minus, plane.map(|index| -index))
    });
    let mut seen: BTreeSet<[i64; 3]> = BTreeSet::new();
    let mut distinct = Vec::new();
    for plane in candidates {
        let Some(indices) = primitive.plane(plane) else { continue };
        if seen.contains(&indices) {
            continue;
        }
        let row = RowVector3::from(indices);
        for operation in &primitive.operations {
            let rotation: Matrix3<i64> = operation.rotation.map(i64::from);
            // A plane h·r = const is taken to the plane h W⁻¹; over the whole group, W⁻¹ runs over all of it.
            seen.insert((row * rotation).transpose().into());
        }
        distinct.push(plane);
    }
    distinct
}
