//! Many inputs: which files a list of paths names, what they hold, and their structures, classified in a stable order.

mod archive;
mod batch;
mod classification;
mod door;
mod input;

pub use batch::{Batches, classify_bytes, classify_input, classify_member};
pub use classification::{Classification, Material, PARENT_TOLERANCE, ParentLevel, Settings, classify_unit};
pub use input::{Input, Member, find_inputs};
