//! The layers of a facet, where it can be cut, and the exact bound charge of each cut.

use super::plane::Facet;
use crate::cell::group_cyclic;
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, Ratio};
use crate::polarization::{Component, FormalPolarization};
use crate::symmetry::Primitive;
use nalgebra::Vector3;
use std::fmt;

/// Layers of the parent that overlap by more than this, in Å, are no layers of the crystal.
const OVERLAP: f64 = 0.1;
/// The finest grouping in Å.
const FINEST: f64 = 1e-3;

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
    /// Whether it carries no bound charge: exactly none, or none within the uncertainty of the positions where symmetry
    /// leaves the value free.
    pub is_neutral: bool,
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
    /// Whether zero is one of the values of the polarization lattice along the normal; see [`Termination::is_neutral`].
    pub contains_zero: bool,
    /// Whether a symmetry operation turns the normal round, so that a slab can end alike on both sides.
    pub is_reversible: bool,
    /// Whether the layers are those of the parent.
    pub follows_parent: bool,
}

impl Stacking {
    /// Groups the atoms of a primitive cell into layers closer than `tolerance` Å and cuts below each of them. Where the
    /// crystal has a parent, `ideal` gives the places of the atoms in it, and the layers are those of the parent; heights
    /// and sums are of the atoms themselves. Layers of the parent that are none of the crystal, because they overlap or hold
    /// the widest gap inside, are not used. A tolerance that leaves a single layer of several heights is halved until
    /// there are two, since a cut through that layer would be as good as any other.
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
        let of_parent = ideal
            .map(|ideal| group_cyclic(&facet.heights(ideal), tolerance / facet.spacing))
            .filter(|(groups, lifts)| are_layers(groups, &lifted_by(&heights, lifts), facet.spacing));
        let follows_parent = of_parent.is_some();
        let (groups, lifts) = of_parent.unwrap_or_else(|| group_by_gaps(&heights, tolerance, facet.spacing));
        let lifted = lifted_by(&heights, &lifts);

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
                let charge = cuts[bottom];
                let is_neutral = formal.is_zero(charge, facet.spacing);
                Termination { top, bottom, charge, same_as: equals[top], is_neutral }
            })
            .collect();
        let kind = if layers.iter().all(|layer| layer.charge == 0) {
            StackingType::One
        } else if terminations.iter().any(|termination| termination.is_neutral) {
            StackingType::Two
        } else {
            StackingType::Three
        };
        let is_reversible = primitive
            .operations
            .iter()
            .any(|operation| facet.image(operation) == facet.indices.map(|index| -index));
        let offset = unreduced.modulo(1).map_err(overflow)?;
        let nearest = match offset {
            Component::Free(value) => Component::Free(value - value.round()),
            exact @ Component::Exact(_) => exact,
        };
        let contains_zero = formal.is_zero(nearest, facet.spacing);
        Ok(Self { layers, terminations, kind, offset, contains_zero, is_reversible, follows_parent })
    }
}

fn lifted_by(heights: &[f64], lifts: &[i64]) -> Vec<f64> {
    heights.iter().zip(lifts).map(|(height, &lift)| height + float(lift)).collect()
}

/// Groups by gaps in the heights themselves, at the tolerance or the first half, quarter, … of it that gives two layers.
fn group_by_gaps(heights: &[f64], tolerance: f64, spacing: f64) -> (Vec<Vec<usize>>, Vec<i64>) {
    let mut tolerance = tolerance;
    loop {
        let found = group_cyclic(heights, tolerance / spacing);
        if found.0.len() != 1 || heights.len() < 2 || tolerance <= FINEST {
            return found;
        }
        tolerance /= 2.0;
    }
}

/// Whether groups, in the order of the stack, are layers of the atoms at these heights: none reaches into the next, and
/// no gap inside one is wider than all gaps between them.
fn are_layers(groups: &[Vec<usize>], lifted: &[f64], spacing: f64) -> bool {
    let sorted: Vec<Vec<f64>> = groups
        .iter()
        .map(|atoms| {
            let mut own: Vec<f64> = atoms.iter().map(|&atom| lifted[atom]).collect();
            own.sort_by(f64::total_cmp);
            own
        })
        .collect();
    let (mut inside, mut between) = (0.0_f64, f64::NEG_INFINITY);
    for (number, own) in sorted.iter().enumerate() {
        inside = own.windows(2).fold(inside, |widest, pair| widest.max(pair[1] - pair[0]));
        let (next, turn) = sorted.get(number + 1).map_or((&sorted[0], 1.0), |next| (next, 0.0));
        let (Some(high), Some(low)) = (own.last(), next.first()) else { return false };
        let gap = low + turn - high;
        if gap * spacing < -OVERLAP {
            return false;
        }
        between = between.max(gap);
    }
    inside <= between + 1e-9
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
