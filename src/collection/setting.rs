//! One structure in another setting: axes, an origin on an inversion centre, and exact operations.
//!
//! # The rule for the origin
//! The origin of the file stays where it is a centre of inversion. Otherwise it moves to a centre from which the operations
//! in the file's axes are those of a setting of the International Tables: the one of the highest site symmetry, the nearest
//! among equals. Where no centre gives such a setting, it moves to the one of the highest site symmetry. The standard axes
//! take the origin of the standard setting, which is a centre too (origin choice 2). A crystal without centres keeps the
//! origin of its file, or of the standard setting.
//!
//! # What becomes of the atoms
//! Where the operations of the file are all that the search finds, the sites it lists are moved and nothing else is done to
//! them. Where the search finds more, as in a file without symmetry, the atoms and the cell are averaged over what was found.

mod agreement;
mod frame;
mod source;

pub use agreement::difference;

use super::classification::{Classification, Settings};
use crate::charge;
use crate::cif::BlockReading;
use crate::crystal::{AsymmetricUnit, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::symmetry::Change;
use crate::symmetry::setting::{Setting, from_group, from_hall};
use frame::{Frame, file_group};
use nalgebra::{Matrix3, Vector3};
use source::{Moved, Source};
use std::collections::{BTreeMap, BTreeSet};

/// Which axes a structure is written in.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Axes {
    /// Those of the file.
    File,
    /// Those of the standard setting of the space group.
    Standard,
    /// Those of the primitive cell.
    Primitive,
}

/// A structure in another setting.
#[derive(Debug, Clone)]
pub struct Recast {
    /// Lattice, sites and operations. Charges that are known are stated as oxidation numbers.
    pub unit: AsymmetricUnit,
    /// For each site, how many atoms it makes in the cell.
    pub multiplicities: Vec<usize>,
    /// For each site, the listed site of the file it comes from.
    pub sources: Vec<usize>,
    /// Standard uncertainties of the cell parameters, where they still hold.
    pub cell_uncertainty: [Option<f64>; 6],
    /// Standard uncertainties of the coordinates, where they still hold.
    pub site_uncertainty: Vec<[Option<f64>; 3]>,
    /// The vectors in the axes of the file, one a column.
    pub axes: Matrix3<f64>,
    /// The origin in the axes of the file.
    pub origin: Vector3<f64>,
    /// Number of the space group the operations make, where it is certain.
    pub number: Option<u16>,
    /// The setting the operations make, where it is one of the usual ones.
    pub setting: Option<Setting>,
    /// What is to be said about it.
    pub diagnostics: Vec<Diagnostic>,
}

/// A structure in the setting asked for; `is_expanded` lists every atom of the cell.
///
/// # Errors
/// The refusal of a structure whose atoms are not known; `build-003` for standard axes where the engine gives none;
/// `symmetry-006` where the symmetry found cannot be written in these axes.
pub fn recast(
    reading: &BlockReading,
    work: &Classification,
    settings: &Settings,
    axes: Axes,
    is_expanded: bool,
) -> Result<Recast, Diagnostic> {
    let unit = reading.unit.as_ref().map_err(Clone::clone)?;
    let Some(crystal) = &work.crystal else {
        return Err(work.outcome.as_ref().err().cloned().unwrap_or_else(|| {
            Diagnostic::error(Code::SitesMissing, "the atoms of the cell are not known")
        }));
    };
    let mut noticed = Vec::new();
    // Inferred charges are a result and not a statement of the file: a reader of the new file infers them again.
    let settled = work.assignment.as_ref().filter(|assignment| assignment.source != charge::Source::Inferred);
    let charges = settled.map(|assignment| assignment.charges.as_slice());
    let source = Source { unit, crystal, charges };
    let (moved, number) = match Frame::find(crystal, work, settings) {
        Ok(frame) => {
            let moved = source.moved(&frame, axes, &mut noticed)?;
            let number = frame.number(&moved.unit, &moved.axes);
            (moved, number)
        }
        Err(why) if axes == Axes::File => {
            let message =
                format!("the symmetry could not be searched, that of the file is written: {}", why.message);
            noticed.push(Diagnostic::warning(Code::BuildSymmetryKept, message));
            (source.by_own_symmetry()?, None)
        }
        Err(why) => return Err(why),
    };
    finish(reading, settings, is_expanded, moved, number, noticed)
}

/// Uncertainties, names and, if asked for, all atoms.
fn finish(
    reading: &BlockReading,
    settings: &Settings,
    is_expanded: bool,
    moved: Moved,
    number: Option<u16>,
    mut noticed: Vec<Diagnostic>,
) -> Result<Recast, Diagnostic> {
    let mut known = Uncertainties::of(reading, &moved);
    let mut made = moved;
    if is_expanded {
        known.has_lost |= known.sites.iter().flatten().any(Option::is_some);
        let (all, _) = made.unit.expand(&settings.expand)?;
        made.sources = all.origins.iter().map(|&origin| made.sources[origin]).collect();
        made.multiplicities = vec![1; all.sites.len()];
        known.sites = vec![[None; 3]; all.sites.len()];
        made.unit = AsymmetricUnit { lattice: all.lattice, sites: all.sites, operations: Vec::new() };
    }
    if known.has_lost {
        let message = "standard uncertainties were left out, since they do not hold for the cell and sites that are written";
        noticed.push(Diagnostic::note(Code::BuildUncertainty, message));
    }
    name_apart(&mut made.unit.sites);
    let setting = if made.unit.operations.is_empty() {
        from_hall("P 1")
    } else {
        file_group(&made.unit).as_ref().and_then(from_group)
    };
    let named = setting.as_ref().and_then(|setting| setting.number);
    Ok(Recast {
        number: named.or(number.filter(|_| !is_expanded)),
        setting,
        unit: made.unit,
        multiplicities: made.multiplicities,
        sources: made.sources,
        cell_uncertainty: known.cell,
        site_uncertainty: known.sites,
        axes: made.axes,
        origin: made.origin,
        diagnostics: noticed,
    })
}

/// What is known about uncertainties in the new setting.
struct Uncertainties {
    cell: [Option<f64>; 6],
    sites: Vec<[Option<f64>; 3]>,
    /// Whether some do not hold there.
    has_lost: bool,
}

impl Uncertainties {
    /// They hold where axes only change their order or direction.
    fn of(reading: &BlockReading, moved: &Moved) -> Self {
        let Some((order, _)) = moved.change.as_ref().and_then(Change::permutation) else {
            let of_sites = reading.site_uncertainty.iter().flatten();
            let has_lost = reading.cell_uncertainty.iter().chain(of_sites).any(Option::is_some);
            return Self { cell: [None; 6], sites: vec![[None; 3]; moved.unit.sites.len()], has_lost };
        };
        let of_site = |&source: &usize| {
            let known = reading.site_uncertainty.get(source).copied().unwrap_or_default();
            order.map(|axis| known[axis])
        };
        Self {
            cell: [0, 1, 2, 3, 4, 5].map(|i: usize| reading.cell_uncertainty[order[i % 3] + i / 3 * 3]),
            sites: moved.sources.iter().map(of_site).collect(),
            has_lost: false,
        }
    }
}

/// Gives sites of the same label different ones: `O1`, `O1_2`, `O1_3`.
fn name_apart(sites: &mut [Site]) {
    let mut taken: BTreeSet<String> = sites.iter().map(|site| site.label.clone()).collect();
    let mut counts: BTreeMap<String, usize> = BTreeMap::new();
    for site in sites {
        let count = counts.entry(site.label.clone()).or_insert(0);
        *count += 1;
        if *count == 1 {
            continue;
        }
        let mut name = format!("{}_{count}", site.label);
        while !taken.insert(name.clone()) {
            *count += 1;
            name = format!("{}_{count}", site.label);
        }
        site.label = name;
    }
}
