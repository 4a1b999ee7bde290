//! Is a structure in another setting still the same crystal?

use super::Recast;
use crate::collection::Classification;
use crate::crystal::{Crystal, Element};
use crate::polarization::{Component, Modulus};
use nalgebra::{Matrix3, Vector3};
use std::collections::BTreeMap;

/// Relative difference of the volume per formula unit that is rounding of what was written.
const VOLUME: f64 = 1e-6;

/// What differs between a structure and the same one read back from another setting; `None` if nothing does.
///
/// Compared are the atoms of each element per volume, the space group, and the classification: label, the three
/// answers about zero, the charges' common divisor, and the offset, brought to the same axes; or the code of the refusal.
#[must_use]
pub fn difference(old: &Classification, new: &Classification, recast: &Recast) -> Option<String> {
    let (Some(before), Some(after)) = (&old.crystal, &new.crystal) else {
        let why = new.outcome.as_ref().err().map_or("no reason is known", |refusal| &refusal.message);
        return Some(format!("the atoms are not read back: {why}"));
    };
    density_difference(before, after)
        .or_else(|| {
            let (one, other) = (old.symmetry.as_ref()?.number, new.symmetry.as_ref()?.number);
            (one != other).then(|| format!("the space group was {one} and is {other}"))
        })
        .or_else(|| classification_difference(old, new, recast))
}

fn density_difference(before: &Crystal, after: &Crystal) -> Option<String> {
    let (one, other) = (densities(before), densities(after));
    if one.keys().ne(other.keys()) {
        return Some("the elements differ".to_owned());
    }
    one.iter().zip(&other).find_map(|((element, a), (_, b))| {
        let is_same = (a - b).abs() <= VOLUME * a;
        (!is_same).then(|| format!("there were {a:.8} atoms of {element} per Å³ and are {b:.8}"))
    })
}

fn densities(crystal: &Crystal) -> BTreeMap<Element, f64> {
    let mut amounts = BTreeMap::new();
    for site in &crystal.sites {
        *amounts.entry(site.element).or_insert(0.0) += site.occupancy / crystal.lattice.volume();
    }
    amounts
}

fn classification_difference(old: &Classification, new: &Classification, recast: &Recast) -> Option<String> {
    let (one, other) = match (&old.outcome, &new.outcome) {
        (Ok(one), Ok(other)) => (one, other),
        (Err(one), Err(other)) => {
            return (one.code != other.code)
                .then(|| format!("the refusal was {} and is {}: {}", one.code, other.code, other.message));
        }
        (Ok(one), Err(other)) => {
            return Some(format!("the label was {} and now there is none: {other}", one.label));
        }
        (Err(one), Ok(other)) => {
            return Some(format!("the refusal was {} and the label is {}", one.code, other.label));
        }
    };
    if one.label != other.label || one.charge_gcd != other.charge_gcd {
        return Some(format!("the label was {} and is {}", one.label, other.label));
    }
    for modulus in Modulus::ALL.iter().zip(one.cosets.iter().zip(&other.cosets)) {
        let (name, (before, after)) = modulus;
        if before.contains_zero != after.contains_zero {
            return Some(format!(
                "whether zero is reached by {name} was {} and is {}",
                before.contains_zero, after.contains_zero
            ));
        }
    }
    let (before, after) = (old.primitive.as_ref()?, new.primitive.as_ref()?);
    // New primitive vectors in the old primitive axes: whole numbers.
    let columns = [0, 1, 2].map(|axis| {
        let (numerators, denominator) = after.vectors();
        #[allow(clippy::cast_precision_loss, reason = "small whole numbers")]
        let vector = numerators.column(axis).map(|entry| entry as f64 / denominator as f64);
        before.from_cell(&(recast.axes * vector))
    });
    let change = Matrix3::from_columns(&columns).try_inverse()?;
    let expected = change * Vector3::from(one.electron().offset.map(Component::value));
    let found = Vector3::from(other.electron().offset.map(Component::value));
    let miss = (expected - found).map(|x| x - x.round());
    let distance = after.lattice.to_cartesian(&miss).norm();
    let is_free = other.electron().offset.iter().any(|component| matches!(component, Component::Free(_)));
    let limit = if is_free { one.residual_limit.max(1e-3) } else { 1e-6 };
    (distance > limit).then(|| format!("the offset differs by {distance:.4} e·Å"))
}
