//! All integration tests, linked once.

mod permitted;
