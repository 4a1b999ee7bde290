//! Which element is each kind of atom?

use super::line::Word;
use crate::crystal::Element;
use crate::diagnostic::{Code, Diagnostic, Span};
use std::collections::{BTreeMap, BTreeSet};

/// Everything a file may say about its kinds.
pub(super) struct Kinds<'a> {
    /// The species line.
    pub(super) species: Option<&'a [Species]>,
    pub(super) title: &'a str,
    pub(super) counts: &'a [usize],
    /// What stands behind each position; empty for nothing.
    pub(super) labels: &'a [String],
    pub(super) places: &'a [Span],
}

/// A word of the species line.
#[derive(Debug, Clone)]
pub(super) struct Species {
    pub(super) name: String,
    pub(super) place: Span,
}

impl Kinds<'_> {
    /// The element of each kind. `line` is the number of the line that should hold them.
    pub(super) fn elements(
        &self,
        line: usize,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<Vec<Element>, Diagnostic> {
        let by_label = self.by_label();
        let Some(species) = self.species else {
            if let Some(elements) = by_label {
                return Ok(elements);
            }
            let elements = self.by_title().ok_or_else(|| self.anonymous(line))?;
            let message = "no species line; the elements were taken from the title, in its order";
            noticed.push(Diagnostic::warning(Code::PoscarTitle, message).hint(self.example()));
            return Ok(elements);
        };
        let elements = species
            .iter()
            .map(|species| {
                element_of_species(&species.name).ok_or_else(|| {
                    let message = format!("'{}' in the species line is not an element", species.name);
                    Diagnostic::error(Code::PoscarAnonymous, message).at(species.place).hint(self.example())
                })
            })
            .collect::<Result<Vec<Element>, _>>()?;
        if let Some(found) = self.contradiction(&elements) {
            noticed.push(found);
        }
        Ok(elements)
    }

    /// The elements of the labels, if every atom has one and those of each kind agree.
    fn by_label(&self) -> Option<Vec<Element>> {
        let mut labels = self.labels.iter();
        self.counts
            .iter()
            .map(|&count| {
                let found: BTreeSet<Option<Element>> =
                    labels.by_ref().take(count).map(|label| element_of_label(label)).collect();
                let mut found = found.into_iter();
                match (found.next(), found.next()) {
                    (Some(element), None) => element,
                    _ => None,
                }
            })
            .collect()
    }

    /// The elements of the title, if it consists of as many symbols as there are kinds.
    fn by_title(&self) -> Option<Vec<Element>> {
        let elements: Vec<Element> =
            self.title.split_whitespace().map(element_of_symbol).collect::<Option<_>>()?;
        (elements.len() == self.counts.len()).then_some(elements)
    }

    fn anonymous(&self, line: usize) -> Diagnostic {
        let message = format!(
            "the file does not name the elements of its {} kinds of atoms: no species line before the counts in line \
             {line}, no labels behind all positions, and no title of element symbols",
            self.counts.len()
        );
        Diagnostic::error(Code::PoscarAnonymous, message)
            .hint(format!("a line before line {line}: {}", self.example()))
    }

    /// A species line of the right length.
    fn example(&self) -> String {
        let symbols = ["Ca", "Ti", "O", "Mg", "Al", "Si", "K", "F"];
        let more = if self.counts.len() > symbols.len() { " ..." } else { "" };
        let some: Vec<&str> = symbols.into_iter().take(self.counts.len()).collect();
        some.join(" ") + more
    }

    /// The first label of another element than the species line gives.
    fn contradiction(&self, elements: &[Element]) -> Option<Diagnostic> {
        let stated = elements
            .iter()
            .zip(self.counts)
            .flat_map(|(element, &count)| std::iter::repeat_n(element, count));
        stated.zip(self.labels).zip(self.places).find_map(|((stated, label), place)| {
            let element = element_of_label(label).filter(|element| element != stated)?;
            let message =
                format!("an atom of {stated} by the species line is labelled '{label}', which is {element}");
            Some(Diagnostic::warning(Code::PoscarLabel, message).at(*place))
        })
    }

    /// A name for each atom: its label, where all labels differ and name an element, else the symbol with a number.
    pub(super) fn names(&self, kinds: &[usize], elements: &[Element]) -> Vec<String> {
        let distinct: BTreeSet<&String> = self.labels.iter().collect();
        let is_usable = |label: &String| element_of_label(label).is_some() && label.len() <= 16;
        if distinct.len() == self.labels.len() && self.labels.iter().all(is_usable) {
            return self.labels.to_vec();
        }
        let mut numbers: BTreeMap<String, usize> = BTreeMap::new();
        let mut name = |kind: usize| {
            let symbol = elements.get(kind).map_or_else(|| format!("kind{}-", kind + 1), ToString::to_string);
            let number = numbers.entry(symbol.clone()).or_default();
            *number += 1;
            format!("{symbol}{number}")
        };
        kinds.iter().map(|&kind| name(kind)).collect()
    }
}

/// The label behind a position: the first word after the flags of selective dynamics, without the mark of a comment.
pub(super) fn label_of(words: &[Word<'_>], is_selective: bool) -> String {
    let texts: Vec<String> = words.iter().map(Word::text).collect();
    let flags = texts.iter().take(3).take_while(|text| is_flag(text)).count();
    // Three flags may be left over without the line that announces them; one T or F alone is an element.
    let skipped = if is_selective || flags == 3 { flags } else { 0 };
    let rest = texts.iter().skip(skipped).map(|text| text.trim_start_matches(['!', '#']));
    rest.filter(|text| !text.is_empty()).take(1).collect()
}

fn is_flag(text: &str) -> bool {
    let letters = text.trim_matches('.');
    ["t", "f", "true", "false"].iter().any(|flag| letters.eq_ignore_ascii_case(flag))
}

/// A symbol in its proper case.
fn element_of_symbol(text: &str) -> Option<Element> {
    Element::from_symbol(text).filter(|element| element.symbol() == text || text == "D")
}

/// The element of a label such as `Mg1` or `O2-`: the letters it begins with.
fn element_of_label(label: &str) -> Option<Element> {
    let letters = label.find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(label.len());
    element_of_symbol(&label[..letters])
}

/// The element of a species such as `Ti`, `TI`, `Ti_pv` or `Ti/2f7a`.
fn element_of_species(name: &str) -> Option<Element> {
    let letters = name.find(|c: char| !c.is_ascii_alphabetic()).unwrap_or(name.len());
    Element::from_symbol(&name[..letters])
}
