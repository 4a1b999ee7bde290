//! `cosetta build setting`: what is written is the same crystal. No expected value comes from the writer: each file is
//! compared with itself read before, and settings with the International Tables.

use super::commands::run;
use cosetta::cell::{CellParameters, contacts_within};
use cosetta::cif::read_bytes;
use cosetta::collection::{Material, Settings, classify_bytes, find_inputs};
use cosetta::crystal::{Crystal, Element, Operation};
use cosetta::symmetry::setting::standard;
use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

/// What has to stay the same in any setting.
#[derive(Debug, Clone)]
struct Essence {
    group: Option<u16>,
    /// Label and answers about zero, or the code of the refusal.
    answer: String,
    /// Atoms of each element in the cell, with the volume of the cell.
    amounts: BTreeMap<Element, f64>,
    volume: f64,
    /// For each pair of elements, a sum over contacts per volume that falls to zero at the longest one.
    contacts: BTreeMap<(Element, Element), f64>,
}

/// The longest contact in Å, and the largest cell in which contacts are compared.
const CONTACTS: (f64, usize) = (3.2, 600);

fn contacts(crystal: &Crystal) -> BTreeMap<(Element, Element), f64> {
    let mut sums = BTreeMap::new();
    if crystal.sites.len() > CONTACTS.1 {
        return sums;
    }
    let positions: Vec<_> = crystal.sites.iter().map(|site| site.position).collect();
    for contact in contacts_within(&crystal.lattice, &positions, CONTACTS.0).expect("a good cell") {
        let (one, other) = (&crystal.sites[contact.first], &crystal.sites[contact.second]);
        let pair = (one.element.min(other.element), one.element.max(other.element));
        let weight = (1.0 - (contact.distance() / CONTACTS.0).powi(2)).powi(2);
        let share = one.occupancy * other.occupancy / crystal.lattice.volume();
        *sums.entry(pair).or_insert(0.0) += weight * share;
    }
    sums
}

fn essence(material: &Material) -> Option<Essence> {
    let work = &material.classification;
    let crystal = work.crystal.as_ref()?;
    let mut amounts = BTreeMap::new();
    for site in &crystal.sites {
        *amounts.entry(site.element).or_insert(0.0) += site.occupancy;
    }
    let answer = match &work.outcome {
        Ok(formal) => {
            // The offset is compared by its sorted components, which the change of axes may mix; exactly by the program.
            let zero = [formal.electron(), formal.pair(), formal.ion()].map(|coset| coset.contains_zero);
            format!("{} {zero:?}", formal.label)
        }
        Err(refusal) => refusal.code.to_string(),
    };
    let group = work.symmetry.as_ref().map(|symmetry| symmetry.number);
    Some(Essence { group, answer, amounts, volume: crystal.lattice.volume(), contacts: contacts(crystal) })
}

impl Essence {
    fn difference(&self, other: &Self) -> Option<String> {
        if self.group != other.group || self.answer != other.answer {
            return Some(format!(
                "{:?} {} became {:?} {}",
                self.group, self.answer, other.group, other.answer
            ));
        }
        if !self.contacts.is_empty() && !other.contacts.is_empty() {
            let far = self.contacts.iter().find_map(|(pair, sum)| {
                let after = other.contacts.get(pair).copied().unwrap_or_default();
                ((after - sum).abs() > 0.02 * sum.max(1e-3))
                    .then(|| format!("contacts {pair:?}: {sum} became {after}"))
            });
            if far.is_some() {
                return far;
            }
        }
        let volumes = self.volume / other.volume;
        let is_same = self.amounts.len() == other.amounts.len()
            && self.amounts.iter().all(|(element, amount)| {
                let after = other.amounts.get(element).copied().unwrap_or_default();
                (amount / after / volumes - 1.0).abs() < 1e-6
            });
        (!is_same).then(|| {
            format!(
                "{:?} in {} Å³ became {:?} in {} Å³",
                self.amounts, self.volume, other.amounts, other.volume
            )
        })
    }
}

fn materials(name: &str, bytes: &[u8]) -> Vec<Material> {
    classify_bytes(name, bytes, &Settings { parent_tolerance: None, ..Settings::default() })
}

/// Offset of the first material, as text.
fn offset(materials: &[Material]) -> String {
    let formal = materials[0].classification.outcome.as_ref().expect("a label");
    formal.electron().offset.map(|component| component.to_string()).join(",")
}

fn build(path: &str, arguments: &[&str]) -> (i32, String, String) {
    let mut all = vec!["build", "setting", path];
    all.extend(arguments);
    run(&all, "")
}

/// Whether the inversion at the origin is among the operations of the first block.
fn has_inversion_at_origin(text: &str) -> bool {
    text.lines().any(|line| line.split_whitespace().nth(1) == Some("-x,-y,-z"))
}

#[test]
fn demo_structures_stay_the_same_crystals() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("structures");
    let mut count = 0;
    for entry in fs::read_dir(folder).expect("the folder") {
        let path = entry.expect("an entry").path();
        if path.extension().is_none_or(|extension| extension != "cif") {
            continue;
        }
        let name = path.display().to_string();
        let before = materials(&name, &fs::read(&path).expect("a file"));
        for arguments in
            [&["--axes", "file"][..], &["--axes", "standard"], &["--axes", "primitive"], &["--expanded"]]
        {
            let (status, text, talk) = build(&name, arguments);
            assert_eq!(status, 0, "{name} {arguments:?}: {talk}");
            let after = materials(&name, text.as_bytes());
            assert_eq!(before.len(), after.len(), "{name}");
            for (one, other) in before.iter().zip(&after) {
                assert_eq!(one.block, other.block, "{name}");
                let (old, new) = (essence(one).expect("atoms"), essence(other).expect("atoms"));
                assert_eq!(old.difference(&new), None, "{name} {arguments:?}");
                let is_centred = one.classification.centres.is_some();
                if is_centred && before.len() == 1 && arguments[0] == "--axes" {
                    assert!(has_inversion_at_origin(&text), "{name} {arguments:?}");
                }
            }
            // The same axes give the same offset, whatever the origin.
            if arguments == ["--axes", "file"] && before.len() == 1 && !offset(&before).contains('.') {
                assert_eq!(offset(&before), offset(&after), "{name}");
                assert!(text.contains(&format!(
                    "_cosetta_label                    {}",
                    before[0].classification.outcome.as_ref().expect("a label").label
                )));
            }
            count += after.len();
        }
    }
    assert!(count >= 4 * 67, "{count} structures written");
}

#[test]
fn a_file_that_was_written_is_written_alike() {
    // But for what is said about the source, which is then the file that was written.
    let bare = |text: &str| text.split("# P and p").next().map(str::to_owned);
    for file in [
        "mgal2o4-spinel",
        "al2o3-corundum",
        "dysco3-perovskite",
        "zno-wurtzite",
        "ga2o3-beta",
        "zro2-baddeleyite",
    ] {
        for axes in ["file", "standard", "primitive"] {
            let (_, once, _) = build(&format!("structures/{file}.cif"), &["--axes", axes]);
            let again = if axes == "primitive" { "file" } else { axes };
            let (status, twice, talk) = run(&["build", "setting", "-", "--axes", again], &once);
            assert_eq!(status, 0, "{talk}");
            assert_eq!(bare(&once), bare(&twice), "{file} {axes}");
            assert!(
                twice.contains("_cosetta_transform_Pp_abc         a,b,c;0,0,0\n"),
                "{file} {axes}\n{twice}"
            );
        }
    }
}

/// Spinel in origin choice 1, with an uncertainty, an author and a shared site if asked for.
fn spinel(aluminium: &str) -> String {
    format!(
        "data_spinel\n_publ_author_name 'Nobody, A.'\n_cell_length_a 8.0831(5)\n_cell_length_b 8.0831(5)\n_cell_length_c 8.0831(5)\n\
         _cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 90\n_space_group_name_H-M_alt 'F d -3 m :1'\nloop_\n\
         _atom_site_label\n_atom_site_fract_x\n_atom_site_fract_y\n_atom_site_fract_z\n_atom_site_occupancy\n\
         Mg1 0 0 0 1\nAl1 0.625 0.625 0.625 {aluminium}\nO1 0.3873(2) 0.3873(2) 0.3873(2) 1\n"
    )
}

#[test]
fn origin_choice_1_becomes_2() {
    // Charges that were only inferred are no oxidation numbers of the new file.
    let (_, inferred, _) = run(&["build", "setting", "-"], &spinel("1"));
    assert!(inferred.contains("_cosetta_charges_source           inferred") && !inferred.contains("Mg2+"));
    let given = ["build", "setting", "-", "--charges", "Mg=2,Al=3,O=-2"];
    let (status, text, _) = run(&given, &spinel("1"));
    assert_eq!(status, 0);
    // International Tables, volume A, group 227: origin 2 is at 1/8,1/8,1/8 of origin 1. Sites by hand: 0 − 1/8 = 7/8,
    // 5/8 − 1/8 = 1/2, 0.3873 − 0.125 = 0.2623.
    for line in [
        "_space_group_name_H-M_alt         'F d -3 m :2'",
        "_space_group_IT_number            227",
        "_cell_length_a                    8.0831(5)",
        "_cosetta_transform_Pp_abc         a,b,c;1/8,1/8,1/8",
        "Mg1 Mg2+ 0.875     0.875     0.875     1 8",
        "Al1 Al3+ 0.5       0.5       0.5       1 16",
        "O1  O2-  0.2623(2) 0.2623(2) 0.2623(2) 1 32",
        "_chemical_formula_sum             'Al2 Mg O4'",
        "_cell_formula_units_Z             8",
        "_cosetta_charges_source           given",
        "_publ_author_name",
    ] {
        assert!(text.lines().any(|found| found.trim() == line), "{line}\n{text}");
    }
    assert!(text.lines().all(|line| line.len() <= 80));
    let (_, primitive, talk) = run(&["build", "setting", "-", "--axes", "primitive"], &spinel("1"));
    assert!(primitive.contains("_cell_formula_units_Z             2\n"), "{primitive}");
    assert!(talk.contains("build-002"), "{talk}");
    let cell =
        read_bytes(primitive.as_bytes()).blocks[0].unit.as_ref().expect("a structure").lattice.parameters();
    let CellParameters { lengths, angles } = cell;
    // a/√2 and 60°, by hand.
    assert!(lengths.iter().all(|length| (length - 8.0831 / 2.0_f64.sqrt()).abs() < 1e-7));
    assert!(angles.iter().all(|angle| (angle - 60.0).abs() < 1e-7));
}

#[test]
fn refused_structures_are_written_without_results() {
    let (status, text, talk) = run(&["build", "setting", "-"], &spinel("0.9"));
    assert_eq!(status, 0, "{talk}");
    assert!(talk.contains("build-006"), "{talk}");
    assert!(
        text.contains("_cosetta_refusal_code             site-006\n") && !text.contains("_cosetta_label"),
        "{text}"
    );
    assert!(text.contains("a,b,c;1/8,1/8,1/8") && has_inversion_at_origin(&text), "{text}");
    assert!(text.contains("'Al1.8 Mg O4'"), "{text}");
}

#[test]
fn symmetry_that_the_file_does_not_state_is_found() {
    // Rocksalt without symmetry, all atoms moved by the same vector: a centre of the highest symmetry becomes the origin.
    let mut text = "data_x _cell_length_a 4.21 _cell_length_b 4.21 _cell_length_c 4.21 _cell_angle_alpha 90 _cell_angle_beta 90\n\
        _cell_angle_gamma 90 _symmetry_space_group_name_H-M 'P 1' loop_ _atom_site_label _atom_site_fract_x _atom_site_fract_y\n\
        _atom_site_fract_z\n"
        .to_owned();
    for (label, shift) in [("Mg", 0.0), ("O", 0.5)] {
        for (x, y, z) in [(0.0, 0.0, 0.0), (0.0, 0.5, 0.5), (0.5, 0.0, 0.5), (0.5, 0.5, 0.0)] {
            let line = format!("{label} {:.6} {:.6} {:.6}\n", x + shift + 0.0123, y + 0.0345, z - 0.0078);
            text.push_str(&line);
        }
    }
    let (status, written, talk) = run(&["build", "setting", "-"], &text);
    assert_eq!(status, 0, "{talk}");
    assert!(talk.contains("build-004"), "{talk}");
    for line in ["'F m -3 m'", "_space_group_IT_number            225", "0.0123,0.0345,-0.0078", "192 "] {
        let zeros_away = written.replace("0000", "");
        assert!(zeros_away.contains(line), "{line}\n{written}");
    }
}

#[test]
fn a_list_of_positions_becomes_a_cif_with_symmetry() {
    // The primitive cell of rocksalt, its origin off every atom.
    let poscar = "MgO\n4.21\n0 0.5 0.5\n0.5 0 0.5\n0.5 0.5 0\nMg O\n1 1\nDirect\n0.1 0.1 0.1\n0.6 0.6 0.6\n";
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("POSCAR");
    fs::write(&path, poscar).expect("a file");
    let (status, text, talk) = build(path.to_str().expect("text"), &["--axes", "standard"]);
    assert_eq!(status, 0, "{talk}");
    assert!(
        text.contains("'F m -3 m'") && text.contains("_cell_length_a                    4.21\n"),
        "{text}"
    );
}

#[test]
fn crystals_without_centre_keep_their_origin() {
    let (status, text, talk) = build("structures/zno-wurtzite.cif", &[]);
    assert_eq!(status, 0);
    assert!(talk.contains("build-001") && text.contains("a,b,c;0,0,0"), "{talk}{text}");
    let (status, text, _) = build("structures/laino3-perovskite.cif", &["--block", "laino3_pbnm"]);
    assert_eq!((status, text.matches("data_").count()), (0, 1));
    let (status, text, _) = build("structures/laino3-perovskite.cif", &[]);
    assert_eq!((status, text.matches("\ndata_").count()), (0, 2));
    assert_eq!(build("no-such-file.cif", &[]).0, 3);
    assert_eq!(build("tests/data/bad/site-004-too-close.cif", &[]).0, 1);
}

#[test]
#[ignore = "needs the data sets in COSETTA_DATA"]
fn files_of_the_data_sets_stay_the_same_crystals() {
    let inputs = find_inputs(&crate::wide::cif_folders());
    let mut counts: BTreeMap<String, usize> = BTreeMap::new();
    let mut faults = Vec::new();
    for axes in ["file", "standard", "primitive", "expanded"] {
        let arguments = if axes == "expanded" { vec!["--expanded"] } else { vec!["--axes", axes] };
        for input in &inputs {
            let name = input.name();
            let bytes = input.read().expect("a readable file");
            let before = materials(&name, &bytes);
            let (_, text, talk) = build(&name, &arguments);
            let written = read_bytes(text.as_bytes()).blocks;
            let after = materials(&name, text.as_bytes());
            let readable: Vec<&Material> =
                before.iter().filter(|m| m.classification.crystal.is_some()).collect();
            let mut left = after.iter().filter(|m| m.classification.crystal.is_some());
            for material in &before {
                if material.classification.crystal.is_none() {
                    let code = material
                        .classification
                        .outcome
                        .as_ref()
                        .map_or_else(|why| why.code.as_str(), |_| "none");
                    *counts.entry(format!("{axes}: no atoms ({code})")).or_default() += 1;
                }
            }
            for old in readable {
                let found = left.next().and_then(essence);
                let why = match (essence(old), found) {
                    (Some(old), Some(new)) => old.difference(&new),
                    _ => Some(format!("not written: {talk}")),
                };
                let key = match &why {
                    Some(_) => "different",
                    None if old.classification.outcome.is_ok() => "same crystal and answer",
                    None => "same crystal, refused likewise",
                };
                *counts.entry(format!("{axes}: {key}")).or_default() += 1;
                let block = written.iter().find(|block| block.name == old.block);
                if axes != "expanded"
                    && old.classification.centres.is_some()
                    && let Some(Ok(unit)) = block.map(|block| &block.unit)
                {
                    let is_centre = |operation: &Operation| {
                        operation.is_inversion() && operation.translation.norm() < 1e-9
                    };
                    let key = if unit.operations.iter().any(is_centre) {
                        "origin on a centre"
                    } else {
                        "NO CENTRE AT ORIGIN"
                    };
                    *counts.entry(format!("{axes}: {key}")).or_default() += 1;
                }
                if axes == "standard"
                    && let (Some(block), Some(symmetry)) = (block, &old.classification.symmetry)
                {
                    let hall = standard(symmetry.number).map(|setting| setting.hall);
                    let key = if hall == block.stated.hall { "standard setting" } else { "OTHER SETTING" };
                    *counts.entry(format!("{axes}: {key}")).or_default() += 1;
                }
                let usual = block.is_some_and(|block| block.stated.hall.is_some());
                let key = if usual { "usual setting, named" } else { "setting without a name" };
                *counts.entry(format!("{axes}: {key}")).or_default() += 1;
                faults.extend(why.map(|why| format!("{axes} {name} {}: {why}", old.block)));
            }
            for code in
                ["build-001", "build-002", "build-003", "build-004", "build-005", "build-007", "build-008"]
            {
                if talk.contains(code) {
                    *counts.entry(format!("{axes}: {code}")).or_default() += 1;
                }
            }
        }
    }
    println!("{} files", inputs.len());
    for (key, count) in &counts {
        println!("{count:>6} {key}");
    }
    assert!(faults.is_empty(), "{} exceptions:\n{}", faults.len(), faults.join("\n"));
}

#[test]
#[cfg(feature = "spglib")]
fn an_engine_without_standard_cell_is_refused_by_name() {
    let (status, text, talk) =
        build("structures/mgal2o4-spinel.cif", &["--engine", "spglib", "--axes", "standard"]);
    assert_eq!((status, text.as_str()), (1, ""));
    assert!(talk.contains("build-003") && talk.contains("--engine moyo"), "{talk}");
    assert_eq!(build("structures/mgal2o4-spinel.cif", &["--engine", "spglib"]).0, 0);
}
