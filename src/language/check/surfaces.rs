//! Patches with their regions, chains and moved copies, and functionals.

use super::super::model::{Bound, Chain, Functional, FunctionalId, FunctionalKind, Interval, Patch, PatchId};
use super::super::syntax::{DefinitionSyntax, IntervalSyntax, Name, Operator, RangeSyntax, SyntaxId, SyntaxKind};
use super::super::unit::{Dimension, Unit};
use super::super::{Diagnostic, Span};
use super::expressions::cut;
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, Reported, SurfaceScope, shown};
use crate::calculus;
use crate::expression::{Exact, ExpressionId, Function, SymbolId};
use std::sync::Arc;

/// The variables of a patch with their intervals.
struct Region {
    variables: [SymbolId; 2],
    dimensions: [Dimension; 2],
    intervals: [Interval; 2],
}

impl Checker {
    /// `name(u, v) = (...) on u in [...], v in [...] where ...`
    pub(super) fn patch_definition(&mut self, index: usize, syntax: &DefinitionSyntax) -> Checked<PatchId> {
        let arguments = syntax.arguments.as_deref().unwrap_or_default();
        if arguments.len() != 2 {
            return Err(self.error(
                "wrong-arity",
                syntax.name.span,
                format!("a patch has 2 variables, `{}` has {}", syntax.name.text, arguments.len()),
            ));
        }
        let region = self.region(arguments, syntax.region.as_deref().unwrap_or_default(), syntax.name.span)?;
        let values = [0, 1].map(|i| {
            let symbol = self.graph.symbol(region.variables[i]);
            Value::number(symbol, Some(region.dimensions[i]))
        });
        let position = self.apply(index, &values, self.span(syntax.value))?;
        self.add_patch(syntax, region, &position, None)
    }

    /// `cap = crown on v in [0, 0.1], u in [0, 2*pi]`
    pub(super) fn cut_patch(&mut self, syntax: &DefinitionSyntax) -> Checked<PatchId> {
        let span = self.span(syntax.value);
        let Meaning::Patch(original) = self.lower(syntax.value)? else {
            return Err(self.error_with_hint(
                "wrong-kind",
                span,
                "a region goes with a patch".to_owned(),
                format!("write the variables: `{}(u, v) = ...`, or name a patch before `on`", syntax.name.text),
            ));
        };
        let patch = self.patch(original).clone();
        let Some(region) = &syntax.region else {
            // Only a trim: the region stays.
            let region = Region {
                variables: patch.variables,
                dimensions: patch.variable_dimensions,
                intervals: patch.intervals.clone(),
            };
            let position =
                Value { components: patch.position.to_vec(), dimension: Some(patch.dimension), kind: Kind::Vector };
            return self.add_patch(syntax, region, &position, patch.trim);
        };
        let names: Vec<Name> = patch
            .variables
            .iter()
            .map(|&variable| Name { text: self.graph.symbol_name(variable).to_owned(), span })
            .collect();
        let region = self.region(&names, region, syntax.name.span)?;
        for (i, name) in names.iter().enumerate() {
            if region.dimensions[i] != patch.variable_dimensions[i] {
                let message = format!(
                    "`{}` is in {}, in `{}` it is in {}",
                    name.text,
                    shown(region.dimensions[i]),
                    patch.name,
                    shown(patch.variable_dimensions[i])
                );
                return Err(self.error("unit-clash", region.intervals[i].span, message));
            }
        }
        let position =
            Value { components: patch.position.to_vec(), dimension: Some(patch.dimension), kind: Kind::Vector };
        self.add_patch(syntax, region, &position, patch.trim)
    }

    fn add_patch(
        &mut self,
        syntax: &DefinitionSyntax,
        region: Region,
        position: &Value,
        inherited_trim: Option<ExpressionId>,
    ) -> Checked<PatchId> {
        let span = self.span(syntax.value);
        if position.kind != Kind::Vector {
            return Err(self.error_with_hint(
                "wrong-kind",
                span,
                format!("a patch gives a position (x, y, z), this is {}", position.kind.words()),
                "write three components in parentheses; without `on` it is a plain function".to_owned(),
            ));
        }
        self.refuse_results(&position.components, span, "a patch")?;
        self.check_size(&position.components, syntax.name.span, &syntax.name.text)?;
        let dimension = position.dimension.unwrap_or(Dimension::NONE);
        let mut trim = inherited_trim;
        if let Some(condition) = syntax.trim {
            let scope = SurfaceScope {
                dimension,
                variables: [0, 1]
                    .map(|i| {
                        let symbol = region.variables[i];
                        (self.graph.symbol_name(symbol).to_owned(), symbol, region.dimensions[i])
                    })
                    .to_vec(),
                partial: Vec::new(),
            };
            let before = self.surface.replace(scope);
            let truth = self.truth(condition);
            self.surface = before;
            let truth = truth?;
            let span = self.span(condition);
            self.refuse_results(&[truth], span, "a trim")?;
            trim = Some(match trim {
                Some(inherited) => self.graph.and(inherited, truth),
                None => truth,
            });
        }
        let id = PatchId(self.model.patches.len());
        self.model.patches.push(Patch {
            name: syntax.name.text.clone(),
            named: true,
            position: [position.components[0], position.components[1], position.components[2]],
            variables: region.variables,
            variable_dimensions: region.dimensions,
            intervals: region.intervals,
            trim,
            orientation: 1,
            dimension,
            span: syntax.name.span,
        });
        Ok(id)
    }

    /// The region of the two variables, in the order of the arguments; the text may give them in any order.
    fn region(&mut self, arguments: &[Name], written: &[IntervalSyntax], span: Span) -> Checked<Region> {
        let mut found: [Option<&IntervalSyntax>; 2] = [None, None];
        for interval in written {
            let name = &interval.variable;
            match arguments.iter().position(|argument| argument.text == name.text) {
                Some(index) if found[index].is_none() => found[index] = Some(interval),
                Some(_) => {
                    return Err(self.error(
                        "doubled-name",
                        name.span,
                        format!("the interval of `{}` stands twice", name.text),
                    ));
                }
                None => {
                    let hint = format!("the variables are `{}` and `{}`", arguments[0].text, arguments[1].text);
                    let message = format!("`{}` is not a variable of this patch", name.text);
                    return Err(self.error_with_hint("unknown-name", name.span, message, hint));
                }
            }
        }
        let [Some(first), Some(second)] = found else {
            let missing = usize::from(found[0].is_some());
            return Err(self.error_with_hint(
                "missing-interval",
                span,
                format!("the interval of `{}` is missing", arguments[missing].text),
                format!("add `{} in [a, b]` after `on`", arguments[missing].text),
            ));
        };
        let written = [first, second];
        let uses_other = |checker: &Self, index: usize| {
            let other = &arguments[1 - index].text;
            let mut uses = false;
            for end in [written[index].range.lower, written[index].range.upper] {
                let mut todo = vec![end];
                while let Some(id) = todo.pop() {
                    uses |= matches!(&checker.sheet.get(id).kind, SyntaxKind::Name(name) if name == other);
                    todo.extend(checker.operands(id));
                }
            }
            uses
        };
        let depends = [uses_other(self, 0), uses_other(self, 1)];
        if depends == [true, true] {
            return Err(self.error_with_hint(
                "circle",
                written[1].range.span,
                "the limits of both variables depend on each other".to_owned(),
                "one of the two intervals must be free of the other variable".to_owned(),
            ));
        }
        let order = if depends[0] { [1, 0] } else { [0, 1] };
        let variables = [0, 1].map(|i| self.variable(&arguments[i].text));
        let mut dimensions = [Dimension::NONE; 2];
        let mut intervals: [Option<Interval>; 2] = [None, None];
        let base = self.locals.len();
        for index in order {
            let result = self.variable_interval(&written[index].range);
            let Ok((interval, dimension)) = result else {
                self.locals.truncate(base);
                return Err(Reported);
            };
            dimensions[index] = dimension;
            intervals[index] = Some(interval);
            let symbol = self.graph.symbol(variables[index]);
            self.locals.push((arguments[index].text.clone(), Value::number(symbol, Some(dimension))));
        }
        self.locals.truncate(base);
        let [Some(a), Some(b)] = intervals else { return Err(Reported) };
        Ok(Region { variables, dimensions, intervals: [a, b] })
    }

    /// Expressions directly below `id`.
    fn operands(&self, id: SyntaxId) -> Vec<SyntaxId> {
        match &self.sheet.get(id).kind {
            SyntaxKind::Number { .. } | SyntaxKind::Name(_) => Vec::new(),
            SyntaxKind::Call { arguments, .. } => arguments.clone(),
            SyntaxKind::Vector(components) => components.clone(),
            SyntaxKind::Component { base, .. } => vec![*base],
            SyntaxKind::Negate(a) | SyntaxKind::Not(a) => vec![*a],
            SyntaxKind::Binary { left, right, .. } => vec![*left, *right],
            SyntaxKind::Compare { first, rest } => {
                std::iter::once(*first).chain(rest.iter().map(|(_, operand)| *operand)).collect()
            }
            SyntaxKind::Sum { from, to, term, .. } => vec![*from, *to, *term],
        }
    }

    fn variable_interval(&mut self, range: &RangeSyntax) -> Checked<(Interval, Dimension)> {
        let (lower, lower_dimension) = self.bound(range.lower)?;
        let (upper, upper_dimension) = self.bound(range.upper)?;
        let span = self.span(range.upper);
        let dimension = self.same_dimension(lower_dimension, upper_dimension, span, "this end")?;
        for (bound, end) in [(lower, range.lower), (upper, range.upper)] {
            if let Bound::Finite(formula) = bound {
                let span = self.span(end);
                self.refuse_results(&[formula], span, "a region")?;
            }
        }
        self.ends_in_order(lower, upper, range)?;
        let interval = Interval {
            lower,
            upper,
            lower_closed: range.lower_closed,
            upper_closed: range.upper_closed,
            span: range.span,
        };
        Ok((interval, dimension.unwrap_or(Dimension::NONE)))
    }

    /// Ends that are plain numbers must not cross.
    fn ends_in_order(&mut self, lower: Bound, upper: Bound, range: &RangeSyntax) -> Checked<()> {
        let crossed = match (lower, upper) {
            (Bound::PlusInfinity, _) | (_, Bound::MinusInfinity) => true,
            (Bound::Finite(a), Bound::Finite(b)) => match (self.graph.as_number(a), self.graph.as_number(b)) {
                (Some(a), Some(b)) => a > b,
                _ => false,
            },
            _ => false,
        };
        if crossed {
            return Err(self.error_with_hint(
                "limits-cross",
                range.span,
                "the lower end of this interval is above the upper end".to_owned(),
                "write the smaller end first".to_owned(),
            ));
        }
        Ok(())
    }

    /// An end of an interval; `inf` may stand here, with a sign or without.
    fn bound(&mut self, id: SyntaxId) -> Checked<(Bound, Option<Dimension>)> {
        let sheet = Arc::clone(&self.sheet);
        let is_infinity = |id: SyntaxId| matches!(&sheet.get(id).kind, SyntaxKind::Name(name) if name == "inf");
        if is_infinity(id) {
            return Ok((Bound::PlusInfinity, None));
        }
        if let SyntaxKind::Negate(inner) = &sheet.get(id).kind
            && is_infinity(*inner)
        {
            return Ok((Bound::MinusInfinity, None));
        }
        let value = self.number(id)?;
        Ok((Bound::Finite(value.components[0]), value.dimension))
    }

    /// The range after `in` of a number. Plain ends take the unit that the number was written with.
    pub(super) fn interval(&mut self, range: &RangeSyntax, value: &Value, unit: Option<&Unit>) -> Checked<Interval> {
        let (mut interval, _) = self.variable_interval(range)?;
        for (bound, end) in [(&mut interval.lower, range.lower), (&mut interval.upper, range.upper)] {
            let Bound::Finite(formula) = *bound else { continue };
            let (_, dimension) = self.bound(end)?;
            let plain = dimension.is_none_or(Dimension::is_none) && !self.mentions_unit(end);
            let has_unit = value.dimension.is_some_and(|dimension| !dimension.is_none());
            let span = self.span(end);
            match unit {
                Some(unit) if plain && has_unit => *bound = Bound::Finite(self.in_unit(formula, unit)),
                _ => {
                    self.same_dimension(value.dimension, dimension, span, "this end")?;
                }
            }
        }
        Ok(interval)
    }

    /// A number of this unit in coherent units.
    fn in_unit(&mut self, formula: ExpressionId, unit: &Unit) -> ExpressionId {
        let factor = self.graph.number(unit.factor.clone());
        let scaled = self.graph.multiply(formula, factor);
        if unit.pi_power == 0 {
            return scaled;
        }
        let pi = self.graph.pi();
        let power = self.graph.integer_power(pi, i64::from(unit.pi_power));
        self.graph.multiply(scaled, power)
    }

    pub(super) fn scaled(&mut self, chain: &Chain, factor: i64, span: Span) -> Checked<Chain> {
        let mut terms = Vec::with_capacity(chain.terms.len());
        for &(coefficient, patch) in &chain.terms {
            match coefficient.checked_mul(factor).filter(|c| c.abs() < 1 << 40) {
                Some(0) => {}
                Some(product) => terms.push((product, patch)),
                None => return Err(self.error("out-of-range", span, "this multiplicity is too large".to_owned())),
            }
        }
        Ok(Chain { terms })
    }

    pub(super) fn binary_chains(
        &mut self,
        operator: Operator,
        span: Span,
        left: Meaning,
        right: Meaning,
    ) -> Checked<Chain> {
        let words = (left.words(), right.words());
        match (operator, left, right) {
            (Operator::Add | Operator::Subtract, left, right) => {
                let (Some(a), Some(b)) = (as_chain(&left), as_chain(&right)) else {
                    return Err(self.error(
                        "wrong-kind",
                        span,
                        format!("{} and {} cannot be added or subtracted", words.0, words.1),
                    ));
                };
                let b = if operator == Operator::Subtract { self.scaled(&b, -1, span)? } else { b };
                let mut terms = a.terms;
                for (coefficient, patch) in b.terms {
                    match terms.iter_mut().find(|(_, known)| *known == patch) {
                        Some((sum, _)) => *sum += coefficient,
                        None => terms.push((coefficient, patch)),
                    }
                }
                terms.retain(|(coefficient, _)| *coefficient != 0);
                Ok(Chain { terms })
            }
            (Operator::Multiply, Meaning::Value(number), chain)
            | (Operator::Multiply, chain, Meaning::Value(number)) => {
                let factor = match (number.kind, &number.components[..]) {
                    (Kind::Number, &[formula]) => self.graph.as_number(formula).and_then(Exact::to_i64),
                    _ => None,
                };
                let (Some(factor), Some(chain)) = (factor, as_chain(&chain)) else {
                    return Err(self.error_with_hint(
                        "wrong-kind",
                        span,
                        "a chain is multiplied by a whole number only".to_owned(),
                        "multiply the answer instead, or scale the formulas of the patch".to_owned(),
                    ));
                };
                self.scaled(&chain, factor, span)
            }
            _ => Err(self.error(
                "wrong-kind",
                span,
                format!("this operator does not go between {} and {}", words.0, words.1),
            )),
        }
    }

    fn chain(&mut self, id: SyntaxId) -> Checked<Chain> {
        let span = self.span(id);
        let meaning = self.lower(id)?;
        match as_chain(&meaning) {
            Some(chain) => Ok(chain),
            None => {
                let hint = match meaning {
                    Meaning::Function(_) => Some("give the function a region with `on` to make it a patch".to_owned()),
                    _ => None,
                };
                let error = Diagnostic::error(
                    "wrong-kind",
                    span,
                    format!("{} where a patch or a chain of patches is due", meaning.words()),
                );
                Err(self.report(match hint {
                    Some(hint) => error.with_hint(hint),
                    None => error,
                }))
            }
        }
    }

    /// `translate(chain, vector)`, `rotate(chain, axis, angle)`, `mirror(chain, normal)`
    pub(super) fn moved(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Chain> {
        self.arity(callee, arguments, &[if callee.text == "rotate" { 3 } else { 2 }])?;
        let chain = self.chain(arguments[0])?;
        let vector = self.of_kind(arguments[1], Kind::Vector)?;
        let angle = match arguments.get(2) {
            Some(&angle) => Some(self.plain_number(angle, "an angle")?.components[0]),
            None => None,
        };
        self.refuse_results(&vector.components, span, "a moved copy")?;
        if let Some(angle) = angle {
            self.refuse_results(&[angle], span, "a moved copy")?;
        }
        let direction = [vector.components[0], vector.components[1], vector.components[2]];
        let mut terms = Vec::with_capacity(chain.terms.len());
        for (coefficient, id) in chain.terms {
            let patch = self.patch(id).clone();
            if callee.text == "translate" {
                let span = self.span(arguments[1]);
                self.same_dimension(Some(patch.dimension), vector.dimension, span, "this vector")?;
            }
            let position = match (callee.text.as_str(), angle) {
                ("translate", _) => calculus::add(&mut self.graph, &patch.position, &direction),
                ("rotate", Some(angle)) => self.rotated(&patch.position, &direction, angle),
                _ => self.mirrored(&patch.position, &direction),
            };
            let name = format!("{}({})", callee.text, patch.name);
            self.check_size(&position, span, &name)?;
            let orientation = if callee.text == "mirror" { -patch.orientation } else { patch.orientation };
            if patch.trim.is_some_and(|trim| self.mentions_position(trim)) {
                return Err(self.error_with_hint(
                    "not-movable",
                    span,
                    format!("`{}` is trimmed by its position, which a copy would not have", patch.name),
                    "trim by the variables of the patch".to_owned(),
                ));
            }
            let new = PatchId(self.model.patches.len());
            self.model.patches.push(Patch { name, named: false, position, orientation, span, ..patch });
            terms.push((coefficient, new));
        }
        Ok(Chain { terms })
    }

    fn mentions_position(&self, formula: ExpressionId) -> bool {
        let used = self.graph.symbols_of(&[formula]);
        let symbols = &self.surface_symbols;
        symbols.position.iter().chain(&symbols.unit_normal).any(|symbol| used.contains(symbol))
    }

    /// Rodrigues' formula about the line through the origin: p cos t + (k x p) sin t + k (k.p)(1 - cos t), k = a/|a|.
    fn rotated(&mut self, p: &[ExpressionId; 3], axis: &[ExpressionId; 3], angle: ExpressionId) -> [ExpressionId; 3] {
        let g = &mut self.graph;
        let length = calculus::norm(g, axis);
        let k = calculus::divide(g, axis, length);
        let cosine = g.call(Function::Cos, angle);
        let sine = g.call(Function::Sin, angle);
        let one = g.integer(1);
        let rest = g.subtract(one, cosine);
        let along = calculus::dot(g, &k, p);
        let along = g.multiply(along, rest);
        let side = calculus::cross(g, &k, p);
        let first = calculus::scale(g, cosine, p);
        let second = calculus::scale(g, sine, &side);
        let third = calculus::scale(g, along, &k);
        let sum = calculus::add(g, &first, &second);
        calculus::add(g, &sum, &third)
    }

    /// The mirror image in the plane through the origin with normal a: p - 2 a (a.p)/(a.a).
    fn mirrored(&mut self, p: &[ExpressionId; 3], normal: &[ExpressionId; 3]) -> [ExpressionId; 3] {
        let g = &mut self.graph;
        let product = calculus::dot(g, normal, p);
        let square = calculus::squared_norm(g, normal);
        let two = g.integer(2);
        let doubled = g.multiply(two, product);
        let factor = g.divide(doubled, square);
        let shift = calculus::scale(g, factor, normal);
        calculus::subtract(g, p, &shift)
    }

    /// `area(c)`, `integral(f, c)`, `flux(F, c)`, `volume(c)`, `centroid([f,] c)`, `inertia([f,] c [, point])`
    pub(super) fn functional(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Value> {
        let name = callee.text.as_str();
        if self.surface.is_some() {
            return Err(self.error_with_hint(
                "wrong-kind",
                callee.span,
                "an integral cannot stand inside an integrand".to_owned(),
                "give it a name in a line of its own and use that name".to_owned(),
            ));
        }
        match name {
            "area" | "volume" => self.arity(callee, arguments, &[1])?,
            "integral" | "flux" => self.arity(callee, arguments, &[2])?,
            "centroid" => self.arity(callee, arguments, &[1, 2])?,
            _ => self.arity(callee, arguments, &[1, 2, 3])?,
        }
        let chain_at = match (name, arguments.len()) {
            (_, 1) => 0,
            ("inertia", 2) => usize::from(!self.looks_like_chain(arguments[0])),
            _ => 1,
        };
        let chain = self.chain(arguments[chain_at])?;
        if chain.terms.is_empty() {
            let span = self.span(arguments[chain_at]);
            return Err(self.error("empty-chain", span, "this chain is empty".to_owned()));
        }
        let length = self.common_dimension(&chain, span)?;
        let density = if chain_at == 1 { Some(arguments[0]) } else { None };
        let point = arguments.get(chain_at + 1).copied();
        let area = length.multiply(length).ok_or(()).map_err(|()| self.unit_overflow(span))?;
        let times = |checker: &mut Self, a: Option<Dimension>, b: Dimension| match a {
            Some(a) => a.multiply(b).map(Some).ok_or(()).map_err(|()| checker.unit_overflow(span)),
            None => Ok(None),
        };
        let (kind, dimension, count) = match name {
            "area" => (FunctionalKind::Area, Some(area), 1),
            "volume" => (FunctionalKind::Volume, times(self, Some(area), length)?, 1),
            "integral" => {
                let f = self.integrand(arguments[0], &chain, Kind::Number)?;
                (FunctionalKind::Integral(f.components[0]), times(self, f.dimension, area)?, 1)
            }
            "flux" => {
                let field = self.integrand(arguments[0], &chain, Kind::Vector)?;
                let components = [field.components[0], field.components[1], field.components[2]];
                (FunctionalKind::Flux(components), times(self, field.dimension, area)?, 1)
            }
            "centroid" => {
                let density = self.mass_density(density, &chain)?.map(|density| density.components[0]);
                (FunctionalKind::Centroid(density), Some(length), 3)
            }
            _ => {
                let density = self.mass_density(density, &chain)?;
                let about = match point {
                    Some(point) => {
                        let value = self.of_kind(point, Kind::Vector)?;
                        let span = self.span(point);
                        self.same_dimension(Some(length), value.dimension, span, "this point")?;
                        Some([value.components[0], value.components[1], value.components[2]])
                    }
                    None => None,
                };
                let mass = match &density {
                    Some(density) => times(self, density.dimension, area)?,
                    None => Some(area),
                };
                let kind = FunctionalKind::Inertia { density: density.map(|density| density.components[0]), about };
                (kind, times(self, mass, area)?, 6)
            }
        };
        let oriented = matches!(kind, FunctionalKind::Flux(_) | FunctionalKind::Volume);
        if !oriented && chain.terms.iter().any(|(coefficient, _)| *coefficient < 0) {
            let chain_span = self.span(arguments[chain_at]);
            self.report(
                Diagnostic::warning(
                    "minus-in-area",
                    chain_span,
                    format!("`{name}` counts a patch with a minus sign as positive"),
                )
                .with_hint("to take a part away, subtract the answers: `area(a) - area(b)`"),
            );
        }
        let components = self.results_of(kind, chain, count, span);
        let kind = match count {
            1 => Kind::Number,
            3 => Kind::Vector,
            _ => Kind::Tensor,
        };
        Ok(Value { components, dimension: dimension.or(Some(Dimension::NONE)), kind })
    }

    /// Symbols for the results of a functional; an equal one that is there already is used again.
    fn results_of(&mut self, kind: FunctionalKind, chain: Chain, count: usize, span: Span) -> Vec<ExpressionId> {
        let known = self.model.functionals.iter().find(|known| known.kind == kind && known.chain == chain);
        let results = match known {
            Some(known) => known.results.clone(),
            None => {
                let text = cut(&self.text(span).split_whitespace().collect::<Vec<_>>().join(" "));
                let results: Vec<SymbolId> = (0..count).map(|_| self.graph.new_symbol(&text)).collect();
                self.result_symbols.extend(&results);
                let formulas: Vec<ExpressionId> = match &kind {
                    FunctionalKind::Area | FunctionalKind::Volume => Vec::new(),
                    FunctionalKind::Integral(f) => vec![*f],
                    FunctionalKind::Flux(field) => field.to_vec(),
                    FunctionalKind::Centroid(density) => density.iter().copied().collect(),
                    FunctionalKind::Inertia { density, about } => {
                        density.iter().copied().chain(about.iter().flatten().copied()).collect()
                    }
                };
                let used = self.results_in(&formulas);
                let depends_on: Vec<FunctionalId> =
                    self.functionals_of(&used).into_iter().filter(|id| id.0 < self.model.functionals.len()).collect();
                self.model.functionals.push(Functional {
                    text,
                    kind,
                    chain,
                    results: results.clone(),
                    depends_on,
                    span,
                });
                results
            }
        };
        results.into_iter().map(|result| self.graph.symbol(result)).collect()
    }

    fn mass_density(&mut self, density: Option<SyntaxId>, chain: &Chain) -> Checked<Option<Value>> {
        match density {
            Some(density) => Ok(Some(self.integrand(density, chain, Kind::Number)?)),
            None => Ok(None),
        }
    }

    /// A formula at a point of the chain's surface.
    fn integrand(&mut self, id: SyntaxId, chain: &Chain, kind: Kind) -> Checked<Value> {
        let span = self.span(id);
        let scope = self.surface_scope(chain, span)?;
        let before = self.surface.replace(scope);
        let value = self.of_kind(id, kind);
        self.surface = before;
        let value = value?;
        self.check_size(&value.components, span, "this integrand")?;
        Ok(value)
    }

    fn surface_scope(&mut self, chain: &Chain, span: Span) -> Checked<SurfaceScope> {
        let dimension = self.common_dimension(chain, span)?;
        let mut variables: Vec<(String, SymbolId, Dimension)> = Vec::new();
        for (_, id) in &chain.terms {
            let patch = self.patch(*id);
            for i in 0..2 {
                let symbol = patch.variables[i];
                if !variables.iter().any(|(_, known, _)| *known == symbol) {
                    variables.push((self.graph.symbol_name(symbol).to_owned(), symbol, patch.variable_dimensions[i]));
                }
            }
        }
        let mut partial = Vec::new();
        for (_, id) in &chain.terms {
            let patch = self.patch(*id);
            for (name, symbol, dimension) in &variables {
                let position = patch.variables.iter().position(|known| known == symbol);
                let same = position.is_some_and(|i| patch.variable_dimensions[i] == *dimension);
                if !same && !partial.iter().any(|(known, _)| known == name) {
                    partial.push((name.clone(), patch.name.clone()));
                }
            }
        }
        variables.retain(|(name, _, _)| !partial.iter().any(|(other, _)| other == name));
        Ok(SurfaceScope { dimension, variables, partial })
    }

    fn common_dimension(&mut self, chain: &Chain, span: Span) -> Checked<Dimension> {
        let mut common: Option<(Dimension, String)> = None;
        for (_, id) in &chain.terms {
            let (dimension, name) = (self.patch(*id).dimension, self.patch(*id).name.clone());
            match &common {
                Some((first, first_name)) if *first != dimension => {
                    let message = format!(
                        "the patches of a chain have one unit: `{first_name}` is in {}, `{name}` in {}",
                        shown(*first),
                        shown(dimension)
                    );
                    return Err(self.error("unit-clash", span, message));
                }
                Some(_) => {}
                None => common = Some((dimension, name)),
            }
        }
        Ok(common.map_or(Dimension::NONE, |(dimension, _)| dimension))
    }

    /// Whether an expression can only be a chain, judged by its names.
    fn looks_like_chain(&self, id: SyntaxId) -> bool {
        let mut todo = vec![id];
        while let Some(id) = todo.pop() {
            match &self.sheet.get(id).kind {
                SyntaxKind::Name(name) => {
                    if let Some(&index) = self.by_name.get(name)
                        && let super::State::Done(Meaning::Patch(_) | Meaning::Chain(_)) = self.definitions[index].state
                    {
                        return true;
                    }
                }
                SyntaxKind::Negate(inner) => todo.push(*inner),
                SyntaxKind::Binary { left, right, .. } => todo.extend([*left, *right]),
                SyntaxKind::Call { callee, .. } => {
                    if matches!(callee.text.as_str(), "translate" | "rotate" | "mirror") {
                        return true;
                    }
                }
                _ => {}
            }
        }
        false
    }
}

fn as_chain(meaning: &Meaning) -> Option<Chain> {
    match meaning {
        Meaning::Patch(patch) => Some(Chain { terms: vec![(1, *patch)] }),
        Meaning::Chain(chain) => Some(chain.clone()),
        Meaning::Value(_) | Meaning::Function(_) => None,
    }
}
