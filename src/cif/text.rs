//! The text of a value: line ends, folded lines, prefixes.
//!
//! *Line folding* (IUCr syntax specification of CIF 1.1, paragraphs 26 to 29): when the first line of a text field is a
//! backslash, a backslash at the end of a line joins it with the next. *Prefix* (CIF 2.0; Bernstein et al., J. Appl. Cryst. 49
//! (2016) 277, section 5.2): when the first line is some text without backslash followed by one backslash, or by two to
//! announce folding as well, each further line begins with that text, which is not part of the value. Blanks after the
//! backslash do not count.

use super::lex::Dialect;
use std::borrow::Cow;

/// The text of a text field, from the bytes between its semicolons.
pub(super) fn of_field(raw: &str, dialect: Dialect) -> Cow<'_, str> {
    let text = with_line_feeds(raw);
    let first = text.split('\n').next().unwrap_or_default().trim_end_matches([' ', '\t']);
    let Some(announced) = first.strip_suffix('\\') else { return text };
    let (prefix, is_folded) = match announced.strip_suffix('\\') {
        None if announced.is_empty() => ("", true),
        None => (announced, false),
        Some(prefix) => (prefix, true),
    };
    let is_prefix = !prefix.is_empty() && !prefix.contains('\\');
    if prefix.is_empty() != announced.is_empty()
        || !prefix.is_empty() && (dialect == Dialect::One || !is_prefix)
    {
        return text;
    }
    let Some(lines) =
        text.split('\n').skip(1).map(|line| line.strip_prefix(prefix)).collect::<Option<Vec<_>>>()
    else {
        return text;
    };
    Cow::Owned(if is_folded { unfold(&lines) } else { lines.join("\n") })
}

/// Joins lines that end with a backslash with the next.
fn unfold(lines: &[&str]) -> String {
    let mut text = String::new();
    for (number, line) in lines.iter().enumerate() {
        match line.trim_end_matches([' ', '\t']).strip_suffix('\\') {
            Some(part) => text.push_str(part),
            None => {
                text.push_str(line);
                if number + 1 < lines.len() {
                    text.push('\n');
                }
            }
        }
    }
    text
}

/// The text with LF as the only line end.
pub(super) fn with_line_feeds(raw: &str) -> Cow<'_, str> {
    if raw.contains('\r') {
        Cow::Owned(raw.replace("\r\n", "\n").replace('\r', "\n"))
    } else {
        Cow::Borrowed(raw)
    }
}

/// When the first line of a text field announces a prefix: the first line, counted from the one after the semicolon as
/// zero, that does not begin with it.
pub(super) fn lacks_prefix(raw: &[u8]) -> Option<usize> {
    let raw = String::from_utf8_lossy(raw);
    let text = with_line_feeds(&raw);
    let mut lines = text.split('\n');
    let announced = lines.next()?.trim_end_matches([' ', '\t']).strip_suffix('\\')?;
    let prefix = announced.strip_suffix('\\').unwrap_or(announced);
    if prefix.is_empty() || prefix.contains('\\') {
        return None;
    }
    lines.position(|line| !line.starts_with(prefix)).map(|number| number + 1)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn protocols_are_undone() {
        // By hand, after the descriptions cited above.
        for (raw, one, two) in [
            ("plain\ntext", "plain\ntext", "plain\ntext"),
            ("\r\na\rb", "\na\nb", "\na\nb"),
            ("\\\nlong \\\nline\nnext", "long line\nnext", "long line\nnext"),
            ("\\  \nlong\\ \t\nline\\", "longline", "longline"),
            ("> \\\n> a\n> ;b", "> \\\n> a\n> ;b", "a\n;b"),
            (">\\\\\n>a\\\n>b", ">\\\\\n>a\\\n>b", "ab"),
            (">\\\n>a\nb", ">\\\n>a\nb", ">\\\n>a\nb"),
            ("\\\\\na", "\\\\\na", "\\\\\na"),
            ("\\", "", ""),
        ] {
            assert_eq!(of_field(raw, Dialect::One), one, "{raw:?}");
            assert_eq!(of_field(raw, Dialect::Two), two, "{raw:?}");
        }
        assert_eq!(lacks_prefix(b">\\\n>a\nb"), Some(2));
        assert_eq!(lacks_prefix(b">\\\n>a\n>b"), None);
        assert_eq!(lacks_prefix(b"text\nb"), None);
    }
}
