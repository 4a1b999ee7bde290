//! Space-group symmetry: settings by name, and what follows from them.

pub mod setting;
