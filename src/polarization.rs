//! Which formal polarization values does a crystal allow, and is zero among them?
//!
//! The formal polarization of a cell with charges `Z_i` (in e) at fractional positions `r_i` is
//! `P = (e/V) Σ Z_i r_i`. Moving an ion to an equivalent site or an electron by a lattice vector changes it, so that
//! only a coset is defined: an offset `p` plus `m` times the lattice `L` (King-Smith & Vanderbilt, Phys. Rev. B 47,
//! 1651 (1993); Resta, Rev. Mod. Phys. 66, 899 (1994)). Throughout, `p` is in units of `e a_i / V` along the
//! primitive vectors `a_i`.

mod choices;
mod formal;
mod label;
mod modulus;
mod permitted;

pub use choices::{Choices, Sweep, SweepPlane};
pub use formal::{C_PER_M2, Component, FormalPolarization};
pub use label::Label;
pub use modulus::{Coset, Modulus};
pub use permitted::Permitted;
