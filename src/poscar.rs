//! What structure does a POSCAR file hold? The format of lattice vectors and positions that many electronic-structure
//! programs read and write; a CONTCAR has the same form.
//!
//! Line by line: a title; a scale factor, three of them, or minus the volume of the cell in Å³; three lattice vectors,
//! one a line; the species (left out in old files); how many atoms of each; optionally `Selective dynamics`;
//! `Direct` or `Cartesian`, told by the first letter; one position a line, with anything behind it. What follows the
//! positions, such as velocities, is not read. (The format is described in the manuals of the programs that use it;
//! here from memory.)
//!
//! Old files do not name their species. The kinds are then told from the labels behind the positions or from the title
//! (see [`read_bytes`]), and otherwise stay anonymous: enough for a symmetry search, not for charges.

mod kinds;
mod line;

use crate::cell::Lattice;
use crate::crystal::{AsymmetricUnit, Element, Site, lattice_refusal};
use crate::diagnostic::{Code, Diagnostic, Span};
use kinds::{Kinds, Species, label_of};
use line::{Source, Word};
use nalgebra::{Matrix3, Vector3};

/// The content of a POSCAR file.
#[derive(Debug, Clone)]
pub struct Poscar {
    /// The first line.
    pub title: String,
    /// Lattice vectors, scaled.
    pub lattice: Lattice,
    /// Fractional positions of all atoms of the cell.
    pub positions: Vec<Vector3<f64>>,
    /// For each atom the number, from zero, of the count it belongs to: atoms of one kind are alike.
    pub kinds: Vec<usize>,
    /// The element of each kind, or why it is not known.
    pub elements: Result<Vec<Element>, Diagnostic>,
    /// A name for each atom: the label behind its position where all atoms have labels of their own.
    pub labels: Vec<String>,
    /// Where each position is in the file.
    pub places: Vec<Span>,
    /// What was noticed.
    pub diagnostics: Vec<Diagnostic>,
}

impl Poscar {
    /// The sites, without symmetry operations: the file lists all atoms of the cell.
    ///
    /// # Errors
    /// `poscar-007` when the elements are not known.
    pub fn unit(&self) -> Result<AsymmetricUnit, Diagnostic> {
        let elements = self.elements.as_ref().map_err(Clone::clone)?;
        let sites = self
            .positions
            .iter()
            .zip(&self.kinds)
            .zip(&self.labels)
            .filter_map(|((position, &kind), label)| {
                elements.get(kind).map(|&element| Site::new(label.clone(), element, *position))
            })
            .collect();
        Ok(AsymmetricUnit { lattice: self.lattice.clone(), sites, operations: Vec::new() })
    }
}

/// Reads a POSCAR or CONTCAR file.
///
/// Without a species line the elements are those of the labels behind the positions, if every atom has one and the
/// atoms of each count agree, or those of the title, if it consists of exactly as many element symbols as there are
/// counts.
///
/// # Errors
/// `poscar-001` to `poscar-006`, each with line and column, `cell-002` or `cell-003` for an impossible cell.
///
/// ```
/// let text = b"rock salt\n-74.7\n0 .5 .5\n.5 0 .5\n.5 .5 0\nMg O\n1 1\nDirect\n0 0 0\n.5 .5 .5\n";
/// let poscar = cosetta::poscar::read_bytes(text)?;
/// assert!((poscar.lattice.volume() - 74.7).abs() < 1e-9);
/// assert_eq!(poscar.unit()?.sites[1].label, "O1");
/// # Ok::<(), cosetta::diagnostic::Diagnostic>(())
/// ```
pub fn read_bytes(bytes: &[u8]) -> Result<Poscar, Diagnostic> {
    let mut source = Source::new(bytes);
    let title = source.next("the title")?.text().trim().to_owned();
    let (lattice, scale) = read_lattice(&mut source)?;
    let counts_number = source.number();
    let (species, counts) = read_counts(&mut source)?;
    let mut mode = source.next("Direct or Cartesian")?;
    let is_selective = mode.starts_with(b"sS");
    if is_selective {
        mode = source.next("Direct or Cartesian")?;
    }
    let is_direct = mode.starts_with(b"dD");
    if !is_direct && !mode.starts_with(b"cCkK") {
        let message =
            format!("line {} says neither Direct nor Cartesian but '{}'", mode.number, mode.excerpt());
        return Err(Diagnostic::error(Code::PoscarMode, message).at(mode.span()).hint("Direct"));
    }
    let kinds: Vec<usize> = expand_counts(&counts, &source)?;
    let (mut positions, mut labels, mut places) = (Vec::new(), Vec::new(), Vec::new());
    for _ in &kinds {
        let line = source.next("a position")?;
        let words = line.words();
        let read = line.vector(&words, "a position")?;
        positions.push(if is_direct { read } else { lattice.to_fractional(&read.component_mul(&scale)) });
        places.push(line.span());
        labels.push(label_of(line.all_words().get(3..).unwrap_or_default(), is_selective));
    }
    source.refuse_surplus(kinds.len())?;
    let told = Kinds {
        species: species.as_deref(),
        title: &title,
        counts: &counts,
        labels: &labels,
        places: &places,
    };
    let mut diagnostics = Vec::new();
    let elements = told.elements(counts_number, &mut diagnostics);
    let labels = told.names(&kinds, elements.as_deref().unwrap_or_default());
    Ok(Poscar { title, lattice, positions, kinds, elements, labels, places, diagnostics })
}

/// The lattice, and the factors that Cartesian components are multiplied with.
fn read_lattice(source: &mut Source<'_>) -> Result<(Lattice, Vector3<f64>), Diagnostic> {
    let line = source.next("the scale factor")?;
    let words = line.words();
    let first = line.numeral(words.first(), "the scale factor")?;
    let others: Vec<f64> = words.iter().skip(1).map_while(Word::number).take(2).collect();
    let rows = [1, 2, 3].map(|_| {
        let line = source.next("a lattice vector")?;
        line.vector(&line.words(), "a lattice vector").map(|vector| (vector, line.span()))
    });
    let [a, b, c] = rows;
    let ((a, place), (b, _), (c, end)) = (a?, b?, c?);
    let plain = Matrix3::from_columns(&[a, b, c]);
    let scale = match others[..] {
        [second, third] => Vector3::new(first, second, third),
        _ if first < 0.0 => {
            let factor = (-first / plain.determinant().abs()).cbrt();
            // A cell without volume has no scale either; that is said of the cell.
            Vector3::repeat(if factor.is_finite() { factor } else { 1.0 })
        }
        _ => Vector3::repeat(first),
    };
    if !scale.iter().all(|factor| *factor > 0.0) {
        let message =
            format!("the scale factor {} is not a positive number or minus a volume", line.excerpt());
        return Err(Diagnostic::error(Code::PoscarScale, message).at(line.span()).hint("1.0"));
    }
    let place = Span { end: end.end, ..place };
    let lattice = Lattice::from_basis(Matrix3::from_diagonal(&scale) * plain)
        .and_then(Lattice::in_range)
        .map_err(|error| lattice_refusal(&error).at(place))?;
    Ok((lattice, scale))
}

/// The species line, if there is one, and the counts.
fn read_counts(source: &mut Source<'_>) -> Result<(Option<Vec<Species>>, Vec<usize>), Diagnostic> {
    let mut line = source.next("the counts")?;
    let mut species: Option<Vec<Species>> = None;
    if line.words().first().is_some_and(|word| word.count().is_none()) {
        let words = line.words();
        species =
            Some(words.iter().map(|word| Species { name: word.text(), place: line.place(word) }).collect());
        line = source.next("the counts")?;
    }
    let words = line.words();
    let counts = words
        .iter()
        .map(|word| {
            word.count().ok_or_else(|| {
                let message = format!("'{}' is not a number of atoms", word.text());
                Diagnostic::error(Code::PoscarCounts, message).at(line.place(word)).hint("4 2 8")
            })
        })
        .collect::<Result<Vec<usize>, _>>()?;
    if counts.iter().all(|&count| count == 0) {
        let message = format!("line {} should hold the numbers of atoms, and holds none", line.number);
        return Err(Diagnostic::error(Code::PoscarCounts, message).at(line.span()).hint("4 2 8"));
    }
    if let Some(species) = species.as_ref().filter(|species| species.len() != counts.len()) {
        let message = format!("there are {} species but {} counts", species.len(), counts.len());
        return Err(Diagnostic::error(Code::PoscarSpecies, message).at(line.span()));
    }
    Ok((species, counts))
}

/// The kind of each atom, if the file has that many lines left.
fn expand_counts(counts: &[usize], source: &Source<'_>) -> Result<Vec<usize>, Diagnostic> {
    let total = counts.iter().try_fold(0_usize, |sum, &count| sum.checked_add(count));
    let left = source.lines_left();
    match total {
        Some(total) if total <= left => Ok(counts
            .iter()
            .enumerate()
            .flat_map(|(kind, &count)| std::iter::repeat_n(kind, count))
            .collect()),
        _ => {
            let stated = total.map_or_else(|| "too many".to_owned(), |total| total.to_string());
            let message = format!("the counts add up to {stated} atoms, but only {left} lines follow");
            Err(Diagnostic::error(Code::PoscarShort, message).at(source.end()))
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// Rock salt, from memory; lines may be replaced (counted from one).
    fn with(changes: &[(usize, &str)]) -> String {
        let mut lines = vec![
            "Mg O", "4.212", "0 .5 .5", ".5 0 .5", ".5 .5 0", "Mg O", "1 1", "Direct", "0 0 0", ".5 .5 .5",
            "",
        ];
        for &(line, text) in changes {
            lines[line - 1] = text;
        }
        lines.join("\n")
    }

    fn read(text: &str) -> Poscar {
        read_bytes(text.as_bytes()).expect("a good file")
    }

    #[test]
    fn scales_and_coordinates_have_several_spellings() {
        let plain = read(&with(&[]));
        // By hand: 4.212³ / 4.
        assert!((plain.lattice.volume() - 18.681_214).abs() < 1e-5);
        let by_volume = read(&with(&[(2, "-18.681214")]));
        assert!((by_volume.lattice.basis() - plain.lattice.basis()).norm() < 1e-6);
        let by_axis = read(&with(&[(2, "4.212 4.212 4.212"), (8, "cartesian"), (10, "0.5D0 5E-1 .5")]));
        assert!((by_axis.lattice.basis() - plain.lattice.basis()).norm() < 1e-12);
        // By hand: half the sum of the three vectors of a face-centred cell is (a/2, a/2, a/2).
        assert!((by_axis.positions[1] - plain.positions[1]).norm() < 1e-12);
        let selective = with(&[(8, "Selective dynamics\nDirect"), (10, ".5 .5 .5 T F T O7")])
            .replace("0 0 0", "0 0 0 T T T Mg3");
        assert_eq!(read(&selective).labels, ["Mg3", "O7"]);
        assert_eq!(read(&with(&[]).replace('\n', "\r\n")).labels, ["Mg1", "O1"]);
    }

    #[test]
    fn more_positions_than_counted_are_refused() {
        let refusal =
            |after: &str| read_bytes(format!("{}{after}", with(&[])).as_bytes()).err().map(|d| d.code);
        assert_eq!(refusal(".25 .25 .25\n"), Some(Code::PoscarCounts));
        assert_eq!(refusal("\n0.0 0.0 0.0\n"), None);
        assert_eq!(refusal("Cartesian\n0.0 0.0 0.0\n"), None);
    }

    #[test]
    fn old_files_name_their_kinds_by_labels_or_the_title() {
        let old = |changes: &[(usize, &str)]| {
            let text = with(changes);
            let lines: Vec<&str> =
                text.split('\n').enumerate().filter(|(k, _)| *k != 5).map(|(_, l)| l).collect();
            read(&lines.join("\n"))
        };
        let symbols = |poscar: &Poscar| {
            poscar.elements.clone().map(|found| found.iter().map(|e| e.symbol()).collect::<Vec<_>>())
        };
        assert_eq!(symbols(&old(&[])), Ok(vec!["Mg", "O"]));
        let labelled = old(&[(1, "rock salt"), (9, "0 0 0 # Ca1"), (10, ".5 .5 .5 #S2")]);
        assert_eq!(symbols(&labelled), Ok(vec!["Ca", "S"]));
        for title in ["rock salt", "MgO", "Mg O F", "mg o", ""] {
            let poscar = old(&[(1, title)]);
            let refusal = poscar.unit().expect_err("anonymous");
            assert_eq!(refusal.code, Code::PoscarAnonymous, "{title}");
            assert_eq!(refusal.hint.as_deref(), Some("a line before line 6: Ca Ti"));
            assert_eq!(poscar.kinds, [0, 1]);
        }
    }

    #[test]
    fn flags_are_not_labels() {
        let poscar = read(&with(&[(6, "H F"), (9, "0 0 0 T T T"), (10, ".5 .5 .5 F F F")]));
        assert!(poscar.diagnostics.is_empty(), "{:?}", poscar.diagnostics);
        let poscar = read(&with(&[(10, ".5 .5 .5 F")]));
        assert_eq!(poscar.diagnostics[0].code, Code::PoscarLabel);
    }

    #[test]
    fn faults_have_a_code_and_a_place() {
        for (changes, code, line, column) in [
            (&[(2, "0.0")][..], Code::PoscarScale, 2, 1),
            (&[(2, "1 -1 1")], Code::PoscarScale, 2, 1),
            (&[(2, "one")], Code::PoscarNumber, 2, 1),
            (&[(3, "0 .5 x.5")], Code::PoscarNumber, 3, 6),
            (&[(3, "0 .5")], Code::PoscarNumber, 3, 1),
            (&[(3, "0 .5 inf")], Code::PoscarNumber, 3, 6),
            (&[(5, "0 1 1")], Code::CellDegenerate, 3, 1),
            (&[(2, "-10"), (5, "0 1 1")], Code::CellDegenerate, 3, 1),
            (&[(7, "1 1 1")], Code::PoscarSpecies, 7, 1),
            (&[(7, "1 -1")], Code::PoscarCounts, 7, 3),
            (&[(7, "0 0")], Code::PoscarCounts, 7, 1),
            (&[(7, "1 2")], Code::PoscarShort, 10, 1),
            (&[(7, "18446744073709551615 2")], Code::PoscarShort, 10, 1),
            (&[(8, "0.0 0.0 0.0")], Code::PoscarMode, 8, 1),
            (&[(10, ".5 .5 ****")], Code::PoscarNumber, 10, 7),
        ] {
            let refusal = read_bytes(with(changes).as_bytes()).expect_err("a fault");
            let span = refusal.span.expect("a place");
            assert_eq!((refusal.code, span.line, span.column), (code, line, column), "{refusal}");
        }
        let refusal = read(&with(&[(6, "Mg Xx")])).unit().expect_err("no element");
        assert_eq!(
            (refusal.code, refusal.span.map(|s| (s.line, s.column))),
            (Code::PoscarAnonymous, Some((6, 4)))
        );
        assert_eq!(read_bytes(b"").expect_err("empty").code, Code::PoscarShort);
    }

    proptest! {
        #[test]
        fn anything_is_taken(
            changes in proptest::collection::vec((1_usize..11, "[-0-9. eDcSMgTF#]{0,12}"), 0..3),
            bytes in proptest::collection::vec(any::<u8>(), 0..60),
        ) {
            let changes: Vec<(usize, &str)> = changes.iter().map(|(line, text)| (*line, text.as_str())).collect();
            let _ = read_bytes(with(&changes).as_bytes()).map(|poscar| poscar.unit());
            let _ = read_bytes(&bytes);
        }
    }
}
