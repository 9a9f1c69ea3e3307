//! Parameter values: the sheet's own or those of `--set`, checked against ranges, claims and assumptions.

use super::check::constant;
use super::diagnostic::{Diagnostic, SheetErrors, Source};
use super::model::{Bound, Interval, Model, NamedValue, Parameter, PatchId};
use super::parse::parse_value;
use super::suggest::nearest;
use super::syntax::Span;
use super::unit::{Dimension, Unit};
use crate::expression::{ExpressionId, SymbolId, evaluate};
use rustc_hash::FxHashMap;

/// Values of symbols, in coherent SI units.
#[derive(Clone, PartialEq, Debug)]
pub struct Bindings {
    values: Vec<f64>,
}

impl Bindings {
    /// The value of a symbol; NaN if it has none.
    pub fn value(&self, symbol: SymbolId) -> f64 {
        self.values.get(symbol.index()).copied().unwrap_or(f64::NAN)
    }

    /// Gives a symbol a value.
    pub fn set(&mut self, symbol: SymbolId, value: f64) {
        if self.values.len() <= symbol.index() {
            self.values.resize(symbol.index() + 1, f64::NAN);
        }
        self.values[symbol.index()] = value;
    }
}

impl Model {
    /// The patch defined under `name`.
    pub fn patch_named(&self, name: &str) -> Option<PatchId> {
        self.patches.iter().position(|patch| patch.named && patch.name == name).map(PatchId)
    }

    /// The number, vector or tensor defined under `name`.
    pub fn value_named(&self, name: &str) -> Option<&NamedValue> {
        self.values.iter().find(|value| value.name == name)
    }

    /// Values of all parameters: those of the sheet, replaced by `settings` (name, text such as `300 [mm]`; a plain number
    /// is in the parameter's own unit).
    ///
    /// # Errors
    /// For a name that is no parameter, text that is no number, a value outside its range, a claim or an assumption that
    /// is false, and limits that cross for these values.
    pub fn bind(&self, settings: &[(String, String)]) -> Result<Bindings, SheetErrors> {
        let mut bindings = Bindings { values: vec![f64::NAN; self.graph.symbol_count()] };
        let defaults: Vec<ExpressionId> = self.parameters.iter().map(|parameter| parameter.default).collect();
        let defaults = evaluate(&self.graph, &defaults, |_| f64::NAN);
        for (parameter, value) in self.parameters.iter().zip(defaults) {
            bindings.set(parameter.symbol, value);
        }
        for (name, text) in settings {
            let (parameter, value) = self.setting(name, text)?;
            bindings.set(parameter.symbol, value);
        }
        let known = self.checked_values(&bindings);
        let mut diagnostics = Vec::new();
        for parameter in &self.parameters {
            let value = bindings.value(parameter.symbol);
            if !value.is_finite() {
                diagnostics.push(Diagnostic::error(
                    "out-of-range",
                    parameter.span,
                    format!("`{}` is not a finite number", parameter.name),
                ));
            } else if let Some(range) = &parameter.range {
                let shown = in_unit(value, parameter.unit.as_ref());
                diagnostics.extend(self.outside(&parameter.name, value, &shown, range, parameter.span, &known));
            }
        }
        for claim in &self.claims {
            let value = known[&claim.value];
            let named = self.value_named(&claim.name);
            let shown = match named.and_then(|named| named.shown_as.as_ref()) {
                Some(unit) => in_unit(value, Some(unit)),
                None => match named.map_or(Dimension::NONE, |named| named.dimension) {
                    Dimension::NONE => format!("{value}"),
                    dimension => format!("{value} {dimension}"),
                },
            };
            diagnostics.extend(self.outside(&claim.name, value, &shown, &claim.range, claim.range.span, &known));
        }
        for assumption in &self.assumptions {
            if known[&assumption.condition] != 1.0 {
                diagnostics.push(
                    Diagnostic::error(
                        "assumption-false",
                        assumption.span,
                        "this assumption is false for the values given".to_owned(),
                    )
                    .with_hint("change the values, or the assumption"),
                );
            }
        }
        for patch in &self.patches {
            for interval in &patch.intervals {
                if let Some(diagnostic) = crossed(interval, &known)
                    && !diagnostics.contains(&diagnostic)
                {
                    diagnostics.push(diagnostic);
                }
            }
        }
        if diagnostics.is_empty() {
            Ok(bindings)
        } else {
            Err(SheetErrors { source: self.source.clone(), diagnostics })
        }
    }

    /// Values of all formulas that are looked at before anything is integrated, in one pass over the graph.
    fn checked_values(&self, bindings: &Bindings) -> FxHashMap<ExpressionId, f64> {
        let ranges = self.parameters.iter().filter_map(|parameter| parameter.range.as_ref());
        let intervals = self.patches.iter().flat_map(|patch| &patch.intervals);
        let ends = ranges.chain(self.claims.iter().map(|claim| &claim.range)).chain(intervals);
        let mut formulas: Vec<ExpressionId> = ends
            .flat_map(|interval| [interval.lower, interval.upper])
            .filter_map(|bound| match bound {
                Bound::Finite(formula) => Some(formula),
                Bound::MinusInfinity | Bound::PlusInfinity => None,
            })
            .collect();
        formulas.extend(self.claims.iter().map(|claim| claim.value));
        formulas.extend(self.assumptions.iter().map(|assumption| assumption.condition));
        let values = evaluate(&self.graph, &formulas, |symbol| bindings.value(symbol));
        formulas.into_iter().zip(values).collect()
    }

    /// One `--set name=text`.
    fn setting(&self, name: &str, text: &str) -> Result<(&Parameter, f64), SheetErrors> {
        let whole = format!("{name}={text}");
        let name_span = Span { start: 0, end: name.len() };
        let fail =
            |diagnostics: Vec<Diagnostic>| SheetErrors { source: Source::new("--set", whole.clone()), diagnostics };
        let Some(parameter) = self.parameters.iter().find(|parameter| parameter.name == name) else {
            return Err(fail(vec![self.not_a_parameter(name, name_span)]));
        };
        let shift = |mut diagnostic: Diagnostic| {
            diagnostic.span.start += name.len() + 1;
            diagnostic.span.end += name.len() + 1;
            diagnostic
        };
        let source = Source::new("--set", text);
        let (sheet, root, diagnostics) = parse_value(&source);
        let Some(root) = root.filter(|_| diagnostics.is_empty()) else {
            return Err(fail(diagnostics.into_iter().map(shift).collect()));
        };
        let (value, dimension, unit_written) =
            constant(sheet, &source, root).map_err(|found| fail(found.into_iter().map(shift).collect()))?;
        let value_span = Span { start: name.len() + 1, end: whole.len() };
        let given = dimension.unwrap_or(parameter.dimension);
        if !unit_written && given == Dimension::NONE || dimension.is_none() {
            let scaled = parameter.unit.as_ref().map_or(value, |unit| unit.to_si(value));
            return Ok((parameter, scaled));
        }
        if given != parameter.dimension {
            let message = format!("`{name}` is in {}, this value in {given}", parameter.dimension);
            return Err(fail(vec![Diagnostic::error("unit-clash", value_span, message)]));
        }
        Ok((parameter, value))
    }

    fn not_a_parameter(&self, name: &str, span: Span) -> Diagnostic {
        if let Some(value) = self.value_named(name) {
            let behind: Vec<&str> = self
                .graph
                .symbols_of(&value.components)
                .into_iter()
                .filter_map(|symbol| self.parameters.iter().find(|parameter| parameter.symbol == symbol))
                .map(|parameter| parameter.name.as_str())
                .collect();
            let error = Diagnostic::error("not-a-parameter", span, format!("`{name}` is derived, so it cannot be set"));
            return match behind.first() {
                Some(first) => error.with_hint(format!("`{name}` depends on `{}`: set `{first}`", behind.join("`, `"))),
                None => error,
            };
        }
        let error = Diagnostic::error("unknown-name", span, format!("the sheet has no parameter `{name}`"));
        let mut names: Vec<&str> = self.parameters.iter().map(|parameter| parameter.name.as_str()).collect();
        names.sort_unstable();
        match nearest(name, names.iter().copied()) {
            Some(near) => error.with_hint(format!("did you mean `{near}`?")),
            None if names.is_empty() => error.with_hint("this sheet has no parameters"),
            None => error.with_hint(format!("its parameters are `{}`", names.join("`, `"))),
        }
    }

    /// An error if a value is outside its range.
    fn outside(
        &self,
        name: &str,
        value: f64,
        shown: &str,
        range: &Interval,
        span: Span,
        known: &FxHashMap<ExpressionId, f64>,
    ) -> Option<Diagnostic> {
        let (lower, upper) = (bound_value(range.lower, known), bound_value(range.upper, known));
        let above = if range.lower_closed { value >= lower } else { value > lower };
        let below = if range.upper_closed { value <= upper } else { value < upper };
        if above && below {
            return None;
        }
        let text = self.source.text.get(range.span.start..range.span.end).unwrap_or("its range");
        Some(
            Diagnostic::error("out-of-range", span, format!("`{name}` is {shown}, outside {text}"))
                .with_hint("change the value, or the range"),
        )
    }
}

fn bound_value(bound: Bound, known: &FxHashMap<ExpressionId, f64>) -> f64 {
    match bound {
        Bound::Finite(formula) => known[&formula],
        Bound::MinusInfinity => f64::NEG_INFINITY,
        Bound::PlusInfinity => f64::INFINITY,
    }
}

/// An error if limits that depend on no variable cross.
fn crossed(interval: &Interval, known: &FxHashMap<ExpressionId, f64>) -> Option<Diagnostic> {
    let (lower, upper) = (bound_value(interval.lower, known), bound_value(interval.upper, known));
    (lower > upper).then(|| {
        Diagnostic::error("limits-cross", interval.span, format!("the limits cross here: {lower} > {upper}"))
            .with_hint("write the smaller end first")
    })
}

/// A value in the unit it was written with.
fn in_unit(value: f64, unit: Option<&Unit>) -> String {
    match unit {
        Some(unit) => format!("{} {}", unit.from_si(value), unit.text),
        None => format!("{value}"),
    }
}
