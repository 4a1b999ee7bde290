//! Which files a list of paths names.

use crate::diagnostic::{Code, Diagnostic};
use std::fs;
use std::io::{self, Read};
use std::path::{Path, PathBuf};
use walkdir::WalkDir;

/// Files larger than this many bytes are refused.
const MAX_FILE_BYTES: u64 = 1 << 30;

/// One thing to read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Input {
    /// A file.
    File(PathBuf),
    /// Standard input.
    Stdin,
    /// A path that names nothing to read, with the reason.
    Fault(PathBuf, Diagnostic),
}

impl Input {
    /// The name to print: the path as given or found, `-` for standard input.
    #[must_use]
    pub fn name(&self) -> String {
        match self {
            Self::File(path) | Self::Fault(path, _) => path.display().to_string(),
            Self::Stdin => "-".to_owned(),
        }
    }

    /// The bytes of the input.
    ///
    /// # Errors
    /// `file-001` when it cannot be read, `file-002` when it is empty, `file-005` when it is too large; the reason of a
    /// [`Input::Fault`].
    pub fn read(&self) -> Result<Vec<u8>, Diagnostic> {
        let bytes = match self {
            Self::File(path) => read_file(path)?,
            Self::Stdin => {
                let mut bytes = Vec::new();
                io::stdin()
                    .lock()
                    .take(MAX_FILE_BYTES + 1)
                    .read_to_end(&mut bytes)
                    .map_err(|error| unreadable("standard input", &error))?;
                bytes
            }
            Self::Fault(_, diagnostic) => return Err(diagnostic.clone()),
        };
        if bytes.len() as u64 > MAX_FILE_BYTES {
            return Err(too_large(bytes.len() as u64));
        }
        if bytes.iter().all(u8::is_ascii_whitespace) {
            return Err(Diagnostic::error(
                Code::FileEmpty,
                format!("the file is empty ({} bytes)", bytes.len()),
            ));
        }
        Ok(bytes)
    }
}

fn read_file(path: &Path) -> Result<Vec<u8>, Diagnostic> {
    let length = fs::metadata(path).map_err(|error| unreadable("the file", &error))?.len();
    if length > MAX_FILE_BYTES {
        return Err(too_large(length));
    }
    fs::read(path).map_err(|error| unreadable("the file", &error))
}

fn unreadable(what: &str, error: &io::Error) -> Diagnostic {
    Diagnostic::error(Code::FileUnreadable, format!("{what} cannot be read: {error}"))
}

fn too_large(length: u64) -> Diagnostic {
    Diagnostic::error(
        Code::FileTooLarge,
        format!("the file has {length} bytes, above the limit of {MAX_FILE_BYTES}"),
    )
}

/// The inputs a list of paths names: files as given, folders searched for files ending in `.cif` (any case) at any
/// depth in the order of their names, `-` for standard input. Links to folders are not followed. What cannot be read
/// becomes a [`Input::Fault`] in its place.
#[must_use]
pub fn find_inputs(paths: &[PathBuf]) -> Vec<Input> {
    let mut inputs = Vec::new();
    for path in paths {
        if path.as_os_str() == "-" {
            inputs.push(Input::Stdin);
        } else if path.is_dir() {
            find_in_folder(path, &mut inputs);
        } else {
            inputs.push(Input::File(path.clone()));
        }
    }
    inputs
}

fn find_in_folder(folder: &Path, inputs: &mut Vec<Input>) {
    let before = inputs.len();
    for entry in WalkDir::new(folder).sort_by_file_name() {
        match entry {
            Ok(entry) if !entry.file_type().is_dir() && has_cif_name(entry.path()) => {
                inputs.push(Input::File(entry.into_path()));
            }
            Ok(_) => {}
            Err(error) => {
                let path = error.path().unwrap_or(folder).to_path_buf();
                let diagnostic =
                    Diagnostic::error(Code::FileUnreadable, format!("the folder cannot be read: {error}"));
                inputs.push(Input::Fault(path, diagnostic));
            }
        }
    }
    if inputs.len() == before {
        let diagnostic = Diagnostic::error(Code::FileNoInput, "the folder holds no file ending in .cif");
        inputs.push(Input::Fault(folder.to_path_buf(), diagnostic));
    }
}

fn has_cif_name(path: &Path) -> bool {
    path.extension().is_some_and(|extension| {
        extension.eq_ignore_ascii_case("cif") || extension.eq_ignore_ascii_case("mcif")
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn folders_are_walked_in_order() {
        let folder = tempfile::tempdir().expect("a folder");
        fs::create_dir(folder.path().join("b")).expect("a folder");
        for name in ["c.cif", "a.CIF", "b/z.cif", "notes.txt"] {
            fs::write(folder.path().join(name), "data_x").expect("a file");
        }
        let found = find_inputs(&[folder.path().to_path_buf()]);
        let names: Vec<_> = found
            .iter()
            .map(|input| match input {
                Input::File(path) => path.strip_prefix(folder.path()).expect("inside").display().to_string(),
                other => other.name(),
            })
            .collect();
        assert_eq!(names, ["a.CIF", "b/z.cif", "c.cif"]);
    }

    #[test]
    fn faults_are_kept() {
        let folder = tempfile::tempdir().expect("a folder");
        let found = find_inputs(&[folder.path().to_path_buf()]);
        assert!(matches!(&found[0], Input::Fault(_, diagnostic) if diagnostic.code == Code::FileNoInput));
        let missing = Input::File(folder.path().join("none.cif")).read().expect_err("no file");
        assert_eq!(missing.code, Code::FileUnreadable);
        let empty = folder.path().join("empty.cif");
        fs::write(&empty, "\n \n").expect("a file");
        assert_eq!(Input::File(empty).read().expect_err("empty").code, Code::FileEmpty);
    }
}
