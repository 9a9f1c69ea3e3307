//! Runs the integrals behind a set of functionals: all integrands of one patch share one pass over its nodes.

use super::bounded::Bounded;
use super::error::{IntegralError, Progress};
use super::functionals::{Pivot, combine, densities};
use super::outcome::Settings;
use super::patch_integrand::{PatchIntegrand, Question};
use crate::expression::{ExpressionId, Graph, SymbolId, differentiate, evaluate};
use crate::geometry::{Surface, at_point};
use crate::language::{Bindings, Bound, Functional, FunctionalId, Model, Patch, PatchId};
use crate::quadrature::{Axis, Failure, Growth, Integral, Limit, PlaneIntegrand, integrate};
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
    /// Why it is not known whether one of its integrals exists.
    pub(super) doubt: Option<String>,
    /// Why there are no results, where there are none.
    pub(super) failure: Option<IntegralError>,
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

/// Work for finding kinks and sharp places of one patch at least, while some of [`RUN_WORK`] is left.
const LEAST_PREPARATION: u64 = 20_000_000;

/// The same when nothing is left: what a formula takes that is smooth or nearly so.
const LAST_PREPARATION: u64 = 2_000_000;

/// Default evaluations of a pass at most, whatever they cost.
const MOST_EVALUATIONS: u64 = 20_000_000;

/// A dear integrand that is not smooth gets this many evaluations, as far as three times [`PASS_WORK`] goes.
const HARD_EVALUATIONS: u64 = 50_000;

/// Default evaluations of a pass at least, whatever they cost: what a smooth integrand needs.
const LEAST_EVALUATIONS: u64 = 10_000;

/// Functionals that need integrals over one side of one patch.
struct Pass {
    patch: PatchId,
    reversed: bool,
    members: Vec<Member>,
}

/// What one functional needs of a pass.
struct Member {
    /// Its position in the level.
    functional: usize,
    /// Which of its shares this is.
    share: usize,
    densities: Vec<ExpressionId>,
}

/// What one patch of its chain contributes to a functional.
#[derive(Clone)]
struct Share {
    /// Multiplicity of the patch in the chain.
    weight: f64,
    /// The integrals, once they are there, or why there are none.
    integrals: Result<Option<Part>, IntegralError>,
}

/// The integrals of one member.
#[derive(Clone)]
struct Part {
    sums: Vec<Bounded>,
    magnitudes: Vec<f64>,
    rounding: Vec<f64>,
    evaluations: u64,
    seconds: f64,
    limit: Option<Limit>,
    /// Why it is not known whether the integral exists.
    doubt: Option<String>,
}

/// Densities of several members that are integrated together.
struct Joint {
    patch: PatchId,
    reversed: bool,
    /// Those that are wanted, then the derivatives that carry the errors of earlier results.
    densities: Vec<ExpressionId>,
    wanted: usize,
    /// First wanted density of each member, and the end of the last one.
    starts: Vec<usize>,
    /// For each derivative: of which density, and by which result.
    sensitivities: Vec<(usize, SymbolId)>,
}

/// Why integrals over a patch could not be had, and which density is to blame if only one is.
struct JointFailure {
    error: IntegralError,
    component: Option<usize>,
}

impl From<IntegralError> for JointFailure {
    fn from(error: IntegralError) -> Self {
        Self { error, component: None }
    }
}

impl Joint {
    fn new(
        graph: &mut Graph,
        patch: PatchId,
        reversed: bool,
        members: &[Member],
        is_result: impl Fn(SymbolId) -> bool,
    ) -> Self {
        let mut densities: Vec<ExpressionId> = Vec::new();
        let mut starts = vec![0];
        for member in members {
            densities.extend(&member.densities);
            starts.push(densities.len());
        }
        let wanted = densities.len();
        let mut sensitivities = Vec::new();
        for index in 0..wanted {
            let density = densities[index];
            for symbol in graph.symbols_of(&[density]).into_iter().filter(|&symbol| is_result(symbol)) {
                densities.push(differentiate(graph, density, symbol));
                sensitivities.push((index, symbol));
            }
        }
        Self { patch, reversed, densities, wanted, starts, sensitivities }
    }

    /// The member that a density belongs to.
    fn member_of(&self, component: usize) -> usize {
        let density = match component.checked_sub(self.wanted) {
            Some(position) => self.sensitivities[position].0,
            None => component,
        };
        self.starts.partition_point(|&start| start <= density) - 1
    }

    /// The integrals of one member, with what the errors of earlier results add to theirs.
    fn part(&self, member: usize, integral: &Integral, seconds: f64, error_of: &dyn Fn(SymbolId) -> f64) -> Part {
        let range = self.starts[member]..self.starts[member + 1];
        let sum = |index: usize| {
            let carried = self.sensitivities.iter().enumerate().filter(|(_, (density, _))| *density == index);
            let error = carried.fold(integral.errors[index], |error, (position, (_, symbol))| {
                let slot = self.wanted + position;
                error + (integral.magnitudes[slot] + integral.errors[slot]) * error_of(*symbol)
            });
            Bounded { value: integral.values[index], error }
        };
        Part {
            sums: range.clone().map(sum).collect(),
            magnitudes: integral.magnitudes[range.clone()].to_vec(),
            rounding: integral.rounding[range].to_vec(),
            evaluations: integral.evaluations,
            seconds,
            limit: integral.limit,
            doubt: None,
        }
    }
}

impl FunctionalOutcome {
    /// No result, for a reason.
    fn failed(failure: IntegralError, results: usize) -> Self {
        let undefined = Bounded { value: f64::NAN, error: f64::INFINITY };
        let result = Outcome { bounded: undefined, magnitude: 0.0, rounding: 0.0 };
        Self {
            results: vec![result; results],
            evaluations: 0,
            seconds: 0.0,
            limit: None,
            doubt: None,
            failure: Some(failure),
        }
    }
}

/// Sums the shares of a functional over its patches and combines them to its results.
fn collect(functional: &Functional, shares: Vec<Share>, pivot: &Pivot) -> FunctionalOutcome {
    let mut parts = Vec::with_capacity(shares.len());
    for share in shares {
        match share.integrals {
            Ok(part) => parts.extend(part.map(|part| (share.weight, part))),
            Err(failure) => return FunctionalOutcome::failed(failure, functional.results.len()),
        }
    }
    let count = parts.first().map_or(0, |(_, part)| part.sums.len());
    let mut sums = vec![Bounded::exact(0.0); count];
    let mut magnitudes = vec![0.0; count];
    let mut roundings = vec![0.0; count];
    let mut outcome = FunctionalOutcome {
        results: Vec::new(),
        evaluations: 0,
        seconds: 0.0,
        limit: None,
        doubt: None,
        failure: None,
    };
    for (weight, part) in parts {
        for k in 0..count {
            sums[k] = sums[k].add(part.sums[k].scale(weight));
            magnitudes[k] += weight * part.magnitudes[k];
            roundings[k] += weight * part.rounding[k];
        }
        outcome.evaluations += part.evaluations;
        outcome.seconds += part.seconds;
        outcome.limit = outcome.limit.or(part.limit);
        outcome.doubt = outcome.doubt.or(part.doubt);
    }
    let size: Vec<f64> = combine_magnitudes(&sums, &magnitudes, count);
    outcome.results = combine(&functional.kind, &sums, pivot)
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

impl Run<'_> {
    /// Outcomes of `wanted` (with everything they depend on) at the given relative tolerance.
    pub(super) fn outcomes(
        &mut self,
        wanted: &[FunctionalId],
        relative: f64,
    ) -> FxHashMap<FunctionalId, FunctionalOutcome> {
        let mut outcomes: FxHashMap<FunctionalId, FunctionalOutcome> = FxHashMap::default();
        let mut waiting = self.with_dependencies(wanted);
        while !waiting.is_empty() {
            let (ready, rest): (Vec<_>, Vec<_>) = waiting
                .into_iter()
                .partition(|id| self.functionals[id.0].depends_on.iter().all(|earlier| outcomes.contains_key(earlier)));
            waiting = rest;
            self.run_level(&ready, relative, &mut outcomes);
            for id in &ready {
                let results = &self.functionals[id.0].results;
                for (&symbol, result) in results.iter().zip(&outcomes[id].results) {
                    self.bindings.set(symbol, result.bounded.value);
                }
            }
        }
        outcomes
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
    ) {
        let pivots: Vec<Pivot> = level.iter().map(|id| self.pivot(*id)).collect();
        let mut passes: Vec<Pass> = Vec::new();
        let mut shares: Vec<Vec<Share>> = vec![Vec::new(); level.len()];
        for (index, id) in level.iter().enumerate() {
            let functional = &self.functionals[id.0];
            if functional.depends_on.iter().any(|earlier| outcomes[earlier].failure.is_some()) {
                continue;
            }
            for &(coefficient, patch) in &functional.chain.terms {
                let reversed = coefficient < 0;
                let surface = self.surface(patch, reversed);
                let symbols = &self.model.surface_symbols;
                let densities = densities(&mut self.graph, &surface, symbols, functional, &pivots[index]);
                let member = Member { functional: index, share: shares[index].len(), densities };
                shares[index].push(Share { weight: coefficient.unsigned_abs() as f64, integrals: Ok(None) });
                match passes.iter_mut().find(|pass| pass.patch == patch && pass.reversed == reversed) {
                    Some(pass) => pass.members.push(member),
                    None => passes.push(Pass { patch, reversed, members: vec![member] }),
                }
            }
        }
        for pass in passes {
            self.run_pass(pass, relative, outcomes, &mut shares);
        }
        for ((id, shares), pivot) in level.iter().zip(shares).zip(&pivots) {
            let functional = &self.functionals[id.0];
            let earlier = functional.depends_on.iter().find_map(|earlier| outcomes[earlier].failure.clone());
            let outcome = match earlier {
                Some(failure) => FunctionalOutcome::failed(failure, functional.results.len()),
                None => collect(functional, shares, pivot),
            };
            outcomes.insert(*id, outcome);
        }
    }

    /// Integrates the members of a pass together. One whose integral fails is taken out and tried alone, and
    /// the others begin again.
    fn run_pass(
        &mut self,
        pass: Pass,
        relative: f64,
        outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>,
        shares: &mut [Vec<Share>],
    ) {
        let Pass { patch, reversed, members } = pass;
        let mut groups = vec![members];
        while let Some(mut members) = groups.pop() {
            let joint = Joint::new(&mut self.graph, patch, reversed, &members, |symbol| {
                outcomes.keys().any(|id| self.functionals[id.0].results.contains(&symbol))
            });
            let start = Instant::now();
            match self.integrate_joint(&joint, relative) {
                // Doubt about one integral must not keep the others from their tolerance.
                Ok(Integral { limit: Some(Limit::Growth(growth)), evaluations, .. }) if members.len() > 1 => {
                    self.done.set(self.done.get() + evaluations);
                    let member = members.remove(joint.member_of(growth.component));
                    groups.extend([members, vec![member]]);
                }
                Ok(integral) => {
                    self.done.set(self.done.get() + integral.evaluations);
                    let seconds = start.elapsed().as_secs_f64();
                    let error_of = |symbol: SymbolId| self.error_of(symbol, outcomes);
                    let doubt = match integral.limit {
                        Some(Limit::Growth(growth)) => Some(self.doubt(&joint, growth)),
                        _ => None,
                    };
                    for (index, member) in members.iter().enumerate() {
                        let part = joint.part(index, &integral, seconds, &error_of);
                        let part = Part { doubt: doubt.clone(), ..part };
                        shares[member.functional][member.share].integrals = Ok(Some(part));
                    }
                }
                // A sound integral can overflow in the map that another one needs at an end: each is judged alone.
                Err(JointFailure { component: Some(component), .. }) if members.len() > 1 => {
                    let member = members.remove(joint.member_of(component));
                    groups.extend([members, vec![member]]);
                }
                // A formula that is too large for one kernel may fit in parts.
                Err(JointFailure { error, component: None }) if error.code == "formula" && members.len() > 1 => {
                    groups.extend(members.into_iter().map(|member| vec![member]));
                }
                Err(JointFailure { error, .. }) => {
                    for member in members {
                        shares[member.functional][member.share].integrals = Err(error.clone());
                    }
                }
            }
        }
    }

    fn surface(&mut self, patch: PatchId, reversed: bool) -> Surface {
        let patch = &self.model.patches[patch.0];
        let negative = (patch.orientation < 0) != reversed;
        Surface::from_map(&mut self.graph, patch.position, patch.variables, negative)
    }

    fn integrate_joint(&mut self, joint: &Joint, relative: f64) -> Result<Integral, JointFailure> {
        let patch: &Patch = &self.model.patches[joint.patch.0];
        let trim = patch.trim.map(|trim| {
            let surface = self.surface(joint.patch, joint.reversed);
            at_point(&mut self.graph, &surface, &self.model.surface_symbols, &[trim])[0]
        });
        if self.graph.is_full() {
            let message = format!("{}: the formulas need more than {} nodes", patch.name, Graph::MAXIMUM_NODES);
            return Err(IntegralError::new("too-large", message).into());
        }
        let question = Question { patch, densities: &joint.densities, trim, bindings: &self.bindings };
        let budget = |integrand: &PatchIntegrand| {
            let default = || default_evaluations(integrand.work(), self.work_left.get());
            self.settings.evaluations.unwrap_or_else(default)
        };
        let least = if self.work_left.get() > 0 { LEAST_PREPARATION } else { LAST_PREPARATION };
        let integrand = question.prepare(&mut self.graph, &budget, (self.work_left.get() / 4).max(least))?;
        let (work, budget) = (integrand.work(), budget(&integrand));
        let tolerance = |k: usize, value: f64, magnitude: f64| {
            // Integrals that only carry errors need two digits.
            if k < joint.wanted { allowed(self.settings, relative, value, magnitude) } else { 1e-2 * magnitude }
        };
        // A pass that fails has spent its evaluations too.
        let spent = Cell::new(0);
        let keep_going = |evaluations: u64| {
            spent.set(evaluations);
            self.progress.evaluations(self.done.get() + evaluations);
            !self.progress.cancelled()
        };
        let result = integrate(&integrand, &integrand.sides, &tolerance, budget, &keep_going);
        let evaluations = result.as_ref().map_or(spent.get(), |integral| integral.evaluations);
        self.work_left.set(self.work_left.get().saturating_sub(work.saturating_mul(evaluations) + integrand.prepared));
        let mut integral = result.map_err(|failure| joint_failure(&question, &self.graph, failure))?;
        for (k, &unsplit) in integrand.unsplit.iter().enumerate() {
            integral.errors[k] += unsplit;
            if integral.errors[k] > tolerance(k, integral.values[k], integral.magnitudes[k]) && unsplit > 0.0 {
                integral.limit = integral.limit.or(Some(Limit::Evaluations));
            }
        }
        Ok(integral)
    }

    /// Says where an integrand grows so fast that samples cannot tell whether its integral exists.
    fn doubt(&self, joint: &Joint, growth: Growth) -> String {
        let patch = &self.model.patches[joint.patch.0];
        let question = Question { patch, densities: &joint.densities, trim: None, bindings: &self.bindings };
        let text = growth_text(&question, &self.graph, growth);
        format!("{}: {text}: whether the integral exists cannot be told from samples", patch.name)
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

fn joint_failure(question: &Question<'_>, graph: &Graph, failure: Failure) -> JointFailure {
    let name = &question.patch.name;
    match failure {
        Failure::NotFinite { outer, inner, component } => {
            let (place, remedy) = question.place(graph, outer, inner, component);
            let [(u, at_u), (v, at_v)] = &place.variables;
            let where_to = format!("at {u} = {at_u:?}, {v} = {at_v:?}");
            let message = if place.expression.is_empty() {
                format!("{name}: the integral overflows {where_to}")
            } else {
                format!("{name} is undefined {where_to}: `{}` is {}", place.expression, place.value)
            };
            let cut = || "cut the region so that it stays inside the domain, or trim it with `where`".to_owned();
            let mut error = IntegralError::new("undefined", message).with_hint(remedy.unwrap_or_else(cut));
            error.place = Some(Box::new(place));
            JointFailure { error, component: Some(component) }
        }
        Failure::Divergent(growth) => {
            let message = format!("{name}: {}, so the integral does not exist", growth_text(question, graph, growth));
            let error = IntegralError::new("divergent", message).with_hint("cut the region before that end");
            JointFailure { error, component: Some(growth.component) }
        }
    }
}

/// How an integrand grows, and towards which end.
fn growth_text(question: &Question<'_>, graph: &Graph, growth: Growth) -> String {
    let outer = question.outer(graph);
    let variable = match growth.axis {
        Axis::Outer => outer,
        Axis::Inner => 1 - outer,
    };
    let variable = graph.symbol_name(question.patch.variables[variable]);
    let Growth { end, exponent, .. } = growth;
    if end.is_finite() {
        format!("the integrand grows like distance^{exponent:.3} towards {variable} = {end}")
    } else {
        let power = -2.0 - exponent;
        let verb = if power < 0.0 { "falls only" } else { "grows" };
        let base = if end < 0.0 { format!("(-{variable})") } else { variable.to_owned() };
        format!("the integrand {verb} like {base}^{power:.3} towards {variable} = {end}")
    }
}
