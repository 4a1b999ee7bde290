//! The members of an archive, one after the other, without unpacking it as a whole.
//!
//! Everything that is unpacked counts towards one limit per archive, so that a small file cannot fill the memory. What
//! is wrong with one member costs that member; the rest of an archive is lost only where its own frame is damaged.

mod budget;

pub(super) use budget::Budget;

use super::door::{Format, KNOWN_NAMES, Packing};
use super::input::Member;
use crate::diagnostic::{Code, Diagnostic};
use budget::{damaged, is_over, nested};
use flate2::read::MultiGzDecoder;
use std::io::{BufReader, Read, Seek};
use zip::CompressionMethod;

/// Takes a member; an error of its own ends the walk.
pub(super) type Take<'t, E> = dyn FnMut(Member) -> Result<(), E> + 't;

/// The first bytes of what a gzip stream holds.
pub(super) fn head_of_gzip(packed: &[u8]) -> Vec<u8> {
    let mut head = Vec::new();
    // A stream that ends too early, or is damaged, gives what it has.
    let _ = MultiGzDecoder::new(packed).take(512).read_to_end(&mut head);
    head
}

/// Visits the members of an archive that may hold structures, in the order of the archive.
///
/// # Errors
/// Only those of `take`.
pub(super) fn visit<E>(
    name: &str,
    packing: Packing,
    source: impl Read + Seek,
    limit: u64,
    take: &mut Take<'_, E>,
) -> Result<(), E> {
    let budget = Budget::new(limit);
    let mut walk = Walk { name, budget: &budget, found: 0, take };
    match packing {
        Packing::Zip => walk.zip(source)?,
        Packing::Tar => walk.tar(BufReader::new(source))?,
        Packing::TarGz => {
            let unpacked = Budget::new(limit);
            let stream = MultiGzDecoder::new(BufReader::new(source));
            walk.tar(unpacked.counted(stream))?;
        }
    }
    if walk.found == 0 {
        let message = format!("the archive holds nothing that is read: {KNOWN_NAMES}");
        walk.give("", Err(Diagnostic::error(Code::FileNoInput, message)))?;
    }
    Ok(())
}

struct Walk<'w, 't, E> {
    name: &'w str,
    budget: &'w Budget,
    found: usize,
    take: &'w mut Take<'t, E>,
}

/// What is done with a member, going by its name.
enum Plan {
    Skip,
    Refuse(Diagnostic),
    Read,
}

impl<E> Walk<'_, '_, E> {
    /// Hands on a member; the archive itself has an empty path.
    fn give(&mut self, path: &str, content: Result<Vec<u8>, Diagnostic>) -> Result<(), E> {
        self.found += 1;
        let path = path.trim_start_matches("./");
        let shown: String = path.chars().map(|c| if c.is_control() { '\u{fffd}' } else { c }).collect();
        let name = if shown.is_empty() { self.name.to_owned() } else { format!("{}/{shown}", self.name) };
        (self.take)(Member::unpacked(name, content))
    }

    fn zip(&mut self, source: impl Read + Seek) -> Result<(), E> {
        let mut archive = match zip::ZipArchive::new(BufReader::new(source)) {
            Ok(archive) => archive,
            Err(error) => return self.give("", Err(damaged(&error.to_string()))),
        };
        for index in 0..archive.len() {
            let described = archive.by_index_raw(index).map(|file| {
                let path = match file.name() {
                    Ok(path) => path.into_owned(),
                    Err(_) => String::from_utf8_lossy(file.name_raw()).into_owned(),
                };
                let plan = match plan(&path, !file.is_dir(), file.is_symlink(), file.encrypted()) {
                    Plan::Read => plan_for_method(file.compression()),
                    plan => plan,
                };
                (path, plan)
            });
            let (path, plan) = match described {
                Ok(described) => described,
                Err(error) => {
                    self.give("", Err(damaged(&format!("member {}: {error}", index + 1))))?;
                    continue;
                }
            };
            let content = match plan {
                Plan::Skip => continue,
                Plan::Refuse(refusal) => Err(refusal),
                Plan::Read => match archive.by_index(index) {
                    Ok(file) => self.budget.read_all(file).and_then(|bytes| self.budget.content(bytes)),
                    Err(error) => Err(damaged(&error.to_string())),
                },
            };
            self.give(&path, content)?;
            if self.budget.is_over() {
                break;
            }
        }
        Ok(())
    }

    fn tar(&mut self, source: impl Read) -> Result<(), E> {
        let mut archive = tar::Archive::new(source);
        let entries = match archive.entries() {
            Ok(entries) => entries,
            Err(error) => return self.give("", Err(damaged(&error.to_string()))),
        };
        for entry in entries {
            let mut entry = match entry {
                Ok(entry) => entry,
                Err(error) => {
                    let refusal =
                        if is_over(&error) { self.budget.refusal() } else { damaged(&error.to_string()) };
                    return self.give("", Err(refusal));
                }
            };
            let path = String::from_utf8_lossy(&entry.path_bytes()).into_owned();
            let kind = entry.header().entry_type();
            let is_link = kind.is_symlink() || kind.is_hard_link();
            let is_file = kind.is_file() || kind.is_contiguous() || kind.is_gnu_sparse() || is_link;
            match plan(&path, is_file, is_link, false) {
                Plan::Skip => {}
                Plan::Refuse(refusal) => self.give(&path, Err(refusal))?,
                Plan::Read => {
                    let size = entry.size();
                    let content = self.budget.read_all(&mut entry);
                    let is_cut = content.as_ref().is_ok_and(|bytes| bytes.len() as u64 != size);
                    let content = if is_cut {
                        Err(damaged(&format!("it ends within a member of {size} bytes")))
                    } else {
                        content
                    };
                    // Without a sound end of this member the next cannot be found.
                    let is_last = content.as_ref().is_err_and(|refusal| refusal.code != Code::FileTooLarge);
                    let content = content.and_then(|bytes| self.budget.content(bytes));
                    self.give(&path, content)?;
                    if is_last || self.budget.is_over() {
                        return Ok(());
                    }
                }
            }
        }
        Ok(())
    }
}

fn plan(path: &str, is_file: bool, is_link: bool, is_encrypted: bool) -> Plan {
    let is_archive = Packing::of_name(path).is_some();
    if !is_file || !is_archive && Format::of_name(path).is_none() {
        Plan::Skip
    } else if !is_safe(path) {
        let message = "the path of the member is absolute, leads upwards, or holds control characters";
        Plan::Refuse(Diagnostic::error(Code::ArchivePath, message))
    } else if is_link {
        Plan::Refuse(Diagnostic::error(Code::ArchivePath, "the member is a link, and links are not followed"))
    } else if is_archive {
        Plan::Refuse(nested())
    } else if is_encrypted {
        Plan::Refuse(Diagnostic::error(Code::ArchiveEncrypted, "the member is encrypted"))
    } else {
        Plan::Read
    }
}

/// Nothing is ever written under the name of a member; a name that would be dangerous shows that something is wrong.
fn is_safe(path: &str) -> bool {
    let is_absolute = path.starts_with(['/', '\\']) || path.as_bytes().get(1) == Some(&b':');
    let leads_upwards = path.split(['/', '\\']).any(|part| part == "..");
    !is_absolute && !leads_upwards && !path.contains(char::is_control)
}

fn plan_for_method(method: CompressionMethod) -> Plan {
    if matches!(method, CompressionMethod::Stored | CompressionMethod::Deflated) {
        return Plan::Read;
    }
    let message =
        format!("the member is packed by the method {method}; only stored and deflated members are read");
    Plan::Refuse(Diagnostic::error(Code::ArchiveMethod, message))
}

#[cfg(test)]
mod tests {
    use super::*;
    use flate2::Compression;
    use flate2::write::GzEncoder;
    use proptest::prelude::*;
    use std::convert::Infallible;
    use std::io::{Cursor, Write};
    use zip::ZipWriter;
    use zip::write::SimpleFileOptions;

    type Files<'a> = &'a [(&'a str, &'a [u8])];

    fn zipped(files: Files<'_>) -> Vec<u8> {
        let mut writer = ZipWriter::new(Cursor::new(Vec::new()));
        for (name, content) in files {
            let options = SimpleFileOptions::default().compression_method(CompressionMethod::Deflated);
            writer.start_file(*name, options).expect("a member");
            writer.write_all(content).expect("content");
        }
        writer.finish().expect("an archive").into_inner()
    }

    fn tarred(files: Files<'_>) -> Vec<u8> {
        let mut builder = tar::Builder::new(Vec::new());
        for (name, content) in files {
            let mut header = tar::Header::new_ustar();
            // Written by hand: the library refuses the hostile names.
            let field = &mut header.as_old_mut().name;
            field[..name.len()].copy_from_slice(name.as_bytes());
            header.set_size(content.len() as u64);
            header.set_mode(0o644);
            header.set_cksum();
            builder.append(&header, *content).expect("a member");
        }
        builder.into_inner().expect("an archive")
    }

    fn gzipped(content: &[u8]) -> Vec<u8> {
        let mut writer = GzEncoder::new(Vec::new(), Compression::default());
        writer.write_all(content).expect("content");
        writer.finish().expect("a stream")
    }

    /// Names of the members, and the code of each refusal.
    fn members(packing: Packing, bytes: &[u8], limit: u64) -> Vec<(String, Option<Code>)> {
        let mut found = Vec::new();
        let Ok(()) = visit::<Infallible>("a", packing, Cursor::new(bytes), limit, &mut |member| {
            let name = member.name.clone();
            found.push((name, member.read().err().map(|refusal| refusal.code)));
            Ok(())
        });
        found
    }

    fn row(name: &str, code: Option<Code>) -> (String, Option<Code>) {
        (name.to_owned(), code)
    }

    const FILES: Files<'static> = &[
        ("./b/x.cif", b"data_x"),
        ("notes.txt", b"no structure"),
        ("POSCAR", b"title"),
        ("._x.cif", b"companion"),
        ("empty.cif", b" "),
    ];

    #[test]
    fn members_have_the_order_of_the_archive() {
        let expected =
            [row("a/b/x.cif", None), row("a/POSCAR", None), row("a/empty.cif", Some(Code::FileEmpty))];
        assert_eq!(members(Packing::Zip, &zipped(FILES), 1 << 20), expected);
        assert_eq!(members(Packing::Tar, &tarred(FILES), 1 << 20), expected);
        assert_eq!(members(Packing::TarGz, &gzipped(&tarred(FILES)), 1 << 20), expected);
        let none = [row("a", Some(Code::FileNoInput))];
        assert_eq!(members(Packing::Zip, &zipped(&[("notes.txt", b"x")]), 1 << 20), none);
        assert_eq!(members(Packing::Tar, &tarred(&[]), 1 << 20), none);
    }

    #[test]
    fn nothing_is_unpacked_beyond_the_limit() {
        let zeros = vec![b' '; 1 << 20];
        let files: Files<'_> = &[("a.cif", b"data_x"), ("b.cif", &zeros), ("c.cif", b"data_x")];
        let expected = [row("a/a.cif", None), row("a/b.cif", Some(Code::ArchiveTooLarge))];
        assert_eq!(members(Packing::Zip, &zipped(files), 10_000), expected);
        assert_eq!(members(Packing::Tar, &tarred(files), 10_000), expected);
        assert_eq!(members(Packing::TarGz, &gzipped(&tarred(files)), 10_000), expected);
        // A member that is itself compressed, and one that is only skipped.
        let packed = gzipped(&zeros);
        let inner: Files<'_> = &[("a.cif.gz", &packed)];
        assert_eq!(
            members(Packing::Zip, &zipped(inner), 10_000),
            [row("a/a.cif.gz", Some(Code::ArchiveTooLarge))]
        );
        let skipped: Files<'_> = &[("notes.txt", &zeros), ("c.cif", b"data_x")];
        let found = members(Packing::TarGz, &gzipped(&tarred(skipped)), 10_000);
        assert_eq!(found, [row("a", Some(Code::ArchiveTooLarge))]);
        assert_eq!(Budget::new(10_000).content(packed).expect_err("too much").code, Code::ArchiveTooLarge);
        // The total counts, not each member.
        let many: Files<'_> = &[("a.cif", &zeros[..6_000]), ("b.cif", &zeros[..6_000])];
        assert_eq!(members(Packing::Zip, &zipped(many), 10_000)[1].1, Some(Code::ArchiveTooLarge));
    }

    #[test]
    fn hostile_members_cost_one_row() {
        let archive = zipped(&[("x.cif", b"data_x")]);
        let files: Files<'_> = &[
            ("../up.cif", b"data_x"),
            ("/etc/x.cif", b"data_x"),
            ("C:x.cif", b"data_x"),
            ("a\\..\\x.cif", b"data_x"),
            ("bell\x07.cif", b"data_x"),
            ("inner.zip", &archive),
            ("inner.cif", &archive),
            ("good.cif", b"data_x"),
        ];
        for found in
            [members(Packing::Zip, &zipped(files), 1 << 20), members(Packing::Tar, &tarred(files), 1 << 20)]
        {
            let codes: Vec<Option<Code>> = found.iter().map(|(_, code)| *code).collect();
            let (path, nested) = (Some(Code::ArchivePath), Some(Code::ArchiveNested));
            assert_eq!(codes, [path, path, path, path, path, nested, nested, None], "{found:?}");
            assert_eq!(found[4].0, "a/bell\u{fffd}.cif");
        }
        let mut builder = tar::Builder::new(Vec::new());
        let mut header = tar::Header::new_gnu();
        header.set_entry_type(tar::EntryType::Symlink);
        header.set_size(0);
        builder.append_link(&mut header, "x.cif", "/etc/passwd").expect("a link");
        let linked = builder.into_inner().expect("an archive");
        assert_eq!(members(Packing::Tar, &linked, 1 << 20), [row("a/x.cif", Some(Code::ArchivePath))]);
    }

    /// Sets bytes at an offset from each header of a kind (offsets from the description of the zip format, from memory:
    /// flags at 6 and 8, method at 8 and 10, of the local and the central header).
    fn patched(mut bytes: Vec<u8>, local: usize, central: usize, value: u8) -> Vec<u8> {
        for at in 0..bytes.len() - 4 {
            match &bytes[at..at + 4] {
                b"PK\x03\x04" => bytes[at + local] = value,
                b"PK\x01\x02" => bytes[at + central] = value,
                _ => {}
            }
        }
        bytes
    }

    #[test]
    fn what_cannot_be_unpacked_is_said() {
        let good = zipped(&[("a.cif", b"data_x"), ("b.cif", b"data_y")]);
        let codes = |bytes: &[u8]| {
            members(Packing::Zip, bytes, 1 << 20).into_iter().map(|(_, code)| code).collect::<Vec<_>>()
        };
        assert_eq!(codes(&patched(good.clone(), 6, 8, 1)), [Some(Code::ArchiveEncrypted); 2]);
        assert_eq!(codes(&patched(good.clone(), 8, 10, 12)), [Some(Code::ArchiveMethod); 2]);
        assert_eq!(codes(&good[..good.len() - 30]), [Some(Code::ArchiveDamaged)]);
        assert_eq!(codes(b"PK\x03\x04"), [Some(Code::ArchiveDamaged)]);
        // One wrong byte in the first member costs that one.
        let mut wrong = good;
        wrong[30 + "a.cif".len() + 1] ^= 0x55;
        assert_eq!(codes(&wrong), [Some(Code::ArchiveDamaged), None]);
        let tar = tarred(&[("a.cif", b"data_x"), ("b.cif", &[b'x'; 2_000])]);
        let damaged = [row("a/a.cif", None), row("a/b.cif", Some(Code::ArchiveDamaged))];
        assert_eq!(members(Packing::Tar, &tar[..2_000], 1 << 20), damaged);
        let packed = gzipped(&tar);
        let found = members(Packing::TarGz, &packed[..packed.len() / 2], 1 << 20);
        assert_eq!(found.last().map(|(_, code)| *code), Some(Some(Code::ArchiveDamaged)), "{found:?}");
        assert_eq!(members(Packing::Tar, &[b'x'; 600], 1 << 20), [row("a", Some(Code::ArchiveDamaged))]);
        assert_eq!(members(Packing::TarGz, b"\x1f\x8bxx", 1 << 20), [row("a", Some(Code::ArchiveDamaged))]);
        let cut = gzipped(&[b'x'; 5_000]);
        assert_eq!(
            Budget::new(1 << 20).content(cut[..20].to_vec()).expect_err("cut").code,
            Code::ArchiveDamaged
        );
    }

    proptest! {
        #[test]
        fn any_archive_is_taken(at in 0_usize..3_000, value: u8, cut in 0_usize..3_000) {
            for (packing, mut bytes) in
                [(Packing::Zip, zipped(FILES)), (Packing::Tar, tarred(FILES)), (Packing::TarGz, gzipped(&tarred(FILES)))]
            {
                let length = bytes.len();
                bytes[at % length] = value;
                prop_assert!(!members(packing, &bytes, 1 << 20).is_empty());
                bytes.truncate(cut % length);
                prop_assert!(!members(packing, &bytes, 1 << 20).is_empty());
            }
        }
    }
}
