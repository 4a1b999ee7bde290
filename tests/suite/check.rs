//! `cosetta check` as a user meets it: what is drawn, as JSON, and the exit status.

use super::commands::run;

fn check(file: &str) -> String {
    let path = format!("tests/data/bad/{file}.cif");
    let (status, stdout, stderr) = run(&["check", &path], "");
    format!("{stdout}{stderr}status {status}\n")
}

#[test]
fn ten_broken_files() {
    let files = [
        "cell-002-comma",
        "cell-004-volume",
        "cell-005-not-cubic",
        "cif-002-latin-1",
        "cif-009-ragged-loop",
        "site-009-multiplicity",
        "site-018-third",
        "site-019-alternatives",
        "symmetry-009-gap",
        "symmetry-014-formula",
    ];
    let drawn: Vec<String> = files.iter().map(|file| check(file)).collect();
    insta::with_settings!({ snapshot_path => "snap", prepend_module_to_snapshot => false }, {
        insta::assert_snapshot!("check-ten-broken-files", drawn.join("----\n"));
    });
}

#[test]
fn json_has_one_object_for_each_file() {
    let files = ["tests/data/bad/cell-002-comma.cif", "structures/mgo-rocksalt.cif"];
    let (status, stdout, stderr) = run(&["check", files[0], files[1], "--format", "json", "--quiet"], "");
    assert_eq!((status, stderr.as_str()), (1, ""));
    let records: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
    let names: Vec<_> = records.as_array().expect("an array").iter().map(|record| &record["file"]).collect();
    assert_eq!(names, files);
    let first = &records[0]["diagnostics"][0];
    assert_eq!(first["code"], "cell-002");
    assert_eq!(first["severity"], "error");
    assert_eq!(first["block"], "MgO");
    assert_eq!((&first["span"]["line"], &first["span"]["column"]), (&3.into(), &16.into()));
    assert_eq!(first["hint"], "_cell_length_b 4.212");
    assert!(first.get("site").is_none(), "{first}");
}

#[test]
fn exit_statuses_follow_the_severity() {
    let warned = "tests/data/bad/cell-004-volume.cif";
    assert_eq!(run(&["check", warned], "").0, 0);
    assert_eq!(run(&["check", warned, "--strict"], "").0, 1);
    assert_eq!(run(&["check", "tests/data/bad/cell-002-comma.cif"], "").0, 1);
    assert_eq!(run(&["check"], "").0, 2);
    assert_eq!(run(&["check", "no-such-file.cif"], "").0, 3);
    assert_eq!(run(&["check", "-", "--color", "always"], "\n").0, 1);
}

#[test]
fn colours_are_for_terminals() {
    let file = "tests/data/bad/cell-002-comma.cif";
    assert!(!run(&["check", file], "").1.contains('\u{1b}'));
    assert!(run(&["check", file, "--color", "always"], "").1.contains("\u{1b}[1;31merror"));
    assert!(!run(&["check", file, "--color", "never"], "").1.contains('\u{1b}'));
}

#[test]
fn every_bad_file_is_drawn() {
    let (status, stdout, stderr) = run(&["check", "tests/data/bad"], "");
    assert_eq!(status, 1, "{stderr}");
    assert!(stdout.lines().all(|line| line.chars().count() <= 160), "a line is too long");
}
