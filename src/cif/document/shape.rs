//! What a document remembers of each tag, loop and block, in a few bytes.

use super::Document;
use crate::cif::lex::ends_name;
use crate::cif::source::narrow;
use std::ops::Range;

/// A tag: where it begins, a number made of its name, and where its value is.
#[derive(Debug, Clone, Copy)]
pub(in crate::cif) struct Entry {
    /// The byte with which the tag begins.
    pub(in crate::cif) tag: u32,
    /// [`fold`] of its name.
    pub(in crate::cif) hash: u32,
    /// The byte with which the value begins, or the number of the loop with the highest bit set.
    place: u32,
}

/// Where the value of a tag is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(in crate::cif) enum Place {
    /// The byte with which it begins.
    Pair(u32),
    /// It is a column of the loop of this number.
    Column(u32),
}

const IN_LOOP: u32 = 1 << 31;
/// Offsets and numbers of loops are below this.
pub(in crate::cif) const MAX_OFFSET: usize = IN_LOOP as usize;

impl Entry {
    pub(in crate::cif) fn new(source: &[u8], tag: Range<usize>, place: Place) -> Self {
        let hash = fold(&source[tag.clone()]);
        let place = match place {
            Place::Pair(offset) => offset,
            Place::Column(number) => number | IN_LOOP,
        };
        Self { tag: narrow(tag.start), hash, place }
    }

    pub(in crate::cif) fn place(self) -> Place {
        if self.place & IN_LOOP == 0 { Place::Pair(self.place) } else { Place::Column(self.place & !IN_LOOP) }
    }

    /// The byte with which the tag, or the loop it is in, begins.
    pub(super) fn begins(self, document: &Document<'_>) -> usize {
        match self.place() {
            Place::Pair(_) => self.tag as usize,
            Place::Column(number) => document.loops[number as usize].start as usize,
        }
    }

    /// Whether the tag has this name, in any case.
    pub(in crate::cif) fn is_named(self, source: &[u8], name: &str) -> bool {
        let rest = &source[self.tag as usize..];
        let ends = rest.get(name.len()).is_none_or(|&byte| ends_name(byte));
        ends && rest.get(..name.len()).is_some_and(|found| found.eq_ignore_ascii_case(name.as_bytes()))
    }
}

/// A number made of a name without regard to ASCII case (FNV-1a, 32 bits). Equal names have equal numbers; unequal names
/// may have them too.
pub(in crate::cif) fn fold(name: &[u8]) -> u32 {
    name.iter().fold(0x811C_9DC5, |hash, byte| {
        (hash ^ u32::from(byte.to_ascii_lowercase())).wrapping_mul(0x0100_0193)
    })
}

/// A data block.
#[derive(Debug, Clone)]
pub(in crate::cif) struct BlockShape {
    /// The byte with which the heading begins, if the file has one.
    pub(in crate::cif) heading: Option<u32>,
    /// Numbers of its entries, those of its save frames included.
    pub(in crate::cif) entries: Range<u32>,
}

/// A save frame.
#[derive(Debug, Clone)]
pub(in crate::cif) struct FrameShape {
    /// The number of the block it is in.
    pub(in crate::cif) block: u32,
    /// The byte with which the heading begins.
    pub(in crate::cif) heading: u32,
    /// Numbers of its entries.
    pub(in crate::cif) entries: Range<u32>,
}

/// A loop.
#[derive(Debug, Clone, Copy)]
pub(in crate::cif) struct LoopShape {
    /// The byte with which `loop_` begins.
    pub(in crate::cif) start: u32,
    /// The number of the entry of its first tag.
    pub(in crate::cif) first_entry: u32,
    /// How many tags it has.
    pub(in crate::cif) columns: u32,
    /// How many whole rows of values it has.
    pub(in crate::cif) rows: u32,
    /// The number of its first mark: marks stand at every sixteenth value.
    pub(in crate::cif) first_mark: u32,
}

impl LoopShape {
    /// Every so many values of a loop one place is remembered.
    pub(in crate::cif) const VALUES_PER_MARK: usize = 16;
}
