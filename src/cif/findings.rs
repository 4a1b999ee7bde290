//! What was noticed in a file, with an end to repetitions.

use crate::diagnostic::{Code, Diagnostic};
use std::collections::BTreeMap;

/// Findings of one code are listed up to this number, and counted beyond it.
pub(super) const MAX_OF_A_CODE: usize = 100;

/// Diagnostics in the order they were found.
#[derive(Debug, Default)]
pub(super) struct Findings {
    list: Vec<Diagnostic>,
    counts: BTreeMap<Code, usize>,
    is_silent: bool,
}

impl Findings {
    /// Findings that nobody will ask for.
    pub(super) fn silent() -> Self {
        Self { is_silent: true, ..Self::default() }
    }

    /// Adds a finding, which is made only when it will be listed.
    pub(super) fn add(&mut self, code: Code, make: impl FnOnce() -> Diagnostic) {
        if self.is_silent {
            return;
        }
        let count = self.counts.entry(code).or_default();
        *count += 1;
        if *count <= MAX_OF_A_CODE {
            self.list.push(make());
        }
    }

    /// Both together, in the order of the file, with a word on what was only counted.
    pub(super) fn merge(mut self, other: Self) -> Vec<Diagnostic> {
        for (code, count) in other.counts {
            *self.counts.entry(code).or_default() += count;
        }
        self.list.extend(other.list);
        self.list.sort_by_key(|found| found.span.map_or(0, |span| span.start));
        for (code, count) in self.counts {
            let mut listed = self.list.iter().filter(|found| found.code == code);
            let Some(first) = listed.next() else { continue };
            let beyond = count - 1 - listed.count();
            if beyond > 0 {
                let message = format!("{beyond} more findings of this kind are not listed");
                self.list.push(Diagnostic::new(first.severity, code, message));
            }
        }
        self.list
    }
}
