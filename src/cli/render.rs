//! Draws diagnostics for people: what and where, the source line with a caret, what was found, what to type.
//!
//! The layout is ours; only the window on the source is drawn by annotate-snippets. Bytes that are not UTF-8 are shown
//! as replacement characters, and the caret stands where it should all the same, because the line is decoded in parts.

use super::output::plain;
use crate::diagnostic::{Diagnostic, Severity, Span};
use annotate_snippets::{AnnotationKind, Level, Renderer, Snippet};

/// Columns of a drawing that is not made for a terminal.
const DEFAULT_WIDTH: usize = 100;
/// Bytes of a line kept on either side of a span; the rest is cut before it is drawn.
const KEPT_BYTES: usize = 4_000;

/// How diagnostics are drawn.
#[derive(Debug, Clone, Copy)]
pub(super) struct Drawing {
    /// Whether to use the colours of a terminal.
    pub(super) is_coloured: bool,
    /// Columns at most, for lines of source.
    pub(super) width: Option<u16>,
}

impl Drawing {
    /// One diagnostic of a file, with an empty line after it. `source` is the content of the file, as far as there is
    /// any.
    pub(super) fn draw(self, file: &str, block: &str, source: &[u8], diagnostic: &Diagnostic) -> String {
        let (file, block) = (&*plain(file), &*plain(block));
        let place = match diagnostic.span {
            Some(span) => format!("{file}, line {}, column {}", span.line, span.column),
            None if block.is_empty() => file.to_owned(),
            None => format!("{file}, block {block}"),
        };
        let severity = self.paint(diagnostic.severity, &diagnostic.severity.to_string());
        let mut text = format!("{severity} {} in {place}\n", diagnostic.code);
        text.push_str(&self.wrap(&plain(&diagnostic.message)));
        let window = diagnostic.span.and_then(|span| Window::new(source, span));
        if let Some(window) = window {
            text.push_str(&self.draw_window(&window, diagnostic.severity));
        }
        match &diagnostic.hint {
            Some(hint) => text.push_str(&self.wrap(&format!("hint: {hint}"))),
            None => text.push_str(&self.wrap(&format!("remedy: {}", diagnostic.code.remedy()))),
        }
        text.push('\n');
        text
    }

    /// Words in lines of the width, each set in by two columns. A word that is longer stays whole.
    fn wrap(self, words: &str) -> String {
        let width = self.columns();
        let mut text = String::new();
        let mut used = 0;
        for word in words.split(' ') {
            let length = word.chars().count();
            if used == 0 || used + 1 + length > width {
                text.push_str(if used == 0 { "  " } else { "\n  " });
                used = 2 + length;
            } else {
                text.push(' ');
                used += 1 + length;
            }
            text.push_str(word);
        }
        text.push('\n');
        text
    }

    fn columns(self) -> usize {
        self.width.map_or(DEFAULT_WIDTH, usize::from)
    }

    fn draw_window(self, window: &Window, severity: Severity) -> String {
        let renderer = if self.is_coloured { Renderer::styled() } else { Renderer::plain() };
        let renderer = renderer.term_width(self.columns());
        let level = match severity {
            Severity::Error => Level::ERROR,
            Severity::Warning => Level::WARNING,
            Severity::Note => Level::NOTE,
        };
        let annotation = AnnotationKind::Primary.span(window.start..window.end);
        let snippet = Snippet::source(window.text.as_str()).line_start(window.line).annotation(annotation);
        let drawn = renderer.render(&[annotate_snippets::Group::with_level(level).element(snippet)]);
        let mut text = String::with_capacity(drawn.len() + 16);
        for line in drawn.lines() {
            text.extend(["  ", line.trim_end(), "\n"]);
        }
        text
    }

    fn paint(self, severity: Severity, text: &str) -> String {
        if !self.is_coloured {
            return text.to_owned();
        }
        let colour = match severity {
            Severity::Error => 31,
            Severity::Warning => 33,
            Severity::Note => 36,
        };
        format!("\u{1b}[1;{colour}m{text}\u{1b}[0m")
    }
}

/// The line of a span as text, and where the span is in it.
struct Window {
    text: String,
    line: usize,
    start: usize,
    end: usize,
}

impl Window {
    /// `None` when the span is not within the source.
    fn new(source: &[u8], span: Span) -> Option<Self> {
        let is_end = |byte: &u8| matches!(byte, b'\n' | b'\r');
        let before = source.get(..span.start)?;
        let line_start = before.iter().rposition(is_end).map_or(0, |at| at + 1);
        let after = source.get(span.start..)?;
        let line_end = after.iter().position(is_end).map_or(source.len(), |length| span.start + length);
        let stop = span.end.clamp(span.start, line_end);
        let first = line_start.max(span.start.saturating_sub(KEPT_BYTES));
        let last = line_end.min(stop.saturating_add(KEPT_BYTES));
        let part = |from: usize, to: usize| {
            let bytes = source.get(from..to).unwrap_or_default();
            String::from_utf8_lossy(bytes).replace(|c: char| c.is_control() && c != '\t', "\u{fffd}")
        };
        let mut text = part(first, span.start).trim_start_matches('\u{feff}').to_owned();
        let start = text.len();
        text.push_str(&part(span.start, stop));
        let end = text.len();
        text.push_str(&part(stop, last));
        Some(Self { text, line: span.line.max(1), start, end })
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::diagnostic::Code;
    use proptest::prelude::*;

    const PLAIN: Drawing = Drawing { is_coloured: false, width: None };

    fn finding(start: usize, end: usize) -> Diagnostic {
        let span = Span { start, end, line: 2, column: 1 };
        Diagnostic::error(Code::CifNumber, "found").at(span)
    }

    #[test]
    fn bytes_that_are_not_utf_8_keep_the_caret_in_place() {
        let source = b"data_x\n_a \xe9\xe9 abc d\n";
        let drawn = PLAIN.draw("x.cif", "x", source, &finding(13, 16));
        let lines: Vec<&str> = drawn.lines().collect();
        let at = lines.iter().position(|line| line.contains("abc")).expect("the source line");
        let column = |text: &str, needle: char| text.chars().position(|c| c == needle);
        assert_eq!(column(lines[at + 1], '^'), lines[at].find("abc").map(|b| lines[at][..b].chars().count()));
    }

    #[test]
    fn long_lines_are_trimmed() {
        let source = format!("data_x\n{}abc{}\n", "-".repeat(100_000), "-".repeat(100_000));
        let drawn = PLAIN.draw("x.cif", "x", source.as_bytes(), &finding(100_007, 100_010));
        assert!(drawn.contains("abc"), "{drawn}");
        assert!(drawn.lines().all(|line| line.chars().count() <= DEFAULT_WIDTH + 10), "{drawn}");
    }

    proptest! {
        #[test]
        fn anything_is_drawn(source in proptest::collection::vec(any::<u8>(), 0..80), a in 0..90_usize, b in 0..90_usize) {
            let _ = PLAIN.draw("x.cif", "", &source, &finding(a, b));
        }
    }
}
