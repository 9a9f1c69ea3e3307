//! A statement that could not be read, and the symbols around the place where reading stopped.

use super::statements::{Token, TokenKind};
use crate::language::diagnostic::Diagnostic;
use crate::language::syntax::Span;
use TokenKind::*;

/// A statement and the place in it where reading stopped.
pub(super) struct Context<'a> {
    /// The sheet with repaired spellings.
    pub text: &'a str,
    /// The tokens of the statement; at least one.
    pub tokens: &'a [Token],
    /// Index of the first token that could not be read; their number if it is the end that came too early.
    pub at: usize,
    /// Byte where reading stopped.
    pub place: usize,
    /// Whether a value is read, not a statement.
    pub is_value: bool,
    /// Indices of the brackets that are open at `at`.
    pub open: Vec<usize>,
}

/// What a bracket encloses.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Role {
    Interval,
    Sum,
    Arguments,
    Group,
}

impl<'a> Context<'a> {
    pub fn kind(&self, at: usize) -> Option<TokenKind> {
        self.tokens.get(at).map(|token| token.kind)
    }

    pub fn word(&self, at: usize) -> &'a str {
        self.tokens.get(at).map_or("", |token| token.text(self.text))
    }

    /// Kind and text of the token that could not be read.
    pub fn here(&self) -> (Option<TokenKind>, &'a str) {
        (self.kind(self.at), self.word(self.at))
    }

    /// Kind and text of the token before it.
    pub fn before(&self) -> (Option<TokenKind>, &'a str) {
        match self.at.checked_sub(1) {
            Some(at) => (self.kind(at), self.word(at)),
            None => (None, ""),
        }
    }

    /// Whether what stands before the place is a complete operand.
    pub fn after_operand(&self) -> bool {
        matches!(self.before().0, Some(Number | Name | Unit | Close))
    }

    /// The text of tokens `from..=to`, if there is one (a pair of brackets may enclose nothing) and it is short enough to
    /// be repeated in a hint.
    pub fn short(&self, from: usize, to: usize) -> Option<&'a str> {
        let text = self.text.get(self.tokens.get(from)?.span.start..self.tokens.get(to)?.span.end)?;
        (text.len() <= 40 && !text.contains(['\n', '#'])).then_some(text)
    }

    /// The place of tokens `from..=to`.
    pub fn span(&self, from: usize, to: usize) -> Span {
        Span { start: self.tokens[from].span.start, end: self.tokens[to].span.end }
    }

    /// The place of the token that could not be read, or the end of the statement.
    pub fn here_span(&self) -> Span {
        let end = self.tokens.last().map_or(self.place, |token| token.span.end);
        self.tokens.get(self.at).map_or(Span { start: end, end }, |token| token.span)
    }

    pub fn error(&self, code: &'static str, message: impl Into<String>) -> Diagnostic {
        Diagnostic::error(code, self.here_span(), message)
    }

    /// What the innermost open bracket encloses.
    pub fn role(&self) -> Option<Role> {
        let open = *self.open.last()?;
        let before = open.checked_sub(1);
        Some(match before.map(|at| (self.tokens[at].kind, self.word(at))) {
            Some((Keyword, "in")) => Role::Interval,
            Some((Name, "sum")) => Role::Sum,
            Some((Name, _)) => Role::Arguments,
            _ => Role::Group,
        })
    }

    /// The bracket that closes the one at `open`, if it is in the statement.
    pub fn closing(&self, open: usize) -> Option<usize> {
        let mut depth = 0usize;
        for (at, token) in self.tokens.iter().enumerate().skip(open) {
            match token.kind {
                Open => depth += 1,
                Close if depth == 1 => return Some(at),
                Close => depth -= 1,
                _ => {}
            }
        }
        None
    }

    /// Whether the place is in the intervals after `on`.
    pub fn in_region(&self) -> bool {
        let clause = self.tokens[..self.at]
            .iter()
            .rev()
            .find(|token| token.kind == Keyword && matches!(token.text(self.text), "on" | "where" | "as" | "assume"));
        clause.is_some_and(|token| token.text(self.text) == "on")
    }

    /// Whether the place is in the condition of `assume` or `where`.
    pub fn is_condition(&self) -> bool {
        self.word(0) == "assume" || self.tokens[..self.at].iter().any(|token| token.text(self.text) == "where")
    }

    /// What is said where nothing better is known.
    pub fn unexpected(&self) -> Diagnostic {
        match self.here() {
            (Some(_), word) => self.error("unexpected", format!("`{word}` cannot stand here")),
            (None, _) => self.error("unexpected", "the statement ends too early"),
        }
    }
}

/// Indices of the brackets in `tokens` that are not closed.
pub(super) fn open_brackets(tokens: &[Token]) -> Vec<usize> {
    let mut open = Vec::new();
    for (at, token) in tokens.iter().enumerate() {
        match token.kind {
            Open => open.push(at),
            Close => {
                open.pop();
            }
            _ => {}
        }
    }
    open
}
