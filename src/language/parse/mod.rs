//! Text of a sheet to its syntax tree, with every error of the text.
//!
//! 1. `spelling` reports characters that a sheet does not use (`**`, `×`, `²`, `;`) and, where it can, puts what was
//!    meant in their place, so that the rest of the statement is read too.
//! 2. `statements` cuts the text into symbols and statements and refuses what nests too deep.
//! 3. pest reads each statement by the grammar; `build` turns the result into the tree, `explain` a failure into a
//!    diagnostic. An error costs one statement.

mod build;
mod context;
mod explain;
mod explain_operands;
mod spelling;
mod statements;
#[cfg(test)]
mod tests;

use super::diagnostic::{Diagnostic, Source};
use super::suggest::canonical_name;
use super::syntax::{Name, Sheet, Span, SyntaxId};
use build::Builder;
use pest::Parser;
use pest::error::InputLocation;
use statements::{MAXIMUM_NESTING, Token, TokenKind};

#[derive(pest_derive::Parser)]
#[grammar = "grammar/sheet.pest"]
struct SheetParser;

/// Longest text of a sheet.
pub const MAXIMUM_BYTES: usize = 1 << 20;

/// Most symbols (numbers, names, operators, brackets, commas) in a sheet; bounds memory to a few hundred bytes each.
const MAXIMUM_SYMBOLS: usize = 400_000;

/// Most errors reported at once.
const MAXIMUM_ERRORS: usize = 100;

/// Reads a sheet: everything that could be read, and all errors in the order of the text.
///
/// A statement with an error is left out, its name is kept in [`Sheet::unread`] so that its uses are not reported as
/// unknown. Reading resumes at the next statement.
pub fn parse(source: &Source) -> (Sheet, Vec<Diagnostic>) {
    let mut reading = match Reading::start(source) {
        Ok(reading) => reading,
        Err(diagnostic) => return (Sheet::default(), vec![diagnostic]),
    };
    for range in statements::split(&reading.text, &reading.tokens) {
        if reading.diagnostics.len() >= MAXIMUM_ERRORS {
            let span = reading.tokens[range.start].span;
            let message = format!("reading stops here after {MAXIMUM_ERRORS} errors");
            reading.diagnostics.push(Diagnostic::error("too-many-errors", span, message));
            break;
        }
        reading.statement(range);
    }
    reading.finish()
}

/// Reads one constant expression, such as the right side of `--set D=300 [mm]`. The sheet holds its expressions only.
pub fn parse_value(source: &Source) -> (Sheet, Option<SyntaxId>, Vec<Diagnostic>) {
    let mut reading = match Reading::start(source) {
        Ok(reading) => reading,
        Err(diagnostic) => return (Sheet::default(), None, vec![diagnostic]),
    };
    let value = reading.value();
    let (sheet, diagnostics) = reading.finish();
    let value = value.filter(|_| diagnostics.is_empty());
    (sheet, value, diagnostics)
}

/// A text on its way to a tree.
struct Reading<'a> {
    /// The text as it was written.
    source: &'a str,
    /// The text with wrong spellings replaced by right ones of the same length.
    text: String,
    tokens: Vec<Token>,
    /// Places of wrong spellings that could not be replaced, ascending.
    unreadable: Vec<usize>,
    sheet: Sheet,
    diagnostics: Vec<Diagnostic>,
}

impl<'a> Reading<'a> {
    fn start(source: &'a Source) -> Result<Self, Diagnostic> {
        if source.text.len() > MAXIMUM_BYTES {
            let message = format!("the sheet has {} bytes, at most {MAXIMUM_BYTES} can be read", source.text.len());
            return Err(Diagnostic::error("too-long", Span::default(), message));
        }
        let spelling::Respelled { text, unreadable, diagnostics } = spelling::respell(&source.text, MAXIMUM_ERRORS);
        let tokens = statements::tokens(&text);
        if let Some(token) = tokens.get(MAXIMUM_SYMBOLS) {
            let message = format!("the sheet has more than {MAXIMUM_SYMBOLS} numbers, names and signs");
            return Err(Diagnostic::error("too-long", token.span, message));
        }
        Ok(Self { source: &source.text, text, tokens, unreadable, sheet: Sheet::default(), diagnostics })
    }

    fn finish(mut self) -> (Sheet, Vec<Diagnostic>) {
        for diagnostic in &mut self.diagnostics {
            diagnostic.span = whole_characters(self.source, diagnostic.span);
        }
        self.diagnostics.sort_by_key(|diagnostic| diagnostic.span.start);
        (self.sheet, self.diagnostics)
    }

    fn statement(&mut self, range: std::ops::Range<usize>) {
        let statement = self.read(Rule::statement, &range, |builder, pair| builder.statement(pair));
        match statement {
            Some(statement) => self.sheet.statements.push(statement),
            None => self.sheet.unread.extend(defined_name(self.source, &self.text, &self.tokens[range])),
        }
    }

    fn value(&mut self) -> Option<SyntaxId> {
        if self.tokens.is_empty() {
            let span = Span { start: self.text.len(), end: self.text.len() };
            self.diagnostics.push(
                Diagnostic::error("missing-operand", span, "a value is missing")
                    .with_hint("a value is a number with its unit, such as `300 [mm]`"),
            );
            return None;
        }
        self.read(Rule::value, &(0..self.tokens.len()), |builder, pair| builder.value(pair))
    }

    /// Reads the tokens in `range`, which is not empty, by `rule`; `None` and a diagnostic if that fails.
    fn read<T>(
        &mut self,
        rule: Rule,
        range: &std::ops::Range<usize>,
        build: impl FnOnce(&mut Builder<'_>, pest::iterators::Pair<'_, Rule>) -> Option<T>,
    ) -> Option<T> {
        let tokens = &self.tokens[range.clone()];
        let (start, end) = (tokens[0].span.start, tokens[tokens.len() - 1].span.end);
        let first = self.unreadable.partition_point(|&place| place < start);
        if self.unreadable.get(first).is_some_and(|&place| place < end) {
            return None;
        }
        if let Some(token) = statements::too_deep(&self.text, tokens) {
            let message = format!("brackets, powers and signs are nested more than {MAXIMUM_NESTING} deep here");
            self.diagnostics.push(
                Diagnostic::error("too-deep", token.span, message).with_hint("give an inner part a name of its own"),
            );
            return None;
        }
        match SheetParser::parse(rule, &self.text[start..end]) {
            Ok(mut pairs) => {
                let mut builder = Builder {
                    sheet: &mut self.sheet,
                    diagnostics: &mut self.diagnostics,
                    offset: start,
                    source: self.source,
                };
                build(&mut builder, pairs.next()?)
            }
            Err(error) => {
                let (InputLocation::Pos(place) | InputLocation::Span((place, _))) = error.location;
                let is_value = rule == Rule::value;
                self.diagnostics.push(explain::explain(&self.text, tokens, start + place, is_value));
                None
            }
        }
    }
}

/// The name that an unreadable statement was going to define.
fn defined_name(source: &str, text: &str, tokens: &[Token]) -> Option<Name> {
    let first = tokens.first().filter(|token| token.kind == TokenKind::Name)?;
    Some(Name { text: canonical_name(first.text(text)), span: whole_characters(source, first.span) })
}

/// The span with the characters of the source that it only reaches into: `*` in place of `×` is half as long.
fn whole_characters(source: &str, span: Span) -> Span {
    Span { start: source.floor_char_boundary(span.start), end: source.ceil_char_boundary(span.end) }
}
