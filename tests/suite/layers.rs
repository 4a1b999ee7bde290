//! The rooms of the house and the direction of imports between them.

use std::fs;
use std::path::{Path, PathBuf};

/// From the ground up. A room may import from rooms before it, never from one after it.
const ROOMS: [&str; 14] = [
    "diagnostic",
    "exact",
    "cell",
    "crystal",
    "symmetry",
    "cif",
    "poscar",
    "optimade",
    "charge",
    "polarization",
    "facet",
    "collection",
    "report",
    "cli",
];

fn sources(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("a readable folder") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            sources(&path, found);
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            found.push(path);
        }
    }
}

fn rank(room: &str) -> Option<usize> {
    ROOMS.iter().position(|known| *known == room)
}

#[test]
fn imports_point_downwards() {
    let base = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&base, &mut files);
    let mut faults = Vec::new();
    for file in files {
        let relative = file.strip_prefix(&base).expect("inside").to_string_lossy().replace('\\', "/");
        if ["lib.rs", "main.rs"].contains(&relative.as_str()) {
            continue;
        }
        let room = relative.split(['/', '.']).next().expect("a name");
        let own = rank(room).unwrap_or_else(|| panic!("{relative}: the room '{room}' is not in the list"));
        let text = fs::read_to_string(&file).expect("a readable file");
        // Unit tests may build their inputs with anything.
        let body = text.split("#[cfg(test)]").next().expect("a body");
        for (number, line) in body.lines().enumerate() {
            for piece in line.split("crate::").skip(1) {
                let target: String =
                    piece.chars().take_while(|c| c.is_ascii_alphanumeric() || *c == '_').collect();
                if rank(&target).is_some_and(|target| target > own) {
                    faults.push(format!("{relative}:{}: imports {target}", number + 1));
                }
            }
        }
    }
    assert!(faults.is_empty(), "imports that point upwards:\n{}", faults.join("\n"));
}

#[test]
fn only_the_engine_room_talks_to_a_symmetry_library() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut files = Vec::new();
    sources(&root, &mut files);
    for file in files {
        let relative = file.strip_prefix(&root).expect("inside").to_string_lossy().replace('\\', "/");
        let allowed = relative.starts_with("symmetry/engine") || relative.starts_with("symmetry/setting");
        let text = fs::read_to_string(&file).expect("a readable file");
        let talks = text.lines().any(|line| line.contains("use moyo::") || line.contains("use spglib_sys"));
        assert!(allowed || !talks, "{relative} imports a symmetry library");
    }
}
