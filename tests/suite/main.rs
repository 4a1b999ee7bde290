//! Tests through the public interface, in one binary.

mod cif;
