//! Points on a circle of length one: fractional coordinates along one axis, heights of atoms above a plane.

/// Groups points on a circle of length one: neighbours closer than `gap` belong together. The circle is cut at its
/// widest gap. Returns the groups in order from the cut, and for each point the whole number that lifts it there.
#[allow(clippy::cast_possible_truncation, reason = "whole parts of coordinates near one cell")]
pub(crate) fn group_cyclic(coordinates: &[f64], gap: f64) -> (Vec<Vec<usize>>, Vec<i64>) {
    let wrapped: Vec<f64> = coordinates.iter().map(|x| x - x.floor()).collect();
    let mut order: Vec<usize> = (0..wrapped.len()).collect();
    order.sort_by(|&a, &b| wrapped[a].total_cmp(&wrapped[b]));
    let step = |k: usize| {
        let next = (k + 1) % order.len();
        let turn = if next == 0 { 1.0 } else { 0.0 };
        wrapped[order[next]] + turn - wrapped[order[k]]
    };
    // The last of equal widest gaps, so that the cut lies below the point nearest to zero where it can.
    let cut = (0..order.len()).max_by(|&a, &b| step(a).total_cmp(&step(b)).then(a.cmp(&b))).unwrap_or(0);
    let mut groups: Vec<Vec<usize>> = Vec::new();
    let mut lifts = vec![0; wrapped.len()];
    for offset in 0..order.len() {
        let k = (cut + 1 + offset) % order.len();
        let point = order[k];
        let turn = i64::from(cut + 1 + offset >= order.len() && cut + 1 < order.len());
        lifts[point] = turn - coordinates[point].floor() as i64;
        let previous = (k + order.len() - 1) % order.len();
        if offset == 0 || step(previous) > gap {
            groups.push(Vec::new());
        }
        if let Some(group) = groups.last_mut() {
            group.push(point);
        }
    }
    (groups, lifts)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn groups_hold_every_point_once(points in proptest::collection::vec(-1.5..1.5_f64, 1..12), gap in 0.0..0.2_f64) {
            let (groups, lifts) = group_cyclic(&points, gap);
            let mut all: Vec<usize> = groups.iter().flatten().copied().collect();
            #[allow(clippy::cast_precision_loss)]
            let lifted: Vec<f64> = all.iter().map(|&i| points[i] + lifts[i] as f64).collect();
            prop_assert!(lifted.windows(2).all(|w| w[0] <= w[1] + 1e-12), "{:?}", lifted);
            prop_assert!(lifted[lifted.len() - 1] - lifted[0] < 1.0 + 1e-12);
            all.sort_unstable();
            prop_assert_eq!(all, (0..points.len()).collect::<Vec<_>>());
        }
    }
}
