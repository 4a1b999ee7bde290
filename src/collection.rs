//! Many inputs: which files a list of paths names, and their structures, classified in a stable order.

mod classification;
mod input;
mod setting;

pub use classification::{
    Classification, Material, PARENT_TOLERANCE, ParentLevel, Settings, classify_bytes, classify_unit,
};
pub use input::{Input, find_inputs};
pub use setting::{Axes, Recast, difference, recast};
