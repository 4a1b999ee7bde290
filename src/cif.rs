//! What structure does a CIF hold, and can it be trusted?
//!
//! Reading goes in two steps. [`parse`] turns bytes into a [`Document`] of blocks, tags and values, each with its place
//! in the file, and tells what is wrong with the syntax (CIF 1.1: International Tables for Crystallography, volume G,
//! chapter 2.2; Hall, Allen & Brown, Acta Cryst. A47 (1991) 655). [`read_document`] gives the tags their meaning and
//! turns each block into an [`AsymmetricUnit`](crate::crystal::AsymmetricUnit), or says why it cannot.
//!
//! The reader is lenient about spelling and strict about meaning: it knows the tags of all dictionaries, every usual way
//! to write numbers, symmetry operations and symbols, and it refuses a structure whenever a value it needs is missing,
//! unreadable or open to two readings.

mod document;
mod edit;
mod findings;
mod lex;
mod number;
mod operation;
mod parse;
mod read;
mod source;
mod text;
mod write;

pub use document::{Block, Document, Element, Item, Pair, Row, Table, Tag, Value, ValueKind};
pub use edit::{EditError, Edits};
pub use lex::{Dialect, Lexer, Token, TokenKind};
pub use number::{Measured, parse_number};
pub use operation::{OperationError, parse_operation};
pub use parse::parse;
pub use read::{
    BlockReading, Reading, SitePlace, StatedSymmetry, SymmetrySource, is_structure, read_block, read_bytes,
    read_document,
};
pub use write::{CifText, Datum, WriteError};
