//! Functionals: `area(c)`, `integral(f, c)` and the others, as numbers inside any expression.

use super::super::model::{Chain, Functional, FunctionalId, FunctionalKind, PatchId};
use super::super::syntax::{Name, SyntaxId, SyntaxKind};
use super::super::unit::Dimension;
use super::super::{Diagnostic, Span};
use super::expressions::cut;
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker};
use crate::expression::{ExpressionId, SymbolId};
use std::collections::BTreeSet;
use std::sync::Arc;

impl Checker {
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
        let text = cut(&self.text(span).split_whitespace().collect::<Vec<_>>().join(" "));
        let results = self.results_of(kind, chain, count, text, span)?;
        let components = results.into_iter().map(|result| self.graph.symbol(result)).collect();
        let kind = match count {
            1 => Kind::Number,
            3 => Kind::Vector,
            _ => Kind::Tensor,
        };
        Ok(Value { components, dimension: dimension.or(Some(Dimension::NONE)), kind })
    }

    /// Symbols for the results of a functional; an equal one that is there already is used again.
    fn results_of(
        &mut self,
        kind: FunctionalKind,
        chain: Chain,
        count: usize,
        text: String,
        span: Span,
    ) -> Checked<Vec<SymbolId>> {
        self.step(chain.terms.len(), span)?;
        let key = (kind, chain);
        if let Some(known) = self.functional_ids.get(&key) {
            return Ok(self.model.functionals[known.0].results.clone());
        }
        let formulas = key.0.formulas();
        let depends_on = self.answers_in(&formulas);
        let is_open = formulas.iter().any(|&formula| self.facts.is_open_formula(formula))
            || key.1.terms.iter().any(|(_, patch)| self.is_open_patch(*patch));
        let id = FunctionalId(self.model.functionals.len());
        let results: Vec<SymbolId> = (0..count).map(|_| self.graph.new_symbol(&text)).collect();
        for &result in &results {
            self.facts.is_result(result, id);
            if is_open {
                self.facts.is_open(result);
            }
        }
        let (kind, chain) = key.clone();
        self.functional_ids.insert(key, id);
        self.model.functionals.push(Functional { text, kind, chain, results: results.clone(), depends_on, span });
        Ok(results)
    }

    /// Whether a patch was moved by the argument of a function that is being read.
    pub(super) fn is_open_patch(&self, patch: PatchId) -> bool {
        self.patch(patch).position.iter().any(|&component| self.facts.is_open_formula(component))
    }

    /// Whether a functional uses the argument of a function that is being read: a pattern that each call fills in.
    pub(super) fn is_open_functional(&self, id: FunctionalId) -> bool {
        self.model.functionals[id.0].results.iter().any(|&result| self.facts.is_open_symbol(result))
    }

    /// Fills in the functionals in the body of a function for one call: `replacements` puts the arguments in their place,
    /// and is extended by the results.
    pub(super) fn fill_in_functionals(
        &mut self,
        body: &[ExpressionId],
        replacements: &mut Vec<(SymbolId, ExpressionId)>,
        span: Span,
    ) -> Checked<()> {
        let mut todo = self.answers_in(body);
        let mut patterns = BTreeSet::new();
        while let Some(id) = todo.pop() {
            if self.is_open_functional(id) && patterns.insert(id) {
                todo.extend(&self.model.functionals[id.0].depends_on);
            }
        }
        if patterns.is_empty() {
            return Ok(());
        }
        let arguments: Vec<ExpressionId> = replacements.iter().map(|(_, argument)| *argument).collect();
        self.refuse_point_symbols(&arguments, span)?;
        // A functional comes after those it depends on.
        for id in patterns {
            let Functional { text, kind, chain, results, span: written, .. } = self.model.functionals[id.0].clone();
            let formulas = kind.formulas();
            self.step(self.graph.reachable(&formulas).len(), span)?;
            let formulas = self.graph.substitute(&formulas, replacements);
            let mut terms = Vec::with_capacity(chain.terms.len());
            for (coefficient, patch) in chain.terms {
                let patch = if self.is_open_patch(patch) { self.filled_in(patch, replacements, span)? } else { patch };
                terms.push((coefficient, patch));
            }
            let chain = Chain { terms };
            let filled = self.results_of(kind.with_formulas(&formulas), chain, results.len(), text, written)?;
            for (pattern, result) in results.into_iter().zip(filled) {
                replacements.push((pattern, self.graph.symbol(result)));
            }
        }
        Ok(())
    }

    /// An integral has no value that varies over another surface.
    fn refuse_point_symbols(&mut self, arguments: &[ExpressionId], span: Span) -> Checked<()> {
        let symbols = self.graph.symbols_of(arguments);
        let Some(&varying) = symbols.iter().find(|symbol| self.varies_on_surfaces(**symbol)) else { return Ok(()) };
        let name = self.graph.symbol_name(varying).to_owned();
        Err(self.error_with_hint(
            "wrong-kind",
            span,
            format!("this function integrates, so it cannot be called with `{name}`, which varies over a surface"),
            "an integral may use parameters, derived numbers and other answers".to_owned(),
        ))
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
        let before = self.surface.replace(Arc::new(scope));
        let value = self.of_kind(id, kind);
        self.surface = before;
        let value = value?;
        self.check_size(&value.components, span, "this integrand")?;
        Ok(value)
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

impl FunctionalKind {
    /// The formulas in it.
    fn formulas(&self) -> Vec<ExpressionId> {
        match self {
            FunctionalKind::Area | FunctionalKind::Volume => Vec::new(),
            FunctionalKind::Integral(f) => vec![*f],
            FunctionalKind::Flux(field) => field.to_vec(),
            FunctionalKind::Centroid(density) => density.iter().copied().collect(),
            FunctionalKind::Inertia { density, about } => {
                density.iter().copied().chain(about.iter().flatten().copied()).collect()
            }
        }
    }

    /// The same question with other formulas, in the order of [`FunctionalKind::formulas`].
    fn with_formulas(&self, formulas: &[ExpressionId]) -> Self {
        let mut next = formulas.iter().copied();
        let mut other = |old: ExpressionId| next.next().unwrap_or(old);
        match self {
            FunctionalKind::Area => FunctionalKind::Area,
            FunctionalKind::Volume => FunctionalKind::Volume,
            FunctionalKind::Integral(f) => FunctionalKind::Integral(other(*f)),
            FunctionalKind::Flux(field) => FunctionalKind::Flux(field.map(other)),
            FunctionalKind::Centroid(density) => FunctionalKind::Centroid(density.map(other)),
            FunctionalKind::Inertia { density, about } => {
                let density = density.map(&mut other);
                FunctionalKind::Inertia { density, about: about.map(|point| point.map(other)) }
            }
        }
    }
}
