//! Which inputs a list of paths names, and the members each of them holds.

use super::archive::{self, Budget, Take};
use super::door::{Format, KNOWN_NAMES, Packing, is_gzip};
use crate::diagnostic::{Code, Diagnostic};
use std::fs::{self, File};
use std::io::{self, Cursor, Read};
use std::path::{Path, PathBuf};
use walkdir::WalkDir;

/// Files larger than this many bytes are refused.
pub(super) const MAX_FILE_BYTES: u64 = 1 << 30;

/// One thing to read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Input {
    /// A file, which may be an archive.
    File(PathBuf),
    /// Standard input.
    Stdin,
    /// A path that names nothing to read, with the reason.
    Fault(PathBuf, Diagnostic),
}

/// One file of structures: an input itself, or a member of an archive.
#[derive(Debug)]
pub struct Member {
    /// The name to print: that of the input, followed by `/` and the path within the archive.
    pub name: String,
    content: Content,
}

#[derive(Debug)]
enum Content {
    /// A file that is opened when it is needed; the limit on what a compression may hold.
    File(PathBuf, u64),
    Read(Result<Vec<u8>, Diagnostic>),
}

impl Member {
    pub(super) fn unpacked(name: String, content: Result<Vec<u8>, Diagnostic>) -> Self {
        Self { name, content: Content::Read(content) }
    }

    /// Bytes that this member holds in memory before it is read.
    #[must_use]
    pub fn held(&self) -> usize {
        match &self.content {
            Content::Read(Ok(bytes)) => bytes.len(),
            _ => 0,
        }
    }

    /// How many bytes the member has before it is unpacked; zero when that cannot be told.
    #[must_use]
    pub fn length(&self) -> u64 {
        match &self.content {
            Content::File(path, _) => fs::metadata(path).map_or(0, |found| found.len()),
            Content::Read(content) => content.as_ref().map_or(0, |bytes| bytes.len() as u64),
        }
    }

    /// The content, without compression.
    ///
    /// # Errors
    /// `file-001` when it cannot be read, `file-002` when it is empty, `file-005` when it is too large; a code of the
    /// family `archive-` when it cannot be unpacked; the reason of an [`Input::Fault`].
    pub fn read(self) -> Result<Vec<u8>, Diagnostic> {
        match self.content {
            Content::Read(content) => content,
            Content::File(path, limit) => Budget::new(limit).content(read_file(&path)?),
        }
    }
}

impl Input {
    /// The input of one path: standard input for `-`.
    #[must_use]
    pub fn new(path: &Path) -> Self {
        if path.as_os_str() == "-" { Self::Stdin } else { Self::File(path.to_owned()) }
    }

    /// The name to print: the path as given or found, `-` for standard input.
    #[must_use]
    pub fn name(&self) -> String {
        match self {
            Self::File(path) | Self::Fault(path, _) => path.display().to_string(),
            Self::Stdin => "-".to_owned(),
        }
    }

    /// The content of an input that is not an archive, without compression.
    ///
    /// # Errors
    /// As [`Member::read`]; `archive-002` for an archive.
    pub fn read(&self) -> Result<Vec<u8>, Diagnostic> {
        let budget = Budget::new(MAX_FILE_BYTES);
        match self {
            Self::File(path) => budget.content(read_file(path)?),
            Self::Stdin => budget.content(read_stdin()?),
            Self::Fault(_, diagnostic) => Err(diagnostic.clone()),
        }
    }

    /// Hands the members to `take` in order: one for a plain file, those of an archive one by one. `max_unpacked` is
    /// the largest number of bytes that may come out of one archive. A file is opened when its member is read; of an
    /// archive one member at a time is in memory, as long as `take` keeps none.
    ///
    /// # Errors
    /// Only those of `take`, which end the walk. What cannot be read is a member whose [`Member::read`] says why.
    pub fn visit<E>(&self, max_unpacked: u64, take: &mut Take<'_, E>) -> Result<(), E> {
        let name = self.name();
        match self {
            Self::Fault(_, diagnostic) => take(Member::unpacked(name, Err(diagnostic.clone()))),
            Self::File(path) => match packing_of_file(path) {
                Ok(Some((packing, file))) => archive::visit(&name, packing, file, max_unpacked, take),
                _ => take(Member { name, content: Content::File(path.clone(), max_unpacked) }),
            },
            Self::Stdin => match read_stdin() {
                Ok(bytes) => match packing_of(&name, &bytes) {
                    Some(packing) => archive::visit(&name, packing, Cursor::new(bytes), max_unpacked, take),
                    None => take(Member::unpacked(name, Budget::new(max_unpacked).content(bytes))),
                },
                Err(refusal) => take(Member::unpacked(name, Err(refusal))),
            },
        }
    }
}

/// How a content is packed; its marks are trusted more than its name.
fn packing_of(name: &str, head: &[u8]) -> Option<Packing> {
    if is_gzip(head) {
        let is_tar = || Packing::of_content(&archive::head_of_gzip(head)) == Some(Packing::Tar);
        return (Packing::of_name(name) == Some(Packing::TarGz) || is_tar()).then_some(Packing::TarGz);
    }
    Packing::of_content(head).or_else(|| Packing::of_name(name))
}

/// The packing of a file, and the file. A file with the name of a structure is not opened for this.
fn packing_of_file(path: &Path) -> io::Result<Option<(Packing, File)>> {
    let name = path.to_string_lossy();
    // The bytes of a pipe come only once.
    if Format::of_name(&name).is_some() || !path.is_file() {
        return Ok(None);
    }
    let mut head = Vec::new();
    File::open(path)?.take(1 << 16).read_to_end(&mut head)?;
    match packing_of(&name, &head) {
        Some(packing) => Ok(Some((packing, File::open(path)?))),
        None => Ok(None),
    }
}

fn read_stdin() -> Result<Vec<u8>, Diagnostic> {
    let mut bytes = Vec::new();
    io::stdin()
        .lock()
        .take(MAX_FILE_BYTES + 1)
        .read_to_end(&mut bytes)
        .map_err(|error| unreadable("standard input", &error))?;
    if bytes.len() as u64 > MAX_FILE_BYTES { Err(too_large(bytes.len() as u64)) } else { Ok(bytes) }
}

fn read_file(path: &Path) -> Result<Vec<u8>, Diagnostic> {
    let length = fs::metadata(path).map_err(|error| unreadable("the file", &error))?.len();
    if length > MAX_FILE_BYTES {
        return Err(too_large(length));
    }
    // Devices and pipes have no length, and may have no end.
    let mut bytes = Vec::with_capacity(usize::try_from(length).unwrap_or(0));
    File::open(path)
        .and_then(|file| file.take(MAX_FILE_BYTES + 1).read_to_end(&mut bytes))
        .map_err(|error| unreadable("the file", &error))?;
    if bytes.len() as u64 > MAX_FILE_BYTES { Err(too_large(bytes.len() as u64)) } else { Ok(bytes) }
}

/// The content, if there is any.
pub(super) fn refuse_blank(bytes: Vec<u8>) -> Result<Vec<u8>, Diagnostic> {
    if bytes.iter().all(u8::is_ascii_whitespace) {
        let message = format!("the file is empty ({} bytes)", bytes.len());
        return Err(Diagnostic::error(Code::FileEmpty, message));
    }
    Ok(bytes)
}

fn unreadable(what: &str, error: &io::Error) -> Diagnostic {
    Diagnostic::error(Code::FileUnreadable, format!("{what} cannot be read: {error}"))
}

pub(super) fn too_large(length: u64) -> Diagnostic {
    Diagnostic::error(
        Code::FileTooLarge,
        format!("the file has {length} bytes, above the limit of {MAX_FILE_BYTES}"),
    )
}

/// The inputs a list of paths names: files as given, folders searched at any depth, in the order of their names, for
/// files whose name stands for a known format or an archive (any case), `-` for standard input. Links to folders are
/// not followed. What cannot be read becomes a [`Input::Fault`] in its place.
#[must_use]
pub fn find_inputs(paths: &[PathBuf]) -> Vec<Input> {
    let mut inputs = Vec::new();
    for path in paths {
        if path.as_os_str() != "-" && path.is_dir() {
            find_in_folder(path, &mut inputs);
        } else {
            inputs.push(Input::new(path));
        }
    }
    inputs
}

fn find_in_folder(folder: &Path, inputs: &mut Vec<Input>) {
    let before = inputs.len();
    for entry in WalkDir::new(folder).sort_by_file_name() {
        match entry {
            Ok(entry) if !entry.file_type().is_dir() && has_known_name(entry.path()) => {
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
        let diagnostic = Diagnostic::error(
            Code::FileNoInput,
            format!("the folder holds nothing that is read: {KNOWN_NAMES}"),
        );
        inputs.push(Input::Fault(folder.to_path_buf(), diagnostic));
    }
}

/// Whether a file of a folder is meant to be read. JSON may be anything, so it has to speak of lattice vectors, or of
/// the standard's entries, in its first 64 kB, unless it is compressed or cannot be opened.
fn has_known_name(path: &Path) -> bool {
    let name = path.to_string_lossy();
    match Format::of_name(&name) {
        Some(Format::Optimade) => {
            let mut head = Vec::new();
            let is_read = File::open(path).and_then(|file| file.take(1 << 16).read_to_end(&mut head)).is_ok();
            let speaks_of = |word: &[u8]| memchr::memmem::find(&head, word).is_some();
            !is_read || is_gzip(&head) || speaks_of(b"lattice_vectors") || speaks_of(b"species_at_sites")
        }
        Some(_) => true,
        None => Packing::of_name(&name).is_some(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn folders_are_walked_in_order() {
        let folder = tempfile::tempdir().expect("a folder");
        fs::create_dir(folder.path().join("b")).expect("a folder");
        for name in
            ["c.cif", "a.CIF", "b/z.cif", "notes.txt", "POSCAR-1", "d.tar.gz", "e.cif.gz", "notes.txt.gz"]
        {
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
        assert_eq!(names, ["POSCAR-1", "a.CIF", "b/z.cif", "c.cif", "d.tar.gz", "e.cif.gz"]);
    }

    #[test]
    fn json_of_another_kind_is_left_alone() {
        let folder = tempfile::tempdir().expect("a folder");
        fs::write(folder.path().join("results.json"), r#"{"label": "polar"}"#).expect("a file");
        fs::write(folder.path().join("entries.json"), r#"{"data": [{"lattice_vectors": 1}]}"#)
            .expect("a file");
        let names: Vec<_> = find_inputs(&[folder.path().to_path_buf()]).iter().map(Input::name).collect();
        assert_eq!(names.len(), 1);
        assert!(names[0].ends_with("entries.json"));
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
