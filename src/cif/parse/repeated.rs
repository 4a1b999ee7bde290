//! Names that are given twice: tags of a block, blocks of a file.
//!
//! Names are sorted by a number made of them, and by themselves where these numbers are equal, so that no choice of names
//! takes more than `n log n` comparisons.

use super::shown;
use crate::cif::document::{Document, fold};
use crate::cif::findings::Findings;
use crate::diagnostic::{Code, Diagnostic};
use std::cmp::Ordering;

/// Reports tags and block names that were used before.
pub(super) fn repeated(document: &Document<'_>, findings: &mut Findings) {
    let mut order: Vec<u32> = Vec::new();
    let mut again: Vec<u32> = Vec::new();
    for block in document.blocks() {
        for scope in std::iter::once(block.clone()).chain(block.frames()) {
            order.clear();
            order.extend(scope.entry_numbers());
            find(
                &mut order,
                &mut again,
                |number| document.entries[number as usize].hash,
                |number| document.name_of(number),
            );
        }
    }
    for &number in &again {
        let tag = document.tag_at(document.entries[number as usize].tag as usize);
        findings.add(Code::CifTagRepeated, || {
            let message =
                format!("tag {} was given before in this block; the first was kept", shown(&tag.name));
            Diagnostic::warning(Code::CifTagRepeated, message).at(tag.span)
        });
    }
    repeated_blocks(document, findings);
}

fn repeated_blocks(document: &Document<'_>, findings: &mut Findings) {
    let name = |number: u32| document.block_name(number);
    let hashes: Vec<u32> = (0..).zip(document.blocks()).map(|(number, _)| fold(name(number))).collect();
    let mut order: Vec<u32> =
        (0..).zip(&hashes).map(|(number, _)| number).filter(|&n| !name(n).is_empty()).collect();
    let mut again = Vec::new();
    find(&mut order, &mut again, |number| hashes[number as usize], name);
    for number in again {
        findings.add(Code::CifBlockRepeated, || {
            let block = document.block(number as usize);
            let is_same = |&other: &u32| name(other).eq_ignore_ascii_case(name(number));
            let first = (0..number).find(is_same).and_then(|first| document.block(first as usize));
            let shown_name = block.as_ref().map_or("", |block| block.name.as_ref());
            let message = format!(
                "block name '{}' was used before, at line {}",
                shown(shown_name),
                first.map_or(0, |first| first.span.line)
            );
            let found = Diagnostic::warning(Code::CifBlockRepeated, message);
            match &block {
                Some(block) => found.at(block.span),
                None => found,
            }
        });
    }
}

/// Adds to `again` the numbers whose name a smaller number has, in the order of the file.
fn find<N: AsRef<[u8]>>(
    order: &mut [u32],
    again: &mut Vec<u32>,
    hash: impl Fn(u32) -> u32,
    name: impl Fn(u32) -> N,
) {
    let before = again.len();
    order.sort_unstable_by_key(|&number| (hash(number), number));
    for group in order.chunk_by_mut(|&a, &b| hash(a) == hash(b)) {
        if group.len() > 1 {
            group.sort_unstable_by(|&a, &b| compare(name(a).as_ref(), name(b).as_ref()).then(a.cmp(&b)));
            let same = |pair: &&[u32]| compare(name(pair[0]).as_ref(), name(pair[1]).as_ref()).is_eq();
            again.extend(group.windows(2).filter(same).map(|pair| pair[1]));
        }
    }
    again[before..].sort_unstable();
}

/// Compares names without regard to ASCII case.
fn compare(a: &[u8], b: &[u8]) -> Ordering {
    a.iter().map(u8::to_ascii_lowercase).cmp(b.iter().map(u8::to_ascii_lowercase))
}
