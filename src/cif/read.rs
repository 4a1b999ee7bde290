//! From a document to structures: one [`BlockReading`] for each data block.

mod cell;
mod composition;
mod sites;
mod species;
mod symmetry;
mod tags;

pub use symmetry::{StatedSymmetry, SymmetrySource};

use super::document::{Block, Document};
use super::parse::parse;
use crate::cell::Lattice;
use crate::crystal::{AsymmetricUnit, Element, ExpandTolerance, Operation, Site};
use crate::diagnostic::{Code, Diagnostic, Span};
use cell::{check_metric, has_cell, optional_number, read_cell, value_of};
use composition::Composition;
use sites::{Sites, has_sites, read_sites};
use symmetry::read_symmetry;
use tags::{
    FORMULA_SUM, FORMULA_UNITS, HALL, HERMANN_MAUGUIN, MACROMOLECULE, MAGNETIC, MODULATION_DIMENSION, NUMBER,
    OPERATIONS, SUPERSPACE, Spellings,
};

/// Formula units per cell may differ from the stated number by this fraction.
const UNITS_TOLERANCE: f64 = 0.02;

/// What was read from one data block.
#[derive(Debug, Clone)]
pub struct BlockReading {
    /// Name of the block.
    pub name: String,
    /// Its heading.
    pub span: Span,
    /// Whether the block has any item of a cell or of atom sites. A block that has none, such as the heading of a
    /// publication, is refused with `cif-018`, and is no reason for complaint when another block holds a structure.
    pub is_structure: bool,
    /// The structure, or the refusal.
    pub unit: Result<AsymmetricUnit, Diagnostic>,
    /// What the block states about its symmetry.
    pub stated: StatedSymmetry,
    /// The sum formula, as stated.
    pub formula_sum: Option<String>,
    /// The number of formula units in the cell, as stated.
    pub formula_units: Option<f64>,
    /// Standard uncertainties of a, b, c, alpha, beta, gamma.
    pub cell_uncertainty: [Option<f64>; 6],
    /// Where each listed site is in the file, in the order of the sites of `unit`.
    pub site_places: Vec<SitePlace>,
    /// Standard uncertainties of the fractional coordinates of each listed site, in the order of the sites of `unit`.
    pub site_uncertainty: Vec<[Option<f64>; 3]>,
    /// Everything noticed but the refusal.
    pub diagnostics: Vec<Diagnostic>,
}

/// What was read from one file.
#[derive(Debug, Clone)]
pub struct Reading {
    /// One reading for each data block, in the order of the file.
    pub blocks: Vec<BlockReading>,
    /// What is wrong with the syntax of the file.
    pub diagnostics: Vec<Diagnostic>,
}

/// Parses and reads a file.
///
/// ```
/// let text = b"data_MgO
/// _cell_length_a 4.212 _cell_length_b 4.212 _cell_length_c 4.212
/// _cell_angle_alpha 90 _cell_angle_beta 90 _cell_angle_gamma 90
/// _space_group_name_H-M_alt 'F m -3 m'
/// loop_ _atom_site_type_symbol _atom_site_fract_x _atom_site_fract_y _atom_site_fract_z
/// Mg2+ 0 0 0
/// O2- 1/2 1/2 1/2
/// ";
/// let reading = cosetta::cif::read_bytes(text);
/// let unit = reading.blocks[0].unit.as_ref().unwrap();
/// assert_eq!((unit.sites.len(), unit.operations.len()), (2, 192));
/// assert_eq!(unit.sites[1].oxidation, Some(-2.0));
/// ```
#[must_use]
pub fn read_bytes(bytes: &[u8]) -> Reading {
    let (document, diagnostics) = parse(bytes);
    Reading { blocks: read_document(&document), diagnostics }
}

/// Reads every block of a document.
#[must_use]
pub fn read_document(document: &Document<'_>) -> Vec<BlockReading> {
    document.blocks().map(|block| read_block(&block)).collect()
}

/// Whether a block has any item of a cell or of atom sites.
#[must_use]
pub fn is_structure(block: &Block<'_, '_>) -> bool {
    has_cell(block) || has_sites(block)
}

/// Reads one block of a document.
#[must_use]
pub fn read_block(block: &Block<'_, '_>) -> BlockReading {
    let mut diagnostics = Vec::new();
    let refusal = Diagnostic::error(Code::CifNoStructure, "the block holds no cell and no atom sites");
    let mut reading = BlockReading {
        span: block.span,
        is_structure: is_structure(block),
        formula_sum: value_of(block, FORMULA_SUM).and_then(|value| value.stated().map(str::to_owned)),
        formula_units: optional_number(block, FORMULA_UNITS, &mut diagnostics).filter(|units| *units > 0.0),
        ..BlockReading::of_unit(&block.name, Err(refusal.at(block.span)))
    };
    if reading.is_structure {
        reading.unit = read_unit(block, &mut reading, &mut diagnostics);
    }
    diagnostics.sort_by_key(|found| found.span.map_or(block.span.start, |span| span.start));
    reading.diagnostics = diagnostics;
    reading
}

fn read_unit(
    block: &Block<'_, '_>,
    reading: &mut BlockReading,
    noticed: &mut Vec<Diagnostic>,
) -> Result<AsymmetricUnit, Diagnostic> {
    refuse_other_kinds(block)?;
    let (lattice, uncertainty) = read_cell(block, noticed)?;
    reading.cell_uncertainty = uncertainty;
    let formula = reading.formula_sum.as_deref().and_then(Composition::parse);
    let found = read_sites(block, &lattice, formula.as_ref(), noticed)?;
    reading.site_places.clone_from(&found.places);
    reading.site_uncertainty.clone_from(&found.uncertainties);
    let evidence = Evidence {
        lattice: &lattice,
        found: &found,
        formula: formula.as_ref(),
        units: reading.formula_units,
    };
    let (stated, operations) = read_symmetry(
        block,
        block.document().source(),
        &lattice,
        |operations| evidence.misfit(operations),
        noticed,
    );
    reading.stated = stated;
    let operations = operations?;
    check_metric(block, &lattice, &uncertainty, &operations, noticed);
    evidence.check(block, &operations, reading.stated.source, noticed)?;
    Ok(AsymmetricUnit { lattice, sites: found.list, operations })
}

/// Refuses structures that are not crystals of atoms in three dimensions, by name.
fn refuse_other_kinds(block: &Block<'_, '_>) -> Result<(), Diagnostic> {
    let stated =
        |tags: Spellings| tags.iter().filter_map(|tag| block.value(tag)).find(|v| v.stated().is_some());
    let dimension = stated(MODULATION_DIMENSION).filter(|value| value.stated() != Some("0"));
    if let Some(value) = dimension.or_else(|| stated(SUPERSPACE)) {
        let message = "the structure is modulated: its symmetry is that of a superspace group";
        return Err(Diagnostic::error(Code::SymmetryModulated, message).at(value.span));
    }
    let is_ordinary = [OPERATIONS, HALL, HERMANN_MAUGUIN, NUMBER].iter().any(|tags| stated(tags).is_some());
    if let Some(value) = stated(MAGNETIC).filter(|_| !is_ordinary) {
        let message =
            "only the symmetry of the magnetic structure is stated, not that of the crystal structure";
        return Err(Diagnostic::error(Code::SymmetryMagnetic, message)
            .at(value.span)
            .hint("_space_group_symop_operation_xyz with one operation per line"));
    }
    if let Some(value) = stated(MACROMOLECULE) {
        let message = "the block describes a macromolecule, with residues and chains";
        return Err(Diagnostic::error(Code::CifMacromolecule, message).at(value.span));
    }
    Ok(())
}

/// What else the file says about its sites, to test the symmetry against.
#[derive(Clone, Copy)]
struct Evidence<'a> {
    lattice: &'a Lattice,
    found: &'a Sites,
    formula: Option<&'a Composition>,
    units: Option<f64>,
}

/// Where the parts of a listed site are in the file.
#[derive(Debug, Clone, Copy)]
pub struct SitePlace {
    /// The label, or what comes first where there is none.
    pub label: Span,
    /// The coordinates.
    pub position: Span,
    /// The occupancy, if one is given.
    pub occupancy: Option<Span>,
    /// The multiplicity, if one is given.
    pub multiplicity: Option<Span>,
}

impl BlockReading {
    /// A structure of which nothing else is stated.
    #[must_use]
    pub fn of_unit(name: &str, unit: Result<AsymmetricUnit, Diagnostic>) -> Self {
        Self {
            name: name.to_owned(),
            span: Span::default(),
            is_structure: true,
            unit,
            stated: StatedSymmetry::default(),
            formula_sum: None,
            formula_units: None,
            cell_uncertainty: [None; 6],
            site_places: Vec::new(),
            site_uncertainty: Vec::new(),
            diagnostics: Vec::new(),
        }
    }

    /// A finding about a listed site, with the place in the file it had not been given so far.
    #[must_use]
    pub fn locate(&self, finding: Diagnostic) -> Diagnostic {
        let Some(place) = finding.site.and_then(|site| self.site_places.get(site)) else { return finding };
        let span = match finding.code {
            Code::SiteShared | Code::SiteOverfull => place.occupancy.unwrap_or(place.label),
            Code::SiteRounded | Code::SitesTooClose | Code::SiteListedTwice => place.position,
            _ => place.label,
        };
        if finding.span.is_some() { finding } else { finding.at(span) }
    }
}

impl Evidence<'_> {
    /// How badly operations fit the sites: impossible distances weigh most, then the formula, the number of formula
    /// units, and the stated multiplicities.
    fn misfit(&self, operations: &[Operation]) -> u32 {
        let unit = AsymmetricUnit {
            lattice: self.lattice.clone(),
            sites: self.found.list.clone(),
            operations: operations.to_vec(),
        };
        let has_clash = unit.expand(&ExpandTolerance::default()).is_err();
        let multiplicities = self.multiplicities(operations);
        let made = self.composition(&multiplicities);
        let units = self.formula.map(|formula| made.units_of(formula));
        let misses_formula = units.is_some_and(|units| units.is_none());
        let misses_units = units.flatten().is_some_and(|found| !self.is_stated_number_of_units(found));
        let wrong = self.wrong_multiplicities(&multiplicities, operations.len()).count();
        let wrong = u32::try_from(wrong).unwrap_or(u32::MAX).min(9_999);
        u32::from(has_clash) * 1_000_000
            + u32::from(misses_formula) * 100_000
            + u32::from(misses_units) * 10_000
            + wrong
    }

    /// How many images each site has in the cell: operations divided by those that leave the site in place.
    fn multiplicities(&self, operations: &[Operation]) -> Vec<f64> {
        self.found.list.iter().map(|site| multiplicity(self.lattice, operations, site)).collect()
    }

    /// Whether a number of formula units is the stated one, if one is stated. Some programs state the number of units but
    /// write the content of the whole cell as the formula; that counts as agreement too.
    fn is_stated_number_of_units(&self, found: f64) -> bool {
        let (Some(stated), Some(formula)) = (self.units, self.formula) else { return true };
        let is_of_cell = (found - 1.0).abs() <= UNITS_TOLERANCE && formula.is_divisible_by(stated);
        is_of_cell || (found - stated).abs() <= UNITS_TOLERANCE * stated
    }

    fn composition(&self, multiplicities: &[f64]) -> Composition {
        let mut made = Composition::default();
        for (site, multiplicity) in self.found.list.iter().zip(multiplicities) {
            made.add(site.element, site.occupancy * multiplicity);
        }
        made
    }

    /// Sites whose stated multiplicity is not the number of images. Some programs write the order of the site
    /// symmetry there instead; that is let pass when all stated numbers are such orders.
    fn wrong_multiplicities<'m>(
        &'m self,
        multiplicities: &'m [f64],
        order: usize,
    ) -> impl Iterator<Item = usize> + 'm {
        #[allow(clippy::cast_precision_loss, reason = "group orders are small")]
        let order = order as f64;
        let pairs = move || self.found.multiplicities.iter().zip(multiplicities).enumerate();
        let is_same = |a: f64, b: f64| (a - b).abs() < 0.5;
        let are_orders =
            pairs().all(|(_, (stated, found))| stated.is_none_or(|stated| is_same(stated * found, order)));
        pairs()
            .filter(move |(_, (stated, found))| {
                !are_orders && stated.is_some_and(|stated| !is_same(stated, **found))
            })
            .map(|(index, _)| index)
    }

    fn check(
        &self,
        block: &Block<'_, '_>,
        operations: &[Operation],
        source: SymmetrySource,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<(), Diagnostic> {
        let multiplicities = self.multiplicities(operations);
        let wrong: Vec<usize> = self.wrong_multiplicities(&multiplicities, operations.len()).collect();
        if let Some(&first) = wrong.first() {
            let more = match wrong.len() {
                1 => String::new(),
                count => format!(", and {} more sites likewise", count - 1),
            };
            let message = format!(
                "site {} has {} images in the cell, but its stated multiplicity is {}{more}",
                self.found.list[first].label,
                multiplicities[first],
                self.found.multiplicities[first].unwrap_or_default()
            );
            let place = &self.found.places[first];
            noticed.push(
                Diagnostic::warning(Code::SiteMultiplicity, message)
                    .at(place.multiplicity.unwrap_or(place.label))
                    .hint(multiplicities[first].to_string()),
            );
        }
        let made = self.composition(&multiplicities);
        // Statements that contradict each other leave open what was meant; listed operations say it.
        let trust = Trust { source, contradicts_multiplicities: !wrong.is_empty() };
        let units = self.check_formula(block, &made, trust, noticed)?;
        let has_hydrogen = made.amount(Element::HYDROGEN) > 0.0;
        if let Some(attached) = &self.found.attached {
            let is_complete = units.is_some() || has_hydrogen && self.formula.is_none();
            if !(has_hydrogen && is_complete) {
                return Err(attached.clone());
            }
        }
        Ok(())
    }

    /// Compares the sites with the formula; returns how many units of it they make.
    fn check_formula(
        &self,
        block: &Block<'_, '_>,
        made: &Composition,
        trust: Trust,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<Option<f64>, Diagnostic> {
        let Some(formula) = self.formula else { return Ok(None) };
        let span = value_of(block, FORMULA_SUM).map_or(block.span, |value| value.span);
        let units = made.units_of(formula);
        if formula.amount(Element::HYDROGEN) > 0.0 && made.amount(Element::HYDROGEN) <= 0.0 {
            let message = format!(
                "formula '{formula}' holds hydrogen, but no site does, so the charges would not add up"
            );
            return Err(Diagnostic::error(Code::SiteHydrogenMissing, message).at(span));
        }
        let misses_units = units.is_some_and(|found| !self.is_stated_number_of_units(found));
        if let Some(why) = trust.doubt(units.is_none(), misses_units) {
            let what = match units {
                None => format!("no multiple of the formula {formula}"),
                Some(found) => format!(
                    "{found:.3} units of the formula {formula} where {} is {}",
                    FORMULA_UNITS[0],
                    self.units.unwrap_or_default()
                ),
            };
            return Err(Diagnostic::error(
                Code::SymmetryDoubtful,
                format!("the sites make up {made} in the cell, {what}; {why}"),
            )
            .at(span)
            .hint("_space_group_symop_operation_xyz with one operation per line"));
        }
        match (units, self.units) {
            (None, _) => {
                let message =
                    format!("the sites make up {made} in the cell, no multiple of the formula {formula}");
                noticed.push(Diagnostic::warning(Code::SiteFormula, message).at(span));
            }
            (Some(found), Some(stated)) if misses_units => {
                let message = format!(
                    "the sites make up {:.3} formula units {formula} in the cell, but {} is {stated}",
                    found, FORMULA_UNITS[0]
                );
                let span = value_of(block, FORMULA_UNITS).map_or(span, |value| value.span);
                noticed.push(Diagnostic::warning(Code::SiteFormula, message).at(span));
            }
            _ => {}
        }
        Ok(units)
    }
}

/// How far the operations in use can be believed.
#[derive(Debug, Clone, Copy)]
struct Trust {
    source: SymmetrySource,
    /// Whether sites have other numbers of images than the file states.
    contradicts_multiplicities: bool,
}

impl Trust {
    /// Why the structure is in doubt, when its sites miss the formula or the number of formula units.
    fn doubt(self, misses_formula: bool, misses_units: bool) -> Option<&'static str> {
        match self.source {
            SymmetrySource::None if misses_formula || misses_units => Some(
                "no symmetry is stated, so the sites were taken for all atoms of the cell, which they are not",
            ),
            SymmetrySource::Hall | SymmetrySource::HermannMauguin | SymmetrySource::Number
                if misses_formula || misses_units && self.contradicts_multiplicities =>
            {
                Some(
                    "the operations come from a name alone, which may mean another setting than the sites are in",
                )
            }
            _ => None,
        }
    }
}

#[allow(clippy::cast_precision_loss, reason = "group orders are small")]
fn multiplicity(lattice: &Lattice, operations: &[Operation], site: &Site) -> f64 {
    let same_position = ExpandTolerance::default().merge_of(site);
    let limits = lattice.face_distances().map(|distance| same_position / distance);
    let fixing = operations
        .iter()
        .filter(|operation| {
            let offset = (operation.apply(&site.position) - site.position).map(|x| x - x.round());
            (0..3).all(|i| offset[i].abs() <= limits[i])
                && lattice.to_cartesian(&offset).norm() <= same_position
        })
        .count();
    operations.len().max(1) as f64 / fixing.max(1) as f64
}
