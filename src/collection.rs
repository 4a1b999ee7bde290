//! Many inputs: which files a list of paths names, what they hold, and their structures, classified in a stable order.

mod alternatives;
mod archive;
mod classification;
mod contents;
mod door;
mod input;
mod setting;

pub use alternatives::{Alternative, PLAUSIBLE};
pub use classification::{
    Classification, Material, PARENT_TOLERANCE, ParentLevel, Settings, classify_bytes, classify_input,
    classify_member, classify_unit,
};
pub use contents::Contents;
pub use input::{Input, Member, find_inputs};
pub use setting::{Axes, Recast, difference, recast};
