//! Runs the integrals behind a set of functionals: all integrands of one patch share one pass over its nodes.

use super::bounded::Bounded;
use super::error::{IntegralError, Progress};
use super::functionals::{Pivot, combine, densities};
use super::outcome::Settings;
use super::patch_integrand::{PatchIntegrand, Question};
use crate::expression::{ExpressionId, Graph, SymbolId, differentiate, evaluate};
use crate::geometry::{Surface, at_point};
use crate::language::{Bindings, Bound, Functional, FunctionalId, Model, Patch, PatchId};
use crate::quadrature::{Failure, Integral, Limit, PlaneIntegrand, integrate};
use rustc_hash::FxHashMap;
use std::cell::Cell;
use std::time::Instant;

/// A result of a functional.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Outcome {
    pub(super) bounded: Bounded,
    /// Integral of the absolute value behind it: what the tolerance is relative to where the value is negligible.
    pub(super) magnitude: f64,
    /// The part of the error that is rounding.
    pub(super) rounding: f64,
}

/// What one functional gave and what it took.
#[derive(Clone, PartialEq, Debug)]
pub(super) struct FunctionalOutcome {
    pub(super) results: Vec<Outcome>,
    pub(super) evaluations: u64,
    pub(super) seconds: f64,
    pub(super) limit: Option<Limit>,
}

/// Where the value is below this fraction of the integral of |f|, the tolerance is relative to that integral.
pub(super) const NEGLIGIBLE: f64 = 1e-4;

/// The error allowed for a value with this integral of |f|.
pub(super) fn allowed(settings: &Settings, relative: f64, value: f64, magnitude: f64) -> f64 {
    let reference = if value.abs() < NEGLIGIBLE * magnitude { magnitude } else { value.abs() };
    settings.absolute.max(relative * reference)
}

/// Everything a run works on.
pub(super) struct Run<'a> {
    pub(super) model: &'a Model,
    pub(super) functionals: &'a [Functional],
    pub(super) graph: Graph,
    pub(super) bindings: Bindings,
    pub(super) settings: &'a Settings,
    pub(super) progress: &'a dyn Progress,
    /// Evaluations of the passes that are done.
    pub(super) done: Cell<u64>,
    /// Work that the passes to come may still spend, in additions; counts only where the budget is the default.
    pub(super) work_left: Cell<u64>,
}

/// Default work of one pass, in additions: 20 million evaluations of a short formula, some seconds.
const PASS_WORK: u64 = 2_500_000_000;

/// Default work of a whole run: a few hard patches have [`PASS_WORK`] each, many hard ones share what is left.
pub(super) const RUN_WORK: u64 = 4 * PASS_WORK;

/// Work for finding kinks and sharp places of one patch at least, however many patches there are.
const LEAST_PREPARATION: u64 = 20_000_000;

/// Default evaluations of a pass at most, whatever they cost.
const MOST_EVALUATIONS: u64 = 20_000_000;

/// A dear integrand that is not smooth gets this many evaluations, as far as three times [`PASS_WORK`] goes.
const HARD_EVALUATIONS: u64 = 50_000;

/// Default evaluations of a pass at least, whatever they cost: what a smooth integrand needs.
const LEAST_EVALUATIONS: u64 = 5_000;

/// Densities of one side of one patch that are integrated together.
struct Pass {
    patch: PatchId,
    reversed: bool,
    densities: Vec<ExpressionId>,
    /// For a density that depends on earlier results: its derivatives by them, whose integrals carry their errors.
    sensitivities: Vec<(usize, SymbolId)>,
}

impl Run<'_> {
    /// Outcomes of `wanted` (with everything they depend on) at the given relative tolerance.
    pub(super) fn outcomes(
        &mut self,
        wanted: &[FunctionalId],
        relative: f64,
    ) -> Result<FxHashMap<FunctionalId, FunctionalOutcome>, IntegralError> {
        let mut outcomes: FxHashMap<FunctionalId, FunctionalOutcome> = FxHashMap::default();
        let mut waiting = self.with_dependencies(wanted);
        while !waiting.is_empty() {
            let (ready, rest): (Vec<_>, Vec<_>) = waiting
                .into_iter()
                .partition(|id| self.functionals[id.0].depends_on.iter().all(|earlier| outcomes.contains_key(earlier)));
            waiting = rest;
            self.run_level(&ready, relative, &mut outcomes)?;
            for id in &ready {
                let results = &self.functionals[id.0].results;
                for (&symbol, result) in results.iter().zip(&outcomes[id].results) {
                    self.bindings.set(symbol, result.bounded.value);
                }
            }
        }
        Ok(outcomes)
    }

    fn with_dependencies(&self, wanted: &[FunctionalId]) -> Vec<FunctionalId> {
        let mut needed: Vec<FunctionalId> = Vec::new();
        let mut todo = wanted.to_vec();
        while let Some(id) = todo.pop() {
            if !needed.contains(&id) {
                needed.push(id);
                todo.extend(&self.functionals[id.0].depends_on);
            }
        }
        needed.sort_unstable();
        needed
    }

    /// One pass for each side of each patch, shared by all functionals of the level.
    fn run_level(
        &mut self,
        level: &[FunctionalId],
        relative: f64,
        outcomes: &mut FxHashMap<FunctionalId, FunctionalOutcome>,
    ) -> Result<(), IntegralError> {
        let pivots: Vec<Pivot> = level.iter().map(|id| self.pivot(*id)).collect();
        let mut passes: Vec<Pass> = Vec::new();
        // For each functional, the passes that serve it: (pass, first density, count, weight).
        let mut shares: Vec<Vec<(usize, usize, usize, f64)>> = vec![Vec::new(); level.len()];
        for (index, id) in level.iter().enumerate() {
            let functional = &self.functionals[id.0];
            for &(coefficient, patch) in &functional.chain.terms {
                let reversed = coefficient < 0;
                let pass = match passes.iter().position(|pass| pass.patch == patch && pass.reversed == reversed) {
                    Some(pass) => pass,
                    None => {
                        passes.push(Pass { patch, reversed, densities: Vec::new(), sensitivities: Vec::new() });
                        passes.len() - 1
                    }
                };
                let surface = self.surface(patch, reversed);
                let symbols = &self.model.surface_symbols;
                let wanted = densities(&mut self.graph, &surface, symbols, functional, &pivots[index]);
                let first = passes[pass].densities.len();
                shares[index].push((pass, first, wanted.len(), coefficient.unsigned_abs() as f64));
                passes[pass].densities.extend(wanted);
            }
        }
        for pass in &mut passes {
            self.add_sensitivities(pass, outcomes);
        }
        let mut integrals = Vec::with_capacity(passes.len());
        for pass in &passes {
            let start = Instant::now();
            let integral = self.integrate_pass(pass, relative)?;
            self.done.set(self.done.get() + integral.evaluations);
            integrals.push((integral, start.elapsed().as_secs_f64()));
        }
        for ((id, shares), pivot) in level.iter().zip(&shares).zip(&pivots) {
            let outcome = self.collect(*id, shares, pivot, &passes, &integrals, outcomes);
            outcomes.insert(*id, outcome);
        }
        Ok(())
    }

    fn surface(&mut self, patch: PatchId, reversed: bool) -> Surface {
        let patch = &self.model.patches[patch.0];
        let negative = (patch.orientation < 0) != reversed;
        Surface::from_map(&mut self.graph, patch.position, patch.variables, negative)
    }

    fn add_sensitivities(&mut self, pass: &mut Pass, outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>) {
        for index in 0..pass.densities.len() {
            let density = pass.densities[index];
            for symbol in self.graph.symbols_of(&[density]) {
                let earlier = outcomes.keys().any(|id| self.functionals[id.0].results.contains(&symbol));
                if earlier {
                    let derivative = differentiate(&mut self.graph, density, symbol);
                    pass.densities.push(derivative);
                    pass.sensitivities.push((index, symbol));
                }
            }
        }
    }

    fn integrate_pass(&mut self, pass: &Pass, relative: f64) -> Result<Integral, IntegralError> {
        let patch: &Patch = &self.model.patches[pass.patch.0];
        let trim = patch.trim.map(|trim| {
            let surface = self.surface(pass.patch, pass.reversed);
            at_point(&mut self.graph, &surface, &self.model.surface_symbols, &[trim])[0]
        });
        if self.graph.is_full() {
            return Err(IntegralError::new(
                "too-large",
                format!("{}: the formulas need more than {} nodes", patch.name, Graph::MAXIMUM_NODES),
            ));
        }
        let question = Question { patch, densities: &pass.densities, trim, bindings: &self.bindings };
        let budget = |integrand: &PatchIntegrand| {
            let default = || default_evaluations(integrand.work(), self.work_left.get());
            self.settings.evaluations.unwrap_or_else(default)
        };
        let integrand =
            question.prepare(&mut self.graph, &budget, (self.work_left.get() / 8).max(LEAST_PREPARATION))?;
        let (work, budget) = (integrand.work(), budget(&integrand));
        let wanted = pass.densities.len() - pass.sensitivities.len();
        let tolerance = |k: usize, value: f64, magnitude: f64| {
            // Integrals that only carry errors need two digits.
            if k < wanted { allowed(self.settings, relative, value, magnitude) } else { 1e-2 * magnitude }
        };
        let keep_going = |evaluations: u64| {
            self.progress.evaluations(self.done.get() + evaluations);
            !self.progress.cancelled()
        };
        let mut integral = integrate(&integrand, &integrand.sides, &tolerance, budget, &keep_going)
            .map_err(|failure| failure_message(&question, &self.graph, failure))?;
        for (k, &unsplit) in integrand.unsplit.iter().enumerate() {
            integral.errors[k] += unsplit;
            if integral.errors[k] > tolerance(k, integral.values[k], integral.magnitudes[k]) && unsplit > 0.0 {
                integral.limit = integral.limit.or(Some(Limit::Evaluations));
            }
        }
        self.work_left
            .set(self.work_left.get().saturating_sub(work.saturating_mul(integral.evaluations) + integrand.prepared));
        Ok(integral)
    }

    /// Sums the shares of a functional over its patches and combines them to its results.
    fn collect(
        &self,
        id: FunctionalId,
        shares: &[(usize, usize, usize, f64)],
        pivot: &Pivot,
        passes: &[Pass],
        integrals: &[(Integral, f64)],
        earlier: &FxHashMap<FunctionalId, FunctionalOutcome>,
    ) -> FunctionalOutcome {
        let kind = &self.functionals[id.0].kind;
        let count = shares.first().map_or(0, |share| share.2);
        let mut sums = vec![Bounded::exact(0.0); count];
        let mut magnitudes = vec![0.0; count];
        let mut roundings = vec![0.0; count];
        let mut outcome = FunctionalOutcome { results: Vec::new(), evaluations: 0, seconds: 0.0, limit: None };
        for &(pass, first, count, weight) in shares {
            let (integral, seconds) = &integrals[pass];
            for k in 0..count {
                let index = first + k;
                let mut error = integral.errors[index];
                for (position, (density, symbol)) in passes[pass].sensitivities.iter().enumerate() {
                    if *density == index {
                        let slot = passes[pass].densities.len() - passes[pass].sensitivities.len() + position;
                        let slope = integral.magnitudes[slot] + integral.errors[slot];
                        error += slope * self.error_of(*symbol, earlier);
                    }
                }
                sums[k] = sums[k].add(Bounded { value: integral.values[index], error }.scale(weight));
                magnitudes[k] += weight * integral.magnitudes[index];
                roundings[k] += weight * integral.rounding[index];
            }
            outcome.evaluations += integral.evaluations;
            outcome.seconds += seconds;
            outcome.limit = outcome.limit.or(integral.limit);
        }
        let size: Vec<f64> = combine_magnitudes(&sums, &magnitudes, count);
        outcome.results = combine(kind, &sums, pivot)
            .into_iter()
            .enumerate()
            .map(|(k, bounded)| Outcome {
                bounded,
                magnitude: size.get(k).copied().unwrap_or(bounded.value.abs()),
                rounding: if count == 1 { roundings[0] } else { 0.0 },
            })
            .collect();
        if count == 10 {
            let largest = magnitudes[4..7].iter().sum();
            outcome.results.iter_mut().for_each(|result| result.magnitude = largest);
        }
        outcome
    }

    fn error_of(&self, symbol: SymbolId, outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>) -> f64 {
        outcomes
            .iter()
            .find_map(|(id, outcome)| {
                let position = self.functionals[id.0].results.iter().position(|&result| result == symbol)?;
                Some(outcome.results[position].bounded.error)
            })
            .unwrap_or(0.0)
    }

    /// A point in the middle of the chain.
    fn pivot(&mut self, id: FunctionalId) -> Pivot {
        let mut sum = [0.0; 3];
        let mut count = 0.0;
        for &(_, patch) in &self.functionals[id.0].chain.terms {
            for position in sample_positions(&self.graph, &self.model.patches[patch.0], &self.bindings) {
                if position.iter().all(|x| x.is_finite()) {
                    for axis in 0..3 {
                        sum[axis] += position[axis];
                    }
                    count += 1.0;
                }
            }
        }
        let position = sum.map(|x| if count > 0.0 { x / count } else { 0.0 });
        let symbols = ["pivot_x", "pivot_y", "pivot_z"].map(|name| self.graph.new_symbol(name));
        for axis in 0..3 {
            self.bindings.set(symbols[axis], position[axis]);
        }
        Pivot { symbols, position }
    }
}

/// How many evaluations a pass gets where nobody says: as many as the work allows. Counts only, so that it is the same on
/// every machine.
fn default_evaluations(work: u64, work_left: u64) -> u64 {
    let usual = PASS_WORK.min(work_left / 2) / work;
    usual.max(HARD_EVALUATIONS.min(3 * usual)).clamp(LEAST_EVALUATIONS, MOST_EVALUATIONS)
}

/// What the tolerance of each result is relative to where its value is negligible.
fn combine_magnitudes(sums: &[Bounded], magnitudes: &[f64], count: usize) -> Vec<f64> {
    if count == 4 {
        // A centroid: first moments over the mass.
        return magnitudes[1..].iter().map(|moment| moment / sums[0].value.abs()).collect();
    }
    magnitudes.to_vec()
}

/// Positions at nine points of the region, for a rough idea of where a patch is.
fn sample_positions(graph: &Graph, patch: &Patch, bindings: &Bindings) -> Vec<[f64; 3]> {
    let mut positions = Vec::new();
    let finite = |bound: Bound, other: f64| match bound {
        Bound::Finite(_) => other,
        Bound::MinusInfinity => -1.0,
        Bound::PlusInfinity => 1.0,
    };
    for first in [0.2, 0.5, 0.8] {
        for second in [0.2, 0.5, 0.8] {
            let mut coordinates = [0.0; 2];
            // Twice: the second time the interval that depends on the other variable has its value.
            for _ in 0..2 {
                for (index, share) in [first, second].into_iter().enumerate() {
                    let interval = &patch.intervals[index];
                    let value_of = |symbol: SymbolId| match patch.variables.iter().position(|&v| v == symbol) {
                        Some(position) => coordinates[position],
                        None => bindings.value(symbol),
                    };
                    let end = |bound: Bound| match bound {
                        Bound::Finite(formula) => evaluate(graph, &[formula], value_of)[0],
                        other => finite(other, 0.0),
                    };
                    let (lower, upper) = (end(interval.lower), end(interval.upper));
                    coordinates[index] = lower + share * (upper - lower);
                }
            }
            let value_of = |symbol: SymbolId| match patch.variables.iter().position(|&v| v == symbol) {
                Some(position) => coordinates[position],
                None => bindings.value(symbol),
            };
            let position = evaluate(graph, &patch.position, value_of);
            positions.push([position[0], position[1], position[2]]);
        }
    }
    positions
}

fn failure_message(question: &Question<'_>, graph: &Graph, failure: Failure) -> IntegralError {
    let name = &question.patch.name;
    match failure {
        Failure::NotFinite { outer, inner, component } => {
            let place = question.place(graph, outer, inner, component);
            let [(u, at_u), (v, at_v)] = &place.variables;
            let mut error = IntegralError::new(
                "undefined",
                format!("{name} is undefined at {u} = {at_u}, {v} = {at_v}: `{}` is {}", place.expression, place.value),
            )
            .with_hint("cut the region so that it stays inside the domain, or trim it with `where`");
            error.place = Some(Box::new(place));
            error
        }
        Failure::Divergent { outer, inner, exponent } => {
            let end = outer.or(inner).unwrap_or(f64::NAN);
            let which = if outer.is_some() { "outer" } else { "inner" };
            IntegralError::new(
                "divergent",
                format!(
                    "{name}: the integrand grows like distance^{exponent:.2} towards {end} of the {which} variable, \
                     so the integral does not exist"
                ),
            )
            .with_hint("cut the region before that end")
        }
    }
}
