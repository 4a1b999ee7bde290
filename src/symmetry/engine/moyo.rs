//! The engine moyo.

use super::Symmetry;
use crate::crystal::{Crystal, Operation};
use moyo::MoyoDataset;
use moyo::base::{AngleTolerance, Cell, Lattice};
use moyo::data::{Setting, hall_symbol_entry};

/// Searches with moyo. The caller has made sure that the cell is not empty and every number is finite.
pub(super) fn find(crystal: &Crystal, kinds: &[i32], tolerance: f64) -> Result<Symmetry, String> {
    // The library takes lattice vectors as rows.
    let lattice = Lattice::new(crystal.lattice.basis().transpose());
    let positions = crystal.sites.iter().map(|site| site.position).collect();
    let cell = Cell::new(lattice, positions, kinds.to_vec());
    let dataset = MoyoDataset::new(&cell, tolerance, AngleTolerance::default(), Setting::Standard, false)
        .map_err(|error| error.to_string())?;
    let entry = hall_symbol_entry(dataset.hall_number).ok_or("it named an unknown Hall symbol")?;
    let operations = dataset
        .operations
        .iter()
        .map(|operation| Operation { rotation: operation.rotation, translation: operation.translation })
        .collect();
    Ok(Symmetry {
        number: u16::try_from(dataset.number).map_err(|_| "it returned no space-group number")?,
        symbol: entry.hm_short.replace(' ', ""),
        hall: entry.hall_symbol.to_owned(),
        operations,
        orbits: dataset.orbits,
        tolerance: dataset.symprec,
    })
}
