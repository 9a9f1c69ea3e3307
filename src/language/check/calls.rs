//! Calls: functions of the language, functions of the sheet, differentiation.

use super::super::Span;
use super::super::model::PatchId;
use super::super::syntax::{Name, SyntaxId, SyntaxKind};
use super::super::unit::Dimension;
use super::expressions::cut;
use super::names::FUNCTIONALS;
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, Instance, State};
use crate::calculus;
use crate::expression::{BinaryFunction, ExpressionId, Function, SymbolId, differentiate_all};
use std::sync::Arc;

impl Checker {
    /// A call of anything.
    pub(super) fn call(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Meaning> {
        let name = callee.text.as_str();
        if let Some(function) = Function::NAMED.iter().find(|function| function.name() == name) {
            return self.plain_function(*function, callee, arguments).map(Meaning::Value);
        }
        if let Some(function) = BinaryFunction::NAMED.iter().find(|function| function.name() == name) {
            return self.binary_function(*function, callee, arguments).map(Meaning::Value);
        }
        match name {
            "if" => self.choice(callee, arguments).map(Meaning::Value),
            "bessel_j" | "bessel_y" => self.bessel(callee, arguments).map(Meaning::Value),
            "dot" | "cross" => self.vector_product(callee, arguments, span).map(Meaning::Value),
            "norm" | "unit" => self.vector_length(callee, arguments).map(Meaning::Value),
            "diff" => self.derivative(callee, arguments).map(Meaning::Value),
            "translate" | "rotate" | "mirror" => self.moved(callee, arguments, span).map(Meaning::Chain),
            _ if FUNCTIONALS.contains(&name) => self.functional(callee, arguments, span).map(Meaning::Value),
            _ => self.sheet_function(callee, arguments, span).map(Meaning::Value),
        }
    }

    /// The right number of arguments, or an error that says how many are due.
    pub(super) fn arity(&mut self, callee: &Name, arguments: &[SyntaxId], due: &[usize]) -> Checked<()> {
        if due.contains(&arguments.len()) {
            return Ok(());
        }
        let words = match due {
            [one] => format!("{one} argument{}", if *one == 1 { "" } else { "s" }),
            [low, .., high] => format!("{low} to {high} arguments"),
            [] => "no arguments".to_owned(),
        };
        Err(self.error(
            "wrong-arity",
            callee.span,
            format!("`{}` takes {words}, here are {}", callee.text, arguments.len()),
        ))
    }

    fn plain_function(&mut self, function: Function, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[1])?;
        let argument = arguments[0];
        let span = self.span(argument);
        let (value, dimension) = match function {
            Function::Sqrt | Function::Cbrt => {
                let root = if function == Function::Sqrt { 2 } else { 3 };
                let value = self.number(argument)?;
                let dimension = match value.dimension {
                    Some(dimension) => match dimension.power(1, root) {
                        Some(rooted) => Some(rooted),
                        None => return Err(self.unit_overflow(span)),
                    },
                    None => None,
                };
                (value, dimension)
            }
            Function::Abs => {
                let value = self.value(argument)?;
                if value.kind == Kind::Vector {
                    return Err(self.error_with_hint(
                        "wrong-kind",
                        span,
                        "a vector where a number is due".to_owned(),
                        "the length of a vector is `norm(a)`".to_owned(),
                    ));
                }
                (self.number(argument)?, value.dimension)
            }
            Function::Sign => (self.number(argument)?, Some(Dimension::NONE)),
            _ => (self.plain_number(argument, &format!("`{}`", callee.text))?, Some(Dimension::NONE)),
        };
        Ok(Value::number(self.graph.call(function, value.components[0]), dimension))
    }

    fn binary_function(&mut self, function: BinaryFunction, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        match function {
            BinaryFunction::Min | BinaryFunction::Max if arguments.len() >= 2 => {}
            BinaryFunction::Min | BinaryFunction::Max => {
                return Err(self.error(
                    "wrong-arity",
                    callee.span,
                    format!("`{}` takes 2 or more arguments, here are {}", callee.text, arguments.len()),
                ));
            }
            BinaryFunction::Atan2 | BinaryFunction::Hypot => self.arity(callee, arguments, &[2])?,
        }
        let mut so_far = self.number(arguments[0])?;
        for &argument in &arguments[1..] {
            let next = self.number(argument)?;
            let span = self.span(argument);
            let dimension = self.same_dimension(so_far.dimension, next.dimension, span, "this argument")?;
            let formula = self.graph.call2(function, so_far.components[0], next.components[0]);
            so_far = Value::number(formula, dimension);
        }
        if function == BinaryFunction::Atan2 {
            so_far.dimension = Some(Dimension::NONE);
        }
        Ok(so_far)
    }

    /// `if(condition, a, b)`
    fn choice(&mut self, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[3])?;
        let condition = self.truth(arguments[0])?;
        let yes = self.value(arguments[1])?;
        let no = self.value(arguments[2])?;
        let span = self.span(arguments[2]);
        if yes.kind != no.kind {
            return Err(self.error(
                "wrong-kind",
                span,
                format!("both branches are of one kind; these are {} and {}", yes.kind.words(), no.kind.words()),
            ));
        }
        let dimension = self.same_dimension(yes.dimension, no.dimension, span, "this branch")?;
        let components =
            yes.components.iter().zip(&no.components).map(|(&a, &b)| self.graph.select(condition, a, b)).collect();
        Ok(Value { components, dimension, kind: yes.kind })
    }

    fn bessel(&mut self, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[2])?;
        let order = self.whole_number(arguments[0])?;
        let argument = self.plain_number(arguments[1], &format!("`{}`", callee.text))?;
        let function = match (callee.text.as_str(), order) {
            ("bessel_j", 0 | 1) => Function::BesselJ(order as u8),
            ("bessel_y", 0 | 1) => Function::BesselY(order as u8),
            _ => {
                let span = self.span(arguments[0]);
                return Err(self.error("out-of-range", span, format!("the order is 0 or 1, here it is {order}")));
            }
        };
        Ok(Value::number(self.graph.call(function, argument.components[0]), Some(Dimension::NONE)))
    }

    fn vector_product(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Value> {
        self.arity(callee, arguments, &[2])?;
        let a = self.of_kind(arguments[0], Kind::Vector)?;
        let b = self.of_kind(arguments[1], Kind::Vector)?;
        let dimension = self.product_dimension(&a, &b, span)?;
        let (first, second) = (triple(&a), triple(&b));
        if callee.text == "dot" {
            return Ok(Value::number(calculus::dot(&mut self.graph, &first, &second), dimension));
        }
        let components = calculus::cross(&mut self.graph, &first, &second).to_vec();
        Ok(Value { components, dimension, kind: Kind::Vector })
    }

    fn vector_length(&mut self, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[1])?;
        let vector = self.of_kind(arguments[0], Kind::Vector)?;
        let length = calculus::norm(&mut self.graph, &triple(&vector));
        if callee.text == "norm" {
            return Ok(Value::number(length, vector.dimension));
        }
        let components = vector.components.iter().map(|&c| self.graph.divide(c, length)).collect();
        Ok(Value { components, dimension: Some(Dimension::NONE), kind: Kind::Vector })
    }

    /// `diff(expression, name)`
    fn derivative(&mut self, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[2])?;
        let value = self.value(arguments[0])?;
        let by_span = self.span(arguments[1]);
        let sheet = Arc::clone(&self.sheet);
        let SyntaxKind::Name(name) = &sheet.get(arguments[1]).kind else {
            return Err(self.error(
                "wrong-kind",
                by_span,
                "`diff` takes the name of a variable or a parameter here".to_owned(),
            ));
        };
        let by = self.number(arguments[1])?;
        let symbol = self.graph.as_symbol(by.components[0]);
        let is_result = symbol.is_some_and(|symbol| self.facts.functional_of(symbol).is_some());
        let Some(symbol) = symbol.filter(|_| !is_result) else {
            let from = self.parameters_behind(&by.components);
            let message = format!("`{name}` is derived, so nothing can be differentiated by it");
            return Err(match from.first() {
                Some(parameter) => self.error_with_hint(
                    "not-a-parameter",
                    by_span,
                    message,
                    format!("differentiate by `{parameter}`, which it depends on"),
                ),
                None => self.error("not-a-parameter", by_span, message),
            });
        };
        if !self.answers_in(&value.components).is_empty() {
            return Err(self.error_with_hint(
                "derivative-of-answer",
                callee.span,
                "the derivative of an integral is not available in this version".to_owned(),
                format!("ask for the answer at two values of `{name}` with --set and take the difference"),
            ));
        }
        if value.kind == Kind::Truth {
            let span = self.span(arguments[0]);
            return Err(self.wrong_kind(span, value.kind.words(), Kind::Number));
        }
        self.refuse_hidden_dependence(&value, symbol, callee.span)?;
        let dimension = match (value.dimension, by.dimension) {
            (Some(x), Some(y)) => match x.divide(y) {
                Some(quotient) => Some(quotient),
                None => return Err(self.unit_overflow(by_span)),
            },
            // By an argument that is zero, and so fits any unit.
            (_, None) | (None, _) => None,
        };
        let cost = self.graph.reachable(&value.components).len();
        self.step(4 * cost, callee.span)?;
        let components = differentiate_all(&mut self.graph, &value.components, symbol);
        self.step(self.graph.reachable(&components).len(), callee.span)?;
        Ok(Value { components, dimension, kind: value.kind })
    }

    /// The position, the normal and the curvatures depend on variables and parameters in a way that differs from patch to
    /// patch, so a formula that uses them cannot be differentiated by one of these.
    fn refuse_hidden_dependence(&mut self, value: &Value, by: SymbolId, span: Span) -> Checked<()> {
        let points = self.point_symbols();
        if self.surface.is_none() || points.contains(&by) {
            return Ok(());
        }
        let used = self.graph.symbols_of(&value.components);
        let Some(&hidden) = points.iter().find(|symbol| used.contains(symbol)) else { return Ok(()) };
        let (hidden, by) = (self.graph.symbol_name(hidden).to_owned(), self.graph.symbol_name(by).to_owned());
        Err(self.error_with_hint(
            "hidden-dependence",
            span,
            format!("`{hidden}` depends on `{by}` here in a way that this formula does not show"),
            "call the patch with its variables instead, such as `diff(patch(u, v).x, u)`".to_owned(),
        ))
    }

    /// Names of the parameters that formulas depend on.
    pub(super) fn parameters_behind(&self, components: &[ExpressionId]) -> Vec<String> {
        self.graph
            .symbols_of(components)
            .into_iter()
            .filter_map(|symbol| self.parameter_symbols.get(&symbol).map(|(name, _)| name.clone()))
            .collect()
    }

    /// A call of a function or a patch of the sheet.
    fn sheet_function(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Value> {
        let hidden = self.locals.iter().any(|(local, _)| *local == callee.text);
        let Some(&index) = self.by_name.get(&callee.text).filter(|_| !hidden) else {
            if hidden {
                let message = format!("`{}` is a number here and cannot be called", callee.text);
                return Err(self.error_with_hint(
                    "wrong-kind",
                    callee.span,
                    message,
                    format!("for a product write `{}*(...)`", callee.text),
                ));
            }
            if self.unread.contains(&callee.text) {
                return Err(super::Reported);
            }
            return Err(self.unknown(&callee.text, callee.span));
        };
        let definition = Arc::clone(&self.definitions[index].syntax);
        let Some(formals) = &definition.arguments else {
            return match &self.definitions[index].state {
                State::Done(Meaning::Patch(patch)) => self.patch_at(*patch, callee, arguments),
                State::Done(Meaning::Chain(chain)) if matches!(chain.terms[..], [(1, _)]) => {
                    self.patch_at(chain.terms[0].1, callee, arguments)
                }
                State::Done(meaning) => {
                    let words = meaning.words();
                    Err(self.error_with_hint(
                        "wrong-kind",
                        callee.span,
                        format!("`{}` is {words} and cannot be called", callee.text),
                        format!("for a product write `{}*(...)`", callee.text),
                    ))
                }
                State::Broken | State::Waiting => Err(super::Reported),
            };
        };
        if matches!(self.definitions[index].state, State::Broken) {
            return Err(super::Reported);
        }
        if formals.len() != arguments.len() {
            let due = formals.len();
            return Err(self.error(
                "wrong-arity",
                callee.span,
                format!(
                    "`{}` takes {due} argument{}, here are {}",
                    callee.text,
                    if due == 1 { "" } else { "s" },
                    arguments.len()
                ),
            ));
        }
        let mut values = Vec::with_capacity(arguments.len());
        for &argument in arguments {
            let value = self.value(argument)?;
            if !matches!(value.kind, Kind::Number | Kind::Vector) {
                let span = self.span(argument);
                return Err(self.wrong_kind(span, value.kind.words(), Kind::Number));
            }
            values.push(value);
        }
        self.apply(index, &values, span)
    }

    /// The position on a patch that has no formula of its own, such as a moved copy.
    fn patch_at(&mut self, id: PatchId, callee: &Name, arguments: &[SyntaxId]) -> Checked<Value> {
        self.arity(callee, arguments, &[2])?;
        let patch = self.patch(id).clone();
        let mut replacements = Vec::with_capacity(2);
        for (&argument, (&variable, &dimension)) in
            arguments.iter().zip(patch.variables.iter().zip(&patch.variable_dimensions))
        {
            let value = self.number(argument)?;
            let span = self.span(argument);
            self.same_dimension(Some(dimension), value.dimension, span, "this argument")?;
            replacements.push((variable, value.components[0]));
        }
        self.step(self.graph.reachable(&patch.position).len(), callee.span)?;
        let components = self.graph.substitute(&patch.position, &replacements);
        Ok(Value { components, dimension: Some(patch.dimension), kind: Kind::Vector })
    }

    /// A bare function name in an integrand: its arguments are what they are called at a point of the surface.
    pub(super) fn call_with_surface_names(&mut self, index: usize, span: Span) -> Checked<Value> {
        let definition = Arc::clone(&self.definitions[index].syntax);
        let mut values = Vec::new();
        for argument in definition.arguments.iter().flatten() {
            // A definition of the same name is not meant.
            match self.point_meaning(&argument.text, span)? {
                Some(value) => values.push(value),
                None => {
                    return Err(self.error_with_hint(
                        "unknown-name",
                        span,
                        format!(
                            "the argument `{}` of `{}` has no meaning at a point of this surface",
                            argument.text, definition.name.text
                        ),
                        "call it with the arguments you mean".to_owned(),
                    ));
                }
            }
        }
        self.apply(index, &values, span)
    }

    /// The value of a function of the sheet for given arguments.
    ///
    /// The body is lowered once for each combination of kinds and dimensions, over symbols of its own; a call puts the
    /// arguments in their place. So a derivative by an argument inside the body is a partial derivative.
    pub(super) fn apply(&mut self, index: usize, arguments: &[Value], span: Span) -> Checked<Value> {
        let key = (index, arguments.iter().map(|value| (value.kind, value.dimension)).collect::<Vec<_>>());
        let instance = match self.instances.get(&key) {
            Some(Some(instance)) => instance.clone(),
            Some(None) => return Err(super::Reported),
            None => {
                let lowered = self.instantiate(index, arguments, span);
                let stored = lowered.as_ref().ok().cloned();
                self.instances.insert(key, stored);
                lowered?
            }
        };
        let mut replacements: Vec<(SymbolId, ExpressionId)> = instance
            .formals
            .iter()
            .copied()
            .zip(arguments.iter().flat_map(|argument| argument.components.iter().copied()))
            .collect();
        let cost = self.graph.reachable(&instance.value.components).len();
        self.step(cost, span)?;
        self.fill_in_functionals(&instance.value.components, &mut replacements, span)?;
        let components = self.graph.substitute(&instance.value.components, &replacements);
        Ok(Value { components, ..instance.value })
    }

    fn instantiate(&mut self, index: usize, arguments: &[Value], span: Span) -> Checked<Instance> {
        let definition = Arc::clone(&self.definitions[index].syntax);
        let mut formals = Vec::new();
        let mut locals = Vec::new();
        for (name, argument) in definition.arguments.iter().flatten().zip(arguments) {
            let mut components = Vec::with_capacity(argument.components.len());
            for _ in &argument.components {
                let symbol = self.graph.new_symbol(&name.text);
                self.facts.is_open(symbol);
                formals.push(symbol);
                components.push(self.graph.symbol(symbol));
            }
            locals.push((name.text.clone(), Value { components, ..argument.clone() }));
        }
        let outer_locals = std::mem::replace(&mut self.locals, locals);
        let outer_surface = self.surface.take();
        let before = self.diagnostics.len();
        let value = self.value(definition.value);
        self.locals = outer_locals;
        self.surface = outer_surface;
        if value.is_err() && self.diagnostics.len() > before && !arguments.is_empty() {
            // The error stands in the body; say which call met it.
            let call = cut(self.text(span));
            if let Some(diagnostic) = self.diagnostics.last_mut()
                && diagnostic.hint.is_none()
                && diagnostic.code == "unit-clash"
            {
                diagnostic.hint = Some(format!("met in the call `{call}`"));
            }
        }
        Ok(Instance { formals, value: value? })
    }
}

fn triple(value: &Value) -> [ExpressionId; 3] {
    [value.components[0], value.components[1], value.components[2]]
}
