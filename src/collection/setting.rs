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

pub use agreement::difference;

use super::classification::{Classification, Settings};
use crate::cif::BlockReading;
use crate::crystal::{AsymmetricUnit, Crystal, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::symmetry::setting::{Group, Motion, Setting, UNIT, from_group, from_hall};
use crate::symmetry::{Change, ChangeError, symmetrise};
use frame::{Frame, file_group};
use nalgebra::{Matrix3, Vector3};
use std::collections::BTreeSet;

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

/// A structure in new axes, and how it came there.
struct Moved {
    unit: AsymmetricUnit,
    multiplicities: Vec<usize>,
    sources: Vec<usize>,
    axes: Matrix3<f64>,
    origin: Vector3<f64>,
    /// The exact change that was made of the file's own sites and operations, if nothing was averaged.
    change: Option<Change>,
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
    let charges = work.assignment.as_ref().map(|assignment| assignment.charges.as_slice());
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
    let (cell_uncertainty, mut site_uncertainty, mut has_lost) = uncertainties(reading, &moved);
    let mut made = moved;
    if is_expanded {
        has_lost |= site_uncertainty.iter().flatten().any(Option::is_some);
        let (all, _) = made.unit.expand(&settings.expand)?;
        made.sources = all.origins.iter().map(|&origin| made.sources[origin]).collect();
        made.multiplicities = vec![1; all.sites.len()];
        site_uncertainty = vec![[None; 3]; all.sites.len()];
        made.unit = AsymmetricUnit { lattice: all.lattice, sites: all.sites, operations: Vec::new() };
    }
    if has_lost {
        let message = "standard uncertainties were left out, since they do not hold for the cell and sites that are written";
        noticed.push(Diagnostic::note(Code::BuildUncertainty, message));
    }
    name_apart(&mut made.unit.sites);
    let setting = if made.unit.operations.is_empty() {
        from_hall("P 1")
    } else {
        file_group(&made.unit).as_ref().and_then(from_group)
    };
    let known = setting.as_ref().and_then(|setting| setting.number);
    Ok(Recast {
        number: known.or(number.filter(|_| !is_expanded)),
        setting,
        unit: made.unit,
        multiplicities: made.multiplicities,
        sources: made.sources,
        cell_uncertainty,
        site_uncertainty,
        axes: made.axes,
        origin: made.origin,
        diagnostics: noticed,
    })
}

/// Uncertainties of cell and sites that hold in the new setting, and whether others were lost: they hold where axes only
/// change their order or direction.
fn uncertainties(reading: &BlockReading, moved: &Moved) -> ([Option<f64>; 6], Vec<[Option<f64>; 3]>, bool) {
    let Some((order, _)) = moved.change.as_ref().and_then(Change::permutation) else {
        let of_sites = reading.site_uncertainty.iter().flatten();
        let has_any = reading.cell_uncertainty.iter().chain(of_sites).any(Option::is_some);
        return ([None; 6], vec![[None; 3]; moved.unit.sites.len()], has_any);
    };
    let cell = [0, 1, 2, 3, 4, 5].map(|i: usize| reading.cell_uncertainty[order[i % 3] + i / 3 * 3]);
    let of_site = |&source: &usize| {
        let known = reading.site_uncertainty.get(source).copied().unwrap_or_default();
        order.map(|axis| known[axis])
    };
    (cell, moved.sources.iter().map(of_site).collect(), false)
}

/// Gives sites of the same label different ones: `O1`, `O1_2`, `O1_3`.
fn name_apart(sites: &mut [Site]) {
    let mut taken: BTreeSet<String> = sites.iter().map(|site| site.label.clone()).collect();
    let mut seen = BTreeSet::new();
    for site in sites {
        if seen.insert(site.label.clone()) {
            continue;
        }
        let free = (2..).map(|n| format!("{}_{n}", site.label)).find(|label| !taken.contains(label));
        if let Some(free) = free {
            taken.insert(free.clone());
            seen.insert(free.clone());
            site.label = free;
        }
    }
}

/// What the file states, all its atoms, and their charges where they are known.
struct Source<'a> {
    unit: &'a AsymmetricUnit,
    crystal: &'a Crystal,
    charges: Option<&'a [i64]>,
}

impl Source<'_> {
    fn moved(
        &self,
        frame: &Frame<'_>,
        axes: Axes,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<Moved, Diagnostic> {
        let (vectors, own_origin) = frame.target(axes)?;
        if frame.centres.is_none() {
            let kept = if own_origin.is_some() {
                "that of the standard setting is used"
            } else {
                "that of the file is kept"
            };
            let message = format!("the crystal has no centre of inversion to take as origin; {kept}");
            noticed.push(Diagnostic::note(Code::BuildNoCentre, message));
        }
        let is_whole = frame.is_stated_in_full(self.unit, axes);
        let (vectors, origin) = match own_origin {
            Some(_) if is_whole && self.is_standard(frame) => (frame.target(Axes::File)?.0, Vector3::zeros()),
            Some(origin) => (vectors, origin),
            None => (vectors, self.best_origin(frame)?),
        };
        if is_whole && let Ok(moved) = self.as_stated(frame, &vectors, &origin) {
            return Ok(moved);
        }
        let why = match self.averaged(frame, &vectors, &origin, |_| true) {
            Ok((moved, largest_move)) => {
                if !is_whole {
                    let message = format!(
                        "the file states {} operations; {} were found and are written, and cell and atoms were averaged over them: \
                         atoms moved by up to {largest_move:.1e} Å",
                        self.unit.operations.len().max(1),
                        moved.unit.operations.len()
                    );
                    noticed.push(Diagnostic::note(Code::BuildSymmetryFound, message));
                }
                return Ok(moved);
            }
            Err(why) => why,
        };
        let message = |what: &str| format!("the symmetry found cannot be written, {what}: {}", why.message);
        if axes == Axes::File {
            noticed.push(Diagnostic::warning(Code::BuildSymmetryKept, message("that of the file is kept")));
            return self.as_stated(frame, &vectors, &origin).or_else(|_| self.by_own_symmetry());
        }
        noticed.push(Diagnostic::warning(Code::BuildSymmetryKept, message("every atom is listed")));
        let (moved, _) =
            self.averaged(frame, &vectors, &origin, |rotation| *rotation == Matrix3::identity())?;
        Ok(moved)
    }

    /// The first of the possible origins that gives a usual setting in the axes of the file, or the first.
    fn best_origin(&self, frame: &Frame<'_>) -> Result<Vector3<f64>, Diagnostic> {
        let origins = frame.origins();
        let first = origins.first().copied().unwrap_or_else(Vector3::zeros);
        if origins.len() < 2 {
            return Ok(first);
        }
        let (vectors, _) = frame.target(Axes::File)?;
        let is_whole = frame.is_stated_in_full(self.unit, Axes::File);
        let is_usual = |origin: &&Vector3<f64>| {
            let moved = if is_whole {
                self.as_stated(frame, &vectors, origin)
            } else {
                self.averaged(frame, &vectors, origin, |_| true).map(|(moved, _)| moved)
            };
            moved.is_ok_and(|moved| file_group(&moved.unit).as_ref().and_then(from_group).is_some())
        };
        Ok(origins.iter().find(is_usual).copied().unwrap_or(first))
    }

    /// Whether the file is in the standard setting as it is; engines may choose other axes that are as good.
    fn is_standard(&self, frame: &Frame<'_>) -> bool {
        let setting = file_group(self.unit).as_ref().and_then(from_group);
        setting.is_some_and(|setting| {
            from_hall(&frame.symmetry.hall)
                .is_some_and(|standard| standard.hall_number == setting.hall_number)
        })
    }

    /// The sites and operations of the file, moved exactly.
    fn as_stated(
        &self,
        frame: &Frame<'_>,
        vectors: &Matrix3<i64>,
        origin: &Vector3<f64>,
    ) -> Result<Moved, Diagnostic> {
        let group = file_group(self.unit).ok_or_else(|| refusal(ChangeError::NotGroup))?;
        let shift = frame.exact_origin(&group, origin).ok_or_else(|| refusal(ChangeError::Fraction))?;
        let (numerators, denominator) = frame.primitive.vectors();
        let change = Change::new(numerators * vectors, denominator, shift).map_err(refusal)?;
        self.changed(change)
    }

    /// The file's own symmetry, with its own centre of inversion nearest to the origin.
    fn by_own_symmetry(&self) -> Result<Moved, Diagnostic> {
        let group = file_group(self.unit).ok_or_else(|| refusal(ChangeError::NotGroup))?;
        let lattice = &self.unit.lattice;
        let centres = group.motions().iter().filter(|motion| motion.to_operation().is_inversion());
        let halves = centres.flat_map(|motion| {
            (0..8_i64).map(|bits| {
                let step = |axis: usize| (bits >> axis & 1) * i64::from(UNIT);
                [0, 1, 2].map(|axis| (i64::from(motion.translation()[axis]) - step(axis)) / 2)
            })
        });
        let distance = |shift: &[i64; 3]| lattice.to_cartesian(&Change::of_origin(*shift).origin()).norm();
        let shift = halves.min_by(|one, other| distance(one).total_cmp(&distance(other))).unwrap_or([0; 3]);
        self.changed(Change::of_origin(shift))
    }

    fn changed(&self, change: Change) -> Result<Moved, Diagnostic> {
        let mut sites = Vec::new();
        let mut sources = Vec::new();
        let mut counts = Vec::new();
        for (listed, site) in self.unit.sites.iter().enumerate() {
            let images =
                || self.crystal.origins.iter().enumerate().filter(move |(_, origin)| **origin == listed);
            let offset =
                |atom: usize| (self.crystal.sites[atom].position - site.position).map(|x| x - x.round());
            let nearest =
                images().map(|(atom, _)| (atom, self.crystal.lattice.to_cartesian(&offset(atom)).norm()));
            // A site without images was dropped as a repetition.
            let Some((atom, distance)) = nearest.min_by(|a, b| a.1.total_cmp(&b.1)) else { continue };
            let position = if distance < 1e-9 { site.position } else { site.position + offset(atom) };
            sites.push(self.charged(atom, position));
            sources.push(listed);
            counts.push(images().count());
        }
        let operations = self.unit.operations.clone();
        let unit = AsymmetricUnit { lattice: self.unit.lattice.clone(), sites, operations };
        let ratio = change.axes().determinant();
        Ok(Moved {
            unit: change.apply(&unit).map_err(refusal)?,
            multiplicities: counts.into_iter().map(|count| scaled(count, ratio)).collect(),
            sources,
            axes: change.axes(),
            origin: change.origin(),
            change: Some(change),
        })
    }

    /// The primitive cell averaged over the operations found, in the new axes; and how far an atom was moved, in Å.
    fn averaged(
        &self,
        frame: &Frame<'_>,
        vectors: &Matrix3<i64>,
        origin: &Vector3<f64>,
        keep: impl Fn(&Matrix3<i32>) -> bool,
    ) -> Result<(Moved, f64), Diagnostic> {
        let primitive = frame.primitive.as_ref();
        let change = Change::new(*vectors, 1, [0; 3]).map_err(refusal)?;
        let is_whole = |rotation: &Matrix3<i32>| {
            let rows = [0, 1, 2].map(|i| [0, 1, 2].map(|j| rotation[(i, j)]));
            Motion::new(rows, [0; 3]).is_some_and(|motion| change.motion(&motion).is_ok())
        };
        let found = symmetrise(primitive, &primitive.from_cell(origin), |rotation| {
            keep(rotation) && is_whole(rotation)
        })?;
        let ratio = change.axes().determinant();
        let (mut sites, mut sources, mut multiplicities) = (Vec::new(), Vec::new(), Vec::new());
        for (atom, position) in
            found.positions.iter().enumerate().filter(|(atom, _)| found.orbits[*atom] == *atom)
        {
            let count = found.orbits.iter().filter(|orbit| **orbit == atom).count();
            for &member in &frame.members[primitive.representatives[atom]] {
                sites.push(self.charged(member, *position));
                sources.push(self.crystal.origins[member]);
                multiplicities.push(scaled(count, ratio));
            }
        }
        let unit = AsymmetricUnit { lattice: found.lattice, sites, operations: found.operations };
        let (numerators, denominator) = primitive.vectors();
        let axes = Change::new(numerators * vectors, denominator, [0; 3]).map_err(refusal)?.axes();
        let unit = change.apply(&unit).map_err(refusal)?;
        let moved = Moved { unit, multiplicities, sources, axes, origin: *origin, change: None };
        Ok((moved, found.largest_move))
    }

    /// A site of the crystal at a position of its own, with its charge where that is known.
    #[allow(clippy::cast_precision_loss, reason = "charges are small")]
    fn charged(&self, atom: usize, position: Vector3<f64>) -> Site {
        let site = &self.crystal.sites[atom];
        let oxidation = self.charges.and_then(|charges| charges.get(atom)).map(|charge| *charge as f64);
        Site { position, oxidation: oxidation.or(site.oxidation), ..site.clone() }
    }
}

fn refusal(error: ChangeError) -> Diagnostic {
    Diagnostic::error(Code::SymmetryNotFound, error.to_string())
}

/// A number of atoms in a cell of another volume.
#[allow(
    clippy::cast_precision_loss,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "numbers of atoms are far below 2^52 and positive"
)]
fn scaled(count: usize, ratio: f64) -> usize {
    (count as f64 * ratio).round() as usize
}

/// A group with its order, for the modules below.
fn point_group_order(group: &Group) -> usize {
    group.order() / group.translations().max(1)
}
