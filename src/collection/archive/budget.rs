//! How much has been unpacked, and the limit.

use crate::collection::door::{Packing, is_gzip};
use crate::collection::input::{MAX_FILE_BYTES, refuse_blank, too_large};
use crate::diagnostic::{Code, Diagnostic};
use flate2::read::MultiGzDecoder;
use std::cell::Cell;
use std::io::{self, Read};

/// What the error says that ends a reader at the limit.
const OVER: &str = "over the limit of bytes to unpack";

/// How much may be unpacked, and how much has been.
pub(in crate::collection) struct Budget {
    limit: u64,
    spent: Cell<u64>,
}

/// A reader whose bytes count towards a limit.
pub(super) struct Counted<'b, R> {
    inner: R,
    budget: &'b Budget,
}

impl<R: Read> Read for Counted<'_, R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        if self.budget.is_over() {
            return Err(io::Error::other(OVER));
        }
        let count = self.inner.read(buffer)?;
        self.budget.spent.set(self.budget.spent.get().saturating_add(count as u64));
        if self.budget.is_over() { Err(io::Error::other(OVER)) } else { Ok(count) }
    }
}

impl Budget {
    pub(in crate::collection) fn new(limit: u64) -> Self {
        Self { limit, spent: Cell::new(0) }
    }

    /// The reader, with its bytes counted.
    pub(super) fn counted<R: Read>(&self, inner: R) -> Counted<'_, R> {
        Counted { inner, budget: self }
    }

    pub(super) fn is_over(&self) -> bool {
        self.spent.get() > self.limit
    }

    pub(super) fn refusal(&self) -> Diagnostic {
        let message = format!(
            "more than {} bytes would be unpacked, the limit of --max-unpacked; this and all that follows in the archive \
                 was not read",
            self.limit
        );
        Diagnostic::error(Code::ArchiveTooLarge, message)
            .hint(format!("--max-unpacked {}", self.limit.saturating_mul(4)))
    }

    pub(super) fn read_all(&self, reader: impl Read) -> Result<Vec<u8>, Diagnostic> {
        let mut bytes = Vec::new();
        let counted = self.counted(reader);
        let outcome = counted.take(MAX_FILE_BYTES + 1).read_to_end(&mut bytes);
        // The limit may also be that of the stream below.
        if self.is_over() || outcome.as_ref().is_err_and(is_over) {
            return Err(self.refusal());
        }
        outcome.map_err(|error| damaged(&error.to_string()))?;
        if bytes.len() as u64 > MAX_FILE_BYTES { Err(too_large(bytes.len() as u64)) } else { Ok(bytes) }
    }

    /// The content itself: without a compression with gzip, refused where it is an archive or blank.
    pub(in crate::collection) fn content(&self, bytes: Vec<u8>) -> Result<Vec<u8>, Diagnostic> {
        let bytes =
            if is_gzip(&bytes) { self.read_all(MultiGzDecoder::new(bytes.as_slice()))? } else { bytes };
        if is_gzip(&bytes) || Packing::of_content(&bytes).is_some() {
            return Err(nested());
        }
        refuse_blank(bytes)
    }
}

pub(super) fn damaged(why: &str) -> Diagnostic {
    Diagnostic::error(Code::ArchiveDamaged, format!("the archive is damaged: {why}"))
}

pub(super) fn nested() -> Diagnostic {
    Diagnostic::error(
        Code::ArchiveNested,
        "an archive inside an archive, or under the name of a structure, is not opened",
    )
}

/// Whether an error of the tar reader comes from a limit on the stream below it.
pub(super) fn is_over(error: &io::Error) -> bool {
    let mut cause: Option<&dyn std::error::Error> = Some(error);
    while let Some(error) = cause {
        if error.to_string() == OVER {
            return true;
        }
        cause = error.source();
    }
    false
}
