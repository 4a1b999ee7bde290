//! The program as a user meets it: arguments, output, exit status.

use assert_cmd::cargo::cargo_bin_cmd;
use std::fs;
use std::path::{Path, PathBuf};

const ROOT: &str = env!("CARGO_MANIFEST_DIR");

/// Exit status, stdout and stderr of one run in the root of the repository.
pub(crate) fn run(arguments: &[&str], stdin: &str) -> (i32, String, String) {
    let output = cargo_bin_cmd!("cosetta")
        .current_dir(ROOT)
        .args(arguments)
        .write_stdin(stdin.to_owned())
        .output()
        .expect("the program runs");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("text");
    (output.status.code().expect("a status"), text(output.stdout), text(output.stderr))
}

/// A rocksalt file with one line replaced.
fn rocksalt(from: &str, to: &str) -> String {
    let text = "data_x\n_cell_length_a 4.21\n_cell_length_b 4.21\n_cell_length_c 4.21\n_cell_angle_alpha 90\n\
        _cell_angle_beta 90\n_cell_angle_gamma 90\n_space_group_name_H-M_alt 'F m -3 m'\nloop_\n_atom_site_label\n\
        _atom_site_fract_x\n_atom_site_fract_y\n_atom_site_fract_z\n_atom_site_occupancy\nMg1 0 0 0 1\nO1 0.5 0.5 0.5 1\n";
    assert!(text.contains(from), "{from}");
    text.replace(from, to)
}

fn codes(arguments: &[&str], stdin: &str) -> (i32, String) {
    let mut all = vec!["classify", "-", "--format", "jsonl"];
    all.extend(arguments);
    let (status, stdout, _) = run(&all, stdin);
    let record: serde_json::Value =
        serde_json::from_str(stdout.lines().next().expect("a row")).expect("JSON");
    (status, record["refusal"]["code"].as_str().unwrap_or("none").to_owned())
}

#[test]
fn bad_input_is_refused_with_its_code() {
    for (from, to, arguments, expected) in [
        ("data_x", "data_x", &[][..], "none"),
        ("Mg1 0 0 0 1\nO1 0.5 0.5 0.5 1\n", "", &[], "site-001"),
        ("_cell_length_b 4.21\n", "", &[], "cell-001"),
        ("_cell_length_a 4.21", "_cell_length_a nan", &[], "cell-002"),
        ("_cell_angle_alpha 90", "_cell_angle_alpha 180", &[], "cell-003"),
        ("_cell_length_a 4.21", "_cell_length_a 0", &[], "cell-003"),
        ("O1 0.5 0.5 0.5", "Xx1 0.5 0.5 0.5", &[], "site-003"),
        ("O1 0.5 0.5 0.5", "O1 0.05 0 0", &[], "site-004"),
        ("O1 0.5 0.5 0.5 1", "O1 0.5 0.5 0.5 0.5", &[], "site-006"),
        ("O1 0.5 0.5 0.5", "O1 ? 0.5 0.5", &[], "site-002"),
        ("O1 0.5 0.5 0.5", "Al1 0.5 0.5 0.5", &[], "charge-006"),
        ("data_x", "data_x", &["--charges", "Mg=2,O=-1"], "charge-004"),
        ("data_x", "data_x", &["--charges", "Mg=2.5,O=-2.5"], "charge-005"),
        ("data_x", "data_x", &["--charges", "Ta=2,O=-2"], "charge-002"),
        ("data_x", "data_x", &["--charges", "Mg=2"], "charge-003"),
        ("data_x", "data_x", &["--block", "y"], "file-004"),
        ("data_x", "data_x", &["--max-sites", "4"], "site-008"),
    ] {
        let (status, code) = codes(arguments, &rocksalt(from, to));
        assert_eq!(code, expected, "{from} -> {to} {arguments:?}");
        assert_eq!(status, i32::from(expected != "none"), "{from} -> {to}");
    }
    assert_eq!(codes(&[], "\n"), (1, "file-002".to_owned()));
    assert_eq!(codes(&[], "no data block here\n"), (1, "file-002".to_owned()));
}

#[test]
fn exit_statuses() {
    assert_eq!(run(&["classify", "structures/mgo-rocksalt.cif"], "").0, 0);
    assert_eq!(run(&["classify", "src"], "").0, 1);
    assert_eq!(run(&["classify"], "").0, 2);
    assert_eq!(run(&["classify", "--charges", "K==2", "structures"], "").0, 2);
    assert_eq!(run(&["classify", "--plane", "0,0", "structures"], "").0, 2);
    assert_eq!(run(&["classify", "no-such-file.cif"], "").0, 3);
    assert_eq!(run(&["classify", "structures", "-o", "no-such-folder/x"], "").0, 3);
    assert_eq!(run(&["--help"], "").0, 0);
    assert_eq!(run(&["enumerate", "no-such-file.cif"], "").0, 3);
}

#[test]
fn one_bad_file_costs_one_row() {
    let folder = tempfile::tempdir().expect("a folder");
    for (name, content) in [
        ("a.cif", rocksalt("data_x", "data_x")),
        ("b.cif", "\u{0}\u{ff}garbage loop_ ; '".to_owned()),
        ("c.cif", rocksalt("data_x", "data_y")),
    ] {
        fs::write(folder.path().join(name), content).expect("a file");
    }
    let path = folder.path().to_str().expect("text");
    let (status, stdout, stderr) = run(&["classify", path, "--format", "jsonl"], "");
    assert_eq!(status, 1);
    let rows: Vec<serde_json::Value> =
        stdout.lines().map(|line| serde_json::from_str(line).expect("JSON")).collect();
    let statuses: Vec<_> = rows.iter().map(|row| row["status"].as_str().expect("a status")).collect();
    assert_eq!(statuses, ["ok", "refused", "ok"]);
    assert!(stderr.contains("3 materials: 2 contains-zero, 1 refused"), "{stderr}");
}

#[test]
fn the_same_bytes_whatever_the_number_of_threads() {
    let one = run(&["classify", "structures", "--format", "json", "--jobs", "1"], "");
    let three = run(&["classify", "structures", "--format", "json", "--jobs", "3"], "");
    assert_eq!(one.1, three.1);
    let rows: Vec<serde_json::Value> = serde_json::from_str(&one.1).expect("JSON");
    assert!(rows.len() >= 45);
}

#[test]
fn formats_agree() {
    let (_, csv, _) = run(&["classify", "structures", "--format", "csv"], "");
    let (_, json, _) = run(&["classify", "structures", "--format", "json"], "");
    let (_, lines, _) = run(&["classify", "structures", "--format", "jsonl"], "");
    let array: Vec<serde_json::Value> = serde_json::from_str(&json).expect("JSON");
    let objects: Vec<serde_json::Value> =
        lines.lines().map(|line| serde_json::from_str(line).expect("JSON")).collect();
    assert_eq!(array, objects);
    let mut reader = csv::Reader::from_reader(csv.as_bytes());
    let heading = reader.headers().expect("a heading").clone();
    let column = |name: &str| heading.iter().position(|title| title == name).expect("a column");
    for (row, object) in reader.records().map(|row| row.expect("a row")).zip(&array) {
        assert_eq!(row[column("block")], *object["block"].as_str().expect("text"));
        assert_eq!(row[column("formula")], *object["formula"].as_str().expect("text"));
        assert_eq!(row[column("label")], *object["strict"]["label"].as_str().expect("text"));
        assert_eq!(row[column("contains_zero")], object["strict"]["contains_zero"].to_string());
    }
}

#[test]
fn output_goes_to_a_file_by_a_rename() {
    let folder = tempfile::tempdir().expect("a folder");
    let path: PathBuf = folder.path().join("rows.csv");
    let name = path.to_str().expect("text");
    let (status, stdout, _) = run(&["classify", "structures", "--format", "csv", "-o", name, "--quiet"], "");
    assert_eq!((status, stdout.as_str()), (0, ""));
    assert!(fs::read_to_string(&path).expect("a file").lines().count() >= 46);
    let left: Vec<_> = fs::read_dir(folder.path()).expect("a folder").collect();
    assert_eq!(left.len(), 1, "a temporary file was left");
}

#[test]
fn enumeration_counts_exactly() {
    let (status, stdout, _) =
        run(&["enumerate", "structures/mgo-rocksalt.cif", "--format", "json", "--window", "1"], "");
    assert_eq!(status, 0);
    let records: Vec<serde_json::Value> = serde_json::from_str(&stdout).expect("JSON");
    let free = &records[0]["free"];
    // Two ions in 27 cells each. Along one axis, 2 (n − m) with n, m of {−1,0,1}: 5 values. By hand.
    assert_eq!(free["choices"], "729");
    assert_eq!(free["values_per_axis"], 5);
    // Mg at (0,0,0), O at (½,½,½): p = −(1,1,1). A change of 1 is odd, two ions of charge 2 cannot make it.
    assert_eq!(free["choices_at_zero"], "0");
    let sweep = records[0]["sweep"].as_array().expect("three axes");
    assert_eq!(sweep.len(), 3);
    assert_eq!(sweep[0]["planes"].as_array().expect("planes").len(), 2);
}

#[test]
fn a_reader_that_goes_away_is_no_fault() {
    use std::io::Read;
    use std::process::{Command, Stdio};
    let mut child = Command::new(assert_cmd::cargo::cargo_bin!("cosetta"))
        .args(["classify", "structures", "--format", "json"])
        .current_dir(Path::new(ROOT))
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the program runs");
    let mut first = [0_u8; 1];
    child.stdout.take().expect("a pipe").read_exact(&mut first).expect("one byte");
    let output = child.wait_with_output().expect("an end");
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
}
