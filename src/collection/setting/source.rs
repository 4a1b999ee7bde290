//! A structure as its file states it, and the ways to move it: exactly as stated, or averaged over what was found.

use super::Axes;
use super::frame::{Frame, file_group};
use crate::crystal::{AsymmetricUnit, Crystal, Site};
use crate::diagnostic::{Code, Diagnostic};
use crate::symmetry::setting::{Motion, UNIT, from_group, from_hall};
use crate::symmetry::{Change, ChangeError, symmetrise, wrap};
use nalgebra::{Matrix3, Vector3};

/// Cells with more operations than this, supercells of small ones, are written with every atom in place of all operations.
const MAX_OPERATIONS: usize = 1000;

/// A structure in new axes, and how it came there.
pub(super) struct Moved {
    pub(super) unit: AsymmetricUnit,
    pub(super) multiplicities: Vec<usize>,
    pub(super) sources: Vec<usize>,
    pub(super) axes: Matrix3<f64>,
    pub(super) origin: Vector3<f64>,
    /// The exact change that was made of the file's own sites and operations, if nothing was averaged.
    pub(super) change: Option<Change>,
}

/// What the file states, all its atoms, and their charges where they are known.
pub(super) struct Source<'a> {
    pub(super) unit: &'a AsymmetricUnit,
    pub(super) crystal: &'a Crystal,
    pub(super) charges: Option<&'a [i64]>,
}

impl Source<'_> {
    /// The structure in the axes asked for.
    pub(super) fn moved(
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
        // The origin of the standard setting is known to give fractions, up to the noise of the positions.
        let reach = if own_origin.is_some() { frame.wide_reach() } else { frame.reach() };
        let (vectors, origin) = match own_origin {
            Some(_) if is_whole && self.is_standard(frame) => (frame.target(Axes::File)?.0, Vector3::zeros()),
            Some(origin) => (vectors, origin),
            None => (vectors, self.best_origin(frame)?),
        };
        if is_whole && let Ok(moved) = self.as_stated(frame, &vectors, &origin) {
            return Ok(moved);
        }
        let why = match self.averaged(frame, &vectors, &origin, reach, |_| true) {
            Ok((moved, largest_move)) => {
                if !is_whole {
                    let message = format!(
                        "the file states {} of the {} operations found; cell and atoms were averaged over all of them, \
                         which moved atoms by up to {largest_move:.4} Å",
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
            if let Ok(moved) = self.as_stated(frame, &vectors, &origin) {
                noticed
                    .push(Diagnostic::warning(Code::BuildSymmetryKept, message("that of the file is kept")));
                return Ok(moved);
            }
            noticed.push(Diagnostic::warning(Code::BuildSymmetryKept, message("every atom is listed")));
            return Ok(self.listed(&origin));
        }
        noticed.push(Diagnostic::warning(Code::BuildSymmetryKept, message("every atom is listed")));
        let (moved, _) =
            self.averaged(frame, &vectors, &origin, reach, |rotation| *rotation == Matrix3::identity())?;
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
                self.averaged(frame, &vectors, origin, frame.reach(), |_| true).map(|(moved, _)| moved)
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
    pub(super) fn by_own_symmetry(&self) -> Result<Moved, Diagnostic> {
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

    /// Every atom of the file's cell from another origin, without operations.
    fn listed(&self, origin: &Vector3<f64>) -> Moved {
        let position = |atom: usize| wrap(&(self.crystal.sites[atom].position - origin));
        let sites: Vec<Site> =
            (0..self.crystal.sites.len()).map(|atom| self.charged(atom, position(atom))).collect();
        Moved {
            multiplicities: vec![1; sites.len()],
            sources: self.crystal.origins.clone(),
            unit: AsymmetricUnit { lattice: self.crystal.lattice.clone(), sites, operations: Vec::new() },
            axes: Matrix3::identity(),
            origin: *origin,
            change: None,
        }
    }

    fn changed(&self, change: Change) -> Result<Moved, Diagnostic> {
        let mut sites = Vec::new();
        let mut sources = Vec::new();
        let mut counts = Vec::new();
        let mut images: Vec<Vec<usize>> = vec![Vec::new(); self.unit.sites.len()];
        for (atom, &origin) in self.crystal.origins.iter().enumerate() {
            images[origin].push(atom);
        }
        for (listed, (site, images)) in self.unit.sites.iter().zip(&images).enumerate() {
            let offset =
                |atom: usize| (self.crystal.sites[atom].position - site.position).map(|x| x - x.round());
            let distance = |atom: usize| self.crystal.lattice.to_cartesian(&offset(atom)).norm();
            let nearest = images.iter().map(|&atom| (atom, distance(atom)));
            // A site without images was dropped as a repetition.
            let Some((atom, distance)) = nearest.min_by(|a, b| a.1.total_cmp(&b.1)) else { continue };
            let position = if distance < 1e-9 { site.position } else { site.position + offset(atom) };
            sites.push(self.charged(atom, position));
            sources.push(listed);
            counts.push(images.len());
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
        reach: f64,
        keep: impl Fn(&Matrix3<i32>) -> bool,
    ) -> Result<(Moved, f64), Diagnostic> {
        let primitive = frame.primitive.as_ref();
        let change = Change::new(*vectors, 1, [0; 3]).map_err(refusal)?;
        let is_whole = |rotation: &Matrix3<i32>| {
            let rows = [0, 1, 2].map(|i| [0, 1, 2].map(|j| rotation[(i, j)]));
            Motion::new(rows, [0; 3]).is_some_and(|motion| change.motion(&motion).is_ok())
        };
        let found = symmetrise(primitive, &primitive.from_cell(origin), reach, |rotation| {
            keep(rotation) && is_whole(rotation)
        })?;
        let ratio = change.axes().determinant();
        if scaled(found.operations.len(), ratio) > MAX_OPERATIONS {
            let message =
                format!("there are more than {MAX_OPERATIONS} operations in this cell, which is a supercell");
            return Err(Diagnostic::error(Code::SymmetryNotFound, message).hint("--axes primitive"));
        }
        let mut counts = vec![0; found.orbits.len()];
        for &orbit in &found.orbits {
            counts[orbit] += 1;
        }
        let (mut sites, mut sources, mut multiplicities) = (Vec::new(), Vec::new(), Vec::new());
        for (atom, position) in found.positions.iter().enumerate().filter(|(atom, _)| counts[*atom] > 0) {
            for &member in &frame.members[primitive.representatives[atom]] {
                sites.push(self.charged(member, *position));
                sources.push(self.crystal.origins[member]);
                multiplicities.push(scaled(counts[atom], ratio));
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
pub(super) fn scaled(count: usize, ratio: f64) -> usize {
    (count as f64 * ratio).round() as usize
}
