//! From one entry to a structure.

use super::document::Piece;
use super::species::{Assembly, Occupant, Species, occupants};
use super::{Entry, refusal};
use crate::cell::Lattice;
use crate::crystal::{AsymmetricUnit, Site, lattice_refusal};
use crate::diagnostic::{Code, Diagnostic, Lines, Span};
use nalgebra::{Matrix3, Vector3};
use serde::Deserialize;
use serde::de::IgnoredAny;
use serde_json::Value;
use serde_json::value::RawValue;
use std::collections::BTreeMap;

/// What stands around the properties.
#[derive(Deserialize)]
struct Wrapper<'a> {
    id: Option<Value>,
    #[serde(rename = "type")]
    kind: Option<Value>,
    #[serde(borrow)]
    attributes: Option<&'a RawValue>,
    /// The mark of the first line of a file of JSON lines.
    #[serde(rename = "x-optimade")]
    heading: Option<IgnoredAny>,
}

/// The properties of a structure that are used here.
#[derive(Deserialize)]
struct Attributes<'a> {
    lattice_vectors: Option<Vec<[Option<f64>; 3]>>,
    dimension_types: Option<Vec<u64>>,
    nperiodic_dimensions: Option<u64>,
    #[serde(borrow)]
    cartesian_site_positions: Option<Vec<&'a RawValue>>,
    chemical_formula_reduced: Option<Value>,
    species_at_sites: Option<Vec<String>>,
    species: Option<Vec<Species>>,
    structure_features: Option<Vec<String>>,
    assemblies: Option<Vec<Assembly>>,
    nsites: Option<u64>,
}

/// An entry that is being read: where it is, and how its refusals are made.
struct Reader<'a> {
    id: &'a str,
    piece: Piece<'a>,
    lines: &'a Lines,
}

/// Reads an entry; `None` for the heading of a file of JSON lines.
pub(super) fn read(piece: Piece<'_>, fallback: String, lines: &Lines) -> Option<Entry> {
    let mut entry = Entry {
        id: fallback,
        span: piece.place_of("", lines),
        is_structure: true,
        unit: Err(Diagnostic::error(Code::OptimadeProperty, "nothing was read")),
        site_places: Vec::new(),
        diagnostics: Vec::new(),
    };
    if !piece.json.starts_with('{') {
        let message = format!("entry {} is not a JSON object", entry.id);
        entry.unit = Err(refusal(Code::OptimadeProperty, message, piece, "", lines));
        return Some(entry);
    }
    let wrapper: Wrapper = match serde_json::from_str(piece.json) {
        Ok(wrapper) => wrapper,
        Err(error) => {
            let what = format!("entry {} cannot be read", entry.id);
            entry.unit = Err(piece.fault(Code::OptimadeProperty, &what, &error, lines));
            return Some(entry);
        }
    };
    if wrapper.heading.is_some() && wrapper.attributes.is_none() {
        return None;
    }
    match &wrapper.id {
        Some(Value::String(id)) if !id.is_empty() => entry.id = printable(id),
        Some(Value::Number(id)) => entry.id = id.to_string(),
        _ => {}
    }
    let id = entry.id.clone();
    let mut reader = Reader { id: &id, piece, lines };
    if let Some(kind) = wrapper.kind.filter(|kind| kind != "structures" && !kind.is_null()) {
        entry.is_structure = false;
        let message = format!("the entry is of the type {}, not structures", printable(&kind.to_string()));
        entry.unit = Err(reader.refuse(Code::OptimadeType, "type", &message));
        return Some(entry);
    }
    let inner = wrapper.attributes.map_or(piece, |attributes| piece.inner(attributes));
    if !inner.json.starts_with('{') {
        let message = "'attributes' is not a JSON object";
        entry.unit = Err(reader.refuse(Code::OptimadeProperty, "attributes", message));
        return Some(entry);
    }
    reader.piece = inner;
    entry.unit = match serde_json::from_str::<Attributes>(inner.json) {
        Ok(attributes) => reader.unit(&attributes, &mut entry.site_places, &mut entry.diagnostics),
        Err(error) => {
            let what = format!("entry {id} has a property of another shape than the standard asks for");
            Err(inner.fault(Code::OptimadeProperty, &what, &error, lines))
        }
    };
    Some(entry)
}

impl Reader<'_> {
    fn refuse(&self, code: Code, property: &str, message: &str) -> Diagnostic {
        refusal(code, format!("entry {}: {message}", self.id), self.piece, property, self.lines)
    }

    /// A property that has to be there.
    fn needed<'v, T>(&self, value: Option<&'v T>, property: &str) -> Result<&'v T, Diagnostic> {
        value.ok_or_else(|| {
            let message = format!("'{property}' is missing or null");
            self.refuse(Code::OptimadeProperty, property, &message)
        })
    }

    fn unit(
        &self,
        given: &Attributes<'_>,
        places: &mut Vec<Span>,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<AsymmetricUnit, Diagnostic> {
        self.check_features(given, noticed)?;
        let lattice = self.lattice(given)?;
        let positions = self.needed(given.cartesian_site_positions.as_ref(), "cartesian_site_positions")?;
        let names = self.needed(given.species_at_sites.as_ref(), "species_at_sites")?;
        self.check_counts(positions.len(), names.len(), given.nsites)?;
        let weights = self.weights(given, positions.len())?;
        let species = self.needed(given.species.as_ref(), "species")?;
        let species: BTreeMap<&str, &Species> =
            species.iter().map(|species| (species.name.as_str(), species)).collect();
        let mut read: BTreeMap<&str, Vec<Occupant>> = BTreeMap::new();
        let mut numbers: BTreeMap<&str, usize> = BTreeMap::new();
        let mut sites = Vec::with_capacity(positions.len());
        for ((name, position), weight) in names.iter().zip(positions).zip(weights) {
            if !read.contains_key(name.as_str()) {
                let found = species.get(name.as_str()).ok_or_else(|| {
                    let message =
                        format!("'species' does not list '{}', which is at a site", printable(name));
                    self.refuse(Code::OptimadeSpecies, "species", &message)
                })?;
                let found = occupants(found)
                    .map_err(|(code, message)| self.refuse(code, "species", &printable(&message)))?;
                read.insert(name.as_str(), found);
            }
            let (position, place) = self.position(position)?;
            let position = lattice.to_fractional(&position);
            for occupant in read.get(name.as_str()).into_iter().flatten() {
                let symbol = occupant.element.symbol();
                let number = numbers.entry(symbol).or_default();
                *number += 1;
                let mut site = Site::new(format!("{symbol}{number}"), occupant.element, position);
                site.occupancy = occupant.concentration * weight;
                if site.occupancy > 0.0 {
                    sites.push(site);
                    places.push(place);
                }
            }
        }
        self.check_formula(given, &sites, noticed);
        Ok(AsymmetricUnit { lattice, sites, operations: Vec::new() })
    }

    /// Compares ordered sites with the reduced formula: elements in alphabetical order, each with its smallest number.
    fn check_formula(&self, given: &Attributes<'_>, sites: &[Site], noticed: &mut Vec<Diagnostic>) {
        let Some(stated) = given.chemical_formula_reduced.as_ref().and_then(Value::as_str) else { return };
        if !sites.iter().all(Site::is_full) {
            return;
        }
        let mut counts: BTreeMap<&str, usize> = BTreeMap::new();
        for site in sites {
            *counts.entry(site.element.symbol()).or_default() += 1;
        }
        let divisor = counts.values().fold(0, |divisor, &count| num_integer::gcd(divisor, count)).max(1);
        let made = counts.iter().fold(String::new(), |text, (symbol, count)| match count / divisor {
            1 => text + symbol,
            count => text + symbol + &count.to_string(),
        });
        if made != stated {
            let message = format!(
                "entry {}: the sites make up {made}, but 'chemical_formula_reduced' is {}",
                self.id,
                printable(stated)
            );
            let place = self.piece.place_of("chemical_formula_reduced", self.lines);
            noticed.push(Diagnostic::warning(Code::SiteFormula, message).at(place));
        }
    }

    /// A Cartesian position in Å, and where it is.
    fn position(&self, json: &RawValue) -> Result<(Vector3<f64>, Span), Diagnostic> {
        let piece = self.piece.inner(json);
        match serde_json::from_str::<[f64; 3]>(piece.json) {
            Ok(position) => Ok((Vector3::from(position), piece.place(self.lines))),
            Err(error) => {
                let what = format!("entry {}: a position is not three numbers", self.id);
                Err(piece.fault(Code::OptimadeProperty, &what, &error, self.lines))
            }
        }
    }

    /// Refuses what says that the listed sites are not the whole structure.
    fn check_features(
        &self,
        given: &Attributes<'_>,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<(), Diagnostic> {
        for feature in given.structure_features.iter().flatten() {
            match feature.as_str() {
                // Told from the species and assemblies themselves.
                "disorder" | "assemblies" | "site_attachments" => {}
                "implicit_atoms" => {
                    let message = "some atoms are implied without a position ('implicit_atoms')";
                    return Err(self.refuse(Code::OptimadeFeature, "structure_features", message));
                }
                other => {
                    let message = format!(
                        "entry {}: the structure feature '{}' is not known",
                        self.id,
                        printable(other)
                    );
                    let place = self.piece.place_of("structure_features", self.lines);
                    noticed.push(Diagnostic::warning(Code::OptimadeFeature, message).at(place));
                }
            }
        }
        Ok(())
    }

    fn lattice(&self, given: &Attributes<'_>) -> Result<Lattice, Diagnostic> {
        let types = given.dimension_types.as_ref().filter(|types| **types != [1, 1, 1]);
        let flat = types.map(|types| types.iter().filter(|kind| **kind == 1).count() as u64);
        let count = given.nperiodic_dimensions.filter(|count| *count != 3);
        for (count, property) in [(flat, "dimension_types"), (count, "nperiodic_dimensions")] {
            if let Some(count) = count {
                let message =
                    format!("'{property}' says periodic in {count} dimensions, not in three of three");
                return Err(self.refuse(Code::OptimadeDimensions, property, &message));
            }
        }
        let rows = self.needed(given.lattice_vectors.as_ref(), "lattice_vectors")?;
        let vectors: Option<Vec<Vector3<f64>>> =
            rows.iter().map(|row| Some(Vector3::new(row[0]?, row[1]?, row[2]?))).collect();
        let Some([a, b, c]) = vectors.as_deref() else {
            let message = "'lattice_vectors' are not three vectors of three numbers";
            return Err(self.refuse(Code::OptimadeProperty, "lattice_vectors", message));
        };
        Lattice::from_basis(Matrix3::from_columns(&[*a, *b, *c])).and_then(Lattice::in_range).map_err(
            |error| {
                let found = lattice_refusal(&error);
                self.refuse(found.code, "lattice_vectors", &found.message)
            },
        )
    }

    fn check_counts(&self, positions: usize, names: usize, stated: Option<u64>) -> Result<(), Diagnostic> {
        let is_stated = |stated: u64| usize::try_from(stated).is_ok_and(|stated| stated == positions);
        if positions == names && stated.is_none_or(is_stated) {
            return Ok(());
        }
        let also = stated.map_or_else(String::new, |stated| format!(", and 'nsites' is {stated}"));
        let message = format!(
            "there are {positions} positions in 'cartesian_site_positions', {names} names in 'species_at_sites'{also}"
        );
        Err(self.refuse(Code::OptimadeCounts, "cartesian_site_positions", &message))
    }

    /// The probability of each site: below one for sites of alternative groups of an assembly.
    fn weights(&self, given: &Attributes<'_>, sites: usize) -> Result<Vec<f64>, Diagnostic> {
        let mut weights = vec![1.0; sites];
        for assembly in given.assemblies.iter().flatten() {
            for (group, probability) in assembly.groups() {
                for &site in group {
                    let Some(weight) = weights.get_mut(site).filter(|_| (0.0..=1.0).contains(&probability))
                    else {
                        let message =
                            format!("'assemblies' names site {site} with probability {probability}");
                        return Err(self.refuse(Code::OptimadeProperty, "assemblies", &message));
                    };
                    *weight *= probability;
                }
            }
        }
        Ok(weights)
    }
}

/// Without control characters, and not longer than a name should be.
fn printable(text: &str) -> String {
    text.chars().map(|c| if c.is_control() { '\u{fffd}' } else { c }).take(200).collect()
}
