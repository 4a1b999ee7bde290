//! Many inputs: which files a list of paths names, and their structures, classified in a stable order.

mod alternatives;
mod classification;
mod input;

pub use alternatives::{Alternative, PLAUSIBLE};
pub use classification::{
    Classification, Material, PARENT_TOLERANCE, ParentLevel, Settings, classify_bytes, classify_unit,
};
pub use input::{Input, find_inputs};
