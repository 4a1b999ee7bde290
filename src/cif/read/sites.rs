//! The atom sites of a block.

use super::super::document::{self, Block, Table, Value};
use super::super::number::{Measured, parse_number};
use super::super::parse::shown;
use super::SitePlace;
use super::cell::{meant_number, value_of};
use super::composition::Composition;
use super::species::{Guess, Species, guess_element, implied_hydrogen, parse_charge, parse_species};
use super::tags::{ATOM_TYPE, CARTESIAN_MATRIX, CARTESIAN_VECTOR, SITE, site};
use crate::cell::Lattice;
use crate::crystal::{Element, Site};
use crate::diagnostic::{Code, Diagnostic, Span};
use nalgebra::{Matrix3, Vector3};
use std::collections::{BTreeSet, HashMap};

/// Blocks that list more sites than this are refused unread, whatever `--max-sites` says.
const MAX_LISTED: usize = 400_000;
/// Occupancies up to this count as one.
const MAX_OCCUPANCY: f64 = 1.001;
/// An uncertainty of a fractional coordinate from here up is a mistyped number.
const MAX_UNCERTAINTY: f64 = 0.5;

/// The sites, and what was said about each.
#[derive(Debug, Default)]
pub(super) struct Sites {
    pub(super) list: Vec<Site>,
    /// For each site, its stated multiplicity.
    pub(super) multiplicities: Vec<Option<f64>>,
    /// For each site, where it is in the file.
    pub(super) places: Vec<SitePlace>,
    /// For each site, the standard uncertainties of its fractional coordinates.
    pub(super) uncertainties: Vec<[Option<f64>; 3]>,
    /// The first site that is said to carry hydrogen atoms without coordinates, with the words for it.
    pub(super) attached: Option<Diagnostic>,
}

/// Whether the block has any item of the atom sites.
pub(super) fn has_sites(block: &Block<'_, '_>) -> bool {
    SITE.iter().copied().flatten().any(|tag| block.has(tag))
}

/// Reads the atom sites.
pub(super) fn read_sites(
    block: &Block<'_, '_>,
    lattice: &Lattice,
    formula: Option<&Composition>,
    noticed: &mut Vec<Diagnostic>,
) -> Result<Sites, Diagnostic> {
    let table = block
        .table(&SITE)
        .filter(|table| table.rows() > 0)
        .ok_or_else(|| Diagnostic::error(Code::SitesMissing, "the block has no atom sites").at(block.span))?;
    if let Some(fault) = table.fault() {
        return Err(fault.clone());
    }
    if table.rows() > MAX_LISTED {
        let message = format!("the block lists {} sites, above the limit of {MAX_LISTED}", table.rows());
        return Err(Diagnostic::error(Code::SiteTooMany, message).at(table.span().unwrap_or(block.span)));
    }
    let position = Position::of(block, &table, lattice, noticed)?;
    let types = AtomTypes::read(block, noticed);
    let formula: Option<BTreeSet<Element>> = formula.map(|formula| formula.elements().collect());
    let mut found = Sites::default();
    let mut dropped = Gathered::default();
    let mut disordered = Gathered::default();
    // For each disorder assembly, the group and the label of its first fully occupied site.
    let mut alternatives: HashMap<String, (String, String)> = HashMap::new();
    for values in table.iter() {
        let row = Row { values };
        let span = row.span().unwrap_or(block.span);
        let label = row.stated(site::LABEL).or_else(|| row.stated(site::TYPE)).unwrap_or("?").to_owned();
        let is_dummy = row.stated(site::CALCULATED).is_some_and(|flag| flag.eq_ignore_ascii_case("dum"));
        let occupancy = row.occupancy(&label)?;
        if is_dummy || occupancy <= 0.0 {
            dropped.add(&label, span);
            continue;
        }
        let (species, oxidation) = row.species(&label, &types, formula.as_ref())?;
        if let Some(group) = row.stated(site::DISORDER_GROUP).filter(|_| occupancy >= Site::FULL_OCCUPANCY) {
            disordered.add(&label, span);
            let assembly = row.stated(site::DISORDER_ASSEMBLY).unwrap_or(".");
            let first =
                alternatives.entry(assembly.to_owned()).or_insert_with(|| (group.to_owned(), label.clone()));
            if first.0 != group {
                return Err(both_full(first, assembly, (group, &label)).at(span));
            }
        }
        if found.attached.is_none() {
            found.attached = row.attached_hydrogens(&label, formula.as_ref());
        }
        let position = position.read(&row, &label)?;
        found.list.push(Site { label, element: species, position, occupancy, oxidation });
        found
            .multiplicities
            .push(row.stated(site::MULTIPLICITY).and_then(parse_number).map(|number| number.value));
        found.places.push(row.place(span));
        found.uncertainties.push(row.uncertainties());
    }
    noticed.extend(dropped.report(Code::SiteDropped, "a dummy, or of zero occupancy, and dropped"));
    noticed.extend(
        disordered
            .report(Code::SiteDisorder, "in a disorder group but fully occupied; the occupancy was kept"),
    );
    if found.list.is_empty() {
        let message = "every atom site is a dummy or has zero occupancy";
        return Err(Diagnostic::error(Code::SitesMissing, message).at(table.span().unwrap_or(block.span)));
    }
    Ok(found)
}

/// The refusal of an assembly two of whose alternatives are said to be there in every cell.
fn both_full(first: &(String, String), assembly: &str, second: (&str, &str)) -> Diagnostic {
    let of = if assembly == "." { String::new() } else { format!(" of assembly {}", shown(assembly)) };
    let message = format!(
        "sites {} and {} are in disorder groups {} and {}{of}, of which a crystal has one at a time, but both are fully \
         occupied",
        shown(&first.1),
        shown(second.1),
        shown(&first.0),
        shown(second.0)
    );
    Diagnostic::error(Code::SiteAlternatives, message)
        .hint("_atom_site_occupancy 0.5 for both, or remove one group")
}

/// Sites of which one thing is to be said.
#[derive(Debug, Default)]
struct Gathered {
    labels: Vec<String>,
    span: Option<Span>,
}

impl Gathered {
    fn add(&mut self, label: &str, span: Span) {
        self.span.get_or_insert(span);
        self.labels.push(shown(label).into_owned());
    }

    fn report(self, code: Code, what: &str) -> Option<Diagnostic> {
        let span = self.span?;
        let verb = if self.labels.len() == 1 { "is" } else { "are" };
        Some(Diagnostic::note(code, format!("{} {verb} {what}", name_list(&self.labels))).at(span))
    }
}

/// `O1`, `O1, O2 and O3`, or `O1, O2, O3 and 7 more`.
pub(super) fn name_list(names: &[String]) -> String {
    match names {
        [] => String::new(),
        [one] => format!("site {one}"),
        [front @ .., last] if names.len() <= 4 => format!("sites {} and {last}", front.join(", ")),
        _ => format!("sites {} and {} more", names[..3].join(", "), names.len() - 3),
    }
}

/// One line of the table.
struct Row<'s> {
    values: document::Row<'s>,
}

impl<'s> Row<'s> {
    fn value(&self, column: usize) -> Option<&Value<'s>> {
        self.values.value(column)
    }

    fn stated(&self, column: usize) -> Option<&str> {
        self.values.stated(column)
    }

    fn span(&self) -> Option<Span> {
        (0..SITE.len())
            .filter_map(|column| self.value(column))
            .map(|value| value.span)
            .min_by_key(|s| s.start)
    }

    fn place(&self, label: Span) -> SitePlace {
        let at = |column: usize| self.value(column).map(|value| value.span);
        let first = [site::FRACTIONAL, site::CARTESIAN].into_iter().find(|first| at(*first).is_some());
        let spans: Vec<Span> = first.map_or(0..0, |first| first..first + 3).filter_map(at).collect();
        // The three numbers together where they follow each other on one line.
        let position = match spans.as_slice() {
            [x, y, z] if x.line == z.line && x.end <= y.start && y.end <= z.start => {
                Span { end: z.end, ..*x }
            }
            [x, ..] => *x,
            [] => label,
        };
        SitePlace { label, position, occupancy: at(site::OCCUPANCY), multiplicity: at(site::MULTIPLICITY) }
    }

    /// Standard uncertainties of the fractional coordinates.
    fn uncertainties(&self) -> [Option<f64>; 3] {
        [0, 1, 2].map(|axis| self.stated(site::FRACTIONAL + axis).and_then(parse_number)?.uncertainty)
    }

    fn occupancy(&self, label: &str) -> Result<f64, Diagnostic> {
        let Some(text) = self.stated(site::OCCUPANCY) else { return Ok(1.0) };
        let refuse = |what: String| {
            let refusal = Diagnostic::error(Code::SiteOccupancyInvalid, what);
            match self.value(site::OCCUPANCY) {
                Some(value) => refusal.at(value.span),
                None => refusal,
            }
        };
        let occupancy = parse_number(text)
            .ok_or_else(|| {
                refuse(format!("the occupancy of site {label} is '{}', which is not a number", shown(text)))
            })?
            .value;
        if !(0.0..=MAX_OCCUPANCY).contains(&occupancy) {
            return Err(refuse(format!("the occupancy of site {label} is {text}, outside 0 to 1")));
        }
        Ok(occupancy.min(1.0))
    }

    /// The element of the site, and its oxidation number if one is stated.
    fn species(
        &self,
        label: &str,
        types: &AtomTypes,
        formula: Option<&BTreeSet<Element>>,
    ) -> Result<(Element, Option<f64>), Diagnostic> {
        let symbol = self.stated(site::TYPE);
        let refuse = |what: String| {
            let column = if symbol.is_some() { site::TYPE } else { site::LABEL };
            let refusal = Diagnostic::error(Code::SiteElementUnknown, what)
                .hint("_atom_site_type_symbol with one element symbol per site");
            match self.value(column) {
                Some(value) => refusal.at(value.span),
                None => refusal,
            }
        };
        if let Some(symbol) = symbol {
            let species = parse_species(symbol)
                .or_else(|| implied_hydrogen(symbol).map(|element| Species { element, charge: None }))
                .ok_or_else(|| {
                    refuse(format!(
                        "type symbol '{}' of site {label} does not begin with an element",
                        shown(symbol)
                    ))
                })?;
            return Ok((species.element, types.oxidation(symbol, &species)));
        }
        let element = match implied_hydrogen(label).map_or_else(|| guess_element(label, formula), Guess::One)
        {
            Guess::One(element) => element,
            Guess::Two(first, second) => {
                return Err(refuse(format!("label '{}' may stand for {first} or {second}", shown(label))));
            }
            Guess::Unknown => {
                return Err(refuse(format!("no element can be told from label '{}'", shown(label))));
            }
        };
        let after = label.get(element.symbol().len()..).unwrap_or_default();
        Ok((element, types.oxidation(element.symbol(), &Species { element, charge: parse_charge(after) })))
    }

    fn attached_hydrogens(&self, label: &str, formula: Option<&BTreeSet<Element>>) -> Option<Diagnostic> {
        let count = self.stated(site::ATTACHED_HYDROGENS).and_then(parse_number).map_or(0.0, |n| n.value);
        let may_hold_hydrogen = formula.is_none_or(|formula| formula.contains(&Element::HYDROGEN));
        let name = self.stated(site::TYPE).unwrap_or(label);
        let (message, column) = if count > 0.0 {
            let message = format!("site {label} has {count} attached hydrogen atoms without coordinates");
            (message, site::ATTACHED_HYDROGENS)
        } else if may_hold_hydrogen && (implied_hydrogen(name).is_some() || implied_hydrogen(label).is_some())
        {
            let message =
                format!("site {label} stands for a group with hydrogen atoms, which have no coordinates");
            (message, site::LABEL)
        } else {
            return None;
        };
        let refusal = Diagnostic::error(Code::SiteHydrogenAttached, message);
        Some(match self.value(column).map(|value| value.span).or_else(|| self.span()) {
            Some(span) => refusal.at(span),
            None => refusal,
        })
    }
}

/// How positions are stated.
enum Position {
    Fractional,
    /// The matrix `A` and vector `v` of `x_fractional = A (x_Cartesian - v)`.
    Cartesian(Box<Matrix3<f64>>, Vector3<f64>),
}

impl Position {
    fn of(
        block: &Block<'_, '_>,
        table: &Table<'_, '_>,
        lattice: &Lattice,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<Self, Diagnostic> {
        let span = table.span().unwrap_or(block.span);
        let lacks = |first: usize| (first..first + 3).find(|column| !table.has(*column));
        let Some(lacking) = lacks(site::FRACTIONAL) else { return Ok(Self::Fractional) };
        if lacks(site::CARTESIAN).is_some() {
            let is_partial = (0..3).any(|column| table.has(site::FRACTIONAL + column));
            let code = if is_partial { Code::SitePositionInvalid } else { Code::SitesMissing };
            let message = format!("the atom sites have no {}", SITE[lacking][0]);
            return Err(Diagnostic::error(code, message).at(span));
        }
        let numbers = |tags: &[super::tags::Spellings]| -> Option<Vec<f64>> {
            tags.iter()
                .map(|tags| value_of(block, tags)?.stated().and_then(parse_number).map(|number| number.value))
                .collect()
        };
        let vector = numbers(&CARTESIAN_VECTOR).map_or_else(Vector3::zeros, Vector3::from_iterator);
        if let Some(matrix) = numbers(&CARTESIAN_MATRIX) {
            let inverse = Matrix3::from_row_iterator(matrix).try_inverse().ok_or_else(|| {
                let message = "the matrix _atom_sites_Cartn_tran_matrix has no inverse";
                Diagnostic::error(Code::SitePositionInvalid, message).at(span)
            })?;
            let message = "positions were made from Cartesian coordinates with the stated matrix";
            noticed.push(Diagnostic::note(Code::SiteCartesian, message).at(span));
            return Ok(Self::Cartesian(Box::new(inverse), vector));
        }
        noticed.push(
            Diagnostic::warning(
                Code::SiteCartesian,
                "positions were made from Cartesian coordinates; no matrix is stated, so a was taken along x and b in the xy plane",
            )
            .at(span),
        );
        Ok(Self::Cartesian(Box::new(*lattice.inverse()), vector))
    }

    fn read(&self, row: &Row<'_>, label: &str) -> Result<Vector3<f64>, Diagnostic> {
        match self {
            Self::Fractional => {
                let numbers = coordinates(row, label, site::FRACTIONAL)?;
                for (number, column) in numbers.iter().zip(site::FRACTIONAL..) {
                    if let Some(uncertainty) = number.uncertainty.filter(|u| *u >= MAX_UNCERTAINTY) {
                        let message = format!(
                            "{} of site {label} has an uncertainty of {uncertainty}, not below {MAX_UNCERTAINTY}",
                            SITE[column][0]
                        );
                        return Err(refuse_position(row, column, message));
                    }
                }
                Ok(Vector3::from(numbers.map(|number| number.value)))
            }
            Self::Cartesian(matrix, vector) => {
                let numbers = coordinates(row, label, site::CARTESIAN)?;
                Ok(**matrix * (Vector3::from(numbers.map(|number| number.value)) - vector))
            }
        }
    }
}

fn coordinates(row: &Row<'_>, label: &str, first: usize) -> Result<[Measured; 3], Diagnostic> {
    let mut numbers = [Measured { value: 0.0, uncertainty: None, decimals: None }; 3];
    for (number, column) in numbers.iter_mut().zip(first..) {
        let tag = SITE[column][0];
        let Some(text) = row.stated(column) else {
            return Err(refuse_position(row, column, format!("site {label} has no value for {tag}")));
        };
        *number = parse_number(text).ok_or_else(|| {
            let message = format!("{tag} of site {label} is '{}', which is not a number", shown(text));
            let refusal = refuse_position(row, column, message);
            match meant_number(text) {
                Some(meant) => refusal.hint(meant),
                None => refusal,
            }
        })?;
    }
    Ok(numbers)
}

fn refuse_position(row: &Row<'_>, column: usize, message: String) -> Diagnostic {
    let refusal = Diagnostic::error(Code::SitePositionInvalid, message);
    match row.value(column) {
        Some(value) => refusal.at(value.span),
        None => refusal,
    }
}

/// Oxidation numbers by type symbol.
struct AtomTypes {
    by_symbol: HashMap<String, f64>,
    /// For each element with types listed, the oxidation number if all its types share it.
    by_element: HashMap<Element, Option<f64>>,
}

impl AtomTypes {
    fn read(block: &Block<'_, '_>, noticed: &mut Vec<Diagnostic>) -> Self {
        let mut types = Self { by_symbol: HashMap::new(), by_element: HashMap::new() };
        let Some(table) = block.table(&ATOM_TYPE).filter(|table| table.has(0) && table.has(1)) else {
            return types;
        };
        for row in table.iter() {
            let (Some(symbol), Some(value)) = (row.stated(0), row.value(1)) else { continue };
            let Some(text) = value.stated() else { continue };
            let Some(number) = parse_number(text).map(|n| n.value).or_else(|| parse_charge(text)) else {
                let message = format!(
                    "the oxidation number of {} is '{}', which is not a number",
                    shown(symbol),
                    shown(text)
                );
                noticed.push(Diagnostic::warning(Code::SiteOxidation, message).at(value.span));
                continue;
            };
            let species = parse_species(symbol);
            if let Some(charge) =
                species.and_then(|s| s.charge).filter(|charge| (charge - number).abs() > 1e-6)
            {
                let message = format!(
                    "the oxidation number of {} is {number}, but its symbol says {charge}; {number} was used",
                    shown(symbol)
                );
                noticed.push(Diagnostic::warning(Code::SiteOxidation, message).at(value.span));
            }
            types.by_symbol.insert(symbol.to_ascii_lowercase(), number);
            if let Some(species) = species {
                types
                    .by_element
                    .entry(species.element)
                    .and_modify(|shared| *shared = shared.filter(|known| (known - number).abs() < 1e-6))
                    .or_insert(Some(number));
            }
        }
        types
    }

    /// The number listed for the symbol, else the charge in the symbol, else the one number listed for the element.
    fn oxidation(&self, symbol: &str, species: &Species) -> Option<f64> {
        self.by_symbol
            .get(&symbol.to_ascii_lowercase())
            .copied()
            .or(species.charge)
            .or_else(|| self.by_element.get(&species.element).copied().flatten())
    }
}
