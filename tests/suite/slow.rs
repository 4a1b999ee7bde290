//! A second, slow way to the polarization, for comparison: no engine, no integer systems, no shortcuts.
//!
//! It looks at all pairs of atoms for translations, takes one atom of each class of translated atoms, sums `Z r` in
//! floating point, and rounds each component to the nearest 24th. Polar means that the average of all rotations is not
//! zero. Every operation is tried on every atom.

use cosetta::cell::Reduced;
use cosetta::collection::Classification;
use cosetta::exact::Ratio;
use cosetta::polarization::{Component, Label};
use nalgebra::{Matrix3, Vector3};

/// Compares a classification with the slow routine.
pub(crate) fn check(work: &Classification) -> Result<(), String> {
    let crystal = work.crystal.as_ref().ok_or("no crystal")?;
    let primitive = work.primitive.as_ref().ok_or("no primitive cell")?;
    let symmetry = work.symmetry.as_ref().ok_or("no symmetry")?;
    let assignment = work.assignment.as_ref().ok_or("no charges")?;
    let tolerance = (4.0 * symmetry.tolerance).max(0.02);

    // Translations by trying all atoms of the first atom's kind as its image.
    let reduced = Reduced::new(&crystal.lattice).map_err(|error| error.to_string())?;
    let near = |a: &Vector3<f64>, b: &Vector3<f64>| {
        reduced.shortest_image(&crystal.lattice.to_cartesian(&(a - b))).norm()
    };
    let same = |i: usize, j: usize| {
        crystal.sites[i].element == crystal.sites[j].element && assignment.charges[i] == assignment.charges[j]
    };
    let count = crystal.sites.len();
    let place = |i: usize| crystal.sites[i].position;
    let find = |from: usize, point: &Vector3<f64>| {
        (0..count)
            .filter(|&j| same(from, j))
            .map(|j| (j, near(&place(j), point)))
            .filter(|&(_, distance)| distance <= tolerance)
            .min_by(|a, b| a.1.total_cmp(&b.1))
            .map(|(j, _)| j)
    };
    let translations: Vec<Vector3<f64>> = (0..count)
        .filter(|&j| same(0, j))
        .map(|j| place(j) - place(0))
        .filter(|t| (0..count).all(|i| find(i, &(place(i) + t)).is_some()))
        .collect();
    if translations.len() * primitive.positions.len() != count {
        return Err(format!(
            "{} translations by search, {} primitive atoms of {count}",
            translations.len(),
            primitive.positions.len()
        ));
    }
    // They are lattice vectors in the primitive basis.
    for t in &translations {
        let miss = primitive.lattice.to_cartesian(&primitive.from_cell(t).map(|x| x - x.round())).norm();
        if miss > tolerance {
            return Err(format!("a translation is {miss:.3} Å off the primitive lattice"));
        }
    }
    // One atom of each class, and the sum.
    let mut seen = vec![false; count];
    let mut sum = Vector3::zeros();
    for i in 0..count {
        if seen[i] {
            continue;
        }
        for t in &translations {
            if let Some(j) = find(i, &(place(i) + t)) {
                seen[j] = true;
            }
        }
        #[allow(clippy::cast_precision_loss)]
        let charge = assignment.charges[i] as f64;
        sum += primitive.from_cell(&place(i)) * charge;
    }
    // Every operation takes every atom to an atom of its kind.
    for operation in &symmetry.operations {
        for i in 0..count {
            if find(i, &operation.apply(&place(i))).is_none() {
                return Err(format!("an operation takes {} nowhere", crystal.sites[i].label));
            }
        }
    }
    check_offset(work, &sum)
}

/// Compares the label and the offset with the sum over one atom of each class.
fn check_offset(work: &Classification, sum: &Vector3<f64>) -> Result<(), String> {
    let primitive = work.primitive.as_ref().ok_or("no primitive cell")?;
    let formal = work.outcome.as_ref().map_err(ToString::to_string)?;
    // Polar: the sum of all rotations is not zero.
    let total: Matrix3<i32> = primitive.operations.iter().map(|operation| operation.rotation).sum();
    let is_polar = total != Matrix3::zeros();
    if is_polar != (formal.label == Label::Polar) {
        return Err(format!("polar by search: {is_polar}, label {}", formal.label));
    }
    // The offset, to the accuracy of the positions.
    let offset = Vector3::from(formal.electron().offset.map(Component::value));
    let miss = primitive.lattice.to_cartesian(&(sum - offset).map(|x| x - x.round())).norm();
    if miss > 2.0 * formal.residual_limit {
        return Err(format!("the offset is {miss:.4} e·Å from the sum"));
    }
    if !is_polar {
        let rounded = sum.map(|x| (x * 24.0).round());
        for axis in 0..3 {
            #[allow(clippy::cast_possible_truncation)]
            let expected = Ratio::new(rounded[axis] as i128, 24).expect("a fraction").fract();
            let drift = (sum[axis] - rounded[axis] / 24.0).abs();
            // Where the positions are too rough for 24ths, rounding says nothing.
            let is_clear = drift < 1.0 / 96.0;
            if is_clear && formal.electron().offset[axis] != Component::Exact(expected) {
                return Err(format!(
                    "component {} is {} by rounding, {} exactly",
                    axis + 1,
                    expected,
                    formal.electron().offset[axis]
                ));
            }
        }
        // Fixed by every rotation, in exact numbers.
        for operation in &primitive.operations {
            for row in 0..3 {
                let mut image = Ratio::ZERO;
                for (column, component) in formal.electron().offset.iter().enumerate() {
                    let Component::Exact(ratio) = component else { return Err("a free component".into()) };
                    let entry = i128::from(operation.rotation[(row, column)] - i32::from(row == column));
                    let term = ratio.checked_mul(Ratio::from_integer(entry)).map_err(|e| e.to_string())?;
                    image = image.checked_add(term).map_err(|e| e.to_string())?;
                }
                if !image.is_integer() {
                    return Err("a rotation moves the offset".into());
                }
            }
        }
    }
    Ok(())
}
