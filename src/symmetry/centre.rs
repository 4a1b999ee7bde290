//! Centres of inversion: where they are, which atoms sit on them, and the origin shift to the centrosymmetric setting.

use super::primitive::Primitive;
use crate::crystal::Operation;
use crate::diagnostic::Diagnostic;
use nalgebra::Vector3;

/// One of the eight classes of inversion centres of a primitive cell.
#[derive(Debug, Clone, PartialEq)]
pub struct Centre {
    /// Position in primitive axes, in [0, 1).
    pub position: Vector3<f64>,
    /// Position relative to the first centre, in halves of primitive vectors: entries 0 or 1.
    pub halves: [i64; 3],
    /// Atoms of the primitive cell on this centre or a lattice translation of it.
    pub atoms: Vec<usize>,
    /// Number of point-group operations that leave the centre where it is, modulo lattice translations.
    pub order: usize,
}

/// The inversion centres of a centrosymmetric crystal.
#[derive(Debug, Clone, PartialEq)]
pub struct Centres {
    /// The eight classes `c = t/2 + n/2`, where the inversion is `x -> −x + t` and `n` runs over {0,1}³.
    pub classes: Vec<Centre>,
    /// Index of the class that makes the origin of the centrosymmetric setting.
    pub chosen: usize,
}

impl Centres {
    /// Finds the centres, or `None` where the point group has no inversion.
    ///
    /// The translation `t` is the mean over all atoms, so that it follows the atoms and not the search's tolerance.
    /// The origin of the setting is the file's own origin where that is a centre, else the centre of the highest site
    /// symmetry, the nearest to the origin among equals.
    ///
    /// # Errors
    /// `symmetry-006` when the inversion found takes an atom to no atom.
    pub fn find(primitive: &Primitive) -> Result<Option<Self>, Diagnostic> {
        let Some(inversion) = primitive.operations.iter().find(|operation| operation.is_inversion()) else {
            return Ok(None);
        };
        let mapping = primitive.map(inversion)?;
        // x_target + shift − (−x + t) summed over atoms: the correction to t.
        let mut correction = Vector3::zeros();
        for (atom, position) in primitive.positions.iter().enumerate() {
            let target = primitive.positions[mapping.targets[atom]] + mapping.shifts[atom].cast::<f64>();
            correction += target - inversion.apply(position);
        }
        #[allow(clippy::cast_precision_loss, reason = "the number of atoms is far below 2^52")]
        let translation = inversion.translation + correction / primitive.positions.len() as f64;

        let mut classes: Vec<Centre> = (0..8_i64)
            .map(|bits| {
                let halves = [bits >> 2 & 1, bits >> 1 & 1, bits & 1];
                let position = (translation + Vector3::from(halves).cast::<f64>()) / 2.0;
                let position = position.map(|x| x - (x + 1e-9).floor());
                let order = site_order(primitive, &position);
                Centre { position, halves, atoms: Vec::new(), order }
            })
            .collect();
        for (atom, &target) in mapping.targets.iter().enumerate() {
            if target == atom {
                // −x + w = x + shift and t ≡ w: 2x = t − shift (up to noise), so the class is the parity of shift.
                let parity = mapping.shifts[atom].map(|n| n.rem_euclid(2));
                if let Some(class) = classes.iter_mut().find(|class| class.halves == <[i64; 3]>::from(parity))
                {
                    class.atoms.push(atom);
                }
            }
        }
        let chosen = choose(primitive, &classes);
        Ok(Some(Self { classes, chosen }))
    }

    /// The class that makes the origin of the centrosymmetric setting.
    #[must_use]
    pub fn origin(&self) -> &Centre {
        &self.classes[self.chosen]
    }
}

fn choose(primitive: &Primitive, classes: &[Centre]) -> usize {
    let distance = |class: &Centre| {
        let nearest = class.position.map(|x| x - x.round());
        primitive.lattice.to_cartesian(&nearest).norm()
    };
    let at_origin = classes.iter().position(|class| distance(class) <= primitive.tolerance);
    at_origin.unwrap_or_else(|| {
        let key = |index: &usize| (std::cmp::Reverse(classes[*index].order), distance(&classes[*index]));
        (0..classes.len())
            .min_by(|a, b| {
                let (order_a, distance_a) = key(a);
                let (order_b, distance_b) = key(b);
                order_a.cmp(&order_b).then(distance_a.total_cmp(&distance_b))
            })
            .unwrap_or(0)
    })
}

fn site_order(primitive: &Primitive, position: &Vector3<f64>) -> usize {
    let limit = (4.0 * primitive.tolerance).max(0.02);
    let fixes = |operation: &&Operation| {
        let offset = (operation.apply(position) - position).map(|x| x - x.round());
        primitive.lattice.to_cartesian(&offset).norm() <= limit
    };
    primitive.operations.iter().filter(fixes).count()
}
