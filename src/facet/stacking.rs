//! The layers of a facet, where it can be cut, and the exact bound charge of each cut.

use super::plane::Facet;
use crate::cell::group_cyclic;
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, Ratio};
use crate::polarization::{Component, FormalPolarization};
use crate::symmetry::Primitive;
use nalgebra::Vector3;
use std::fmt;

/// Bound charges below this, in e per surface cell, count as zero where symmetry leaves the value free.
const NO_CHARGE: f64 = 1e-4;

/// A layer of atoms parallel to a facet. Grouping is for naming and for where a cut is allowed; every sum keeps each
/// atom's own height.
#[derive(Debug, Clone, PartialEq)]
pub struct Layer {
    /// Mean height of its atoms in units of the spacing, in [0, 1).
    pub height: f64,
    /// Difference between the highest and the lowest atom in Å.
    pub thickness: f64,
    /// Atoms of the primitive cell.
    pub atoms: Vec<usize>,
    /// Charge in e per primitive surface cell.
    pub charge: i64,
}

/// A way of ending the crystal at a facet.
#[derive(Debug, Clone, PartialEq)]
pub struct Termination {
    /// Index of the layer that lies on top.
    pub top: usize,
    /// Index of the layer at the bottom of the tile, the one above `top` in the endless stack.
    pub bottom: usize,
    /// Bound charge of the upper surface in e per primitive surface cell: `Σ Z_i u_i` over the tile.
    pub charge: Component,
    /// The first termination that a symmetry operation takes to this one: itself, or one before it.
    pub same_as: usize,
}

/// Charged layers and dipoles of a stack (Tasker, J. Phys. C 12, 4977 (1979)).
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum StackingType {
    /// Every layer is neutral.
    One,
    /// Some layers are charged, and some cut leaves no bound charge.
    Two,
    /// Some layers are charged, and every cut leaves a bound charge.
    Three,
}

impl StackingType {
    /// 1, 2 or 3.
    #[must_use]
    pub fn number(self) -> u8 {
        match self {
            Self::One => 1,
            Self::Two => 2,
            Self::Three => 3,
        }
    }
}

impl fmt::Display for StackingType {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.number())
    }
}

/// The layers of a facet and its terminations.
#[derive(Debug, Clone, PartialEq)]
pub struct Stacking {
    /// The layers, by height.
    pub layers: Vec<Layer>,
    /// One termination for each layer, in the order of the layer on top.
    pub terminations: Vec<Termination>,
    /// Type of the stack.
    pub kind: StackingType,
    /// The facet offset `h · p` modulo one, which every termination shares.
    pub offset: Component,
    /// Whether a symmetry operation turns the normal round, so that a slab can end alike on both sides.
    pub is_reversible: bool,
}

impl Stacking {
    /// Groups the atoms of a primitive cell into layers closer than `tolerance` Å and cuts below each of them. Where the
    /// crystal has a parent, `ideal` gives the places of the atoms in it, and the layers are those of the parent; heights
    /// and sums are of the atoms themselves.
    ///
    /// # Errors
    /// `polarization-003` when a number leaves the exact range.
    pub fn new(
        facet: &Facet,
        primitive: &Primitive,
        charges: &[i64],
        formal: &FormalPolarization,
        ideal: Option<&[Vector3<f64>]>,
        tolerance: f64,
    ) -> Result<Self, Diagnostic> {
        let overflow = |_: Overflow| Diagnostic::error(Code::PolarizationOverflow, Overflow.to_string());
        let heights = facet.heights(&primitive.positions);
        let grouped = ideal.map_or_else(|| heights.clone(), |ideal| facet.heights(ideal));
        let (groups, lifts) = group_cyclic(&grouped, tolerance / facet.spacing);
        let lifted: Vec<f64> =
            heights.iter().zip(&lifts).map(|(height, &lift)| height + float(lift)).collect();

        // The tile that starts with the first group: h · p plus the charges that were lifted by whole spacings. Each
        // further cut takes one layer from the bottom of the tile to its top, one spacing higher.
        let unreduced = formal.unreduced_along(facet.indices).map_err(overflow)?;
        let mut moved: i128 =
            lifts.iter().zip(charges).map(|(&lift, &charge)| i128::from(lift) * i128::from(charge)).sum();
        let mut cuts = Vec::with_capacity(groups.len());
        let mut layers = Vec::with_capacity(groups.len());
        for atoms in groups {
            let charge: i64 = atoms.iter().map(|&atom| charges[atom]).sum();
            cuts.push(shifted(unreduced, moved).map_err(overflow)?);
            moved += i128::from(charge);
            let own = || atoms.iter().map(|&atom| lifted[atom]);
            let (low, high) =
                own().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), u| (low.min(u), high.max(u)));
            #[allow(clippy::cast_precision_loss, reason = "numbers of atoms are far below 2^52")]
            let mean = own().sum::<f64>() / atoms.len() as f64;
            let height = mean - (mean + 1e-9).floor();
            layers.push(Layer {
                height: height.max(0.0),
                thickness: (high - low) * facet.spacing,
                atoms,
                charge,
            });
        }
        // From order of the stack to order by height, which only turns the circle.
        let first =
            (0..layers.len()).min_by(|&a, &b| layers[a].height.total_cmp(&layers[b].height)).unwrap_or(0);
        layers.rotate_left(first);
        cuts.rotate_left(first);
        let count = layers.len();
        let equals = equal_layers(facet, primitive, &layers);
        let terminations: Vec<Termination> = (0..count)
            .map(|top| {
                let bottom = (top + 1) % count;
                Termination { top, bottom, charge: cuts[bottom], same_as: equals[top] }
            })
            .collect();
        let kind = if layers.iter().all(|layer| layer.charge == 0) {
            StackingType::One
        } else if terminations.iter().any(Termination::is_neutral) {
            StackingType::Two
        } else {
            StackingType::Three
        };
        let is_reversible = primitive
            .operations
            .iter()
            .any(|operation| facet.image(operation) == facet.indices.map(|index| -index));
        Ok(Self { layers, terminations, kind, offset: unreduced.modulo(1).map_err(overflow)?, is_reversible })
    }
}

impl Termination {
    /// Whether the termination carries no bound charge.
    #[must_use]
    pub fn is_neutral(&self) -> bool {
        match self.charge {
            Component::Exact(ratio) => ratio.is_zero(),
            Component::Free(value) => value.abs() < NO_CHARGE,
        }
    }
}

/// For each layer, the first layer that an operation keeping the normal takes to it. Such an operation moves every
/// height by the same amount.
fn equal_layers(facet: &Facet, primitive: &Primitive, layers: &[Layer]) -> Vec<usize> {
    let indices = Vector3::from(facet.indices).cast::<f64>();
    let near = (4.0 * primitive.tolerance).max(0.02) / facet.spacing;
    let mut equals: Vec<usize> = (0..layers.len()).collect();
    for operation in primitive.operations.iter().filter(|operation| facet.image(operation) == facet.indices) {
        let shift = indices.dot(&operation.translation);
        for (index, layer) in layers.iter().enumerate() {
            let target = layers.iter().position(|other| {
                let miss = other.height - layer.height - shift;
                (miss - miss.round()).abs() <= near
                    && other.charge == layer.charge
                    && other.atoms.len() == layer.atoms.len()
            });
            if let Some(target) = target {
                let first = equals[index].min(equals[target]);
                (equals[index], equals[target]) = (first, first);
            }
        }
    }
    // Follow the links to the first of each set.
    for index in 0..equals.len() {
        equals[index] = equals[equals[index]];
    }
    equals
}

fn shifted(component: Component, by: i128) -> Result<Component, Overflow> {
    Ok(match component {
        Component::Exact(ratio) => Component::Exact(ratio.checked_add(Ratio::from_integer(by))?),
        Component::Free(value) => {
            #[allow(clippy::cast_precision_loss, reason = "charges of one cell are far below 2^52")]
            let by = by as f64;
            Component::Free(value + by)
        }
    })
}

#[allow(clippy::cast_precision_loss, reason = "numbers of cells are far below 2^52")]
fn float(value: i64) -> f64 {
    value as f64
}
