//! The structures in the content of a file, read one by one as they are asked for, so that a file of half a million data
//! blocks takes no more memory than the file.

use super::classification::{Classification, Material, Settings, classify_unit};
use super::door::Format;
use crate::cif::{self, Document};
use crate::crystal::AsymmetricUnit;
use crate::diagnostic::{Code, Diagnostic, Span};
use crate::{optimade, poscar};

/// So many names are listed when none of them is the one that was asked for.
const BLOCKS_NAMED: usize = 20;

/// The structures of one file.
pub struct Contents<'b> {
    file: String,
    source: Source<'b>,
    /// What is to be said of the file as a whole.
    diagnostics: Vec<Diagnostic>,
    /// Numbers of the parts that are answered for.
    wanted: Vec<u32>,
}

enum Source<'b> {
    Cif(Document<'b>),
    Listed(Vec<Structure>),
}

/// One structure.
struct Structure {
    /// Data block, or id of the entry; empty where the format has no names.
    name: String,
    /// Whether it is meant to be a structure, and not something that stands beside them.
    is_structure: bool,
    unit: Result<AsymmetricUnit, Diagnostic>,
    diagnostics: Vec<Diagnostic>,
    /// Where each site is in the source.
    places: Vec<Span>,
}

impl<'b> Contents<'b> {
    /// Opens the content of a file, whose name helps to tell the format. Parts without a structure (headers of a
    /// publication, entries of other types) are left out when another part holds one, and so is all that was not asked for.
    ///
    /// # Errors
    /// The one material to report when the file cannot be read at all, holds nothing, or not what was asked for.
    pub fn open(file: &str, bytes: &'b [u8], settings: &Settings) -> Result<Self, Box<Material>> {
        let refused = |refusal: Diagnostic| Box::new(Material::refused(file, refusal));
        let (source, diagnostics) = read(file, bytes).map_err(refused)?;
        let mut contents = Self { file: file.to_owned(), source, diagnostics, wanted: Vec::new() };
        let parts = contents.parts();
        if parts == 0 {
            let mut material = refused(
                Diagnostic::error(Code::FileEmpty, "the file holds no data block")
                    .hint("a CIF starts with data_ and a name"),
            );
            material.classification.diagnostics = contents.diagnostics;
            return Err(material);
        }
        let all = || 0..u32::try_from(parts).unwrap_or(u32::MAX);
        if let Some(wanted) = &settings.block {
            let is_wanted = |&number: &u32| contents.name(number as usize).eq_ignore_ascii_case(wanted);
            contents.wanted = all().filter(is_wanted).collect();
            if contents.wanted.is_empty() {
                let refusal = contents.unknown_block(wanted);
                return Err(Box::new(Material { block: wanted.clone(), ..Material::refused(file, refusal) }));
            }
        } else {
            contents.wanted = all().filter(|&number| contents.is_structure(number as usize)).collect();
            if contents.wanted.is_empty() {
                contents.wanted = all().collect();
            }
        }
        Ok(contents)
    }

    /// How many structures there are to be classified; at least one.
    #[must_use]
    pub fn len(&self) -> usize {
        self.wanted.len()
    }

    /// Never: contents without structures cannot be opened.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.wanted.is_empty()
    }

    /// Classifies a structure by its number. What is to be said of the file as a whole comes with the first.
    ///
    /// # Panics
    /// When the number is not below [`Contents::len`].
    #[must_use]
    pub fn classify(&self, number: usize, settings: &Settings) -> Material {
        let first = if number == 0 { self.diagnostics.clone() } else { Vec::new() };
        let part = self.wanted[number] as usize;
        match &self.source {
            Source::Cif(document) => {
                let block = document.block(part).expect("a block of this document");
                let reading = cif::read_block(&block);
                let locate = |found| reading.locate(found);
                self.material(&reading.name, first, &reading.unit, &reading.diagnostics, locate, settings)
            }
            Source::Listed(structures) => {
                let structure = &structures[part];
                let locate = |found| structure.locate(found);
                let Structure { name, unit, diagnostics, .. } = structure;
                self.material(name, first, unit, diagnostics, locate, settings)
            }
        }
    }

    fn material(
        &self,
        name: &str,
        mut diagnostics: Vec<Diagnostic>,
        unit: &Result<AsymmetricUnit, Diagnostic>,
        own: &[Diagnostic],
        locate: impl Fn(Diagnostic) -> Diagnostic,
        settings: &Settings,
    ) -> Material {
        let mut classification = match unit {
            Ok(unit) => classify_unit(unit, settings),
            Err(refusal) => Classification::refused(refusal.clone()),
        };
        diagnostics.extend_from_slice(own);
        let found = std::mem::take(&mut classification.diagnostics);
        diagnostics.extend(found.into_iter().map(&locate));
        classification.diagnostics = diagnostics;
        classification.outcome = classification.outcome.map_err(locate);
        Material { file: self.file.clone(), block: name.to_owned(), classification }
    }

    fn parts(&self) -> usize {
        match &self.source {
            Source::Cif(document) => document.blocks().len(),
            Source::Listed(structures) => structures.len(),
        }
    }

    fn name(&self, part: usize) -> String {
        match &self.source {
            Source::Cif(document) => {
                document.block(part).map_or_else(String::new, |block| block.name.into_owned())
            }
            Source::Listed(structures) => structures[part].name.clone(),
        }
    }

    fn is_structure(&self, part: usize) -> bool {
        match &self.source {
            Source::Cif(document) => document.block(part).is_some_and(|block| cif::is_structure(&block)),
            Source::Listed(structures) => structures[part].is_structure,
        }
    }

    fn unknown_block(&self, wanted: &str) -> Diagnostic {
        let mut names = (0..self.parts())
            .map(|part| self.name(part))
            .filter(|name| !name.is_empty())
            .take(BLOCKS_NAMED + 1);
        let Some(first) = names.next() else {
            let message =
                format!("the file has no data block '{wanted}': its format has no names for structures");
            return Diagnostic::error(Code::FileUnknownBlock, message);
        };
        let rest: Vec<String> = names.collect();
        let more = if rest.len() >= BLOCKS_NAMED { ", ..." } else { "" };
        let some = rest.iter().take(BLOCKS_NAMED - 1).fold(first.clone(), |list, name| list + ", " + name);
        let message = format!("the file has no data block '{wanted}'; it has: {some}{more}");
        Diagnostic::error(Code::FileUnknownBlock, message).hint(format!("--block {first}"))
    }
}

impl Structure {
    /// A finding about a listed site, with its place in the source.
    fn locate(&self, finding: Diagnostic) -> Diagnostic {
        match finding.site.and_then(|site| self.places.get(site)) {
            Some(span) if finding.span.is_none() => finding.at(*span),
            _ => finding,
        }
    }
}

/// Opens an input. The second value holds what is to be said of it as a whole.
fn read<'b>(path: &str, bytes: &'b [u8]) -> Result<(Source<'b>, Vec<Diagnostic>), Diagnostic> {
    Ok(match Format::of(path, bytes) {
        Format::Cif => {
            let (document, diagnostics) = cif::parse(bytes);
            (Source::Cif(document), diagnostics)
        }
        Format::Poscar => {
            let poscar = poscar::read_bytes(bytes)?;
            let structure = Structure {
                name: String::new(),
                is_structure: true,
                unit: poscar.unit(),
                diagnostics: poscar.diagnostics,
                places: poscar.places,
            };
            (Source::Listed(vec![structure]), Vec::new())
        }
        Format::Optimade => {
            let entries = optimade::read_bytes(bytes)?;
            let structures = entries.into_iter().map(|entry| Structure {
                name: entry.id,
                is_structure: entry.is_structure,
                unit: entry.unit,
                diagnostics: entry.diagnostics,
                places: entry.site_places,
            });
            (Source::Listed(structures.collect()), Vec::new())
        }
    })
}
