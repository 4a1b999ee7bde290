//! From an input to a label: reads, expands, searches symmetry, assigns charges, sums the polarization.

use super::alternatives::{Alternative, alternatives};
use super::{Contents, Input, Member};
use crate::charge::{self, Assignment, Candidate, Given, Known, Parameters};
use crate::crystal::{AsymmetricUnit, Crystal, ExpandTolerance, Formula};
use crate::diagnostic::{Code, Diagnostic};
use crate::polarization::FormalPolarization;
use crate::symmetry::{Centres, Engine, Parent, Primitive, Symmetry, analyse};
use std::collections::BTreeSet;
use std::convert::Infallible;
use std::sync::Arc;

/// What a classification is asked to use. Printed in every report.
#[derive(Debug, Clone)]
pub struct Settings {
    /// Charges given by the user, if any.
    pub charges: Option<Given>,
    /// The symmetry engine.
    pub engine: Engine,
    /// Distance tolerance of the symmetry search in Å.
    pub symmetry_tolerance: f64,
    /// Distances that merge images and refuse clashes.
    pub expand: ExpandTolerance,
    /// Largest distance in Å of an atom from its place in the parent structure; without it no parent is searched.
    pub parent_tolerance: Option<f64>,
    /// Bond-valence parameters; the built-in ones without it.
    pub parameters: Option<Arc<Parameters>>,
    /// Only the data block or entry of this name.
    pub block: Option<String>,
    /// The largest number of bytes that may come out of one archive.
    pub max_unpacked: u64,
}

impl Settings {
    /// The bond-valence parameters to use.
    #[must_use]
    pub fn parameters(&self) -> &Parameters {
        self.parameters.as_deref().unwrap_or(Parameters::standard())
    }
}

impl Default for Settings {
    /// No given charges, the default engine at 0.01 Å (positions in CIFs are commonly rounded to 1e-4 of a cell edge,
    /// about 0.001 Å), all blocks.
    fn default() -> Self {
        Self {
            charges: None,
            engine: Engine::default(),
            symmetry_tolerance: 0.01,
            expand: ExpandTolerance::default(),
            parent_tolerance: Some(PARENT_TOLERANCE),
            parameters: None,
            block: None,
            max_unpacked: MAX_UNPACKED,
        }
    }
}

/// Oxygen atoms of strongly tilted perovskites lie up to 0.75 Å from their places in the cubic parent (0.72 Å in `DyScO3`),
/// those of rutiles 0.82 to 0.88 Å from a body-centred arrangement that nobody calls their parent.
pub const PARENT_TOLERANCE: f64 = 0.8;

/// 2 GiB: some 100,000 CIFs, and no more than a machine for such work can spare.
const MAX_UNPACKED: u64 = 2 << 30;

/// The answer for the averaged structure of the parent cell.
#[derive(Debug, Clone)]
pub struct ParentLevel {
    /// The averaged structure.
    pub parent: Parent,
    /// Its symmetry.
    pub symmetry: Symmetry,
    /// Its primitive cell.
    pub primitive: Primitive,
    /// Its polarization.
    pub formal: FormalPolarization,
}

/// How far the classification of one structure came, and what it found.
///
/// Each part is there as far as the work got, so that a refusal can still name the formula and the group.
#[derive(Debug, Clone)]
pub struct Classification {
    /// All atoms of the cell.
    pub crystal: Option<Crystal>,
    /// What the symmetry search found.
    pub symmetry: Option<Symmetry>,
    /// The primitive cell.
    pub primitive: Option<Primitive>,
    /// The inversion centres, where there are any.
    pub centres: Option<Centres>,
    /// The charges used.
    pub assignment: Option<Assignment>,
    /// The charges that came into question, where none could be inferred.
    pub candidates: Vec<Candidate>,
    /// Other plausible charges, where the charges were inferred, and what they would change.
    pub alternatives: Vec<Alternative>,
    /// The parent cell, where there is one and it was searched for.
    pub parent: Option<ParentLevel>,
    /// The answer, or why there is none.
    pub outcome: Result<FormalPolarization, Diagnostic>,
    /// What was noticed on the way.
    pub diagnostics: Vec<Diagnostic>,
}

/// One structure of one file.
#[derive(Debug, Clone)]
pub struct Material {
    /// The input it came from: a path, or `-` for standard input; for a member of an archive the path within follows.
    pub file: String,
    /// The data block or the id of the entry; empty when the file could not be read or its format has no names.
    pub block: String,
    /// What was found.
    pub classification: Classification,
}

impl Material {
    /// A material of which nothing is known but why.
    #[must_use]
    pub fn refused(file: &str, refusal: Diagnostic) -> Self {
        Self { file: file.to_owned(), block: String::new(), classification: Classification::refused(refusal) }
    }
}

impl Classification {
    /// A classification that got nowhere.
    #[must_use]
    pub fn refused(refusal: Diagnostic) -> Self {
        Self {
            crystal: None,
            symmetry: None,
            primitive: None,
            centres: None,
            assignment: None,
            candidates: Vec::new(),
            alternatives: Vec::new(),
            parent: None,
            outcome: Err(refusal),
            diagnostics: Vec::new(),
        }
    }

    /// The formula, once the atoms are known; in the usual order once the charges are.
    #[must_use]
    pub fn formula(&self) -> Option<Formula> {
        let crystal = self.crystal.as_ref().filter(|crystal| crystal.is_ordered())?;
        Some(match &self.assignment {
            Some(assignment) => charge::charged_formula(&crystal.sites, &assignment.charges),
            None => Formula::from_elements(crystal.sites.iter().map(|site| site.element)),
        })
    }

    /// Charges of the atoms of the primitive cell in e, once they are known.
    #[must_use]
    pub fn primitive_charges(&self) -> Option<Vec<i64>> {
        let (primitive, assignment) = (self.primitive.as_ref()?, self.assignment.as_ref()?);
        Some(primitive.representatives.iter().map(|&site| assignment.charges[site]).collect())
    }
}

/// Classifies every structure of an input, that of all members where it is an archive. At least one material.
#[must_use]
pub fn classify_input(input: &Input, settings: &Settings) -> Vec<Material> {
    let mut materials = Vec::new();
    let mut take = |member: Member| {
        materials.extend(classify_member(member, settings));
        Ok(())
    };
    let Ok(()) = input.visit::<Infallible>(settings.max_unpacked, &mut take);
    materials
}

/// Classifies every structure of a file or of a member of an archive. At least one material.
#[must_use]
pub fn classify_member(member: Member, settings: &Settings) -> Vec<Material> {
    let file = member.name.clone();
    match member.read() {
        Ok(bytes) => classify_bytes(&file, &bytes, settings),
        Err(refusal) => vec![Material::refused(&file, refusal)],
    }
}

/// Classifies every structure in the content of a file, whose name helps to tell the format. Parts without a structure
/// (headers of a publication, entries of other types) are skipped when another part holds one. At least one material.
#[must_use]
pub fn classify_bytes(file: &str, bytes: &[u8], settings: &Settings) -> Vec<Material> {
    match Contents::open(file, bytes, settings) {
        Ok(contents) => (0..contents.len()).map(|number| contents.classify(number, settings)).collect(),
        Err(refused) => vec![*refused],
    }
}

/// Classifies one structure.
#[must_use]
pub fn classify_unit(unit: &AsymmetricUnit, settings: &Settings) -> Classification {
    let mut work = Classification::refused(Diagnostic::error(Code::SitesMissing, "nothing was done"));
    work.outcome = run(unit, settings, &mut work);
    work
}

fn run(
    unit: &AsymmetricUnit,
    settings: &Settings,
    work: &mut Classification,
) -> Result<FormalPolarization, Diagnostic> {
    let (crystal, noticed) = unit.expand(&settings.expand)?;
    work.diagnostics.extend(noticed);
    let crystal = &*work.crystal.insert(crystal);
    refuse_shared(crystal)?;

    // Charges that are known beforehand take part in the symmetry search: sites of unlike charge are unlike.
    let known = charge::known(&crystal.sites, &crystal.origins, settings.charges.as_ref())?;
    let mut kinds: Vec<i32> = crystal.sites.iter().map(|site| i32::from(site.element.number())).collect();
    if let Known::Settled(assignment) = &known {
        for (kind, charge) in kinds.iter_mut().zip(&assignment.charges) {
            *kind += 1000 * i32::try_from(*charge).unwrap_or(0);
        }
    }
    let (symmetry, primitive) = analyse(crystal, &kinds, settings.engine, settings.symmetry_tolerance)?;
    let symmetry = &*work.symmetry.insert(symmetry);
    let primitive = &*work.primitive.insert(primitive);
    if (symmetry.tolerance - settings.symmetry_tolerance).abs() > 1e-12 {
        work.diagnostics.push(Diagnostic::note(
            Code::SymmetryTolerance,
            format!(
                "the symmetry search used {:.2e} Å in place of {:.2e} Å",
                symmetry.tolerance, settings.symmetry_tolerance
            ),
        ));
    }
    work.centres = Centres::find(primitive)?;
    let assignment = match known {
        Known::Settled(assignment) => assignment,
        Known::Open(remark) => {
            let positions = Some((&crystal.lattice, settings.parameters()));
            charge::infer(&crystal.sites, &symmetry.orbits, positions, remark).map_err(|refusal| {
                work.candidates = refusal.candidates;
                refusal.diagnostic
            })?
        }
    };
    let charges: Vec<i64> = primitive.representatives.iter().map(|&site| assignment.charges[site]).collect();
    work.diagnostics.extend(assignment.diagnostics.iter().cloned());
    work.assignment = Some(assignment);
    let formal = FormalPolarization::new(primitive, work.centres.as_ref(), &charges)?;
    if let Some(assignment) = &work.assignment {
        work.alternatives = alternatives(crystal, primitive, work.centres.as_ref(), assignment, &formal);
    }
    if let Some(tolerance) = settings.parent_tolerance {
        work.parent = parent_level(crystal, primitive, &charges, settings, tolerance, &mut work.diagnostics);
    }
    Ok(formal)
}

/// The parent level. It adds to the answer and never takes it away: a parent that cannot be classified is a note.
fn parent_level(
    crystal: &Crystal,
    primitive: &Primitive,
    charges: &[i64],
    settings: &Settings,
    tolerance: f64,
    noticed: &mut Vec<Diagnostic>,
) -> Option<ParentLevel> {
    let elements: Vec<i32> = primitive
        .representatives
        .iter()
        .map(|&site| i32::from(crystal.sites[site].element.number()))
        .collect();
    let kinds: Vec<i32> = elements
        .iter()
        .zip(charges)
        .map(|(element, &charge)| element + 1000 * i32::try_from(charge).unwrap_or(0))
        .collect();
    let mut note = |why: String| noticed.push(Diagnostic::note(Code::ParentRefused, why));
    let find = |kinds: &[i32]| Parent::find(primitive, crystal, kinds, tolerance);
    let found = match find(&kinds) {
        Ok(found) => found,
        Err(why) => {
            note(format!("no parent: {}", why.message));
            return None;
        }
    };
    if kinds.iter().collect::<BTreeSet<_>>().len() > elements.iter().collect::<BTreeSet<_>>().len() {
        let cells = |parents: &[Parent]| parents.first().map_or(1, |parent| parent.cells);
        if let Ok(plain) = find(&elements)
            && cells(&plain) > cells(&found)
        {
            note(format!(
                "charge order blocks a smaller parent: {} cells without it, {} with it",
                cells(&plain),
                cells(&found)
            ));
        }
    }
    for parent in found {
        match classify_parent(parent, &kinds, charges, settings) {
            // The averaged structure of a true parent has every rotation of the crystal.
            Ok(level) if level.primitive.operations.len() >= primitive.operations.len() => {
                return Some(level);
            }
            Ok(_) => {}
            Err(why) => note(format!("a parent structure could not be classified: {}", why.message)),
        }
    }
    None
}

fn classify_parent(
    parent: Parent,
    kinds: &[i32],
    charges: &[i64],
    settings: &Settings,
) -> Result<ParentLevel, Diagnostic> {
    let of_first = |members: &Vec<usize>| (kinds[members[0]], charges[members[0]]);
    let (kinds, charges): (Vec<i32>, Vec<i64>) = parent.members.iter().map(of_first).unzip();
    let (symmetry, primitive) =
        analyse(&parent.crystal, &kinds, settings.engine, settings.symmetry_tolerance)?;
    let centres = Centres::find(&primitive)?;
    let charges: Vec<i64> = primitive.representatives.iter().map(|&site| charges[site]).collect();
    let formal = FormalPolarization::new(&primitive, centres.as_ref(), &charges)?;
    Ok(ParentLevel { parent, symmetry, primitive, formal })
}

/// Averages over unlike cells have no quantized polarization.
fn refuse_shared(crystal: &Crystal) -> Result<(), Diagnostic> {
    if crystal.is_ordered() {
        return Ok(());
    }
    let first = crystal.sites.iter().position(|site| !site.is_full()).unwrap_or(0);
    let mut seen = BTreeSet::new();
    let mut names: Vec<String> = crystal
        .sites
        .iter()
        .zip(&crystal.origins)
        .filter(|(site, origin)| !site.is_full() && seen.insert(**origin))
        .map(|(site, _)| format!("{} ({:.4})", site.label, site.occupancy))
        .collect();
    let rest = names.len().saturating_sub(6);
    names.truncate(6);
    let more = if rest > 0 { format!(" and {rest} more") } else { String::new() };
    Err(Diagnostic::error(
        Code::SiteShared,
        format!(
            "sites are partly occupied or shared, so the charges are averages and the polarization is not quantized: \
             {}{more}",
            names.join(", ")
        ),
    )
    .about(crystal.origins[first]))
}
