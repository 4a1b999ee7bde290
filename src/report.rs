//! What the answers look like: records for machines, tables and words for people.

pub mod facets;
pub mod ladder;
pub mod materials;
pub mod reasoning;
pub mod record;
pub mod setting;
pub mod table;
pub mod words;
