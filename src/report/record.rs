//! One object per material for machines. The field names are a contract: they are documented by the generated schema
//! `man/classify.schema.json` and only ever added to. A field that does not apply is absent.

use super::reasoning::bonds_of;
use crate::charge::{Candidate, charges_text};
use crate::collection::{Material, ParentLevel, Settings};
use crate::crystal::Operation;
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::Ratio;
use crate::polarization::{Component, Coset, FormalPolarization, Label, Sweep};
use crate::symmetry::{Centre, Primitive, Symmetry};
use nalgebra::Vector3;
use schemars::JsonSchema;
use serde::Serialize;

/// A component of an offset: a fraction as text (`"1/2"`) where symmetry fixes it, a number where it is free.
#[derive(Debug, Clone, PartialEq, Serialize, JsonSchema)]
#[serde(untagged)]
pub enum OffsetComponent {
    /// Fixed by symmetry, such as `"1/2"`.
    Exact(String),
    /// Free, from the positions.
    Free(f64),
}

impl From<Component> for OffsetComponent {
    fn from(component: Component) -> Self {
        match component {
            Component::Exact(ratio) => Self::Exact(ratio.to_string()),
            Component::Free(value) => Self::Free(value),
        }
    }
}

/// Whether there is an answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Status {
    /// There is.
    Ok,
    /// There is none; `refusal` says why.
    Refused,
}

/// The classification of one material.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct MaterialRecord {
    /// Path of the file as given or found, `-` for standard input.
    pub file: String,
    /// Name of the data block.
    pub block: String,
    /// Reduced formula, electropositive elements first.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub formula: Option<String>,
    /// Whether there is an answer.
    pub status: Status,
    /// Why there is no answer.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub refusal: Option<Diagnostic>,
    /// The space group found.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub space_group: Option<SpaceGroupRecord>,
    /// Whether the point group holds the inversion.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub centrosymmetric: Option<bool>,
    /// The primitive cell to which offsets refer.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub primitive: Option<PrimitiveRecord>,
    /// The eight classes of inversion centres.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub inversion_centres: Vec<CentreRecord>,
    /// The charges used.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub charges: Option<ChargesRecord>,
    /// The charges that came into question, where none could be inferred.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub candidates: Vec<CandidateRecord>,
    /// The coset of the primitive cell as given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub strict: Option<LevelRecord>,
    /// The coset of the parent cell, where the crystal is a distorted multiple of a smaller cell.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub parent: Option<ParentRecord>,
    /// The offsets that the point group permits.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub permitted: Option<PermittedRecord>,
    /// The polarization in SI and related units.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub polarization: Option<UnitsRecord>,
    /// The tolerances used.
    pub tolerances: TolerancesRecord,
    /// What was noticed; it did not prevent the answer.
    pub diagnostics: Vec<Diagnostic>,
}

/// A space group.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct SpaceGroupRecord {
    /// Number, 1 to 230.
    pub number: u16,
    /// Short Hermann–Mauguin symbol of the standard setting.
    pub symbol: String,
    /// Hall symbol of the standard setting.
    pub hall: String,
}

/// The primitive cell.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct PrimitiveRecord {
    /// How the cell of the file is centred.
    pub centring: String,
    /// The three primitive vectors in the axes of the file, as fractions.
    pub vectors: [[String; 3]; 3],
    /// Number of atoms.
    pub atoms: usize,
    /// Volume in Å³.
    pub volume: f64,
}

/// A class of inversion centres.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct CentreRecord {
    /// Position in the axes of the file.
    pub position: [f64; 3],
    /// Labels of the sites on it.
    pub sites: Vec<String>,
    /// Order of its site symmetry.
    pub order: usize,
    /// Whether it is the origin of the centrosymmetric setting.
    pub is_origin: bool,
}

/// The charges used.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct ChargesRecord {
    /// Where they come from: `given`, `file` or `inferred`.
    pub source: String,
    /// All of them in the form of `--charges`, by element where its sites agree, else by label.
    pub text: String,
    /// One entry for each orbit of sites.
    pub sites: Vec<ChargeRecord>,
    /// The probability of inferred charges.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub probability: Option<f64>,
    /// How many times as likely inferred charges are as the runner-up.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub margin: Option<f64>,
    /// Root mean square difference of bond-valence sums and charges, in valence units.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub global_instability: Option<f64>,
    /// Other plausible charges, where charges were inferred.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub alternatives: Vec<AlternativeRecord>,
    /// Whether label and offset are the same under all plausible charges.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub label_is_certain: Option<bool>,
}

/// Charges that came into question.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct CandidateRecord {
    /// In the form of `--charges`.
    pub text: String,
    /// Their probability.
    pub probability: f64,
}

/// Other plausible charges.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct AlternativeRecord {
    /// In the form of `--charges`.
    pub text: String,
    /// Their probability.
    pub probability: f64,
    /// The label they would lead to.
    pub label: Label,
    /// Whether label and offset would be the same.
    pub is_same: bool,
}

/// The charge of one orbit of sites.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct ChargeRecord {
    /// Label of the first site of the orbit.
    pub label: String,
    /// Element symbol.
    pub element: String,
    /// Formal charge in e.
    pub charge: i64,
    /// Atoms of the orbit in the primitive cell.
    pub count: usize,
    /// Bond-valence sum, positive for valence given, negative for valence taken.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub bond_valence_sum: Option<f64>,
    /// Number of bonds to sites of the other sign.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub coordination: Option<f64>,
    /// The probability of an inferred charge.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub probability: Option<f64>,
}

/// The answer at one level.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct LevelRecord {
    /// One word.
    pub label: Label,
    /// Offset modulo one electron, in units of `e a_i / V` along the primitive vectors.
    pub offset: [OffsetComponent; 3],
    /// Whether zero is in the lattice for single electrons.
    pub contains_zero: bool,
    /// Distance in e·Å from the sum over positions to the nearest permitted value.
    pub residual: f64,
    /// That distance over the distance to the next permitted value; absent when everything is permitted.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub residual_fraction: Option<f64>,
    /// The same for electrons in pairs.
    pub pair: PairRecord,
    /// The same for whole ions.
    pub ion: IonRecord,
}

/// The answer for the averaged structure of the parent cell.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct ParentRecord {
    /// The coset, in the reduced vectors of the parent cell.
    #[serde(flatten)]
    pub level: LevelRecord,
    /// Space group of the averaged structure at the tolerance of the search.
    pub space_group: SpaceGroupRecord,
    /// How many parent cells make a primitive cell of the crystal.
    pub cells: usize,
    /// Largest distance in Å of an atom from its place in the parent.
    pub max_displacement: f64,
    /// Root mean square of these distances in Å.
    pub rms_displacement: f64,
    /// Lengths in Å of the vectors of the parent cell.
    pub lengths: [f64; 3],
    /// Angles in degrees of the vectors of the parent cell.
    pub angles: [f64; 3],
}

/// The coset for electrons in pairs.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct PairRecord {
    /// 2 where every charge is even, else 1, in e.
    pub modulus: i64,
    /// Offset in units of the modulus.
    pub offset: [OffsetComponent; 3],
    /// Whether zero is in the lattice.
    pub contains_zero: bool,
}

/// The coset for whole ions.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct IonRecord {
    /// Greatest common divisor of the charges, in e.
    pub spacing: i64,
    /// Offset in units of the spacing.
    pub offset: [OffsetComponent; 3],
    /// Whether zero is in the lattice.
    pub contains_zero: bool,
}

/// The offsets that a point group permits.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct PermittedRecord {
    /// The offsets, in units of the modulus.
    pub offsets: Vec<[String; 3]>,
    /// Directions along which any value is permitted, in primitive vectors.
    pub free: Vec<[i64; 3]>,
}

/// The offset and the quantum along each primitive vector in other units.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct UnitsRecord {
    /// `e |a_i| / V` in C/m².
    pub quantum_c_per_m2: [f64; 3],
    /// `e |a_i| / V` in µC/cm².
    pub quantum_uc_per_cm2: [f64; 3],
    /// `e |a_i| / V` in e/nm².
    pub quantum_e_per_nm2: [f64; 3],
    /// Offset modulo the quantum, in C/m².
    pub offset_c_per_m2: [f64; 3],
    /// Offset modulo the quantum, in µC/cm².
    pub offset_uc_per_cm2: [f64; 3],
    /// Offset modulo the quantum, in e/nm².
    pub offset_e_per_nm2: [f64; 3],
}

/// The tolerances a result was computed with.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct TolerancesRecord {
    /// The symmetry engine.
    pub engine: String,
    /// The symmetry tolerance asked for, in Å.
    pub symmetry: f64,
    /// The symmetry tolerance that was used, in Å.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub symmetry_used: Option<f64>,
    /// Images of a site nearer than this are one atom, in Å.
    pub merge: f64,
    /// Atoms nearer than this are refused, in Å.
    pub min_distance: f64,
}

/// One e/Å² in e/nm².
const E_PER_NM2: f64 = 100.0;

impl MaterialRecord {
    /// The record of a classified material.
    #[must_use]
    pub fn new(material: &Material, settings: &Settings) -> Self {
        let work = &material.classification;
        let formal = work.outcome.as_ref().ok();
        Self {
            file: material.file.clone(),
            block: material.block.clone(),
            formula: work.formula().map(|formula| formula.to_string()),
            status: if formal.is_some() { Status::Ok } else { Status::Refused },
            refusal: work.outcome.as_ref().err().cloned(),
            space_group: work.symmetry.as_ref().map(SpaceGroupRecord::new),
            centrosymmetric: work
                .primitive
                .as_ref()
                .map(|primitive| primitive.operations.iter().any(Operation::is_inversion)),
            primitive: work.primitive.as_ref().map(PrimitiveRecord::new),
            inversion_centres: CentreRecord::all(material),
            charges: ChargesRecord::new(material, settings),
            candidates: CandidateRecord::all(material),
            strict: formal.map(LevelRecord::new),
            parent: work.parent.as_ref().map(ParentRecord::new),
            permitted: formal.map(PermittedRecord::new),
            polarization: formal.map(UnitsRecord::new),
            tolerances: TolerancesRecord {
                engine: settings.engine.to_string(),
                symmetry: settings.symmetry_tolerance,
                symmetry_used: work.symmetry.as_ref().map(|symmetry| symmetry.tolerance),
                merge: settings.expand.merge,
                min_distance: settings.expand.min_distance,
            },
            diagnostics: work.diagnostics.clone(),
        }
    }

    /// The code of the refusal, if it was refused.
    #[must_use]
    pub fn refusal_code(&self) -> Option<Code> {
        self.refusal.as_ref().map(|refusal| refusal.code)
    }
}

impl SpaceGroupRecord {
    fn new(symmetry: &Symmetry) -> Self {
        Self { number: symmetry.number, symbol: symmetry.symbol.clone(), hall: symmetry.hall.clone() }
    }
}

impl PrimitiveRecord {
    fn new(primitive: &Primitive) -> Self {
        Self {
            centring: primitive.centring.to_string(),
            vectors: primitive_vectors(primitive),
            atoms: primitive.positions.len(),
            volume: primitive.lattice.volume(),
        }
    }
}

/// The primitive vectors in the axes of the file, one vector an entry, as fractions.
#[must_use]
pub fn primitive_vectors(primitive: &Primitive) -> [[String; 3]; 3] {
    let (numerators, denominator) = primitive.vectors();
    [0, 1, 2].map(|vector| {
        [0, 1, 2].map(|axis| {
            Ratio::new(i128::from(numerators[(axis, vector)]), i128::from(denominator))
                .map_or_else(String::new, |ratio| ratio.to_string())
        })
    })
}

impl CentreRecord {
    fn all(material: &Material) -> Vec<Self> {
        let work = &material.classification;
        let (Some(crystal), Some(primitive), Some(centres)) = (&work.crystal, &work.primitive, &work.centres)
        else {
            return Vec::new();
        };
        let labels = |centre: &Centre| {
            centre
                .atoms
                .iter()
                .map(|&atom| crystal.sites[primitive.representatives[atom]].label.clone())
                .collect()
        };
        centres
            .classes
            .iter()
            .enumerate()
            .map(|(index, centre)| Self {
                position: centre_position(primitive, centre.position),
                sites: labels(centre),
                order: centre.order,
                is_origin: index == centres.chosen,
            })
            .collect()
    }
}

/// A centre in the axes of the file, in [0, 1), with what lies within rounding of a whole number set to zero.
#[must_use]
pub fn centre_position(primitive: &Primitive, position: Vector3<f64>) -> [f64; 3] {
    let shown = primitive.to_cell(&position).map(|x| {
        let rounded = (x * 1e6).round() / 1e6;
        rounded - rounded.floor() + 0.0
    });
    shown.into()
}

impl CandidateRecord {
    fn all(material: &Material) -> Vec<Self> {
        let work = &material.classification;
        let Some(crystal) = &work.crystal else { return Vec::new() };
        let record = |candidate: &Candidate| Self {
            text: charges_text(&crystal.sites, &candidate.charges),
            probability: candidate.probability,
        };
        work.candidates.iter().map(record).collect()
    }
}

impl ChargesRecord {
    fn new(material: &Material, settings: &Settings) -> Option<Self> {
        let work = &material.classification;
        let (crystal, assignment) = (work.crystal.as_ref()?, work.assignment.as_ref()?);
        let (symmetry, primitive) = (work.symmetry.as_ref()?, work.primitive.as_ref()?);
        let bonds = bonds_of(material, settings.parameters());
        let reasoning = assignment.reasoning.as_ref();
        let mut sites: Vec<(usize, ChargeRecord)> = Vec::new();
        for &site in &primitive.representatives {
            let orbit = symmetry.orbits[site];
            if let Some((_, record)) = sites.iter_mut().find(|(known, _)| *known == orbit) {
                record.count += 1;
            } else {
                let label = crystal.sites[orbit].label.clone();
                let element = crystal.sites[orbit].element.to_string();
                let charge = assignment.charges[orbit];
                let of_orbit = bonds
                    .as_ref()
                    .and_then(|bonds| bonds.orbits.iter().find(|known| known.sites.contains(&orbit)));
                let record = ChargeRecord {
                    label,
                    element,
                    charge,
                    count: 1,
                    bond_valence_sum: of_orbit.map(|found| found.sum),
                    coordination: of_orbit.map(|found| found.coordination),
                    probability: reasoning.map(|reasoning| reasoning.site_probability(orbit, charge)),
                };
                sites.push((orbit, record));
            }
        }
        let sites = sites.into_iter().map(|(_, record)| record).collect();
        let text = charges_text(&crystal.sites, &assignment.charges);
        let alternatives = work.alternatives.iter().map(|other| AlternativeRecord {
            text: other.text.clone(),
            probability: other.probability,
            label: other.label,
            is_same: other.is_same,
        });
        let is_certain = || work.alternatives.iter().all(|other| other.is_same);
        Some(Self {
            source: assignment.source.to_string(),
            text,
            sites,
            probability: reasoning.map(|reasoning| reasoning.probability),
            margin: assignment.margin.filter(|margin| margin.is_finite()),
            global_instability: bonds.map(|bonds| bonds.global_instability),
            alternatives: alternatives.collect(),
            label_is_certain: reasoning.filter(|_| work.outcome.is_ok()).map(|_| is_certain()),
        })
    }
}

/// The components of a coset's offset.
#[must_use]
pub fn offset_components(coset: &Coset) -> [OffsetComponent; 3] {
    coset.offset.map(OffsetComponent::from)
}

impl LevelRecord {
    fn new(formal: &FormalPolarization) -> Self {
        let (electron, pair, ion) = (formal.electron(), formal.pair(), formal.ion());
        Self {
            label: formal.label,
            offset: offset_components(electron),
            contains_zero: electron.contains_zero,
            residual: formal.residual,
            residual_fraction: formal.runner_up.is_finite().then(|| formal.residual_fraction()),
            pair: PairRecord {
                modulus: pair.value,
                offset: offset_components(pair),
                contains_zero: pair.contains_zero,
            },
            ion: IonRecord {
                spacing: ion.value,
                offset: offset_components(ion),
                contains_zero: ion.contains_zero,
            },
        }
    }
}

impl ParentRecord {
    fn new(found: &ParentLevel) -> Self {
        let parameters = found.primitive.lattice.parameters();
        Self {
            level: LevelRecord::new(&found.formal),
            space_group: SpaceGroupRecord::new(&found.symmetry),
            cells: found.parent.cells,
            max_displacement: found.parent.max_displacement,
            rms_displacement: found.parent.rms_displacement,
            lengths: parameters.lengths,
            angles: parameters.angles,
        }
    }
}

impl PermittedRecord {
    fn new(formal: &FormalPolarization) -> Self {
        let offsets =
            formal.permitted.offsets().iter().map(|offset| offset.map(|ratio| ratio.to_string())).collect();
        let narrow = |direction: &[i128; 3]| direction.map(|entry| i64::try_from(entry).unwrap_or_default());
        Self { offsets, free: formal.permitted.free().iter().map(narrow).collect() }
    }
}

impl UnitsRecord {
    fn new(formal: &FormalPolarization) -> Self {
        let quanta = formal.quanta();
        let offset = formal.electron().offset.map(Component::value);
        let values = [0, 1, 2].map(|axis| offset[axis] * quanta[axis]);
        let c_per_m2 = crate::polarization::C_PER_M2;
        Self {
            quantum_c_per_m2: quanta.map(|q| q * c_per_m2),
            quantum_uc_per_cm2: quanta.map(|q| q * c_per_m2 * 100.0),
            quantum_e_per_nm2: quanta.map(|q| q * E_PER_NM2),
            offset_c_per_m2: values.map(|q| q * c_per_m2),
            offset_uc_per_cm2: values.map(|q| q * c_per_m2 * 100.0),
            offset_e_per_nm2: values.map(|q| q * E_PER_NM2),
        }
    }
}

/// The basis choices of one material.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct EnumerationRecord {
    /// The classification.
    pub material: MaterialRecord,
    /// For each primitive vector, the bases a moving window passes through.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub sweep: Vec<SweepRecord>,
    /// The free choices.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub free: Option<FreeRecord>,
}

/// The bases a window moved along one primitive vector passes through.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct SweepRecord {
    /// Which primitive vector: `a1`, `a2` or `a3`.
    pub axis: String,
    /// The planes of atoms, by coordinate.
    pub planes: Vec<SweepPlaneRecord>,
}

/// A plane of atoms that crosses the faces of the window together.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct SweepPlaneRecord {
    /// Fractional coordinate along the primitive vector.
    pub coordinate: f64,
    /// Labels of its sites.
    pub sites: Vec<String>,
    /// Its charge per primitive cell in e.
    pub charge: i64,
    /// The component of the polarization, not reduced, when the window starts just below this plane.
    pub polarization: OffsetComponent,
}

/// The free choices: each ion from any cell in a window around its own.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct FreeRecord {
    /// Cells from −window to +window along each axis.
    pub window: u32,
    /// Number of choices, exact.
    pub choices: String,
    /// Number of values reached along each axis.
    pub values_per_axis: usize,
    /// For each change of one component, in e, the number of choices along one axis that make it, exact.
    pub counts: Vec<FreeCountRecord>,
    /// Number of choices that reach zero polarization, exact; absent for polar crystals.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub choices_at_zero: Option<String>,
}

/// How many choices make one change.
#[derive(Debug, Clone, Serialize, JsonSchema)]
pub struct FreeCountRecord {
    /// Change of the component in e.
    pub change: i64,
    /// Number of choices along one axis, exact.
    pub choices: String,
}

impl SweepRecord {
    /// The record of a sweep.
    #[must_use]
    pub fn new(sweep: &Sweep, labels: &[String]) -> Self {
        let planes = sweep
            .planes
            .iter()
            .map(|plane| SweepPlaneRecord {
                coordinate: plane.coordinate,
                sites: plane.atoms.iter().map(|&atom| labels[atom].clone()).collect(),
                charge: plane.charge,
                polarization: plane.value.into(),
            })
            .collect();
        Self { axis: format!("a{}", sweep.axis + 1), planes }
    }
}
