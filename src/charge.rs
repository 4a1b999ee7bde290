//! Which whole charge does each atom carry?
//!
//! Formal polarization needs one whole charge per set of symmetry-equivalent sites, and a neutral cell. The charges
//! are, in this order of trust,
//!
//! 1. *given* by the user, as in `Ta=5,K=1,O=-2` ([`Given`]);
//! 2. *stated* by the file;
//! 3. *inferred* from the composition, the published frequencies of oxidation states ([`states`]) and the lengths of
//!    the bonds ([`bond_valences`]).
//!
//! [`assign`] does all three and refuses with a reason where no answer can be defended.

mod assignment;
mod average;
mod bond_valence;
mod calibration;
mod electronegativity;
mod evidence;
mod given;
mod inferred;
mod neutral;
mod orbit;
mod parameters;
mod prior;
mod reasoning;
mod sense;
mod stated;
mod states;
mod surroundings;

pub use assignment::{Assignment, Known, Source, assign, charged_formula, charges_text, infer, known};
pub use bond_valence::{BondValences, OrbitValence, bond_valences};
pub use given::Given;
pub use inferred::{MIN_LIKELIHOOD_RATIO, MIN_PROBABILITY};
pub use parameters::{Origin, Pair, Parameters};
pub use reasoning::{Candidate, Reasoning, Refusal};
pub use states::{State, share, states};

/// Larger charges, in units of e, are taken for mistakes: 118 is the charge of the heaviest nucleus.
const MAX_CHARGE: i32 = 118;

/// The first few of a list, and how many more there are.
fn listing<T: std::fmt::Display>(items: impl IntoIterator<Item = T>) -> String {
    const SHOWN: usize = 8;
    let mut items = items.into_iter();
    let shown: Vec<String> = items.by_ref().take(SHOWN).map(|item| item.to_string()).collect();
    match items.count() {
        0 => shown.join(", "),
        more => format!("{} and {more} more", shown.join(", ")),
    }
}
