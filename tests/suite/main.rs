//! All integration tests, linked once.

mod cif;
mod demo;
mod enumeration;
mod generated;
mod layers;
mod permitted;
mod published;
mod slow;
mod wide;
