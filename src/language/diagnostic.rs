//! What is wrong with a sheet, where, and what to change.

use super::syntax::Span;
use std::fmt;
use unicode_width::UnicodeWidthChar;

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
        let line_start = before.iter().rposition(|&b| b == b'\n').map_or(self.first_character(), |at| at + 1);
        let line_start = line_start.min(position);
        let line = before.iter().filter(|&&b| b == b'\n').count() + 1;
        let column = String::from_utf8_lossy(&before[line_start..]).chars().count() + 1;
        (line, column)
    }

    /// Where the text begins after a byte order mark.
    fn first_character(&self) -> usize {
        if self.text.starts_with('\u{feff}') { '\u{feff}'.len_utf8() } else { 0 }
    }

    /// The diagnostic with its place, the line of the text, a marker under it and the hint, each on its own line:
    ///
    /// ```text
    /// head.sheet line 1, column 5: two factors stand side by side without `*`
    ///     b = 2pi
    ///         ^^^
    /// hint: write `2*pi`
    /// ```
    ///
    /// Tabs become four spaces, characters that could disturb a terminal become `\u{fffd}`, and a long line is cut
    /// around the marker. A marker that would reach over several lines ends with the first.
    pub fn draw(&self, diagnostic: &Diagnostic) -> String {
        self.draw_styled(diagnostic, &|_, text| text.to_owned())
    }

    /// The same with each part passed through `style`, which may add color.
    pub fn draw_styled(&self, diagnostic: &Diagnostic, style: &dyn Fn(Part, &str) -> String) -> String {
        let start = self.text.floor_char_boundary(diagnostic.span.start);
        let (line, column) = self.line_column(start);
        let place = format!("{} line {line}, column {column}:", shown(&self.name));
        let message = match diagnostic.severity {
            Severity::Error => shown(&diagnostic.message),
            Severity::Warning => format!("warning: {}", shown(&diagnostic.message)),
        };
        let message = style(Part::Message(diagnostic.severity), &message);
        let mut text = format!("{} {message}\n", style(Part::Place, &place));
        let (excerpt, indent, width) = self.excerpt(start, diagnostic.span.end);
        if !excerpt.trim().is_empty() {
            let marker = style(Part::Marker(diagnostic.severity), &"^".repeat(width.max(1)));
            text += &format!("    {}\n", style(Part::Excerpt, excerpt.trim_end()));
            text += &format!("    {}{marker}\n", " ".repeat(indent));
        }
        if let Some(hint) = &diagnostic.hint {
            text += &format!("{} {}\n", style(Part::HintLabel, "hint:"), style(Part::Hint, &shown(hint)));
        }
        text
    }

    /// The line around `start..end` as it is shown, and where the marker stands under it: columns before it, and its
    /// width.
    fn excerpt(&self, start: usize, end: usize) -> (String, usize, usize) {
        /// Columns of a line that are shown, and those before and under the marker.
        const ROOM: usize = 110;
        const ROOM_BEFORE: usize = 60;
        const ROOM_UNDER: usize = 40;
        let line_start = self.text[..start].rfind('\n').map_or(self.first_character(), |at| at + 1).min(start);
        let line_end = self.text[start..].find('\n').map_or(self.text.len(), |at| start + at);
        let end = self.text.floor_char_boundary(end).clamp(start, line_end);
        let (before, cut_before) = fitting(self.text[line_start..start].chars().rev(), ROOM_BEFORE);
        let (marked, cut_marked) = fitting(self.text[start..end].chars(), ROOM_UNDER);
        let columns = |pieces: &[(String, usize)]| pieces.iter().map(|(_, width)| width).sum::<usize>();
        let width = columns(&marked);
        let room_after = ROOM.saturating_sub(columns(&before) + width);
        let (after, cut_after) = fitting(self.text[end..line_end].chars(), room_after);
        let before: String = before.into_iter().rev().map(|(text, _)| text).collect();
        let before = if cut_before { format!("...{before}") } else { before };
        let mut excerpt: String = marked.into_iter().map(|(text, _)| text).collect();
        if cut_marked {
            excerpt += "...";
        } else {
            excerpt.extend(after.into_iter().map(|(text, _)| text));
            excerpt += if cut_after { "..." } else { "" };
        }
        let indent = before.chars().map(|c| c.width().unwrap_or(0)).sum();
        (before + &excerpt, indent, width)
    }
}

/// A part of a drawn diagnostic, for styling.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Part {
    /// `head.sheet line 4, column 7:`
    Place,
    /// What was found.
    Message(Severity),
    /// The line of the text.
    Excerpt,
    /// The marker under it.
    Marker(Severity),
    /// `hint:`
    HintLabel,
    /// What to change.
    Hint,
}

/// Characters as they are shown with their widths, up to `room` columns, and whether some are left over.
fn fitting(characters: impl Iterator<Item = char>, room: usize) -> (Vec<(String, usize)>, bool) {
    let mut used = 0;
    let mut fitting = Vec::new();
    for c in characters {
        let (text, width) = shown_character(c);
        used += width;
        if used > room || fitting.len() > 4 * (room + 1) {
            return (fitting, true);
        }
        fitting.push((text, width));
    }
    (fitting, false)
}

fn shown(text: &str) -> String {
    text.chars().map(|c| shown_character(c).0).collect()
}

/// A character as it is shown, and its width in columns.
fn shown_character(c: char) -> (String, usize) {
    match c {
        '\t' => ("    ".to_owned(), 4),
        '\r' => (String::new(), 0),
        _ if c.is_control() || is_invisible(c) => ("\u{fffd}".to_owned(), 1),
        _ => (c.to_string(), c.width().unwrap_or(0)),
    }
}

/// Characters that take no room on the screen, or turn its direction around.
pub(super) fn is_invisible(c: char) -> bool {
    matches!(c, '\u{ad}' | '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2060}'..='\u{206f}' | '\u{feff}')
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
            f.write_str(&self.source.draw(diagnostic))?;
        }
        Ok(())
    }
}

impl std::error::Error for SheetErrors {}
