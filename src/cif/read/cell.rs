//! The unit cell of a block.

use super::super::document::{Block, Value};
use super::super::number::{Measured, parse_number};
use super::super::parse::shown;
use super::tags::{CELL, CELL_VOLUME, Spellings};
use crate::cell::{CellParameters, Lattice, LatticeError};
use crate::diagnostic::{Code, Diagnostic, Span};

/// The stated volume may differ from that of the cell by this fraction.
const VOLUME_TOLERANCE: f64 = 0.01;

/// Names of the parameters, in the order of [`CELL`].
const NAMES: [&str; 6] = ["a", "b", "c", "alpha", "beta", "gamma"];

/// The value of the first spelling the block has.
pub(super) fn value_of<'d, 's>(block: &'d Block<'s>, tags: Spellings) -> Option<&'d Value<'s>> {
    tags.iter().find_map(|tag| block.value(tag))
}

/// The values that follow an item without a tag of their own.
pub(super) fn surplus_of(block: &Block<'_>, tags: Spellings) -> Option<Span> {
    tags.iter().find_map(|tag| block.pair(tag)).and_then(|pair| pair.surplus)
}

/// A number that is nice to have: an unreadable one is reported and passed over.
pub(super) fn optional_number(
    block: &Block<'_>,
    tags: Spellings,
    noticed: &mut Vec<Diagnostic>,
) -> Option<f64> {
    let value = value_of(block, tags)?;
    let text = value.stated()?;
    let number = parse_number(text).map(|number| number.value);
    if number.is_none() {
        let message = format!("{} is '{}', which is not a number", tags[0], shown(text));
        noticed.push(Diagnostic::warning(Code::CifNumber, message).at(value.span));
    }
    number
}

/// Whether the block has any item of the cell.
pub(super) fn has_cell(block: &Block<'_>) -> bool {
    CELL.iter().any(|tags| value_of(block, tags).is_some())
}

/// The lattice, and the standard uncertainties of the six parameters.
pub(super) fn read_cell(
    block: &Block<'_>,
    noticed: &mut Vec<Diagnostic>,
) -> Result<(Lattice, [Option<f64>; 6]), Diagnostic> {
    let missing: Vec<&str> = CELL
        .iter()
        .filter(|tags| value_of(block, tags).is_none_or(|value| value.stated().is_none()))
        .map(|tags| tags[0])
        .collect();
    if !missing.is_empty() {
        return Err(Diagnostic::error(Code::CellMissing, format!("no value for {}", missing.join(", ")))
            .at(CELL.iter().find_map(|tags| value_of(block, tags)).map_or(block.span, |value| value.span))
            .hint(format!("{} 4.000", missing[0])));
    }
    let mut numbers = [Measured { value: 0.0, uncertainty: None, decimals: None }; 6];
    for (number, tags) in numbers.iter_mut().zip(CELL) {
        *number = read_parameter(block, tags)?;
    }
    let [a, b, c, alpha, beta, gamma] = numbers.map(|number| number.value);
    let parameters = CellParameters { lengths: [a, b, c], angles: [alpha, beta, gamma] };
    let lattice = Lattice::from_parameters(&parameters).map_err(|error| refusal(block, &error))?;
    check_volume(block, &lattice, noticed);
    Ok((lattice, numbers.map(|number| number.uncertainty)))
}

fn read_parameter(block: &Block<'_>, tags: Spellings) -> Result<Measured, Diagnostic> {
    let value = value_of(block, tags);
    let (text, span) = value.map_or(("", block.span), |value| (value.text.as_ref(), value.span));
    if let Some(surplus) = surplus_of(block, tags) {
        let message = format!("{} is followed by a second value, so it cannot be trusted", tags[0]);
        return Err(Diagnostic::error(Code::CellNotFinite, message).at(surplus));
    }
    parse_number(text).ok_or_else(|| {
        let message = format!("{} is '{}', which is not a number", tags[0], shown(text));
        Diagnostic::error(Code::CellNotFinite, message).at(span).hint(format!("{} 4.000", tags[0]))
    })
}

/// What is wrong with the lattice, at the value that makes it so.
fn refusal(block: &Block<'_>, error: &LatticeError) -> Diagnostic {
    let (code, index) = match error {
        LatticeError::NotFinite { name, .. } => (Code::CellNotFinite, place(name)),
        LatticeError::OutOfRange { name, .. } => (Code::CellDegenerate, place(name)),
        LatticeError::Degenerate { .. } => (Code::CellDegenerate, place("alpha")),
    };
    let span = value_of(block, CELL[index]).map_or(block.span, |value| value.span);
    Diagnostic::error(code, error.to_string()).at(span)
}

fn place(name: &str) -> usize {
    NAMES.iter().position(|known| *known == name).unwrap_or(0)
}

fn check_volume(block: &Block<'_>, lattice: &Lattice, noticed: &mut Vec<Diagnostic>) {
    let Some(stated) = optional_number(block, CELL_VOLUME, noticed).filter(|volume| *volume > 0.0) else {
        return;
    };
    let found = lattice.volume();
    if (stated - found).abs() > VOLUME_TOLERANCE * found {
        let span = value_of(block, CELL_VOLUME).map_or(block.span, |value| value.span);
        noticed.push(
            Diagnostic::warning(
                Code::CellVolume,
                format!(
                    "{} is {stated} Å³, but the cell parameters give {found:.3} Å³, more than {} % apart",
                    CELL_VOLUME[0],
                    VOLUME_TOLERANCE * 100.0
                ),
            )
            .at(span),
        );
    }
}
