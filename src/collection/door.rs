//! The one place that decides which format an input is in.
//!
//! The name decides where it says something, else the content.

/// A format that structures are read from.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Format {
    /// Crystallographic Information File.
    Cif,
    /// Vectors and positions, as electronic-structure programs write them.
    Poscar,
    /// JSON of the OPTIMADE standard, one document or one entry a line.
    Optimade,
}

/// A way to put many files into one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Packing {
    /// A zip archive.
    Zip,
    /// A tar archive.
    Tar,
    /// A tar archive compressed with gzip.
    TarGz,
}

/// What a folder may hold that is read, for messages.
pub(super) const KNOWN_NAMES: &str = "files ending in .cif, .mcif, .vasp, .poscar, .json or .jsonl, POSCAR and CONTCAR files, each as it is or with .gz, \
     and archives ending in .zip, .tar, .tar.gz or .tgz";

/// The part of a path behind its last separator, without `.gz`; and whether it had that.
fn stem(path: &str) -> (&str, bool) {
    let name = path.rsplit(['/', '\\']).next().unwrap_or(path);
    match name.len().checked_sub(3).and_then(|at| name.split_at_checked(at)) {
        Some((stem, ending)) if ending.eq_ignore_ascii_case(".gz") => (stem, true),
        _ => (name, false),
    }
}

fn has_ending(name: &str, endings: &[&str]) -> bool {
    name.rsplit_once('.').is_some_and(|(_, last)| endings.iter().any(|e| last.eq_ignore_ascii_case(e)))
}

impl Format {
    /// The format a name stands for. Names that begin with `._`, the companion files of some archivers, stand for
    /// none.
    pub(super) fn of_name(path: &str) -> Option<Self> {
        let (name, _) = stem(path);
        if name.starts_with("._") {
            None
        } else if has_ending(name, &["cif", "mcif"]) {
            Some(Self::Cif)
        } else if has_ending(name, &["json", "jsonl"]) {
            Some(Self::Optimade)
        } else if has_ending(name, &["poscar", "vasp"])
            || Packing::of_name(path).is_none() && (name.starts_with("POSCAR") || name.starts_with("CONTCAR"))
        {
            Some(Self::Poscar)
        } else {
            None
        }
    }

    /// The format of an input: that of its name, or that of its content.
    pub(super) fn of(path: &str, bytes: &[u8]) -> Self {
        Self::of_name(path).unwrap_or_else(|| {
            let text = bytes.strip_prefix(b"\xef\xbb\xbf").unwrap_or(bytes).trim_ascii_start();
            if text.starts_with(b"{") || text.starts_with(b"[") {
                Self::Optimade
            } else if has_vectors(bytes) {
                Self::Poscar
            } else {
                Self::Cif
            }
        })
    }
}

/// Whether lines 3 to 5 begin with three numbers each and line 2 with one, as in a POSCAR file.
fn has_vectors(bytes: &[u8]) -> bool {
    let numbers = |line: &[u8]| {
        let words = line.split(u8::is_ascii_whitespace).filter(|word| !word.is_empty());
        let is_number =
            |word: &&[u8]| std::str::from_utf8(word).is_ok_and(|word| word.parse::<f64>().is_ok());
        words.take_while(is_number).count()
    };
    let counts: Vec<usize> = bytes.split(|byte| *byte == b'\n').skip(1).take(4).map(numbers).collect();
    counts.len() == 4 && counts[0] >= 1 && counts[1..].iter().all(|count| *count >= 3)
}

impl Packing {
    /// The packing a name stands for.
    pub(super) fn of_name(path: &str) -> Option<Self> {
        let (name, is_gz) = stem(path);
        if has_ending(name, &["tgz"]) || is_gz && has_ending(name, &["tar"]) {
            Some(Self::TarGz)
        } else if has_ending(name, &["tar"]) {
            Some(Self::Tar)
        } else if has_ending(name, &["zip"]) {
            Some(Self::Zip)
        } else {
            None
        }
    }

    /// The packing of a content that is not compressed: by its marks.
    pub(super) fn of_content(bytes: &[u8]) -> Option<Self> {
        if bytes.starts_with(b"PK\x03\x04") || bytes.starts_with(b"PK\x05\x06") {
            Some(Self::Zip)
        } else if bytes.get(257..262) == Some(b"ustar") {
            Some(Self::Tar)
        } else {
            None
        }
    }
}

/// Whether a content is compressed with gzip.
pub(super) fn is_gzip(bytes: &[u8]) -> bool {
    bytes.starts_with(b"\x1f\x8b")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_decide() {
        for (name, format) in [
            ("a/b.cif", Some(Format::Cif)),
            ("B.CIF.GZ", Some(Format::Cif)),
            ("x.mcif", Some(Format::Cif)),
            ("run/POSCAR", Some(Format::Poscar)),
            ("POSCAR-221.gz", Some(Format::Poscar)),
            ("CONTCAR_relaxed", Some(Format::Poscar)),
            ("POSCAR.cif", Some(Format::Cif)),
            ("a.vasp", Some(Format::Poscar)),
            ("a.poscar.gz", Some(Format::Poscar)),
            ("dump.jsonl.gz", Some(Format::Optimade)),
            ("r.json", Some(Format::Optimade)),
            ("._a.cif", None),
            ("POSCARS.zip", None),
            ("notes.txt", None),
            ("é.gz", None),
            ("", None),
        ] {
            assert_eq!(Format::of_name(name), format, "{name}");
        }
        assert_eq!(Packing::of_name("a.tar.gz"), Some(Packing::TarGz));
        assert_eq!(Packing::of_name("a.TGZ"), Some(Packing::TarGz));
        assert_eq!(Packing::of_name("b/a.tar"), Some(Packing::Tar));
        assert_eq!(Packing::of_name("a.zip"), Some(Packing::Zip));
        assert_eq!(Packing::of_name("a.cif.gz"), None);
    }

    #[test]
    fn content_decides_where_the_name_says_nothing() {
        assert_eq!(Format::of("-", b"data_x\n_cell_length_a 3"), Format::Cif);
        assert_eq!(Format::of("-", b" \n{\"data\": []}"), Format::Optimade);
        assert_eq!(Format::of("-", b"title\n1.0\n1 0 0\n0 1 0\n0 0 1\n"), Format::Poscar);
        assert_eq!(Format::of("-", b""), Format::Cif);
        assert_eq!(Format::of("x.cif", b"{}"), Format::Cif);
    }
}
