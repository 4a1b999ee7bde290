//! The engine spglib, through its raw C interface (release 1.16.1).
//!
//! What the C source says and this file relies on:
//! - `spg_get_dataset` reads three arrays, keeps no pointer into them, and returns a dataset that the caller frees
//!   with `spg_free_dataset`, or null.
//! - Every call stores its outcome in one static integer that is neither atomic nor thread-local; it is the only
//!   static the library writes. Calls are therefore serialised here, which also ties the message to its call.
//! - It prints only when compiled with `SPGDEBUG` or `SPGWARNING`. Its build file sets both for the build type `Debug`,
//!   which is what a Cargo profile with `opt-level = 0` asks for. No profile of this package does.
//! - It lowers the tolerance by itself when a search fails, and does not say to what.
//! - NaN and infinity crash it, and it casts coordinates to `int` when it rounds them.
//! - Large tolerances are unsafe. Above 1.13 it can use an origin it never set, since it compares a fractional length,
//!   at most √3/2, with 2 minus the tolerance. Above about half the shortest lattice vector it can dereference null.

#![allow(unsafe_code, reason = "the C library has no other interface; no other file of the crate needs this")]

use super::{Symmetry, standard_symbols};
use crate::cell::{Lattice, Reduced};
use crate::crystal::{Crystal, Operation};
use nalgebra::{Matrix3, Vector3};
use spglib_sys as ffi;
use std::ffi::{CStr, c_int};
use std::ptr::NonNull;
use std::slice;
use std::sync::{Mutex, PoisonError};

/// Held during every call, since each one writes the library's error code.
static LIBRARY: Mutex<()> = Mutex::new(());

/// The largest tolerance given to the library: in Å, and as a fraction of the shortest lattice vector. Twice as much
/// is unsafe, and atoms that far apart are different atoms.
const MAX_TOLERANCE: (f64, f64) = (1.0, 0.25);

/// Searches with spglib. The caller has made sure that the cell is not empty and every coordinate is finite.
pub(super) fn find(crystal: &Crystal, kinds: &[i32], tolerance: f64) -> Result<Symmetry, String> {
    let basis = crystal.lattice.basis();
    if !basis.iter().all(|x| x.is_finite()) || basis.determinant().abs() < f64::MIN_POSITIVE {
        return Err("the lattice vectors are not a lattice".into());
    }
    let limit = largest_tolerance(&crystal.lattice)?;
    if !(tolerance > 0.0 && tolerance <= limit) {
        return Err(format!("it takes a tolerance of at most {limit:.3} Å in this cell"));
    }
    // The library takes lattice vectors as columns, in the order of a C array: one row after the other.
    let lattice = [0, 1, 2].map(|i| [0, 1, 2].map(|j| basis[(i, j)]));
    let positions: Vec<[f64; 3]> =
        crystal.sites.iter().map(|site| site.position.map(|x| x - x.floor()).into()).collect();
    let found = Dataset::search(lattice, positions, kinds, tolerance)?;
    let number = found.number();
    let (symbol, hall) =
        standard_symbols(number).ok_or_else(|| format!("it returned space-group number {number}"))?;
    Ok(Symmetry {
        number: u16::try_from(number).map_err(|_| "it returned no space-group number")?,
        symbol,
        hall,
        operations: found.operations()?,
        orbits: first_of_orbit(found.orbits()?)?,
        tolerance,
        standard: None,
    })
}

fn largest_tolerance(lattice: &Lattice) -> Result<f64, String> {
    let reduced = Reduced::new(lattice).map_err(|error| error.to_string())?;
    let lengths = reduced.lattice().parameters().lengths;
    let shortest = lengths.into_iter().fold(f64::INFINITY, f64::min);
    Ok(MAX_TOLERANCE.0.min(MAX_TOLERANCE.1 * shortest))
}

/// For each site the first site with the same mark. The library marks an orbit by one of its sites.
fn first_of_orbit(marks: &[c_int]) -> Result<Vec<usize>, String> {
    let mut first = vec![None; marks.len()];
    let found = marks.iter().enumerate().map(|(site, &mark)| {
        let slot = usize::try_from(mark).ok().and_then(|mark| first.get_mut(mark))?;
        Some(*slot.get_or_insert(site))
    });
    found.collect::<Option<_>>().ok_or_else(|| "it returned an orbit outside the cell".into())
}

/// What the C library returned; freed when dropped.
struct Dataset {
    raw: NonNull<ffi::SpglibDataset>,
    sites: usize,
}

impl Dataset {
    fn search(
        mut lattice: [[f64; 3]; 3],
        mut positions: Vec<[f64; 3]>,
        kinds: &[c_int],
        tolerance: f64,
    ) -> Result<Self, String> {
        let sites = positions.len();
        if sites == 0 || kinds.len() != sites {
            return Err(format!("{sites} sites with {} kinds", kinds.len()));
        }
        let count = c_int::try_from(sites).map_err(|_| format!("{sites} sites are too many for it"))?;
        let guard = LIBRARY.lock().unwrap_or_else(PoisonError::into_inner);
        // SAFETY: the arrays hold 3, `count` and `count` entries and outlive the call. `find` has made sure that all
        // numbers are finite and the tolerance is one the library can take.
        let raw = unsafe {
            ffi::spg_get_dataset(
                lattice.as_mut_ptr(),
                positions.as_mut_ptr(),
                kinds.as_ptr(),
                count,
                tolerance,
            )
        };
        let found = NonNull::new(raw).ok_or_else(last_error);
        drop(guard);
        let found = Self { raw: found?, sites };
        let reported = found.fields().n_atoms;
        if reported == count { Ok(found) } else { Err(format!("it returned {reported} sites for {sites}")) }
    }

    fn fields(&self) -> &ffi::SpglibDataset {
        // SAFETY: the pointer came from the library, is not null, and is freed only in `drop`.
        unsafe { self.raw.as_ref() }
    }

    fn number(&self) -> c_int {
        self.fields().spacegroup_number
    }

    fn operations(&self) -> Result<Vec<Operation>, String> {
        let fields = self.fields();
        let count = usize::try_from(fields.n_operations).unwrap_or(0);
        if count == 0 || fields.rotations.is_null() || fields.translations.is_null() {
            return Err("it returned no operations".into());
        }
        // SAFETY: both arrays are allocated with `n_operations` entries, filled, and live as long as `self`.
        let (rotations, translations) = unsafe {
            (
                slice::from_raw_parts(fields.rotations, count),
                slice::from_raw_parts(fields.translations, count),
            )
        };
        let pairs = rotations.iter().zip(translations);
        Ok(pairs
            .map(|(rotation, translation)| Operation {
                rotation: Matrix3::from_fn(|i, j| rotation[i][j]),
                translation: Vector3::from(*translation),
            })
            .collect())
    }

    /// Orbits under the space group itself. The other field, `equivalent_atoms`, knows only the operations that
    /// survive in a supercell, so it splits an orbit when the supercell is less symmetric than its crystal.
    fn orbits(&self) -> Result<&[c_int], String> {
        let marks = self.fields().crystallographic_orbits;
        if marks.is_null() {
            return Err("it returned no orbits".into());
        }
        // SAFETY: the array is allocated with `n_atoms` entries, which `search` has compared with `sites`.
        Ok(unsafe { slice::from_raw_parts(marks, self.sites) })
    }
}

impl Drop for Dataset {
    fn drop(&mut self) {
        // SAFETY: the pointer came from `spg_get_dataset` and is freed once. Freeing touches no static of the library.
        unsafe { ffi::spg_free_dataset(self.raw.as_ptr()) }
    }
}

/// The message of the last call. The caller holds [`LIBRARY`].
fn last_error() -> String {
    // SAFETY: both functions only read; the message is null or a literal inside the library.
    let message = unsafe {
        let message = ffi::spg_get_error_message(ffi::spg_get_error_code());
        (!message.is_null()).then(|| CStr::from_ptr(message))
    };
    message.map_or_else(|| "no message".into(), |message| message.to_string_lossy().into_owned())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::crystal::{Element, Site};
    use std::thread;

    /// Wurtzite with an ideal axial ratio, atoms at 1/3 and 2/3.
    fn wurtzite() -> (Crystal, Vec<i32>) {
        let (a, c) = (3.25, 5.3);
        let basis = Matrix3::new(a, -a / 2.0, 0.0, 0.0, a * 0.75_f64.sqrt(), 0.0, 0.0, 0.0, c);
        let (third, height) = (1.0 / 3.0, 0.38);
        let positions = [
            [third, 2.0 * third, 0.0],
            [2.0 * third, third, 0.5],
            [third, 2.0 * third, height],
            [2.0 * third, third, 0.5 + height],
        ];
        (crystal(basis, &positions), vec![30, 30, 8, 8])
    }

    fn crystal(basis: Matrix3<f64>, positions: &[[f64; 3]]) -> Crystal {
        let site = |&position: &[f64; 3]| Site::new("X", Element::OXYGEN, position.into());
        Crystal {
            lattice: Lattice::from_basis(basis).expect("a good cell"),
            sites: positions.iter().map(site).collect(),
            origins: (0..positions.len()).collect(),
        }
    }

    #[test]
    fn a_skew_polar_cell() {
        let (crystal, kinds) = wurtzite();
        let found = find(&crystal, &kinds, 1e-5).expect("a symmetry");
        assert_eq!((found.number, found.symbol.as_str(), found.hall.as_str()), (186, "P6_3mc", "P 6c -2c"));
        assert_eq!(found.orbits, [0, 0, 2, 2]);
        assert_eq!(found.operations.len(), 12);
        for operation in &found.operations {
            let basis = crystal.lattice.basis();
            let turned = basis * operation.rotation.cast::<f64>();
            assert!(
                (turned.transpose() * turned - basis.transpose() * basis).norm() < 1e-9,
                "not an isometry"
            );
            assert_eq!(operation.rotation.column(2).as_slice(), [0, 0, 1], "the polar axis is turned over");
        }
    }

    #[test]
    fn the_message_of_a_failure() {
        let twice = crystal(Matrix3::identity() * 4.0, &[[0.0; 3], [0.0; 3]]);
        assert_eq!(find(&twice, &[1, 1], 1e-3).err().as_deref(), Some("too close distance between atoms"));
        assert_eq!(find(&twice, &[1], 1e-3).err().as_deref(), Some("2 sites with 1 kinds"));
    }

    #[test]
    fn a_tolerance_the_library_cannot_take() {
        let limit = |edge: f64, tolerance| {
            let crystal = crystal(Matrix3::identity() * edge, &[[0.0; 3]]);
            find(&crystal, &[1], tolerance).map(|found| found.number)
        };
        assert_eq!(limit(8.0, 0.9), Ok(221));
        assert_eq!(limit(8.0, 1.1), Err("it takes a tolerance of at most 1.000 Å in this cell".into()));
        assert_eq!(limit(2.0, 0.6), Err("it takes a tolerance of at most 0.500 Å in this cell".into()));
        assert!(limit(2.0, f64::NAN).is_err() && limit(2.0, 0.0).is_err());
        // All three vectors are long, but a + b is 0.3 Å.
        let skew = Matrix3::new(8.0, -8.0, 0.0, 0.0, 0.3, 0.0, 0.0, 0.0, 8.0);
        assert!(find(&crystal(skew, &[[0.0; 3]]), &[1], 0.2).is_err());
    }

    #[test]
    fn distant_coordinates_are_wrapped() {
        let far = crystal(Matrix3::identity() * 4.0, &[[1e15, -1e15, 0.0], [0.5, 0.5, 0.5]]);
        assert_eq!(find(&far, &[1, 2], 1e-3).map(|found| found.number), Ok(221));
    }

    #[test]
    fn orbits_begin_with_their_first_site() {
        assert_eq!(first_of_orbit(&[2, 1, 2, 1]), Ok(vec![0, 1, 0, 1]));
        assert!(first_of_orbit(&[0, 2]).is_err());
        assert!(first_of_orbit(&[-1]).is_err());
    }

    #[test]
    fn two_threads_do_not_disturb_each_other() {
        let (good, kinds) = wurtzite();
        let twice = crystal(Matrix3::identity() * 4.0, &[[0.0; 3], [0.0; 3]]);
        let run = || {
            for _ in 0..500 {
                let found = find(&good, &kinds, 1e-5).expect("a symmetry");
                assert_eq!((found.number, found.operations.len()), (186, 12));
                let why = find(&twice, &[1, 1], 1e-3).expect_err("two atoms on one position");
                assert_eq!(why, "too close distance between atoms");
            }
        };
        thread::scope(|scope| {
            scope.spawn(run);
            scope.spawn(run);
        });
    }
}
