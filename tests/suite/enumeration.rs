//! Basis choices against a listing of every one of them, for cells small enough to list.

use cosetta::polarization::Choices;
use std::collections::BTreeMap;

/// Every way of putting each ion into one of the (2w+1)³ cells around its own, by the change of `p` it makes.
fn list_all(charges: &[i64], window: i64) -> BTreeMap<[i64; 3], u64> {
    fn go(charges: &[i64], window: i64, change: [i64; 3], found: &mut BTreeMap<[i64; 3], u64>) {
        let Some((&first, rest)) = charges.split_first() else {
            *found.entry(change).or_default() += 1;
            return;
        };
        for x in -window..=window {
            for y in -window..=window {
                for z in -window..=window {
                    let next = [change[0] + first * x, change[1] + first * y, change[2] + first * z];
                    go(rest, window, next, found);
                }
            }
        }
    }
    let mut found = BTreeMap::new();
    go(charges, window, [0; 3], &mut found);
    found
}

#[test]
fn free_choices_equal_a_full_listing() {
    // NaCl, MgO, CaF2, Cu2O (half the cell), a II-IV-VI group of three: charges alone decide the counts.
    for (charges, window) in [
        (&[1, -1][..], 2),
        (&[2, -2], 1),
        (&[2, -1, -1], 1),
        (&[1, 1, -2], 1),
        (&[4, -2, -2], 1),
        (&[3, -3, 1, -1], 1),
    ] {
        let choices = Choices::count(charges, window).expect("small");
        let listed = list_all(charges, i64::from(window));
        let total: u64 = listed.values().sum();
        assert_eq!(choices.total.to_string(), total.to_string());
        for (change, ways) in &listed {
            assert_eq!(choices.ways(*change).to_string(), ways.to_string(), "{charges:?} {change:?}");
        }
        let reached = choices.counts.len().pow(3);
        assert_eq!(reached, listed.len(), "{charges:?}");
    }
}
