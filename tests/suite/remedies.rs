//! What cures a charged termination, against published cases.

use assert_cmd::cargo::cargo_bin_cmd;
use serde_json::Value;

fn terminations(file: &str, plane: &str) -> Vec<Value> {
    let output = cargo_bin_cmd!("cosetta")
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .args(["facets", file, "--plane", plane, "--format", "json"])
        .output()
        .expect("the program runs");
    let records: Value = serde_json::from_slice(&output.stdout).expect("JSON");
    records[0]["planes"][0]["terminations"].as_array().expect("terminations").clone()
}

/// Coverage and number of cells of a remedy of the termination with a layer on top.
fn remedy(file: &str, plane: &str, top: &str, kind: &str, ion: &str) -> (String, u64) {
    let found = terminations(file, plane);
    let termination =
        found.iter().find(|one| one["top"] == top).unwrap_or_else(|| panic!("{top} in {found:?}"));
    let remedies = termination["remedies"].as_array().expect("remedies");
    let remedy = remedies
        .iter()
        .find(|one| one["kind"] == kind && (ion.is_empty() || one["ion"] == ion))
        .unwrap_or_else(|| panic!("{kind} {ion} in {remedies:?}"));
    (remedy["coverage"].as_str().expect("a fraction").to_owned(), remedy["cells"].as_u64().expect("a number"))
}

#[test]
fn published_compensation() {
    // Rocksalt (111): half of the outer layer, one proton per cell. Goniakowski, Finocchi & Noguera, Rep. Prog. Phys.
    // 71, 016501 (2008) (from memory).
    let mgo = "structures/mgo-rocksalt.cif";
    assert_eq!(remedy(mgo, "1,1,1", "O", "remove", "O2-"), ("1/2".into(), 2));
    assert_eq!(remedy(mgo, "1,1,1", "O", "hydrogen", ""), ("1".into(), 1));
    // Zincblende III–V (111): a quarter of the cations, as in the 2×2 vacancy structure of GaAs(111) (Mönch,
    // Semiconductor Surfaces and Interfaces; content seen in an abstract).
    assert_eq!(remedy("structures/gap-zincblende.cif", "1,1,1", "Ga", "remove", "Ga3+"), ("1/4".into(), 4));
    // Fluorite (100): half of the oxygen of the outer plane. Tasker, Surf. Sci. 87, 315 (1979); Tan, Grimes & Owens,
    // Phys. Rev. B 72, 035457 (2005).
    assert_eq!(remedy("structures/ceo2-fluorite.cif", "1,0,0", "O2", "remove", "O2-"), ("1".into(), 1));
    // III–III perovskite (001), BO2 on top: half a hole, a quarter of an oxygen vacancy, half a proton. Nakagawa, Hwang &
    // Muller, Nat. Mater. 5, 204 (2006) (fractions from memory).
    let cubic = "structures/ktao3-perovskite.cif";
    assert_eq!(remedy(cubic, "0,0,1", "KO", "holes", ""), ("1/2".into(), 2));
    assert_eq!(remedy(cubic, "0,0,1", "KO", "remove", "O2-"), ("1/4".into(), 4));
    assert_eq!(remedy(cubic, "0,0,1", "TaO2", "electrons", ""), ("1/2".into(), 2));
}

#[test]
fn a_remedy_leaves_no_charge() {
    for (file, plane) in [
        ("structures/mgal2o4-spinel.cif", "0,0,1"),
        ("structures/la2zr2o7-pyrochlore.cif", "1,1,1"),
        ("structures/cualo2-delafossite.cif", "0,0,1"),
        ("structures/zno-wurtzite.cif", "0,0,1"),
    ] {
        for termination in terminations(file, plane) {
            let number = |value: &Value| match value {
                Value::String(text) => {
                    let (above, below) = text.split_once('/').unwrap_or((text, "1"));
                    above.parse::<f64>().expect("a number") / below.parse::<f64>().expect("a number")
                }
                other => other.as_f64().expect("a number"),
            };
            let sigma = number(&termination["sigma_e"]);
            for remedy in termination["remedies"].as_array().expect("remedies") {
                let charge = |ion: &str| {
                    let digits: String = ion.chars().filter(char::is_ascii_digit).collect();
                    let size = if digits.is_empty() { 1.0 } else { digits.parse().expect("a digit") };
                    if ion.ends_with('-') { -size } else { size }
                };
                let coverage = number(&remedy["coverage"]);
                let per_unit = match remedy["kind"].as_str().expect("a kind") {
                    "electrons" | "hydroxide" => -1.0,
                    "holes" | "hydrogen" => 1.0,
                    "remove" => -charge(remedy["ion"].as_str().expect("an ion")),
                    "add" => charge(remedy["ion"].as_str().expect("an ion")),
                    "substitute" => {
                        number(&remedy["replaced_by_charge"])
                            - charge(remedy["ion"].as_str().expect("an ion"))
                    }
                    other => panic!("{other}"),
                };
                assert!((sigma + coverage * per_unit).abs() < 1e-9, "{file} {plane}: {remedy}");
            }
        }
    }
}
