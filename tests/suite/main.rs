//! Tests through the public interface, linked once.

#[cfg(feature = "spglib")]
mod engines;
