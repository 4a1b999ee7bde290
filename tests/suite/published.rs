//! The offsets of 93 crystals against published structures and a sum of charges times positions done elsewhere.
//!
//! `tests/data/published.json` holds for each crystal space group, setting, cell, sites with formal charges, the source
//! of the structure, and the expected offset modulo one electron and modulo two, from an independent calculation over
//! the listed coordinates.

use crate::slow;
use cosetta::cell::{CellParameters, Lattice};
use cosetta::charge::Given;
use cosetta::collection::{Classification, Settings, classify_unit};
use cosetta::crystal::{AsymmetricUnit, Element, Operation, Site};
use cosetta::diagnostic::Code;
use cosetta::polarization::{Coset, Label};
use moyo::data::{HallSymbol, hall_symbol_entry};
use nalgebra::{Matrix3, Vector3};

#[derive(serde::Deserialize)]
pub(crate) struct Entry {
    pub(crate) name: String,
    sg: i32,
    setting: Option<String>,
    lattice: [f64; 6],
    sites: Vec<(String, f64, [f64; 3])>,
    prim_rows_in_conv: [[f64; 3]; 3],
    n_prim: usize,
    #[serde(rename = "P_mod_e")]
    p_mod_e: [f64; 3],
    #[serde(rename = "P_mod_2e")]
    p_mod_2e: Option<[f64; 3]>,
}

pub(crate) fn entries() -> Vec<Entry> {
    serde_json::from_str(include_str!("../data/published.json")).expect("the check values")
}

/// All operations of a setting, from the tables of the crate moyo.
fn operations(number: i32, setting: Option<&str>) -> Vec<Operation> {
    let hall_number = (1..=530)
        .find(|&hall| {
            hall_symbol_entry(hall).is_some_and(|entry| {
                entry.number == number && setting.is_none_or(|wanted| entry.setting == wanted)
            })
        })
        .unwrap_or_else(|| panic!("no setting {setting:?} of group {number}"));
    let symbol = HallSymbol::from_hall_number(hall_number).expect("a Hall symbol");
    let centring = hall_symbol_entry(hall_number).expect("an entry").centering.lattice_points();
    let with_centring = itertools::iproduct!(symbol.traverse(), centring);
    with_centring
        .map(|(operation, point)| Operation {
            rotation: operation.rotation,
            translation: operation.translation + point,
        })
        .collect()
}

/// The entries use letters for idealised types; elements of the same usual charge stand for them.
fn element(symbol: &str, charge: f64) -> Element {
    let known = match symbol {
        "A" if charge > 2.9 => "La",
        "A" if charge > 2.4 => "Sr",
        "A" => "Zn",
        "X" if charge < -2.5 => "N",
        "X" => "O",
        // The average B site of Mg2TiO4.
        "B" if charge > 2.9 && charge < 3.1 => "B",
        other => other,
    };
    Element::from_symbol(known).unwrap_or_else(|| panic!("{symbol}"))
}

impl Entry {
    pub(crate) fn unit(&self) -> AsymmetricUnit {
        let [a, b, c, alpha, beta, gamma] = self.lattice;
        let parameters = CellParameters { lengths: [a, b, c], angles: [alpha, beta, gamma] };
        let sites = self
            .sites
            .iter()
            .enumerate()
            .map(|(index, (symbol, charge, position))| {
                let element = element(symbol, *charge);
                Site::new(format!("{}{}", element.symbol(), index + 1), element, Vector3::from(*position))
            })
            .collect();
        AsymmetricUnit {
            lattice: Lattice::from_parameters(&parameters).expect("a cell"),
            sites,
            operations: operations(self.sg, self.setting.as_deref()),
        }
    }

    /// The charges of the listed sites in e.
    pub(crate) fn formal_charges(&self) -> Vec<f64> {
        self.sites.iter().map(|(_, charge, _)| *charge).collect()
    }

    pub(crate) fn is_averaged(&self) -> bool {
        self.sites.iter().any(|(_, charge, _)| charge.fract() != 0.0)
    }

    fn charges(&self) -> Given {
        let parts: Vec<String> = self
            .unit()
            .sites
            .iter()
            .zip(&self.sites)
            .map(|(site, (_, q, _))| format!("{}={q}", site.label))
            .collect();
        parts.join(",").parse().expect("charges")
    }

    /// Whether an offset, in units of `m` along our primitive vectors, is the expected one modulo `m` times the
    /// primitive lattice, whatever basis the expectation uses.
    fn agrees(&self, work: &Classification, coset: &Coset, expected: [f64; 3]) -> bool {
        let primitive = work.primitive.as_ref().expect("a primitive cell");
        let rows = Matrix3::from_fn(|vector, axis| self.prim_rows_in_conv[vector][axis]);
        let expected = primitive.from_cell(&(rows.transpose() * Vector3::from(expected)));
        let ours = Vector3::from(coset.offset.map(cosetta::polarization::Component::value));
        let miss = (ours - expected).map(|x| x - x.round());
        miss.norm() < 5e-4
    }

    pub(crate) fn check(&self, work: &Classification) -> Result<(), String> {
        let formal = work.outcome.as_ref().map_err(ToString::to_string)?;
        let primitive = work.primitive.as_ref().ok_or("no primitive cell")?;
        if primitive.positions.len() != self.n_prim {
            return Err(format!("{} primitive atoms in place of {}", primitive.positions.len(), self.n_prim));
        }
        if !self.agrees(work, formal.electron(), self.p_mod_e) {
            return Err(format!("{:?} modulo e in place of {:?}", formal.electron().offset, self.p_mod_e));
        }
        match self.p_mod_2e {
            Some(expected) if formal.pair().value != 2 || !self.agrees(work, formal.pair(), expected) => {
                return Err(format!("{:?} modulo 2e in place of {expected:?}", formal.pair().offset));
            }
            None if formal.pair().value != 1 => {
                return Err("some charge is odd, yet the pair modulus is 2".into());
            }
            _ => {}
        }
        slow::check(work)
    }
}

fn settings(charges: Option<Given>) -> Settings {
    // The idealised entries have cells of one Å.
    let mut settings = Settings { charges, symmetry_tolerance: 1e-3, ..Settings::default() };
    settings.expand.merge = 0.01;
    settings
}

#[test]
fn offsets_with_the_listed_charges() {
    let entries = entries();
    assert_eq!(entries.len(), 93);
    let mut faults = Vec::new();
    for entry in &entries {
        let work = classify_unit(&entry.unit(), &settings(Some(entry.charges())));
        if entry.is_averaged() {
            // LiMn2O4 with Mn 3.5+ and LaSrAlO4 with A 2.5+: averages, refused as such.
            assert_eq!(work.outcome.expect_err("an average").code, Code::ChargeAveraged, "{}", entry.name);
        } else if let Err(why) = entry.check(&work) {
            faults.push(format!("{}: {why}", entry.name));
        }
    }
    assert!(faults.is_empty(), "{} disagree:\n{}", faults.len(), faults.join("\n"));
}

#[test]
fn offsets_with_inferred_charges() {
    let mut right = 0;
    let mut refused = Vec::new();
    let mut wrong = Vec::new();
    for entry in entries() {
        let work = classify_unit(&entry.unit(), &settings(None));
        match (&work.outcome, entry.check(&work)) {
            (Err(refusal), _) => {
                refused.push(format!("{}: {}: {}", entry.name, refusal.code, refusal.message));
            }
            (Ok(_), Ok(())) => right += 1,
            (Ok(_), Err(why)) => wrong.push(format!("{}: {why}", entry.name)),
        }
    }
    println!("{right} right\n{} refused:\n  {}", refused.len(), refused.join("\n  "));
    println!("{} wrong:\n  {}", wrong.len(), wrong.join("\n  "));
    assert!(right >= 82, "{right} right; refused:\n{}\nwrong:\n{}", refused.join("\n"), wrong.join("\n"));
}

#[test]
fn one_crystal_of_each_kind() {
    // MgO contains zero for electrons and not for pairs; cubic and R-3c III–III perovskites are half-quantum, the
    // Pbnm one contains zero; zincblende III–V is a quarter (King-Smith & Vanderbilt, Phys. Rev. B 47, 1651 (1993) for
    // the quantum; the values follow from the structures by hand).
    let label = |name: &str| {
        let entry = entries().into_iter().find(|entry| entry.name == name).expect("an entry");
        let work = classify_unit(&entry.unit(), &settings(Some(entry.charges())));
        let formal = work.outcome.expect("an answer");
        (formal.label, formal.pair().contains_zero)
    };
    assert_eq!(label("MgO"), (Label::ContainsZero, false));
    assert_eq!(label("LaAlO3-pc").0, Label::HalfQuantum);
    assert_eq!(label("LaAlO3-R3c").0, Label::HalfQuantum);
    assert_eq!(label("LaGaO3-Pbnm").0, Label::ContainsZero);
    assert_eq!(label("GaAs").0, Label::Rational);
    assert_eq!(label("GaN").0, Label::Polar);
}
