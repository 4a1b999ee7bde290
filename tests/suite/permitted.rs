//! The permitted offsets of all space groups against a search that tries every point of a grid.

use cosetta::exact::Ratio;
use cosetta::polarization::Permitted;
use moyo::data::{HallSymbol, hall_symbol_entry};
use nalgebra::Matrix3;
use std::collections::BTreeSet;

const GRID: i32 = 24;

/// Rotations in a primitive basis of the group with a Hall number, from an independent data base (the crate moyo).
fn rotations(hall_number: i32) -> Vec<Matrix3<i32>> {
    let symbol = HallSymbol::from_hall_number(hall_number).expect("530 Hall symbols");
    symbol.primitive_traverse().into_iter().map(|operation| operation.rotation).collect()
}

/// All points `p` of (1/24)Z³ in `[0, m)³` with `(W − 1) p ∈ m Z³` for every rotation, in 24ths.
fn search(rotations: &[Matrix3<i32>], m: i32) -> BTreeSet<[i32; 3]> {
    let mut found = BTreeSet::new();
    let modulus = GRID * m;
    for x in 0..modulus {
        for y in 0..modulus {
            for z in 0..modulus {
                let p = nalgebra::Vector3::new(x, y, z);
                if rotations.iter().all(|w| (w * p - p).iter().all(|d| d % modulus == 0)) {
                    found.insert([x, y, z]);
                }
            }
        }
    }
    found
}

/// The same points from the permitted offsets: `m (offset + any multiple of the free directions)`, in 24ths.
fn from_permitted(permitted: &Permitted, m: i32) -> BTreeSet<[i32; 3]> {
    let modulus = GRID * m;
    // Steps of 1/144 along the free directions, finer than the grid so that no grid point is missed.
    let fine = 6;
    let mut points: BTreeSet<[i32; 3]> = permitted
        .offsets()
        .iter()
        .map(|offset| {
            offset.map(|ratio: Ratio| {
                let scaled = ratio.numerator() * i128::from(modulus * fine);
                assert_eq!(scaled % ratio.denominator(), 0, "an offset off the grid: {ratio}");
                i32::try_from(scaled / ratio.denominator()).expect("small")
            })
        })
        .collect();
    if permitted.free().len() == 3 {
        // No condition is left: every point of the grid.
        let axis = 0..modulus;
        return itertools::iproduct!(axis.clone(), axis.clone(), axis).map(|(x, y, z)| [x, y, z]).collect();
    }
    for direction in permitted.free() {
        let mut more = BTreeSet::new();
        for point in &points {
            for step in 0..modulus * fine {
                more.insert([0, 1, 2].map(|axis| {
                    let along = i32::try_from(direction[axis]).expect("small") * step;
                    (point[axis] + along).rem_euclid(modulus * fine)
                }));
            }
        }
        points = more;
    }
    points.into_iter().filter(|p| p.iter().all(|x| x % fine == 0)).map(|p| p.map(|x| x / fine)).collect()
}

#[test]
fn equal_a_search_for_every_space_group() {
    let mut groups = BTreeSet::new();
    for hall_number in 1..=530 {
        let entry = hall_symbol_entry(hall_number).expect("530 Hall symbols");
        if !groups.insert(entry.number) {
            continue;
        }
        let rotations = rotations(hall_number);
        let permitted = Permitted::by_rotations(&rotations).expect("small numbers");
        for m in [1, 2] {
            assert_eq!(
                from_permitted(&permitted, m),
                search(&rotations, m),
                "group {} ({}), modulus {m}",
                entry.number,
                entry.hm_short
            );
        }
    }
    assert_eq!(groups.len(), 230);
}

#[test]
fn published_lists() {
    // The number of permitted offsets by group: Fang, Gilbert & Bernevig, Phys. Rev. B 86, 115112 (2012) for rotation
    // axes, the others by an independent search over (1/24)Z³.
    for (number, offsets, free) in [
        (221, 2, 0), // Pm-3m: 0, (½½½)
        (225, 2, 0), // Fm-3m
        (216, 4, 0), // F-43m: quarters
        (229, 1, 0), // Im-3m: zero only
        (230, 1, 0), // Ia-3d
        (206, 1, 0), // Ia-3
        (167, 2, 0), // R-3c
        (123, 4, 0), // P4/mmm
        (139, 2, 0), // I4/mmm
        (82, 4, 0),  // I-4
        (62, 8, 0),  // Pnma
        (12, 4, 0),  // C2/m
        (69, 2, 0),  // Fmmm
        (71, 4, 0),  // Immm
        (194, 2, 0), // P6_3/mmc
        (187, 6, 0), // P-6m2: thirds and halves
        (186, 1, 1), // P6_3mc
        (161, 1, 1), // R3c
        (99, 2, 1),  // P4mm
        (1, 1, 3),
    ] {
        let hall_number = (1..=530)
            .find(|&hall| hall_symbol_entry(hall).is_some_and(|entry| entry.number == number))
            .expect("a group");
        let permitted = Permitted::by_rotations(&rotations(hall_number)).expect("small numbers");
        assert_eq!((permitted.offsets().len(), permitted.free().len()), (offsets, free), "group {number}");
    }
}
