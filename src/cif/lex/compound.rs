//! Lists and tables of CIF 2.0, however deep they are nested, without recursion.

use super::{Lexer, Place, Token, TokenKind};
use crate::diagnostic::{Code, Diagnostic, Span};
use std::collections::HashSet;

/// What is met on a walk through a list or table.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(in super::super) enum Part {
    /// A list or table begins, the outermost one included.
    Open,
    /// The key of the next value.
    Key(Token),
    /// A value that is no list and no table.
    Value(Token),
    /// The innermost list or table ends; this is all of it.
    Close(Token),
}

/// A list or table that is not closed yet.
struct Level<'s> {
    place: Place,
    kind: TokenKind,
    /// The keys so far, as the file writes them.
    keys: HashSet<&'s [u8]>,
    state: State,
}

/// What comes next in a list or table.
#[derive(Clone, Copy, PartialEq, Eq)]
enum State {
    /// A value of a list.
    Element,
    /// A key of a table.
    Key,
    /// The value of a key.
    ValueOf(Token),
}

/// Walks through the list or table of a token of that kind.
pub(in super::super) fn parts(mut lexer: Lexer<'_>, sink: &mut dyn FnMut(Part)) {
    if matches!(lexer.peek(), Some(b'[' | b'{')) {
        lexer.compound(sink);
    }
}

impl<'s> Lexer<'s> {
    /// The list or table that begins at the current byte.
    pub(super) fn compound(&mut self, sink: &mut dyn FnMut(Part)) -> Token {
        let mut levels: Vec<Level<'s>> = Vec::new();
        loop {
            self.skip_blanks_and_comments();
            let next = self.peek();
            let begins_outside = next.is_none_or(|first| self.begins_outside(first));
            match next {
                Some(first @ (b'[' | b'{')) => self.open(first, &mut levels, sink),
                Some(first @ (b']' | b'}')) => {
                    if let Some(token) = self.close(first, &mut levels, sink) {
                        return token;
                    }
                }
                Some(first) if !begins_outside => self.member(first, &mut levels, sink),
                _ => return self.end_unclosed(levels, sink),
            }
        }
    }

    /// Whether the current byte begins a tag or a keyword, which no list can hold.
    fn begins_outside(&self, first: u8) -> bool {
        if first == b'_' {
            return true;
        }
        if !matches!(first.to_ascii_lowercase(), b'd' | b's' | b'l' | b'g') {
            return false;
        }
        let mut ahead = Lexer::within(
            self.bytes,
            self.at,
            super::LineStart { line: self.line, start: self.line_start },
            self.dialect,
        );
        ahead.word().kind != TokenKind::Bare
    }

    fn open(&mut self, first: u8, levels: &mut Vec<Level<'s>>, sink: &mut dyn FnMut(Part)) {
        let place = self.here();
        self.at += 1;
        if levels.last().is_some_and(|level| level.state == State::Key) {
            let span = self.span_from(place);
            self.report_entry(span, "a list or table in a table has no key");
        }
        let (kind, state) =
            if first == b'[' { (TokenKind::List, State::Element) } else { (TokenKind::Table, State::Key) };
        levels.push(Level { place, kind, keys: HashSet::new(), state });
        sink(Part::Open);
    }

    /// Closes the innermost level; returns the whole when it was the last.
    fn close(
        &mut self,
        bracket: u8,
        levels: &mut Vec<Level<'s>>,
        sink: &mut dyn FnMut(Part),
    ) -> Option<Token> {
        let wanted = if bracket == b']' { TokenKind::List } else { TokenKind::Table };
        let Some(level) = levels.pop_if(|level| level.kind == wanted) else {
            self.skip_stray_bracket(bracket);
            return None;
        };
        if let State::ValueOf(key) = level.state {
            self.report_entry(key.span, "a key of a table has no value");
        }
        self.at += 1;
        let token = self.whole(&level, self.at - 1);
        sink(Part::Close(token));
        if levels.is_empty() {
            self.expect_blank("the bracket", true);
            return Some(token);
        }
        self.after_value(levels);
        None
    }

    fn whole(&self, level: &Level<'_>, end: usize) -> Token {
        Token { kind: level.kind, span: self.span_from(level.place), start: level.place.start + 1, end }
    }

    /// A key or a value.
    fn member(&mut self, first: u8, levels: &mut [Level<'s>], sink: &mut dyn FnMut(Part)) {
        let token = self.simple(first);
        let Some(level) = levels.last_mut() else { return };
        if level.state != State::Key {
            sink(Part::Value(token));
            self.after_value(levels);
            return;
        }
        if token.kind == TokenKind::Quoted && self.peek() == Some(b':') {
            self.at += 1;
            level.state = State::ValueOf(token);
            if !level.keys.insert(&self.bytes[token.start..token.end]) {
                self.findings.add(Code::CifKeyRepeated, || {
                    let message = "a key was given before in this table; both entries were kept";
                    Diagnostic::warning(Code::CifKeyRepeated, message).at(token.span)
                });
            }
            sink(Part::Key(token));
            return;
        }
        let what = match token.kind {
            TokenKind::Quoted => "a quoted text in a table is followed by no colon",
            TokenKind::Text => "a text field in a table has no key",
            _ => "a word in a table has no key in quotes",
        };
        self.report_entry(token.span, what);
    }

    /// The value of a key is complete, or the next element of a list may follow.
    fn after_value(&mut self, levels: &mut [Level<'s>]) {
        if let Some(level) = levels.last_mut() {
            if level.kind == TokenKind::Table {
                level.state = State::Key;
            }
            self.expect_blank("this value", true);
        }
    }

    fn report_entry(&mut self, span: Span, what: &str) {
        self.findings.add(Code::CifTableEntry, || {
            Diagnostic::error(Code::CifTableEntry, format!("{what}; the entry was passed over"))
                .at(span)
                .hint("{'key': value}")
        });
    }

    fn end_unclosed(&mut self, mut levels: Vec<Level<'s>>, sink: &mut dyn FnMut(Part)) -> Token {
        let mut token = None;
        while let Some(level) = levels.pop() {
            let whole = self.whole(&level, self.at);
            sink(Part::Close(whole));
            token = Some(whole);
        }
        let token = token.unwrap_or(Token {
            kind: TokenKind::List,
            span: self.span_from(self.here()),
            start: self.at,
            end: self.at,
        });
        let span = Span { end: token.span.start + 1, ..token.span };
        self.findings.add(Code::CifListOpen, || {
            let (name, close) = if token.kind == TokenKind::List { ("list", ']') } else { ("table", '}') };
            Diagnostic::error(
                Code::CifListOpen,
                format!("the {name} that begins at line {} is not closed", span.line),
            )
            .at(span)
            .hint(format!("end it with {close}"))
        });
        token
    }
}
