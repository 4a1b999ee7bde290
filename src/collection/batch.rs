//! From an input to its materials: every structure it holds, classified, in order.

use super::door::{self, Part};
use super::{Classification, Input, Material, Member, Settings, classify_unit};
use crate::diagnostic::{Code, Diagnostic};
use rayon::prelude::*;
use std::convert::Infallible;

/// Structures of one file that are worked on before their results are handed on.
const BATCH: usize = 256;
/// From so many on, the structures of one file are worked on side by side.
const MANY: usize = 16;
/// So many names are listed when none of them is the one that was asked for.
const NAMED: usize = 20;

/// The materials of one file, in batches: a dump of a database is one file, and its answers need not be in memory
/// together. The structures of a batch are worked on by the threads of the current pool.
pub struct Batches<'s> {
    file: String,
    parts: std::vec::IntoIter<Part>,
    /// What is to be said of the file as a whole, until it has been said with the first material.
    first: Vec<Diagnostic>,
    /// The only material of a file that cannot be read.
    refused: Option<Material>,
    settings: &'s Settings,
}

impl<'s> Batches<'s> {
    /// Reads a file, whose name helps to tell the format. Parts without a structure (headers of a publication, entries of
    /// other types) are skipped when another part holds one. At least one material comes out.
    #[must_use]
    pub fn new(file: &str, bytes: &[u8], settings: &'s Settings) -> Self {
        let (parts, first, refused) = match wanted_parts(file, bytes, settings) {
            Ok((parts, first)) => (parts, first, None),
            Err(refused) => (Vec::new(), Vec::new(), Some(*refused)),
        };
        Self { file: file.to_owned(), parts: parts.into_iter(), first, refused, settings }
    }
}

impl Iterator for Batches<'_> {
    type Item = Vec<Material>;

    fn next(&mut self) -> Option<Vec<Material>> {
        if let Some(refused) = self.refused.take() {
            return Some(vec![refused]);
        }
        let batch: Vec<Part> = self.parts.by_ref().take(BATCH).collect();
        let one = |part: &Part| classify_part(&self.file, part, self.settings);
        let mut materials: Vec<Material> = if batch.len() < MANY {
            batch.iter().map(one).collect()
        } else {
            batch.par_iter().map(one).collect()
        };
        materials.first_mut()?.classification.diagnostics.splice(..0, std::mem::take(&mut self.first));
        Some(materials)
    }
}

/// Classifies every structure of an input, that of all members where it is an archive. At least one material.
#[must_use]
pub fn classify_input(input: &Input, settings: &Settings) -> Vec<Material> {
    let mut materials = Vec::new();
    let mut take = |member: Member| {
        materials.extend(classify_member(member, settings));
        Ok(())
    };
    let Ok(()) = input.visit::<Infallible>(settings.max_unpacked, &mut take);
    materials
}

/// Classifies every structure of a file or of a member of an archive. At least one material.
#[must_use]
pub fn classify_member(member: Member, settings: &Settings) -> Vec<Material> {
    let file = member.name.clone();
    match member.read() {
        Ok(bytes) => classify_bytes(&file, &bytes, settings),
        Err(refusal) => vec![Material::refused(&file, refusal)],
    }
}

/// Classifies every structure in the content of a file; all of [`Batches`] together.
#[must_use]
pub fn classify_bytes(file: &str, bytes: &[u8], settings: &Settings) -> Vec<Material> {
    Batches::new(file, bytes, settings).flatten().collect()
}

type Wanted = (Vec<Part>, Vec<Diagnostic>);

/// The parts to classify and what is to be said of the whole; or the only material of a file without any.
fn wanted_parts(file: &str, bytes: &[u8], settings: &Settings) -> Result<Wanted, Box<Material>> {
    let refused = |refusal| Box::new(Material::refused(file, refusal));
    let (mut parts, first) = door::read(file, bytes).map_err(refused)?;
    if parts.is_empty() {
        let mut material = refused(
            Diagnostic::error(Code::FileEmpty, "the file holds no data block")
                .hint("a CIF starts with data_ and a name"),
        );
        material.classification.diagnostics = first;
        return Err(material);
    }
    if let Some(wanted) = &settings.block {
        if !parts.iter().any(|part| part.name.eq_ignore_ascii_case(wanted)) {
            let refusal = unknown_block(wanted, &parts);
            return Err(Box::new(Material { block: wanted.clone(), ..Material::refused(file, refusal) }));
        }
        parts.retain(|part| part.name.eq_ignore_ascii_case(wanted));
    } else if parts.iter().any(|part| part.is_structure) {
        parts.retain(|part| part.is_structure);
    }
    Ok((parts, first))
}

fn classify_part(file: &str, part: &Part, settings: &Settings) -> Material {
    let mut classification = match &part.unit {
        Ok(unit) => classify_unit(unit, settings),
        Err(refusal) => Classification::refused(refusal.clone()),
    };
    let mut diagnostics = part.diagnostics.clone();
    let found = std::mem::take(&mut classification.diagnostics);
    diagnostics.extend(found.into_iter().map(|found| part.locate(found)));
    classification.diagnostics = diagnostics;
    classification.outcome = classification.outcome.map_err(|refusal| part.locate(refusal));
    Material { file: file.to_owned(), block: part.name.clone(), classification }
}

fn unknown_block(wanted: &str, parts: &[Part]) -> Diagnostic {
    let names: Vec<_> = parts.iter().map(|part| part.name.as_str()).filter(|name| !name.is_empty()).collect();
    let Some(first) = names.first() else {
        let message =
            format!("the file has no data block '{wanted}': its format has no names for structures");
        return Diagnostic::error(Code::FileUnknownBlock, message);
    };
    let more = if names.len() > NAMED { ", ..." } else { "" };
    let some = names.iter().take(NAMED).copied().collect::<Vec<_>>().join(", ");
    let message = format!("the file has no data block '{wanted}'; it has: {some}{more}");
    Diagnostic::error(Code::FileUnknownBlock, message).hint(format!("--block {first}"))
}
