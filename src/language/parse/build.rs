//! What pest has read, to the tree of `syntax`: operators grouped by precedence, numbers made exact, names checked
//! against the reserved words.
//!
//! Grouping uses two stacks (operands, waiting operators), so a sum of 100,000 terms needs no recursion; brackets do
//! recurse, at most `MAXIMUM_NESTING` deep. Operands are stored before what contains them.

use super::{MAXIMUM_ERRORS, Rule, whole_characters};
use crate::expression::Exact;
use crate::language::diagnostic::Diagnostic;
use crate::language::suggest::{canonical_name, is_reserved};
use crate::language::syntax::*;
use pest::iterators::{Pair, Pairs};

/// Largest exponent of a unit.
const MAXIMUM_UNIT_EXPONENT: i32 = 99;

/// Builds the tree of one statement or value that starts at byte `offset` of the sheet.
pub(super) struct Builder<'a> {
    pub sheet: &'a mut Sheet,
    pub diagnostics: &'a mut Vec<Diagnostic>,
    pub offset: usize,
    /// The sheet as it was written.
    pub source: &'a str,
}

/// An operand with the text it takes up, brackets included: `(a + b)`.
#[derive(Clone, Copy)]
struct Operand {
    id: SyntaxId,
    outer: Span,
}

/// An operator that waits for its right operand.
#[derive(Clone, Copy)]
enum Waiting {
    Negate(Span),
    Not(Span),
    Binary(Operator, Span),
    Compare(Comparison),
}

impl Waiting {
    /// A higher one is tighter.
    fn precedence(self) -> u8 {
        match self {
            Waiting::Binary(Operator::Or, _) => 1,
            Waiting::Binary(Operator::And, _) => 2,
            Waiting::Not(_) => 3,
            Waiting::Compare(_) => 4,
            Waiting::Binary(Operator::Add | Operator::Subtract, _) => 5,
            Waiting::Binary(Operator::Multiply | Operator::Divide, _) => 6,
            Waiting::Negate(_) => 7,
            Waiting::Binary(Operator::Power, _) => 8,
        }
    }

    /// Whether `self`, on the stack, takes its operands before the operator `next` does. Powers group to the right;
    /// comparisons of one chain stay together until its end.
    fn goes_before(self, next: Waiting) -> bool {
        let to_the_right = matches!(next, Waiting::Binary(Operator::Power, _) | Waiting::Compare(_));
        self.precedence() > next.precedence() || (self.precedence() == next.precedence() && !to_the_right)
    }
}

impl Builder<'_> {
    /// The content of rule `statement`.
    pub fn statement(&mut self, pair: Pair<'_, Rule>) -> Option<Statement> {
        let pair = pair.into_inner().next()?;
        let span = self.span(&pair);
        match pair.as_rule() {
            Rule::assumption => {
                let condition = pair.into_inner().find(|inner| inner.as_rule() == Rule::expression)?;
                Some(Statement::Assume { condition: self.expression(condition)?.id, span })
            }
            Rule::definition => self.definition(pair.into_inner(), span).map(Statement::Definition),
            _ => None,
        }
    }

    /// The content of rule `value`.
    pub fn value(&mut self, pair: Pair<'_, Rule>) -> Option<SyntaxId> {
        let expression = pair.into_inner().find(|inner| inner.as_rule() == Rule::expression)?;
        Some(self.expression(expression)?.id)
    }

    fn definition(&mut self, parts: Pairs<'_, Rule>, span: Span) -> Option<DefinitionSyntax> {
        let (mut name, mut arguments, mut value) = (None, None, None);
        let (mut region, mut trim, mut range, mut shown_as) = (None, None, None, None);
        for part in parts {
            let word_span = part.clone().into_inner().next().map(|word| self.span(&word));
            let clause = match part.as_rule() {
                Rule::name => {
                    name = Some(self.new_name(&part, "defined"));
                    continue;
                }
                Rule::arguments => {
                    arguments = Some(part.into_inner().map(|pair| self.new_name(&pair, "an argument")).collect());
                    continue;
                }
                Rule::expression => {
                    value = Some(self.expression(part)?.id);
                    continue;
                }
                Rule::range_clause => ("in", range.replace(self.interval(last(part)?)?).is_some()),
                Rule::region_clause => ("on", region.replace(self.region(part)?).is_some()),
                Rule::trim_clause => ("where", trim.replace(self.expression(last(part)?)?.id).is_some()),
                Rule::unit_clause => ("as", shown_as.replace(self.unit(last(part)?)?).is_some()),
                _ => continue,
            };
            if let (word, true) = clause {
                let hint = if word == "where" { "join the conditions with `and`" } else { "keep one of them" };
                let message = format!("a second `{word}` in one definition");
                self.diagnostics
                    .push(Diagnostic::error("repeated-clause", word_span.unwrap_or(span), message).with_hint(hint));
            }
        }
        Some(DefinitionSyntax { name: name?, arguments, value: value?, region, trim, range, shown_as, span })
    }

    fn region(&mut self, clause: Pair<'_, Rule>) -> Option<Vec<IntervalSyntax>> {
        let ranges = clause.into_inner().filter(|pair| pair.as_rule() == Rule::variable_range);
        ranges
            .map(|pair| {
                let mut parts = pair.into_inner();
                let variable = self.new_name(&parts.next()?, "a variable");
                Some(IntervalSyntax { variable, range: self.interval(parts.last()?)? })
            })
            .collect()
    }

    fn interval(&mut self, pair: Pair<'_, Rule>) -> Option<RangeSyntax> {
        let span = self.span(&pair);
        let mut parts = pair.into_inner();
        let lower_closed = parts.next()?.as_str() == "[";
        let lower = self.expression(parts.next()?)?.id;
        let upper = self.expression(parts.next()?)?.id;
        let upper_closed = parts.next()?.as_str() == "]";
        Some(RangeSyntax { lower, upper, lower_closed, upper_closed, span })
    }

    /// Groups `prefix* operand component* (infix prefix* operand component*)*` by precedence.
    fn expression(&mut self, pair: Pair<'_, Rule>) -> Option<Operand> {
        let mut operands: Vec<Operand> = Vec::new();
        let mut waiting: Vec<Waiting> = Vec::new();
        for part in pair.into_inner() {
            let span = self.span(&part);
            match part.as_rule() {
                Rule::prefix => {
                    let negates = part.as_str() == "-";
                    waiting.push(if negates { Waiting::Negate(span) } else { Waiting::Not(span) });
                }
                Rule::infix => {
                    let next = infix(part.as_str(), span)?;
                    while waiting.last().is_some_and(|top| top.goes_before(next)) {
                        self.reduce(&mut operands, &mut waiting)?;
                    }
                    waiting.push(next);
                }
                Rule::component => {
                    let base = operands.pop()?;
                    let field = Name {
                        text: canonical_name(&part.as_str()[1..]),
                        span: Span { start: span.start + 1, end: span.end },
                    };
                    let outer = Span { start: base.outer.start, end: span.end };
                    operands.push(self.add(outer, SyntaxKind::Component { base: base.id, field }));
                }
                _ => operands.push(self.operand(part)?),
            }
        }
        while !waiting.is_empty() {
            self.reduce(&mut operands, &mut waiting)?;
        }
        operands.pop()
    }

    /// Gives the topmost operator its operands; a chain of comparisons all of them at once.
    fn reduce(&mut self, operands: &mut Vec<Operand>, waiting: &mut Vec<Waiting>) -> Option<()> {
        let right = operands.pop()?;
        let made = match waiting.pop()? {
            Waiting::Negate(sign) => {
                self.add(Span { start: sign.start, end: right.outer.end }, SyntaxKind::Negate(right.id))
            }
            Waiting::Not(word) => self.add(Span { start: word.start, end: right.outer.end }, SyntaxKind::Not(right.id)),
            Waiting::Binary(operator, operator_span) => {
                let left = operands.pop()?;
                let kind = SyntaxKind::Binary { operator, operator_span, left: left.id, right: right.id };
                self.add(Span { start: left.outer.start, end: right.outer.end }, kind)
            }
            Waiting::Compare(comparison) => {
                let mut rest = vec![(comparison, right.id)];
                let mut first = operands.pop()?;
                while let Some(Waiting::Compare(comparison)) = waiting.last().copied() {
                    waiting.pop();
                    rest.push((comparison, first.id));
                    first = operands.pop()?;
                }
                rest.reverse();
                let outer = Span { start: first.outer.start, end: right.outer.end };
                self.add(outer, SyntaxKind::Compare { first: first.id, rest })
            }
        };
        operands.push(made);
        Some(())
    }

    fn operand(&mut self, pair: Pair<'_, Rule>) -> Option<Operand> {
        let span = self.span(&pair);
        match pair.as_rule() {
            Rule::number => self.number(pair),
            Rule::named => self.named(pair),
            Rule::group => {
                let mut parts = self.expressions(pair)?;
                match parts.as_slice() {
                    [only] => Some(Operand { id: only.id, outer: span }),
                    _ => {
                        let components = parts.drain(..).map(|part| part.id).collect();
                        Some(self.add(span, SyntaxKind::Vector(components)))
                    }
                }
            }
            Rule::sum => {
                let index = pair.clone().into_inner().find(|inner| inner.as_rule() == Rule::name)?;
                let index = self.new_name(&index, "an index");
                let parts = self.expressions(pair)?;
                let [from, to, term] = parts.as_slice() else { return None };
                Some(self.add(span, SyntaxKind::Sum { index, from: from.id, to: to.id, term: term.id }))
            }
            _ => None,
        }
    }

    /// A name, or a call if arguments follow it.
    fn named(&mut self, pair: Pair<'_, Rule>) -> Option<Operand> {
        let span = self.span(&pair);
        let name = self.name(&pair.clone().into_inner().next()?);
        let arguments: Vec<SyntaxId> = self.expressions(pair)?.iter().map(|part| part.id).collect();
        if arguments.is_empty() {
            if let Some(form) = needs_arguments(&name.text) {
                let message = format!("`{}` stands without its arguments", name.text);
                let error = Diagnostic::error("missing-arguments", name.span, message);
                self.report(error.with_hint(format!("write `{form}`")));
            }
            return Some(self.add(name.span, SyntaxKind::Name(name.text)));
        }
        if matches!(name.text.as_str(), "pi" | "inf") {
            let message = format!("`{}` is a number, not a function", name.text);
            let hint = format!("a product needs its sign: `{}*(...)`", name.text);
            self.report(Diagnostic::error("implicit-product", name.span, message).with_hint(hint));
        }
        Some(self.add(span, SyntaxKind::Call { callee: name, arguments }))
    }

    fn expressions(&mut self, pair: Pair<'_, Rule>) -> Option<Vec<Operand>> {
        let inner = pair.into_inner().filter(|inner| inner.as_rule() == Rule::expression);
        inner.map(|expression| self.expression(expression)).collect()
    }

    fn number(&mut self, pair: Pair<'_, Rule>) -> Option<Operand> {
        let mut parts = pair.into_inner();
        let decimal = parts.next()?;
        // The pair itself may reach over a comment up to where no unit was found.
        let mut span = self.span(&decimal);
        let unit = match parts.next() {
            Some(unit) => {
                span.end = self.span(&unit).end;
                Some(self.unit(unit)?)
            }
            None => None,
        };
        let Some(value) = Exact::parse_decimal(decimal.as_str()) else {
            let place = self.span(&decimal);
            self.report(
                Diagnostic::error("number-out-of-range", place, "this number is too large, too small or too long")
                    .with_hint("write a number between 1e-1000 and 1e1000, with fewer digits"),
            );
            return None;
        };
        Some(self.add(span, SyntaxKind::Number { value, unit }))
    }

    fn unit(&mut self, pair: Pair<'_, Rule>) -> Option<UnitSyntax> {
        let span = self.span(&pair);
        let mut factors = Vec::new();
        let mut sign = 1;
        for part in pair.into_inner() {
            match part.as_rule() {
                Rule::unit_operator => sign = if part.as_str() == "/" { -1 } else { 1 },
                Rule::unit_power => factors.push(self.unit_power(part, sign)?),
                Rule::unit_group => {
                    let mut inner_sign = sign;
                    for inner in part.into_inner() {
                        match inner.as_rule() {
                            Rule::unit_operator => inner_sign = if inner.as_str() == "/" { -sign } else { sign },
                            _ => factors.push(self.unit_power(inner, inner_sign)?),
                        }
                    }
                }
                _ => {}
            }
        }
        Some(UnitSyntax { factors, span })
    }

    fn unit_power(&mut self, pair: Pair<'_, Rule>, sign: i32) -> Option<(Name, (i32, i32))> {
        let span = self.span(&pair);
        let mut parts = pair.into_inner();
        let name = parts.next()?;
        let name = Name { text: canonical_name(name.as_str()), span: self.span(&name) };
        let mut integer = || match parts.next() {
            Some(part) => part.as_str().parse().ok().filter(|n: &i32| n.abs() <= MAXIMUM_UNIT_EXPONENT),
            None => Some(1),
        };
        match (integer(), integer()) {
            (Some(numerator), Some(denominator)) if denominator > 0 => Some((name, (sign * numerator, denominator))),
            _ => {
                let message = format!("the exponent of `{}` cannot be used", name.text);
                let hint = format!("exponents of units are whole numbers or fractions up to {MAXIMUM_UNIT_EXPONENT}");
                self.report(Diagnostic::error("unit-exponent", span, message).with_hint(hint));
                None
            }
        }
    }

    /// A name that the sheet gives to something; reserved words are refused.
    fn new_name(&mut self, pair: &Pair<'_, Rule>, role: &str) -> Name {
        let name = self.name(pair);
        if is_reserved(&name.text) {
            let message = format!("`{}` has a meaning in every sheet and cannot be {role}", name.text);
            let hint = format!("choose another name, such as `{}_1`", name.text);
            self.report(Diagnostic::error("reserved-name", name.span, message).with_hint(hint));
        }
        name
    }

    /// A statement of 100,000 errors is as well served by the first hundred.
    fn report(&mut self, diagnostic: Diagnostic) {
        if self.diagnostics.len() < MAXIMUM_ERRORS {
            self.diagnostics.push(diagnostic);
        }
    }

    fn name(&self, pair: &Pair<'_, Rule>) -> Name {
        Name { text: canonical_name(pair.as_str()), span: self.span(pair) }
    }

    fn span(&self, pair: &Pair<'_, Rule>) -> Span {
        let span = pair.as_span();
        let end = span.start() + pair.as_str().trim_end().len();
        whole_characters(self.source, Span { start: self.offset + span.start(), end: self.offset + end })
    }

    fn add(&mut self, span: Span, kind: SyntaxKind) -> Operand {
        let id = SyntaxId(self.sheet.expressions.len() as u32);
        self.sheet.expressions.push(Syntax { span, kind });
        Operand { id, outer: span }
    }
}

fn last(pair: Pair<'_, Rule>) -> Option<Pair<'_, Rule>> {
    pair.into_inner().last()
}

fn infix(text: &str, span: Span) -> Option<Waiting> {
    Some(match text {
        "+" => Waiting::Binary(Operator::Add, span),
        "-" => Waiting::Binary(Operator::Subtract, span),
        "*" => Waiting::Binary(Operator::Multiply, span),
        "/" => Waiting::Binary(Operator::Divide, span),
        "^" => Waiting::Binary(Operator::Power, span),
        "and" => Waiting::Binary(Operator::And, span),
        "or" => Waiting::Binary(Operator::Or, span),
        "<" => Waiting::Compare(Comparison::Less),
        "<=" => Waiting::Compare(Comparison::LessEqual),
        ">" => Waiting::Compare(Comparison::Greater),
        ">=" => Waiting::Compare(Comparison::GreaterEqual),
        _ => return None,
    })
}

/// How to write a word that means nothing without its arguments.
fn needs_arguments(name: &str) -> Option<&'static str> {
    match name {
        "if" => Some("if(condition, a, b)"),
        "sum" => Some("sum(i in 1..8, term)"),
        _ => None,
    }
}
