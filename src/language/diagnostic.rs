//! What is wrong with a sheet, where, and what to change.

use super::syntax::Span;
use std::fmt;

/// How bad it is.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Severity {
    /// The sheet cannot be used.
    Error,
    /// The sheet can be used, but probably does not say what was meant.
    Warning,
}

/// One problem in a sheet.
#[derive(Clone, PartialEq, Debug)]
pub struct Diagnostic {
    /// Error or warning.
    pub severity: Severity,
    /// A stable short name for programs, such as `unknown-name`.
    pub code: &'static str,
    /// What was found; no full stop.
    pub message: String,
    /// The text that the marker stands under.
    pub span: Span,
    /// What to change, if there is something to say.
    pub hint: Option<String>,
}

impl Diagnostic {
    /// An error without a hint.
    pub fn error(code: &'static str, span: Span, message: impl Into<String>) -> Self {
        Self { severity: Severity::Error, code, message: message.into(), span, hint: None }
    }

    /// A warning without a hint.
    pub fn warning(code: &'static str, span: Span, message: impl Into<String>) -> Self {
        Self { severity: Severity::Warning, ..Self::error(code, span, message) }
    }

    /// The same with a hint.
    pub fn with_hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }
}

/// The text of a sheet and the name it goes by in messages.
#[derive(Clone, PartialEq, Debug)]
pub struct Source {
    /// File name, or `standard input`.
    pub name: String,
    /// The text.
    pub text: String,
}

impl Source {
    /// A sheet named `name`.
    pub fn new(name: impl Into<String>, text: impl Into<String>) -> Self {
        Self { name: name.into(), text: text.into() }
    }

    /// Line and column (both from 1, column in characters) of a byte position.
    pub fn line_column(&self, position: usize) -> (usize, usize) {
        let position = position.min(self.text.len());
        let before = &self.text.as_bytes()[..position];
        let line_start = before.iter().rposition(|&b| b == b'\n').map_or(0, |at| at + 1);
        let line = before.iter().filter(|&&b| b == b'\n').count() + 1;
        let column = String::from_utf8_lossy(&before[line_start..]).chars().count() + 1;
        (line, column)
    }
}

/// All problems that make a sheet unusable, with the text they are in.
#[derive(Clone, PartialEq, Debug)]
pub struct SheetErrors {
    /// The sheet.
    pub source: Source,
    /// At least one error, in the order of the text; warnings may stand between them.
    pub diagnostics: Vec<Diagnostic>,
}

impl fmt::Display for SheetErrors {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for diagnostic in &self.diagnostics {
            writeln!(f, "{}", diagnostic.message)?;
        }
        Ok(())
    }
}

impl std::error::Error for SheetErrors {}
