//! One species at one position.

use super::Element;
use nalgebra::Vector3;

/// One species at one position. Several sites may share a position when each is partly occupied.
#[derive(Debug, Clone, PartialEq)]
pub struct Site {
    /// The name the file gives it, such as `O1`.
    pub label: String,
    /// The chemical element.
    pub element: Element,
    /// Fractional coordinates in the cell the site belongs to.
    pub position: Vector3<f64>,
    /// Fraction of cells in which the site is filled, above 0 and at most 1.
    pub occupancy: f64,
    /// Oxidation number stated by the file, in units of e.
    pub oxidation: Option<f64>,
}

impl Site {
    /// A fully occupied site without a stated oxidation number.
    #[must_use]
    pub fn new(label: impl Into<String>, element: Element, position: Vector3<f64>) -> Self {
        Self { label: label.into(), element, position, occupancy: 1.0, oxidation: None }
    }

    /// Occupancies from here up count as full: files round them.
    pub const FULL_OCCUPANCY: f64 = 0.999;

    /// Whether the site is filled in every cell.
    #[must_use]
    pub fn is_full(&self) -> bool {
        self.occupancy >= Self::FULL_OCCUPANCY
    }
}
