//! All integration tests, linked once.

mod enumeration;
mod generated;
mod layers;
mod permitted;
mod published;
mod slow;
mod wide;
