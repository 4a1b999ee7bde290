//! From the content of a file to a label: reads, expands, searches symmetry, assigns charges, sums the polarization.

use crate::charge::{self, Assignment, Given, Known};
use crate::cif;
use crate::crystal::{AsymmetricUnit, Crystal, ExpandTolerance, Formula};
use crate::diagnostic::{Code, Diagnostic};
use crate::polarization::FormalPolarization;
use crate::symmetry::{Centres, Engine, Primitive, Symmetry, find_symmetry};

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
    /// Only the data block of this name.
    pub block: Option<String>,
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
            block: None,
        }
    }
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
    /// The answer, or why there is none.
    pub outcome: Result<FormalPolarization, Diagnostic>,
    /// What was noticed on the way.
    pub diagnostics: Vec<Diagnostic>,
}

/// One structure of one file.
#[derive(Debug, Clone)]
pub struct Material {
    /// The input it came from: a path, or `-` for standard input.
    pub file: String,
    /// The data block, or empty when the file could not be read.
    pub block: String,
    /// What was found.
    pub classification: Classification,
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

/// Classifies every structure in the content of a file. Blocks without a structure (headers of a publication) are
/// skipped when another block holds one. Always returns at least one material.
#[must_use]
pub fn classify_bytes(file: &str, bytes: &[u8], settings: &Settings) -> Vec<Material> {
    let reading = cif::read_bytes(bytes);
    let material = |block: &str, classification| Material {
        file: file.to_owned(),
        block: block.to_owned(),
        classification,
    };
    if reading.blocks.is_empty() {
        let refusal = Diagnostic::error(Code::FileEmpty, "the file holds no data block")
            .hint("a CIF starts with data_ and a name");
        let mut classification = Classification::refused(refusal);
        classification.diagnostics = reading.diagnostics;
        return vec![material("", classification)];
    }
    let is_wanted =
        |name: &str| settings.block.as_ref().is_none_or(|wanted| name.eq_ignore_ascii_case(wanted));
    if let Some(wanted) = &settings.block
        && !reading.blocks.iter().any(|block| is_wanted(&block.name))
    {
        let names: Vec<_> = reading.blocks.iter().map(|block| block.name.as_str()).collect();
        let refusal = Diagnostic::error(
            Code::FileUnknownBlock,
            format!("the file has no data block '{wanted}'; it has: {}", names.join(", ")),
        )
        .hint(format!("--block {}", names[0]));
        return vec![material(wanted, Classification::refused(refusal))];
    }
    let any_structure = reading.blocks.iter().any(|block| block.is_structure);
    let mut first_diagnostics = reading.diagnostics;
    reading
        .blocks
        .into_iter()
        .filter(|block| {
            is_wanted(&block.name) && (settings.block.is_some() || block.is_structure || !any_structure)
        })
        .map(|block| {
            let mut classification = match &block.unit {
                Ok(unit) => classify_unit(unit, settings),
                Err(refusal) => Classification::refused(refusal.clone()),
            };
            let mut diagnostics = std::mem::take(&mut first_diagnostics);
            diagnostics.extend(block.diagnostics.iter().cloned());
            let found = std::mem::take(&mut classification.diagnostics);
            diagnostics.extend(found.into_iter().map(|found| block.locate(found)));
            classification.diagnostics = diagnostics;
            classification.outcome = classification.outcome.map_err(|refusal| block.locate(refusal));
            material(&block.name, classification)
        })
        .collect()
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
    let symmetry = find_symmetry(crystal, &kinds, settings.engine, settings.symmetry_tolerance)?;
    let symmetry = &*work.symmetry.insert(symmetry);
    if (symmetry.tolerance - settings.symmetry_tolerance).abs() > 1e-12 {
        work.diagnostics.push(Diagnostic::note(
            Code::SymmetryTolerance,
            format!(
                "the symmetry search used {:.2e} Å in place of {:.2e} Å",
                symmetry.tolerance, settings.symmetry_tolerance
            ),
        ));
    }
    let primitive = &*work.primitive.insert(Primitive::new(crystal, &kinds, symmetry)?);
    work.centres = Centres::find(primitive)?;
    let assignment = match known {
        Known::Settled(assignment) => assignment,
        Known::Open(remark) => charge::infer(&crystal.sites, &symmetry.orbits, remark)?,
    };
    let charges: Vec<i64> = primitive.representatives.iter().map(|&site| assignment.charges[site]).collect();
    work.diagnostics.extend(assignment.diagnostics.iter().cloned());
    work.assignment = Some(assignment);
    FormalPolarization::new(primitive, work.centres.as_ref(), &charges)
}

/// Averages over unlike cells have no quantized polarization.
fn refuse_shared(crystal: &Crystal) -> Result<(), Diagnostic> {
    if crystal.is_ordered() {
        return Ok(());
    }
    let first = crystal.sites.iter().position(|site| !site.is_full()).unwrap_or(0);
    let mut seen = std::collections::BTreeSet::new();
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
