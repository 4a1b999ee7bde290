//! Oxidation numbers stated by the file.
//!
//! They are used only as a whole: every site must have one. Where some are missing, or all are zero (many programs
//! write 0 for "not known"), they are set aside with a remark and charges are inferred.
//!
//! A complete statement is taken at its word, also where it is wrong: averaged numbers, different numbers on equivalent
//! sites and a sum other than zero are refused and not replaced by an inference. The usual cause of a sum other than
//! zero is atoms that the file lacks, most often hydrogen. An inference from the composition would then be just as
//! wrong and look better than it is. The refusal proposes what inference would have said.

use super::MAX_CHARGE;
use crate::crystal::Site;
use crate::diagnostic::{Code, Diagnostic};
use itertools::Itertools;

/// Stated numbers nearer than this to a whole number are whole.
const WHOLE: f64 = 1e-6;

/// What the file says.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Stated {
    /// Nothing.
    Nothing,
    /// Something that cannot be used, and why.
    SetAside(Diagnostic),
    /// A whole charge for each site.
    Charges(Vec<i64>),
}

/// Reads the oxidation numbers of the sites.
///
/// # Errors
/// Every site has a number and one of them is not whole.
pub(super) fn read(sites: &[Site]) -> Result<Stated, Diagnostic> {
    let known =
        || sites.iter().filter_map(|site| Some((site, site.oxidation.filter(|number| number.is_finite())?)));
    if known().next().is_none() {
        return Ok(Stated::Nothing);
    }
    let set_aside =
        |message: String| Ok(Stated::SetAside(Diagnostic::warning(Code::ChargeSetAside, message)));
    let without = sites.iter().filter(|site| !site.oxidation.is_some_and(f64::is_finite));
    let without: Vec<&str> = without.map(|site| site.label.as_str()).unique().collect();
    if !without.is_empty() {
        return set_aside(format!(
            "the file's oxidation numbers were not used: it states none for {}",
            super::listing(without)
        ));
    }
    if known().all(|(_, number)| number.abs() < WHOLE) {
        let message = "the file's oxidation numbers were not used: all of them are 0";
        return Ok(Stated::SetAside(Diagnostic::note(Code::ChargeSetAside, message)));
    }
    let mut charges = Vec::with_capacity(sites.len());
    for (site, number) in known() {
        if number.abs() > f64::from(MAX_CHARGE) {
            return set_aside(format!(
                "the file's oxidation numbers were not used: {number} of site {} is beyond the limit of {MAX_CHARGE}",
                site.label
            ));
        }
        if (number - number.round()).abs() > WHOLE {
            return Err(Diagnostic::error(
                Code::ChargeAveraged,
                format!(
                    "the file states the charge {number} for site {}, which is not within {WHOLE} of a whole number; \
                     a polarization with averaged charges is not quantized",
                    site.label
                ),
            ));
        }
        #[expect(clippy::cast_possible_truncation, reason = "the number is within the limit")]
        charges.push(number.round() as i64);
    }
    Ok(Stated::Charges(charges))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::crystal::Element;
    use nalgebra::Vector3;

    fn sites(numbers: &[Option<f64>]) -> Vec<Site> {
        numbers
            .iter()
            .enumerate()
            .map(|(index, &oxidation)| Site {
                oxidation,
                ..Site::new(format!("O{index}"), Element::OXYGEN, Vector3::zeros())
            })
            .collect()
    }

    #[test]
    fn complete_whole_numbers_are_used() {
        assert_eq!(read(&sites(&[Some(2.0), Some(-2.000_000_1)])), Ok(Stated::Charges(vec![2, -2])));
        assert_eq!(read(&sites(&[None, None])), Ok(Stated::Nothing));
        assert_eq!(read(&sites(&[Some(f64::NAN), None])), Ok(Stated::Nothing));
    }

    #[test]
    fn partial_zero_and_absurd_statements_are_set_aside() {
        for (numbers, text) in [
            (&[Some(2.0), None][..], "none for O1"),
            (&[Some(0.0), Some(0.0)], "all of them are 0"),
            (&[Some(1.0), Some(300.0)], "300 of site O1 is beyond the limit of 118"),
            (&[Some(1.0), Some(-1e300)], "of site O1 is beyond the limit of 118"),
        ] {
            match read(&sites(numbers)) {
                Ok(Stated::SetAside(remark)) => assert!(remark.message.contains(text), "{}", remark.message),
                other => panic!("{other:?}"),
            }
        }
    }

    #[test]
    fn averages_are_refused() {
        let refusal = read(&sites(&[Some(2.67), Some(-2.0)])).expect_err("averaged");
        assert_eq!(refusal.code, Code::ChargeAveraged);
        assert!(refusal.message.contains("2.67 for site O0"), "{}", refusal.message);
    }
}
