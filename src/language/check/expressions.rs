//! Expressions to formulas: operators, vectors, comparisons, units.
//!
//! A long sum is a deep tree on its left side; it is taken in a loop. Recursion follows brackets, whose nesting the parser
//! limits, and calls, whose nesting is limited here.

use super::super::Span;
use super::super::syntax::{Comparison, Name, Operator, SyntaxId, SyntaxKind, UnitSyntax};
use super::super::unit::{Dimension, Unit};
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, MAXIMUM_DEPTH, shown};
use crate::expression::{Exact, ExpressionId};
use crate::language::Chain;
use std::sync::Arc;

impl Checker {
    /// What an expression means.
    pub(super) fn lower(&mut self, id: SyntaxId) -> Checked<Meaning> {
        let span = self.span(id);
        self.step(1, span)?;
        if self.depth >= MAXIMUM_DEPTH {
            return Err(self.error_with_hint(
                "too-deep",
                span,
                format!("calls are nested more than {MAXIMUM_DEPTH} deep here"),
                "write the formula with fewer intermediate functions".to_owned(),
            ));
        }
        self.depth += 1;
        let meaning = self.lower_spine(id);
        self.depth -= 1;
        meaning
    }

    /// Follows the left operands of operators down, then applies the operators on the way back.
    fn lower_spine(&mut self, id: SyntaxId) -> Checked<Meaning> {
        let sheet = Arc::clone(&self.sheet);
        let mut spine = Vec::new();
        let mut current = id;
        while let SyntaxKind::Binary { operator, operator_span, left, right } = &sheet.get(current).kind {
            spine.push((*operator, *operator_span, *right));
            current = *left;
        }
        let mut left_span = self.span(current);
        let mut left = self.leaf(current);
        for (operator, operator_span, right_id) in spine.into_iter().rev() {
            // Both operands are looked at even if one is broken, so that their errors show together.
            let right = self.lower(right_id);
            let right_span = self.span(right_id);
            self.step(1, operator_span)?;
            left = match (left, right) {
                (Ok(left), Ok(right)) => self.binary(operator, operator_span, (left, left_span), (right, right_span)),
                _ => Err(super::Reported),
            };
            left_span = Span { start: left_span.start, end: right_span.end };
        }
        left
    }

    fn leaf(&mut self, id: SyntaxId) -> Checked<Meaning> {
        let sheet = Arc::clone(&self.sheet);
        let span = self.span(id);
        match &sheet.get(id).kind {
            SyntaxKind::Number { value, unit } => self.literal(value, unit.as_ref(), span).map(Meaning::Value),
            SyntaxKind::Name(name) => {
                let meaning = self.resolve(name, span)?;
                match meaning {
                    Meaning::Function(index) if self.surface.is_some() => {
                        self.call_with_surface_names(index, span).map(Meaning::Value)
                    }
                    other => Ok(other),
                }
            }
            SyntaxKind::Call { callee, arguments } => self.call(callee, arguments, span),
            SyntaxKind::Vector(components) => self.vector(components, span).map(Meaning::Value),
            SyntaxKind::Component { base, field } => self.component(*base, field).map(Meaning::Value),
            SyntaxKind::Negate(a) => self.negative(*a, span),
            SyntaxKind::Not(a) => {
                let truth = self.truth(*a)?;
                Ok(Meaning::Value(Value::truth(self.graph.not(truth))))
            }
            SyntaxKind::Compare { first, rest } => self.comparison(*first, rest).map(Meaning::Value),
            SyntaxKind::Sum { index, from, to, term } => self.sum(index, *from, *to, *term, span).map(Meaning::Value),
            SyntaxKind::Binary { .. } => unreachable!("operators are on the spine"),
        }
    }

    /// An exact number in the coherent unit.
    fn literal(&mut self, value: &Exact, unit: Option<&UnitSyntax>, span: Span) -> Checked<Value> {
        let Some(unit) = unit else {
            let dimension = if value.is_zero() { None } else { Some(Dimension::NONE) };
            return Ok(Value::number(self.graph.number(value.clone()), dimension));
        };
        let unit = Unit::resolve(unit).map_err(|diagnostic| self.report(diagnostic))?;
        let Some(scaled) = value.multiply(&unit.factor) else {
            return Err(self.error("too-large", span, "this number needs too many digits in SI units".to_owned()));
        };
        let mut formula = self.graph.number(scaled);
        if unit.pi_power != 0 {
            let pi = self.graph.pi();
            let power = self.graph.integer_power(pi, i64::from(unit.pi_power));
            formula = self.graph.multiply(formula, power);
        }
        Ok(Value::number(formula, Some(unit.dimension)))
    }

    fn vector(&mut self, components: &[SyntaxId], span: Span) -> Checked<Value> {
        if components.len() != 3 {
            return Err(self.error_with_hint(
                "wrong-length",
                span,
                format!("a vector has 3 components, this one has {}", components.len()),
                "write (a, b, c); a plane figure has 0 as its third component".to_owned(),
            ));
        }
        let values: Vec<Checked<Value>> = components.iter().map(|&component| self.number(component)).collect();
        let mut formulas = Vec::with_capacity(3);
        let mut dimension = None;
        for (value, &component) in values.into_iter().zip(components) {
            let value = value?;
            dimension = self.same_dimension(dimension, value.dimension, self.span(component), "this component")?;
            formulas.push(value.components[0]);
        }
        Ok(Value { components: formulas, dimension, kind: Kind::Vector })
    }

    fn component(&mut self, base: SyntaxId, field: &Name) -> Checked<Value> {
        let value = self.value(base)?;
        let (fields, words): (&[&[&str]], _) = match value.kind {
            Kind::Vector => (&[&["x"], &["y"], &["z"]], "`.x`, `.y`, `.z`"),
            Kind::Tensor => (
                &[&["xx"], &["yy"], &["zz"], &["xy", "yx"], &["xz", "zx"], &["yz", "zy"]],
                "`.xx`, `.yy`, `.zz`, `.xy`, `.xz`, `.yz`",
            ),
            Kind::Number | Kind::Truth => {
                return Err(self.error(
                    "wrong-kind",
                    field.span,
                    format!("{} has no component `.{}`", value.kind.words(), field.text),
                ));
            }
        };
        match fields.iter().position(|names| names.contains(&field.text.as_str())) {
            Some(index) => Ok(Value::number(value.components[index], value.dimension)),
            None => Err(self.error_with_hint(
                "unknown-name",
                field.span,
                format!("{} has no component `.{}`", value.kind.words(), field.text),
                format!("it has {words}"),
            )),
        }
    }

    fn negative(&mut self, operand: SyntaxId, span: Span) -> Checked<Meaning> {
        match self.lower(operand)? {
            Meaning::Value(value) if value.kind != Kind::Truth => {
                let components = value.components.iter().map(|&c| self.graph.negate(c)).collect();
                Ok(Meaning::Value(Value { components, ..value }))
            }
            Meaning::Patch(patch) => Ok(Meaning::Chain(Chain { terms: vec![(-1, patch)] })),
            Meaning::Chain(chain) => Ok(Meaning::Chain(self.scaled(&chain, -1, span)?)),
            other => Err(self.error("wrong-kind", span, format!("{} has no negative", other.words()))),
        }
    }

    fn comparison(&mut self, first: SyntaxId, rest: &[(Comparison, SyntaxId)]) -> Checked<Value> {
        let mut left = self.number(first)?;
        let mut all = self.graph.truth(true);
        for &(comparison, right_id) in rest {
            let right = self.number(right_id)?;
            self.same_dimension(left.dimension, right.dimension, self.span(right_id), "this side")?;
            let (a, b) = (left.components[0], right.components[0]);
            let holds = match comparison {
                Comparison::Less => self.graph.less(a, b),
                Comparison::LessEqual => self.graph.less_equal(a, b),
                Comparison::Greater => self.graph.less(b, a),
                Comparison::GreaterEqual => self.graph.less_equal(b, a),
            };
            all = self.graph.and(all, holds);
            left = right;
        }
        Ok(Value::truth(all))
    }

    fn sum(&mut self, index: &Name, from: SyntaxId, to: SyntaxId, term: SyntaxId, span: Span) -> Checked<Value> {
        let first = self.whole_number(from)?;
        let last = self.whole_number(to)?;
        if last.saturating_sub(first) >= 10_000 {
            return Err(self.error(
                "too-large",
                span,
                format!("a sum has at most 10000 terms, this one has {}", last - first + 1),
            ));
        }
        let mut total: Option<Value> = None;
        for i in first..=last {
            let value = Value::number(self.graph.integer(i), if i == 0 { None } else { Some(Dimension::NONE) });
            self.locals.push((index.text.clone(), value));
            let lowered = self.value(term);
            self.locals.pop();
            let lowered = lowered?;
            total = Some(match total {
                None => lowered,
                Some(so_far) => match self.binary(
                    Operator::Add,
                    self.span(term),
                    (Meaning::Value(so_far), self.span(term)),
                    (Meaning::Value(lowered), self.span(term)),
                )? {
                    Meaning::Value(value) => value,
                    _ => return Err(super::Reported),
                },
            });
        }
        Ok(total.unwrap_or_else(|| Value::number(self.graph.integer(0), None)))
    }

    /// A constant integer.
    pub(super) fn whole_number(&mut self, id: SyntaxId) -> Checked<i64> {
        let value = self.number(id)?;
        let exact = self.graph.as_number(value.components[0]).and_then(Exact::to_i64);
        match exact {
            Some(number) if number.abs() < 1 << 40 => Ok(number),
            _ => {
                let span = self.span(id);
                Err(self.error("wrong-kind", span, "a whole number known in advance is due here".to_owned()))
            }
        }
    }

    /// An operator between two meanings.
    fn binary(
        &mut self,
        operator: Operator,
        operator_span: Span,
        (left, left_span): (Meaning, Span),
        (right, right_span): (Meaning, Span),
    ) -> Checked<Meaning> {
        match (left, right) {
            (Meaning::Value(a), Meaning::Value(b)) => {
                self.binary_values(operator, operator_span, (a, left_span), (b, right_span)).map(Meaning::Value)
            }
            (Meaning::Function(_), _) | (_, Meaning::Function(_)) => Err(self.error_with_hint(
                "wrong-kind",
                operator_span,
                "a function without its arguments is not a value".to_owned(),
                "write its arguments in parentheses".to_owned(),
            )),
            (left, right) => self.binary_chains(operator, operator_span, left, right).map(Meaning::Chain),
        }
    }

    fn binary_values(
        &mut self,
        operator: Operator,
        operator_span: Span,
        (a, left_span): (Value, Span),
        (b, right_span): (Value, Span),
    ) -> Checked<Value> {
        use Kind::{Number, Tensor, Truth, Vector};
        use Operator::{Add, And, Divide, Multiply, Or, Power, Subtract};
        let both = Span { start: left_span.start, end: right_span.end };
        match (operator, a.kind, b.kind) {
            (And | Or, Truth, Truth) => {
                let (x, y) = (a.components[0], b.components[0]);
                Ok(Value::truth(if operator == And { self.graph.and(x, y) } else { self.graph.or(x, y) }))
            }
            (And | Or, Truth, other) => Err(self.wrong_kind(right_span, other.words(), Truth)),
            (And | Or, other, _) => Err(self.wrong_kind(left_span, other.words(), Truth)),
            (_, Truth, _) => Err(self.wrong_kind(left_span, Truth.words(), Number)),
            (_, _, Truth) => Err(self.wrong_kind(right_span, Truth.words(), Number)),
            (Add | Subtract, left, right) if left == right => {
                let dimension = self.same_dimension_of_sum(&a, &b, operator_span, (left_span, right_span))?;
                let components = self.zip(
                    &a,
                    &b,
                    |graph, x, y| {
                        if operator == Add { graph.add(x, y) } else { graph.subtract(x, y) }
                    },
                );
                Ok(Value { components, dimension, kind: left })
            }
            (Add | Subtract, left, right) => Err(self.error(
                "wrong-kind",
                operator_span,
                format!("{} and {} cannot be added or subtracted", left.words(), right.words()),
            )),
            (Multiply, Number, _) | (Multiply, _, Number) => {
                let dimension = self.product_dimension(&a, &b, both)?;
                let (factor, other) = if a.kind == Number { (&a, &b) } else { (&b, &a) };
                let scalar = factor.components[0];
                let first = a.kind == Number;
                let components = other
                    .components
                    .iter()
                    .map(|&c| if first { self.graph.multiply(scalar, c) } else { self.graph.multiply(c, scalar) })
                    .collect();
                Ok(Value { components, dimension, kind: other.kind })
            }
            (Multiply, Vector, Vector) => Err(self.error_with_hint(
                "wrong-kind",
                operator_span,
                "`*` between two vectors is ambiguous".to_owned(),
                "write `dot(a, b)` or `cross(a, b)`".to_owned(),
            )),
            (Divide, _, Number) => {
                let inverse = match b.dimension {
                    Some(dimension) => Some(Dimension::NONE.divide(dimension)).flatten(),
                    None => Some(Dimension::NONE),
                };
                let Some(inverse) = inverse else { return Err(self.unit_overflow(both)) };
                let dimension = match a.dimension {
                    Some(dimension) => {
                        Some(dimension.multiply(inverse).ok_or(()).map_err(|()| self.unit_overflow(both))?)
                    }
                    None => None,
                };
                let divisor = b.components[0];
                if self.graph.as_number(divisor).is_some_and(Exact::is_zero) {
                    return Err(self.error("division-by-zero", right_span, "this divisor is zero".to_owned()));
                }
                let components = a.components.iter().map(|&c| self.graph.divide(c, divisor)).collect();
                Ok(Value { components, dimension, kind: a.kind })
            }
            (Power, Number, Number) => self.power(&a, &b, left_span, right_span),
            (Multiply | Divide | Power, left, right) => {
                let (span, kind) =
                    if matches!(right, Vector | Tensor) { (right_span, right) } else { (left_span, left) };
                Err(self.wrong_kind(span, kind.words(), Number))
            }
        }
    }

    fn power(&mut self, base: &Value, exponent: &Value, base_span: Span, exponent_span: Span) -> Checked<Value> {
        if exponent.dimension.is_some_and(|dimension| !dimension.is_none()) {
            return Err(self.error(
                "unit-clash",
                exponent_span,
                format!(
                    "an exponent is a plain number, this one is in {}",
                    shown(exponent.dimension.unwrap_or_default())
                ),
            ));
        }
        let literal = self.graph.as_number(exponent.components[0]).cloned();
        let negative_base = self.graph.as_number(base.components[0]).is_some_and(Exact::is_negative);
        if negative_base && literal.as_ref().is_some_and(|number| !number.is_integer()) {
            return Err(self.error_with_hint(
                "undefined-power",
                base_span,
                "a negative number has no real power with this exponent".to_owned(),
                "the real cube root is `cbrt(x)`".to_owned(),
            ));
        }
        let dimension = match base.dimension {
            Some(dimension) if !dimension.is_none() => {
                let Some((numerator, denominator)) = literal.as_ref().and_then(Exact::to_fraction) else {
                    return Err(self.error_with_hint(
                        "unit-clash",
                        exponent_span,
                        format!("a base in {} needs an exponent known in advance", shown(dimension)),
                        "divide the base by a reference value first".to_owned(),
                    ));
                };
                let powered = dimension.power(numerator, denominator);
                Some(powered.ok_or(()).map_err(|()| self.unit_overflow(base_span))?)
            }
            Some(plain) => Some(plain),
            None if literal.as_ref().is_some_and(Exact::is_zero) => Some(Dimension::NONE),
            None => None,
        };
        let formula = self.graph.power(base.components[0], exponent.components[0]);
        Ok(Value::number(formula, dimension))
    }

    fn zip(
        &mut self,
        a: &Value,
        b: &Value,
        mut f: impl FnMut(&mut crate::expression::Graph, ExpressionId, ExpressionId) -> ExpressionId,
    ) -> Vec<ExpressionId> {
        a.components.iter().zip(&b.components).map(|(&x, &y)| f(&mut self.graph, x, y)).collect()
    }

    pub(super) fn product_dimension(&mut self, a: &Value, b: &Value, span: Span) -> Checked<Option<Dimension>> {
        match (a.dimension, b.dimension) {
            (Some(x), Some(y)) => match x.multiply(y) {
                Some(product) => Ok(Some(product)),
                None => Err(self.unit_overflow(span)),
            },
            _ => Ok(None),
        }
    }

    pub(super) fn unit_overflow(&mut self, span: Span) -> super::Reported {
        self.error("unit-clash", span, "this unit has an exponent that is not handled".to_owned())
    }

    fn same_dimension_of_sum(
        &mut self,
        a: &Value,
        b: &Value,
        operator_span: Span,
        (left_span, right_span): (Span, Span),
    ) -> Checked<Option<Dimension>> {
        match (a.dimension, b.dimension) {
            (Some(x), Some(y)) if x != y => {
                let name = |span: Span| self.text(span).split_whitespace().collect::<Vec<_>>().join(" ");
                let (left, right) = (cut(&name(left_span)), cut(&name(right_span)));
                Err(self.error_with_hint(
                    "unit-clash",
                    operator_span,
                    format!("{} and {} cannot be added or subtracted", shown(x), shown(y)),
                    format!("`{left}` is in {}, `{right}` in {}", shown(x), shown(y)),
                ))
            }
            (x, y) => Ok(x.or(y)),
        }
    }

    /// The common dimension of two values; zero fits any.
    pub(super) fn same_dimension(
        &mut self,
        first: Option<Dimension>,
        second: Option<Dimension>,
        span: Span,
        what: &str,
    ) -> Checked<Option<Dimension>> {
        match (first, second) {
            (Some(x), Some(y)) if x != y => Err(self.error(
                "unit-clash",
                span,
                format!("{what} is in {}, what it goes with is in {}", shown(y), shown(x)),
            )),
            (x, y) => Ok(x.or(y)),
        }
    }

    /// An expression that must be a value of any kind.
    pub(super) fn value(&mut self, id: SyntaxId) -> Checked<Value> {
        match self.lower(id)? {
            Meaning::Value(value) => Ok(value),
            other => {
                let span = self.span(id);
                Err(self.wrong_kind(span, other.words(), Kind::Number))
            }
        }
    }

    /// An expression that must be a number.
    pub(super) fn number(&mut self, id: SyntaxId) -> Checked<Value> {
        self.of_kind(id, Kind::Number)
    }

    /// An expression that must be a condition.
    pub(super) fn truth(&mut self, id: SyntaxId) -> Checked<ExpressionId> {
        Ok(self.of_kind(id, Kind::Truth)?.components[0])
    }

    pub(super) fn of_kind(&mut self, id: SyntaxId, kind: Kind) -> Checked<Value> {
        let span = self.span(id);
        match self.lower(id)? {
            Meaning::Value(value) if value.kind == kind => Ok(value),
            other => Err(self.wrong_kind(span, other.words(), kind)),
        }
    }

    /// A number without a unit.
    pub(super) fn plain_number(&mut self, id: SyntaxId, what: &str) -> Checked<Value> {
        let value = self.number(id)?;
        match value.dimension {
            Some(dimension) if !dimension.is_none() => {
                let span = self.span(id);
                Err(self.error_with_hint(
                    "unit-clash",
                    span,
                    format!("{what} needs a plain number, this is in {}", shown(dimension)),
                    "divide by a reference value of the same unit".to_owned(),
                ))
            }
            _ => Ok(value),
        }
    }
}

/// A short form of a text for a message.
pub(super) fn cut(text: &str) -> String {
    if text.chars().count() <= 40 {
        return text.to_owned();
    }
    let head: String = text.chars().take(37).collect();
    format!("{head}...")
}
