//! One value of a document.

use super::Document;
use crate::cif::lex::{Part, Token, TokenKind, parts};
use crate::cif::text::{of_field, with_line_feeds};
use crate::diagnostic::Span;
use std::borrow::Cow;

/// How a value is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum ValueKind {
    /// Without quotes.
    Bare,
    /// In quotes.
    Quoted,
    /// In a text field.
    Text,
    /// A bare `.`: the item does not apply, or has its default value.
    Inapplicable,
    /// A bare `?`: the value is not known.
    Unknown,
    /// A list of CIF 2.0; see [`Document::elements`].
    List,
    /// A table of CIF 2.0; see [`Document::elements`].
    Table,
}

/// One value.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Value<'s> {
    /// How it is written.
    pub kind: ValueKind,
    /// Where all of it is, delimiters included.
    pub span: Span,
    /// Its text without delimiters. Line ends are LF, folded lines and prefixes are undone. Of a list or table, what is
    /// between the brackets, as it stands.
    pub text: Cow<'s, str>,
}

/// A member of a list or table.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Element<'s> {
    /// Its key, in a table.
    pub key: Option<Cow<'s, str>>,
    /// Its value.
    pub value: Value<'s>,
}

impl Value<'_> {
    /// The text without blanks around it; `None` for a bare `.` or `?`, or when nothing is left.
    #[must_use]
    pub fn stated(&self) -> Option<&str> {
        match self.kind {
            ValueKind::Inapplicable | ValueKind::Unknown => None,
            _ => Some(self.text.trim()).filter(|text| !text.is_empty()),
        }
    }
}

impl<'s> Document<'s> {
    pub(in crate::cif) fn value_of(&self, token: &Token) -> Value<'s> {
        let raw = self.slice(token.start, token.end);
        let kind = match (token.kind, raw.as_ref()) {
            (TokenKind::Quoted, _) => ValueKind::Quoted,
            (TokenKind::Text, _) => ValueKind::Text,
            (TokenKind::List, _) => ValueKind::List,
            (TokenKind::Table, _) => ValueKind::Table,
            (_, ".") => ValueKind::Inapplicable,
            (_, "?") => ValueKind::Unknown,
            _ => ValueKind::Bare,
        };
        let text = match (token.kind, raw) {
            (TokenKind::Text, Cow::Borrowed(raw)) => of_field(raw, self.dialect),
            (TokenKind::Text, Cow::Owned(raw)) => Cow::Owned(of_field(&raw, self.dialect).into_owned()),
            (TokenKind::Quoted, Cow::Borrowed(raw)) => with_line_feeds(raw),
            (_, raw) => raw,
        };
        Value { kind, span: token.span, text }
    }

    /// The members of a list or table, in the order of the file. Members that are lists or tables are values of that
    /// kind, whose members are asked for in turn. Takes time linear in the length of the value. Empty for any other value.
    ///
    /// ```
    /// use cosetta::cif::parse;
    /// let (document, _) = parse(b"#\\#CIF_2.0\ndata_x _shape {'a':[1 2] 'b':3}");
    /// let table = document.block(0).unwrap().value("_shape").unwrap();
    /// let members = document.elements(&table);
    /// assert_eq!(members[0].key.as_deref(), Some("a"));
    /// assert_eq!(document.elements(&members[0].value).len(), 2);
    /// ```
    #[must_use]
    pub fn elements(&self, value: &Value<'_>) -> Vec<Element<'s>> {
        let mut elements = Vec::new();
        if !matches!(value.kind, ValueKind::List | ValueKind::Table) {
            return elements;
        }
        let mut depth = 0_usize;
        let mut key: Option<Token> = None;
        parts(self.lexer_at(value.span.start), &mut |part| {
            let member = match part {
                Part::Open => {
                    depth += 1;
                    return;
                }
                Part::Key(token) if depth == 1 => {
                    key = Some(token);
                    return;
                }
                Part::Value(token) if depth == 1 => token,
                Part::Close(token) => {
                    depth -= 1;
                    if depth != 1 {
                        return;
                    }
                    token
                }
                Part::Key(_) | Part::Value(_) => return,
            };
            let key = key.take().map(|key| self.value_of(&key).text);
            if key.is_some() || value.kind == ValueKind::List {
                elements.push(Element { key, value: self.value_of(&member) });
            }
        });
        elements
    }
}
