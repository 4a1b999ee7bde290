//! Placeholder until the reader lands.

use crate::crystal::AsymmetricUnit;
use crate::diagnostic::Diagnostic;

/// The structures of a file.
pub struct Reading {
    /// One for each data block.
    pub blocks: Vec<BlockReading>,
    /// What was noticed.
    pub diagnostics: Vec<Diagnostic>,
}

/// One block.
pub struct BlockReading {
    /// Its name.
    pub name: String,
    /// Whether it is about a structure.
    pub is_structure: bool,
    /// The structure.
    pub unit: Result<AsymmetricUnit, Diagnostic>,
    /// What was noticed.
    pub diagnostics: Vec<Diagnostic>,
}

/// Reads nothing yet.
pub fn read_bytes(_: &[u8]) -> Reading {
    Reading { blocks: vec![], diagnostics: vec![] }
}
