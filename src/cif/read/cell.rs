//! The unit cell of a block.

use super::super::document::{Block, Value};
use super::super::number::{Measured, parse_number};
use super::super::parse::shown;
use super::tags::{CELL, CELL_VOLUME, Spellings};
use crate::cell::{CellParameters, Lattice, LatticeError};
use crate::crystal::Operation;
use crate::diagnostic::{Code, Diagnostic, Span};
use nalgebra::Matrix3;

/// The stated volume may differ from that of the cell by this fraction.
const VOLUME_TOLERANCE: f64 = 0.01;
/// Lengths in Å and angles in degrees may differ from those of the lattice system by this.
const METRIC_TOLERANCE: [f64; 2] = [1e-3, 0.02];

/// Names of the parameters, in the order of [`CELL`].
const NAMES: [&str; 6] = ["a", "b", "c", "alpha", "beta", "gamma"];

/// The value of the first spelling the block has.
pub(super) fn value_of<'s>(block: &Block<'_, 's>, tags: Spellings) -> Option<Value<'s>> {
    tags.iter().find_map(|tag| block.value(tag))
}

/// The values that follow an item without a tag of their own.
pub(super) fn surplus_of(block: &Block<'_, '_>, tags: Spellings) -> Option<Span> {
    tags.iter().find_map(|tag| block.pair(tag)).and_then(|pair| pair.surplus)
}

/// A number that is nice to have: an unreadable one is reported and passed over.
pub(super) fn optional_number(
    block: &Block<'_, '_>,
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
pub(super) fn has_cell(block: &Block<'_, '_>) -> bool {
    CELL.iter().copied().flatten().any(|tag| block.has(tag))
}

/// The lattice, and the standard uncertainties of the six parameters.
pub(super) fn read_cell(
    block: &Block<'_, '_>,
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
            .hint(example(missing[0])));
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

fn read_parameter(block: &Block<'_, '_>, tags: Spellings) -> Result<Measured, Diagnostic> {
    let value = value_of(block, tags);
    let (text, span) = value.as_ref().map_or(("", block.span), |value| (value.text.as_ref(), value.span));
    if let Some(surplus) = surplus_of(block, tags) {
        let message = format!("{} is followed by a second value, so it cannot be trusted", tags[0]);
        return Err(Diagnostic::error(Code::CellNotFinite, message).at(surplus));
    }
    parse_number(text).ok_or_else(|| {
        let message = format!("{} is '{}', which is not a number", tags[0], shown(text));
        let hint =
            meant_number(text).map_or_else(|| example(tags[0]), |meant| format!("{} {meant}", tags[0]));
        Diagnostic::error(Code::CellNotFinite, message).at(span).hint(hint)
    })
}

/// What is wrong with the lattice, at the value that makes it so.
fn refusal(block: &Block<'_, '_>, error: &LatticeError) -> Diagnostic {
    let (code, index) = match error {
        LatticeError::NotFinite { name, .. } => (Code::CellNotFinite, place(name)),
        LatticeError::OutOfRange { name, .. } => (Code::CellDegenerate, place(name)),
        LatticeError::Degenerate { .. } => (Code::CellDegenerate, place("alpha")),
    };
    let span = value_of(block, CELL[index]).map_or(block.span, |value| value.span);
    Diagnostic::error(code, error.to_string()).at(span)
}

/// Reports parameters that differ from the ones the operations ask for: the mean of the metric over all of them.
/// Lengths may differ by 0.001 Å and angles by 0.02°, or by three standard uncertainties, which covers rounding.
pub(super) fn check_metric(
    block: &Block<'_, '_>,
    lattice: &Lattice,
    uncertainty: &[Option<f64>; 6],
    operations: &[Operation],
    noticed: &mut Vec<Diagnostic>,
) {
    let metric = lattice.basis().transpose() * lattice.basis();
    let mut sum = Matrix3::zeros();
    let mut count = 0.0;
    for operation in operations {
        let rotation = operation.rotation.cast::<f64>();
        sum += rotation.transpose() * metric * rotation;
        count += 1.0;
    }
    let Some(mean) = (count > 0.0).then(|| sum / count) else { return };
    let length = |i: usize| mean[(i, i)].sqrt();
    let angle =
        |i: usize, j: usize| (mean[(i, j)] / (length(i) * length(j))).clamp(-1.0, 1.0).acos().to_degrees();
    let asked = [length(0), length(1), length(2), angle(1, 2), angle(0, 2), angle(0, 1)];
    let parameters = lattice.parameters();
    let stated = parameters.lengths.into_iter().chain(parameters.angles);
    let wrong: Vec<(usize, f64)> = stated
        .enumerate()
        .filter(|(i, value)| {
            let least = if *i < 3 { METRIC_TOLERANCE[0] } else { METRIC_TOLERANCE[1] };
            (value - asked[*i]).abs() > uncertainty[*i].map_or(least, |u| least.max(3.0 * u))
        })
        .collect();
    // The value that is furthest off is the one to look at; the nearest of its kind tells what was meant.
    let off = |(i, value): &(usize, f64)| (value - asked[*i]).abs();
    let worst = wrong.iter().copied().reduce(|a, b| if off(&b) > off(&a) + 1e-9 { b } else { a });
    let Some((worst, _)) = worst else { return };
    let is_alike = |(i, _): &&(usize, f64)| *i != worst && (*i < 3) == (worst < 3);
    let meant = wrong
        .iter()
        .filter(is_alike)
        .min_by(|a, b| off(a).total_cmp(&off(b)))
        .map_or(asked[worst], |(_, value)| *value);
    let differences: Vec<String> = wrong
        .iter()
        .map(|(i, value)| {
            let unit = if *i < 3 { "Å" } else { "°" };
            let (value, asked) = (plain(*value), plain(asked[*i]));
            format!("{} is {value} {unit} and should be near {asked} {unit}", NAMES[*i])
        })
        .collect();
    let message = format!(
        "the cell does not have the shape that the {} symmetry operations ask for: {}; it was used as it is",
        operations.len(),
        differences.join(", ")
    );
    let span = value_of(block, CELL[worst]).map_or(block.span, |value| value.span);
    noticed.push(Diagnostic::warning(Code::CellMetric, message).at(span).hint(format!(
        "{} {}",
        CELL[worst][0],
        plain(meant)
    )));
}

/// A number to four places without the zeros at its end.
fn plain(number: f64) -> String {
    let text = format!("{number:.4}");
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// What to write where nothing can be known of the value.
fn example(tag: &str) -> String {
    let unit = if tag.contains("angle") { "degrees" } else { "Å" };
    format!("{tag} and its value in {unit}")
}

/// The number somebody probably meant: a comma for the point, a unit after the number, letters for digits.
pub(super) fn meant_number(text: &str) -> Option<String> {
    let text = text.trim().replace(',', ".").replace(['O', 'o'], "0").replace(['l', 'I'], "1");
    let end = text.rfind(|c: char| c.is_ascii_digit() || matches!(c, '.' | ')')).map_or(0, |at| at + 1);
    let text = text[..end].trim();
    // A parenthesis that was forgotten.
    let closed =
        if text.contains('(') && !text.ends_with(')') { format!("{text})") } else { text.to_owned() };
    parse_number(&closed).map(|_| closed)
}

fn place(name: &str) -> usize {
    NAMES.iter().position(|known| *known == name).unwrap_or(0)
}

fn check_volume(block: &Block<'_, '_>, lattice: &Lattice, noticed: &mut Vec<Diagnostic>) {
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
            .at(span)
            .hint(format!("{} {found:.3}, if the cell parameters are right", CELL_VOLUME[0])),
        );
    }
}
