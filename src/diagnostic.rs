//! What is wrong or noteworthy about an input, as data.
//!
//! A [`Diagnostic`] carries a stable [`Code`], where it was found, what was found, and what to type instead.
//! It is serialised in JSON output, counted in summaries and drawn by the command line; nothing in this module prints.
//! A material that cannot be answered is *refused*: the refusal is the one diagnostic of severity
//! [`Severity::Error`] that stopped the work.

mod code;
mod lines;

pub use code::Code;
pub use lines::Lines;

use serde::Serialize;
use std::fmt;

/// How much a finding matters.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, schemars::JsonSchema)]
#[serde(rename_all = "lowercase")]
pub enum Severity {
    /// Worth knowing; the answer does not depend on it.
    Note,
    /// The input was read in one of several possible ways, or contradicts itself.
    Warning,
    /// The material could not be answered.
    Error,
}

impl fmt::Display for Severity {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Self::Note => "note",
            Self::Warning => "warning",
            Self::Error => "error",
        })
    }
}

/// A range of bytes in a file, with the position a person would count.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Default, Serialize, schemars::JsonSchema)]
pub struct Span {
    /// First byte, counted from zero.
    pub start: usize,
    /// One past the last byte.
    pub end: usize,
    /// Line of the first byte, counted from one.
    pub line: usize,
    /// Column of the first byte in its line, counted from one, in bytes.
    pub column: usize,
}

/// One finding about an input.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, schemars::JsonSchema)]
pub struct Diagnostic {
    /// Stable code; see [`Code`].
    pub code: Code,
    /// How much it matters.
    pub severity: Severity,
    /// Where, if the finding belongs to a place in a file.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub span: Option<Span>,
    /// What was found, naming the value and the limit; lower case, no full stop.
    pub message: String,
    /// Something that can be typed to get further.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub hint: Option<String>,
    /// The listed site it is about, counted from zero, as long as nobody has said where that is in the file.
    #[serde(skip)]
    #[schemars(skip)]
    pub site: Option<usize>,
}

impl Diagnostic {
    /// A finding of the given severity.
    pub fn new(severity: Severity, code: Code, message: impl Into<String>) -> Self {
        Self { code, severity, span: None, message: message.into(), hint: None, site: None }
    }

    /// A finding that stops the work on this material.
    pub fn error(code: Code, message: impl Into<String>) -> Self {
        Self::new(Severity::Error, code, message)
    }

    /// A finding that leaves an answer, read in one of several possible ways.
    pub fn warning(code: Code, message: impl Into<String>) -> Self {
        Self::new(Severity::Warning, code, message)
    }

    /// A finding that does not change the answer.
    pub fn note(code: Code, message: impl Into<String>) -> Self {
        Self::new(Severity::Note, code, message)
    }

    /// The same finding at a place in the file.
    #[must_use]
    pub fn at(mut self, span: Span) -> Self {
        self.span = Some(span);
        self
    }

    /// The same finding about a listed site.
    #[must_use]
    pub fn about(mut self, site: usize) -> Self {
        self.site = Some(site);
        self
    }

    /// The same finding with something to type.
    #[must_use]
    pub fn hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }
}

impl fmt::Display for Diagnostic {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}[{}]: {}", self.severity, self.code, self.message)?;
        if let Some(span) = self.span {
            write!(f, " (line {}, column {})", span.line, span.column)?;
        }
        if let Some(hint) = &self.hint {
            write!(f, "; hint: {hint}")?;
        }
        Ok(())
    }
}

impl std::error::Error for Diagnostic {}
