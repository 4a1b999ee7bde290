//! The engine moyo.

use super::{StandardCell, Symmetry, standard_symbols};
use crate::crystal::{Crystal, Operation};
use moyo::MoyoDataset;
use moyo::base::{AngleTolerance, Cell, Lattice};
use moyo::data::Setting;

/// Searches with moyo. The caller has made sure that the cell is not empty and every number is finite.
pub(super) fn find(crystal: &Crystal, kinds: &[i32], tolerance: f64) -> Result<Symmetry, String> {
    // The library takes lattice vectors as rows.
    let lattice = Lattice::new(crystal.lattice.basis().transpose());
    let positions = crystal.sites.iter().map(|site| site.position).collect();
    let cell = Cell::new(lattice, positions, kinds.to_vec());
    let dataset = MoyoDataset::new(&cell, tolerance, AngleTolerance::default(), Setting::Standard, false)
        .map_err(|error| error.to_string())?;
    let number = dataset.number;
    let (symbol, hall) =
        standard_symbols(number).ok_or_else(|| format!("it returned space-group number {number}"))?;
    let operations = dataset
        .operations
        .iter()
        .map(|operation| Operation { rotation: operation.rotation, translation: operation.translation })
        .collect();
    Ok(Symmetry {
        number: u16::try_from(number).map_err(|_| "it returned no space-group number")?,
        symbol,
        hall,
        operations,
        orbits: dataset.orbits,
        tolerance: dataset.symprec,
        standard: Some(StandardCell { axes: dataset.std_linear, origin: dataset.std_origin_shift }),
    })
}
