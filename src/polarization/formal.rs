//! The formal polarization of a crystal with given charges.
//!
//! Three routes lead to it, and they have to agree:
//!
//! 1. *Sum*: `Σ Z_i r_i` in floating point over the atoms of the primitive cell, compared with the nearest value that
//!    symmetry permits; the distance is the residual.
//! 2. *Exact*: where an operation takes atom `i` to atom `j`, `W r_i + w = r_j + n_i` with `n_i` whole. Times `Z_i` and
//!    summed over a neutral cell, `(W − 1) p = Σ Z_i n_i`, an integer system solved through the Smith normal form. It
//!    fixes every component of `p` that symmetry does not leave free, without rounding a coordinate.
//! 3. *Centres* (centrosymmetric crystals): atoms off the inversion centres come in pairs and add whole numbers, so
//!    `p = Σ Z_i r_i` over the ions on centres alone, with `r_i ∈ ½L` from the centre taken as origin.

use super::label::Label;
use super::modulus::{Coset, Modulus};
use super::permitted::Permitted;
use crate::cell::{Lattice, Reduced};
use crate::diagnostic::{Code, Diagnostic};
use crate::exact::{Overflow, Ratio};
use crate::symmetry::{Centres, Primitive};
use nalgebra::{Matrix3, Vector3};
use std::fmt;

/// Elementary charge in coulomb (exact, SI 2019).
const ELEMENTARY_CHARGE: f64 = 1.602_176_634e-19;
/// One e/Å² in C/m².
pub const C_PER_M2: f64 = ELEMENTARY_CHARGE * 1e20;

/// A component that symmetry leaves free is no zero, whatever the tolerance, when it is further from one than this share of
/// the modulus. In a large cell the uncertainty of the positions exceeds the quantum and would call anything zero.
const FREE_ZERO: f64 = 0.02;

/// One component of a polarization along a primitive vector.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Component {
    /// Fixed by symmetry.
    Exact(Ratio),
    /// Left free by symmetry, and taken from the positions.
    Free(f64),
}

impl Component {
    /// The component as a floating-point number.
    #[must_use]
    pub fn value(self) -> f64 {
        match self {
            Self::Exact(ratio) => ratio_value(ratio),
            Self::Free(value) => value,
        }
    }

    /// The component modulo `m`, in units of `m`: in [0, 1).
    ///
    /// # Errors
    /// When an exact number leaves its range.
    #[allow(clippy::cast_precision_loss, reason = "moduli are small")]
    pub fn modulo(self, m: i64) -> Result<Self, Overflow> {
        Ok(match self {
            Self::Exact(ratio) => Self::Exact(ratio.checked_div(Ratio::from_integer(i128::from(m)))?.fract()),
            Self::Free(value) => {
                let scaled = value / m as f64;
                let fraction = scaled - scaled.floor();
                Self::Free(if fraction >= 1.0 { 0.0 } else { fraction })
            }
        })
    }
}

impl fmt::Display for Component {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Exact(ratio) => f.pad(&ratio.to_string()),
            Self::Free(value) => f.pad(&format!("{value:.4}")),
        }
    }
}

/// The float nearest to a ratio: the only way from exact polarizations to floats.
#[allow(clippy::cast_precision_loss, reason = "offsets have small numerators and denominators")]
#[must_use]
pub(crate) fn ratio_value(ratio: Ratio) -> f64 {
    ratio.numerator() as f64 / ratio.denominator() as f64
}

/// The formal polarization of one primitive cell.
#[derive(Debug, Clone)]
pub struct FormalPolarization {
    /// Offsets that symmetry permits.
    pub permitted: Permitted,
    /// The polarization of the atoms as listed in the primitive cell, not reduced by any modulus.
    pub polarization: [Component; 3],
    /// For each modulus of [`Modulus::ALL`], the coset.
    pub cosets: [Coset; 3],
    /// Greatest common divisor of the charges.
    pub charge_gcd: i64,
    /// One word for the electron coset.
    pub label: Label,
    /// Distance in e·Å between the floating-point sum and the nearest permitted value.
    pub residual: f64,
    /// Distance in e·Å between the sum and the next permitted value; infinite where everything is permitted.
    pub runner_up: f64,
    /// The residual above which the answer is refused, in e·Å: the symmetry tolerance times `Σ |Z_i|`.
    pub residual_limit: f64,
    /// Uncertainty of the sum in e·Å when the ions are misplaced by the symmetry tolerance independently of each other:
    /// `tolerance × √Σ Z²`. It decides whether a value that symmetry leaves free counts as zero.
    pub uncertainty: f64,
    /// Volume of the primitive cell in Å³.
    pub volume: f64,
    /// Lengths of the primitive vectors in Å.
    pub lengths: [f64; 3],
}

impl FormalPolarization {
    /// Computes the polarization of a primitive cell with whole charges in e, one per atom of the cell.
    ///
    /// # Errors
    /// `charge-004` when the cell is not neutral, `symmetry-006` when an operation does not map the atoms,
    /// `polarization-001` when the residual is over the limit, `polarization-002` when the routes disagree,
    /// `polarization-003` when an exact number overflows.
    pub fn new(
        primitive: &Primitive,
        centres: Option<&Centres>,
        charges: &[i64],
    ) -> Result<Self, Diagnostic> {
        let total: i64 = charges.iter().sum();
        if total != 0 {
            return Err(Diagnostic::error(
                Code::ChargeNotNeutral,
                format!("the charges of the primitive cell add up to {total:+} e, not to zero"),
            ));
        }
        let rotations: Vec<Matrix3<i32>> =
            primitive.operations.iter().map(|operation| operation.rotation).collect();
        let permitted = Permitted::by_rotations(&rotations).map_err(overflow)?;
        let sum: Vector3<f64> =
            primitive.positions.iter().zip(charges).map(|(position, &charge)| position * float(charge)).sum();
        let polarization = exact_route(primitive, charges, &permitted, &sum)?;

        let (residual, runner_up) = distances(primitive, &permitted, &sum).map_err(overflow)?;
        let weight: i64 = charges.iter().map(|charge| charge.abs()).sum();
        let residual_limit = primitive.tolerance * float(weight);
        let squares: i64 = charges.iter().map(|charge| charge * charge).sum();
        let uncertainty = primitive.tolerance * float(squares).sqrt();
        if residual > residual_limit || residual > 0.5 * runner_up {
            return Err(Diagnostic::error(
                Code::PolarizationResidual,
                format!(
                    "the sum of charges and positions is {residual:.4} e·Å from the nearest value that symmetry \
                     permits; the limit is {residual_limit:.4} e·Å and half the {runner_up:.4} e·Å to the next value"
                ),
            ));
        }
        let exact = polarization.map(Component::value);
        let miss = primitive.lattice.to_cartesian(&(sum - Vector3::from(exact)));
        if !permitted.is_polar() && miss.norm() > residual_limit {
            return Err(disagreement("the floating-point sum", "the exact solution"));
        }

        let charge_gcd = charges.iter().fold(0, |divisor, &charge| num_integer::gcd(divisor, charge));
        let lengths = primitive.lattice.parameters().lengths;
        let coset = |modulus: Modulus| {
            let unit = float(modulus.value(charge_gcd));
            let is_zero = |axis: usize, distance: f64| {
                distance <= FREE_ZERO && distance * unit * lengths[axis] <= uncertainty
            };
            Coset::new(modulus, charge_gcd, &polarization, is_zero).map_err(overflow)
        };
        let cosets = [coset(Modulus::Electron)?, coset(Modulus::Pair)?, coset(Modulus::Ion)?];
        if let Some(centres) = centres {
            for modulus in [Modulus::Electron, Modulus::Pair] {
                let route = centre_route(centres, charges, modulus.value(charge_gcd)).map_err(overflow)?;
                let expected = route.map(Component::Exact);
                if cosets[usize::from(modulus == Modulus::Pair)].offset != expected {
                    return Err(disagreement("the ions on inversion centres", "the exact solution"));
                }
            }
        }
        Ok(Self {
            label: Label::of(&cosets[0]),
            permitted,
            polarization,
            cosets,
            charge_gcd,
            residual,
            runner_up,
            residual_limit,
            uncertainty,
            volume: primitive.lattice.volume(),
            lengths,
        })
    }

    /// The coset for single electrons, the headline.
    #[must_use]
    pub fn electron(&self) -> &Coset {
        &self.cosets[0]
    }

    /// The coset for pairs of electrons.
    #[must_use]
    pub fn pair(&self) -> &Coset {
        &self.cosets[1]
    }

    /// The coset for whole ions.
    #[must_use]
    pub fn ion(&self) -> &Coset {
        &self.cosets[2]
    }

    /// Whether a normal polarization, in e per surface cell of a plane with this spacing in Å, is zero: exactly, or within
    /// [`FormalPolarization::uncertainty`] and 2 % of the quantum where symmetry leaves it free.
    #[must_use]
    pub fn is_zero(&self, value: Component, spacing: f64) -> bool {
        match value {
            Component::Exact(ratio) => ratio.is_zero(),
            Component::Free(value) => value.abs() <= FREE_ZERO && value.abs() * spacing <= self.uncertainty,
        }
    }

    /// Residual over the distance to the next permitted value: 0 is certain, ½ would be a toss.
    #[must_use]
    pub fn residual_fraction(&self) -> f64 {
        if self.runner_up.is_finite() { self.residual / self.runner_up } else { 0.0 }
    }

    /// The polarization quantum `e |a_i| / V` along each primitive vector, in e/Å².
    #[must_use]
    pub fn quanta(&self) -> [f64; 3] {
        self.lengths.map(|length| length / self.volume)
    }

    /// The facet offset `h · p` modulo one for coprime indices `h` in the reciprocal primitive basis: the normal
    /// polarization in units of the surface quantum `e/A`.
    ///
    /// # Errors
    /// When an exact number leaves its range.
    pub fn along(&self, plane: [i64; 3]) -> Result<Component, Overflow> {
        self.unreduced_along(plane)?.modulo(1)
    }

    /// `h · p` for the atoms as listed in the primitive cell, not reduced.
    ///
    /// # Errors
    /// When an exact number leaves its range.
    pub fn unreduced_along(&self, plane: [i64; 3]) -> Result<Component, Overflow> {
        let mut exact = Ratio::ZERO;
        let mut free = None;
        for (component, index) in self.polarization.iter().zip(plane) {
            match component {
                Component::Exact(ratio) => {
                    exact = exact.checked_add(ratio.checked_mul(Ratio::from_integer(i128::from(index)))?)?;
                }
                Component::Free(value) if index != 0 => *free.get_or_insert(0.0) += value * float(index),
                Component::Free(_) => {}
            }
        }
        Ok(match free {
            None => Component::Exact(exact),
            Some(value) => Component::Free(value + ratio_value(exact)),
        })
    }
}

fn overflow(cause: Overflow) -> Diagnostic {
    Diagnostic::error(Code::PolarizationOverflow, cause.to_string())
}

fn disagreement(one: &str, other: &str) -> Diagnostic {
    Diagnostic::error(
        Code::PolarizationRoutes,
        format!("two routes to the offset disagree: {one} and {other}"),
    )
}

#[allow(clippy::cast_precision_loss, reason = "sums of charges and shifts of one cell are far below 2^52")]
fn float(value: i64) -> f64 {
    value as f64
}

/// Solves `(W − 1) p = Σ Z_i n_i` for the witnesses of the point group. The free part is taken from `sum`.
fn exact_route(
    primitive: &Primitive,
    charges: &[i64],
    permitted: &Permitted,
    sum: &Vector3<f64>,
) -> Result<[Component; 3], Diagnostic> {
    let mut right = Vec::new();
    for &witness in permitted.witnesses() {
        let mapping = primitive.map(&primitive.operations[witness])?;
        let mut shift = [0_i128; 3];
        for (atom, n) in mapping.shifts.iter().enumerate() {
            if charges[mapping.targets[atom]] != charges[atom] {
                return Err(Diagnostic::error(
                    Code::ChargeBroken,
                    format!(
                        "symmetry-equivalent atoms carry the charges {:+} and {:+}",
                        charges[atom], charges[mapping.targets[atom]]
                    ),
                ));
            }
            for axis in 0..3 {
                shift[axis] += i128::from(charges[atom]) * i128::from(n[axis]);
            }
        }
        right.extend(shift);
    }
    if right.is_empty() {
        // The one row of zeros that stands for no condition.
        right.push(0);
    }
    let smith = permitted.smith();
    let transformed = smith.u.checked_mul_vector(&right).map_err(overflow)?;
    let divisors = permitted.divisors();
    let consistent = transformed
        .iter()
        .enumerate()
        .all(|(row, &value)| value == 0 || divisors.get(row).is_some_and(|&divisor| divisor != 0));
    if !consistent {
        return Err(disagreement("the operations of the point group", "each other"));
    }
    solve(permitted, &transformed, sum).map_err(overflow)
}

fn solve(
    permitted: &Permitted,
    transformed: &[i128],
    sum: &Vector3<f64>,
) -> Result<[Component; 3], Overflow> {
    let divisors = permitted.divisors();
    let v = &permitted.smith().v;
    let free_part = free_coordinates(permitted, sum)?;
    let mut polarization = [Component::Exact(Ratio::ZERO); 3];
    for (row, component) in polarization.iter_mut().enumerate() {
        let mut exact = Ratio::ZERO;
        let mut free = None;
        for axis in 0..3 {
            let entry = v.get(row, axis);
            if entry == 0 {
                continue;
            }
            if divisors[axis] == 0 {
                *free.get_or_insert(0.0) += big_float(entry) * free_part[axis];
            } else {
                let y = Ratio::new(transformed[axis], divisors[axis]).ok_or(Overflow)?;
                exact = exact.checked_add(y.checked_mul(Ratio::from_integer(entry))?)?;
            }
        }
        *component = match free {
            None => Component::Exact(exact),
            Some(value) => Component::Free(value + ratio_value(exact)),
        };
    }
    Ok(polarization)
}

#[allow(clippy::cast_precision_loss, reason = "entries of the normal form of small matrices")]
fn big_float(value: i128) -> f64 {
    value as f64
}

/// `y = V⁻¹ p`.
fn free_coordinates(permitted: &Permitted, sum: &Vector3<f64>) -> Result<Vector3<f64>, Overflow> {
    let v = &permitted.smith().v;
    let inverse = v.inverse_unimodular()?.ok_or(Overflow)?;
    Ok(Matrix3::from_fn(|row, column| big_float(inverse.get(row, column))) * sum)
}

/// The exact route through ions on inversion centres alone, for charges that are multiples of `m`; in units of `m`.
fn centre_route(centres: &Centres, charges: &[i64], m: i64) -> Result<[Ratio; 3], Overflow> {
    let mut offset = [Ratio::ZERO; 3];
    for (axis, component) in offset.iter_mut().enumerate() {
        let halves: i64 = centres
            .classes
            .iter()
            .flat_map(|class| class.atoms.iter().map(move |&atom| (atom, class.halves[axis])))
            .map(|(atom, half)| charges[atom] / m * half)
            .sum();
        *component = Ratio::new(i128::from(halves), 2).ok_or(Overflow)?.fract();
    }
    Ok(offset)
}

/// Distances in e·Å from the sum to the nearest and to the second nearest permitted value, measured across the free
/// directions.
///
/// The permitted values form a lattice with basis `B V e_i / d_i`, projected along the free directions. It is
/// completed to three dimensions by long vectors along those.
fn distances(
    primitive: &Primitive,
    permitted: &Permitted,
    sum: &Vector3<f64>,
) -> Result<(f64, f64), Overflow> {
    const LONG: f64 = 1.0e3;
    let divisors = permitted.divisors();
    let v = Matrix3::from_fn(|row, column| big_float(permitted.smith().v.get(row, column)));
    let columns = primitive.lattice.basis() * v;
    let mut free: Vec<Vector3<f64>> = Vec::new();
    for axis in (0..3).filter(|&axis| divisors[axis] == 0) {
        let direction = across(&columns.column(axis).into_owned(), &free);
        free.push(direction.normalize());
    }
    if free.len() == 3 {
        return Ok((0.0, f64::INFINITY));
    }
    let mut long = free.iter();
    let basis: Vec<Vector3<f64>> = (0..3)
        .map(|axis| match divisors[axis] {
            0 => long.next().copied().unwrap_or_else(Vector3::zeros) * LONG,
            divisor => across(&columns.column(axis).into_owned(), &free) / big_float(divisor),
        })
        .collect();
    let lattice = Lattice::from_basis(Matrix3::from_columns(&basis)).map_err(|_| Overflow)?;
    let reduced = Reduced::new(&lattice).map_err(|_| Overflow)?;
    let target = across(&primitive.lattice.to_cartesian(sum), &free);
    let fractional = reduced.lattice().to_fractional(&target).map(|x| x - x.round());
    let mut near = [f64::INFINITY; 2];
    for i in -2..=2 {
        for j in -2..=2 {
            for k in -2..=2 {
                let shift = Vector3::new(f64::from(i), f64::from(j), f64::from(k));
                let distance = reduced.lattice().to_cartesian(&(fractional + shift)).norm();
                if distance < near[0] {
                    near = [distance, near[0]];
                } else if distance < near[1] {
                    near[1] = distance;
                }
            }
        }
    }
    Ok((near[0], near[1]))
}

/// The part of a vector perpendicular to all of a list of orthonormal vectors.
fn across(vector: &Vector3<f64>, directions: &[Vector3<f64>]) -> Vector3<f64> {
    directions.iter().fold(*vector, |rest, direction| rest - direction * rest.dot(direction))
}
