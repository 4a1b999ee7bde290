//! Options that several commands share.

use super::exit::Exit;
use super::output;
use crate::charge::{Given, Parameters};
use crate::collection::{Input, Material, PARENT_TOLERANCE, Settings, classify_input};
use crate::crystal::ExpandTolerance;
use crate::diagnostic::Code;
use crate::symmetry::Engine;
use clap::Args;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// How a structure is read and searched.
#[derive(Debug, Args)]
pub(super) struct StructureOptions {
    /// Formal charges in e by element or site label, such as 'Ta=5,K=1,O=-2'
    #[arg(long, value_name = "CHARGES", allow_hyphen_values = true, help_heading = "Structure")]
    charges: Option<Given>,
    /// Bond-valence parameters of your own: a CIF with the items of the bond-valence dictionary; they go before the built-in ones
    #[arg(long, value_name = "FILE", value_parser = bond_valence, help_heading = "Structure")]
    bond_valence: Option<Arc<Parameters>>,
    /// Only the data block or entry of this name
    #[arg(long, value_name = "NAME", help_heading = "Structure")]
    block: Option<String>,
    /// Symmetry engine: moyo, or spglib where it is built in
    #[arg(long, value_name = "ENGINE", default_value_t = Engine::default(), help_heading = "Structure")]
    engine: Engine,
    /// Distance tolerance of the symmetry search in Å
    #[arg(long, value_name = "Å", default_value_t = 0.01, value_parser = positive, help_heading = "Structure")]
    symmetry_tolerance: f64,
    /// Largest distance in Å of an atom from its place in the parent structure
    #[arg(long, value_name = "Å", default_value_t = PARENT_TOLERANCE, value_parser = positive, help_heading = "Structure")]
    parent_tolerance: f64,
    /// Do not look for the parent cell of a distorted crystal
    #[arg(long, conflicts_with = "parent_tolerance", help_heading = "Structure")]
    no_parent: bool,
    /// Refuse different atoms nearer than this, in Å
    #[arg(long, value_name = "Å", default_value_t = ExpandTolerance::default().min_distance, value_parser = positive,
          help_heading = "Structure")]
    min_distance: f64,
    /// Refuse cells with more sites than this
    #[arg(long, value_name = "N", default_value_t = ExpandTolerance::default().max_sites, help_heading = "Structure")]
    max_sites: usize,
    /// Unpack at most this much from one archive, in bytes, or with K, M, G or T for powers of 1024
    #[arg(long, value_name = "SIZE", default_value = "2G", value_parser = size, help_heading = "Structure")]
    max_unpacked: u64,
}

impl StructureOptions {
    pub(super) fn settings(self) -> Settings {
        Settings {
            charges: self.charges,
            engine: self.engine,
            symmetry_tolerance: self.symmetry_tolerance,
            expand: ExpandTolerance {
                min_distance: self.min_distance,
                max_sites: self.max_sites,
                ..ExpandTolerance::default()
            },
            parent_tolerance: (!self.no_parent).then_some(self.parent_tolerance),
            parameters: self.bond_valence,
            block: self.block,
            max_unpacked: self.max_unpacked,
        }
    }
}

/// Where the answer goes and how much is said on the way.
#[derive(Debug, Args)]
pub(super) struct OutputOptions {
    /// Write to this file in place of stdout
    #[arg(short, long, value_name = "FILE", help_heading = "Output")]
    pub(super) output: Option<PathBuf>,
    /// Say nothing on stderr but errors
    #[arg(short, long, help_heading = "Output")]
    pub(super) quiet: bool,
    /// Say more on stderr: every diagnostic of every material
    #[arg(short, long, conflicts_with = "quiet", help_heading = "Output")]
    pub(super) verbose: bool,
}

/// Reads a table of bond-valence parameters.
fn bond_valence(path: &str) -> Result<Arc<Parameters>, String> {
    let bytes = std::fs::read(path).map_err(|error| error.to_string())?;
    Parameters::from_cif(&bytes).map(Arc::new).map_err(|fault| format!("{}: {}", fault.code, fault.message))
}

pub(super) fn positive(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.is_finite() && value > 0.0 => Ok(value),
        Ok(value) => Err(format!("{value} is not a positive number")),
        Err(error) => Err(error.to_string()),
    }
}

/// Parses a number of bytes such as `1000000`, `500M` or `2G`.
pub(super) fn size(text: &str) -> Result<u64, String> {
    let digits = text.trim_end_matches(|c: char| c.is_ascii_alphabetic());
    let shift = match text[digits.len()..].to_ascii_uppercase().as_str() {
        "" | "B" => 0,
        "K" | "KB" | "KIB" => 10,
        "M" | "MB" | "MIB" => 20,
        "G" | "GB" | "GIB" => 30,
        "T" | "TB" | "TIB" => 40,
        other => return Err(format!("'{other}' is not K, M, G or T; write a size as 500M or 2G")),
    };
    let number: u64 = digits.parse().map_err(|_| format!("'{text}' is not a size; write 500M or 2G"))?;
    number
        .checked_mul(1 << shift)
        .filter(|size| *size > 0)
        .ok_or_else(|| format!("'{text}' is not between 1 byte and 16 EiB"))
}

/// The materials of one path, or how to end when it cannot be read at all, which has then been said.
pub(super) fn materials_of(path: &Path, settings: &Settings) -> Result<Vec<Material>, Exit> {
    let materials = classify_input(&Input::new(path), settings);
    if let [only] = materials.as_slice()
        && let Err(refusal) = &only.classification.outcome
        && matches!(refusal.code, Code::FileUnreadable | Code::FileEmpty | Code::FileTooLarge)
    {
        output::talk(&format!("{}: {refusal}", only.file));
        return Err(if refusal.code == Code::FileUnreadable { Exit::Fault } else { Exit::Refused });
    }
    Ok(materials)
}

/// Parses `h,k,l`.
pub(super) fn plane(text: &str) -> Result<[i64; 3], String> {
    let indices: Vec<i64> = text
        .split(',')
        .map(|part| {
            part.trim().parse().map_err(|_| format!("'{part}' is not a whole number; write a plane as 0,0,1"))
        })
        .collect::<Result<_, _>>()?;
    match <[i64; 3]>::try_from(indices) {
        Ok([0, 0, 0]) => Err("0,0,0 is not a plane".to_owned()),
        Ok(indices) if indices.iter().any(|index| index.abs() > 1000) => {
            Err("indices go up to 1000".to_owned())
        }
        Ok(indices) => Ok(indices),
        Err(indices) => Err(format!("{} indices in place of three; write a plane as 0,0,1", indices.len())),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn sizes() {
        assert_eq!(size("2G"), Ok(Settings::default().max_unpacked));
        // By hand: K, M, G are 1024, 1024², 1024³.
        for (text, expected) in
            [("1", 1), ("500M", 524_288_000), ("2G", 2_147_483_648), ("3kb", 3072), ("1GiB", 1 << 30)]
        {
            assert_eq!(size(text), Ok(expected), "{text}");
        }
        for text in ["", "0", "G", "-1", "1.5G", "2X", "99999999T", "é"] {
            assert!(size(text).is_err(), "{text}");
        }
    }
}
