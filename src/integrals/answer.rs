//! Answers: named values of a sheet computed from the functionals they rest on, with their errors.

use super::bounded::Bounded;
use super::error::{IntegralError, Progress};
use super::exact::mark_exact;
use super::outcome::{Answer, AnswerFailure, AnswerKind, Component, Principal, Settings};
use super::rounding::{evaluate_bounded, evaluate_with_errors};
use super::run::{FunctionalOutcome, NEGLIGIBLE, Outcome, RUN_WORK, Run};
use super::sides::chain_warnings;
use crate::expression::{ExpressionId, Graph, SymbolId, differentiate, evaluate};
use crate::language::{
    Bindings, Chain, Dimension, Functional, FunctionalId, FunctionalKind, Model, Span, Unit, nearest,
};
use crate::quadrature::Limit;
use crate::simplify::exact_area;
use nalgebra::Matrix3;
use rustc_hash::FxHashMap;
use std::cell::Cell;

/// What a sum of doubles can be had to, relative to the value.
const FINEST: f64 = 16.0 * f64::EPSILON;

/// What is to be answered.
struct Target {
    name: String,
    components: Vec<ExpressionId>,
    dimension: Dimension,
    shown_as: Option<Unit>,
    depends_on: Vec<FunctionalId>,
    /// Its definition in the text.
    span: Span,
}

/// All answers or none: [`answer_each`], where the first failure of an answer fails the whole.
///
/// # Errors
/// For an unknown name, and for the first answer without a value; the message then names it with its line and column.
pub fn answer(
    model: &Model,
    bindings: &Bindings,
    requests: &[String],
    settings: &Settings,
    progress: &dyn Progress,
) -> Result<Vec<Answer>, IntegralError> {
    let answers = answer_each(model, bindings, requests, settings, progress)?;
    match answers.iter().find_map(|answer| answer.failure.clone()) {
        Some(failure) => {
            let AnswerFailure { mut error, line, column, .. } = *failure;
            error.message = format!("line {line}, column {column}: {}", error.message);
            Err(error)
        }
        None => Ok(answers),
    }
}

/// Answers `requests`: names of values, patches or chains (their area) in the sheet. Without any, every answer of the
/// sheet, or the area of each patch where the sheet has no answers.
///
/// Values are in coherent SI units. The error of an answer covers the quadrature, rounding, and the errors of all
/// integrals that went in; a shared integral counts once, so that `a/a` is exact.
///
/// An answer whose density is undefined in the region, or whose integral does not exist, has a [`Answer::failure`]; the
/// others have their values. Not reaching the tolerance is no failure: the answer then says [`AnswerKind::Unreached`].
///
/// # Errors
/// For an unknown name.
pub fn answer_each(
    model: &Model,
    bindings: &Bindings,
    requests: &[String],
    settings: &Settings,
    progress: &dyn Progress,
) -> Result<Vec<Answer>, IntegralError> {
    let mut graph = model.graph.clone();
    let mut functionals = model.functionals.clone();
    let targets = targets(model, &mut graph, &mut functionals, requests)?;
    let mut wanted: Vec<FunctionalId> = targets.iter().flat_map(|target| target.depends_on.clone()).collect();
    wanted.sort_unstable();
    wanted.dedup();
    let mut run = Run {
        model,
        functionals: &functionals,
        graph,
        bindings: bindings.clone(),
        settings,
        progress,
        done: Cell::new(0),
        work_left: Cell::new(RUN_WORK),
    };
    let mut relative = 0.5 * settings.relative;
    for attempt in 0..3 {
        let outcomes = run.outcomes(&wanted, relative);
        let mut answers = Vec::with_capacity(targets.len());
        for target in &targets {
            answers.push(assemble(target, &mut run, &outcomes));
        }
        // An answer that combines integrals may need them more exactly than it is asked for itself.
        let short = answers.iter().any(|answer| answer.kind == AnswerKind::Unreached && answer.failure.is_none());
        let stuck = outcomes.values().any(|outcome| outcome.limit.is_some());
        if !short || stuck || attempt == 2 {
            for (answer, target) in answers.iter_mut().zip(&targets) {
                answer.closed_form = closed_form(answer, target, &run);
            }
            mark_exact(model, bindings, &mut answers);
            return Ok(answers);
        }
        relative *= 0.03;
    }
    unreachable!("the last attempt returns")
}

/// The exact formula of an answer that is the area of one patch. A formula whose value the number does not enclose is not
/// shown.
fn closed_form(answer: &Answer, target: &Target, run: &Run<'_>) -> Option<String> {
    let ([component], [functional]) = (&target.components[..], &target.depends_on[..]) else { return None };
    let functional = &run.functionals[functional.0];
    let ([(1 | -1, patch)], FunctionalKind::Area) = (&functional.chain.terms[..], &functional.kind) else {
        return None;
    };
    if run.graph.as_symbol(*component) != functional.results.first().copied() {
        return None;
    }
    let (form, value) = exact_area(run.model, *patch, &|symbol| run.bindings.value(symbol))?;
    let number = answer.components.first()?;
    let encloses = (number.value - value).abs() <= number.error + 1e-12 * value.abs();
    encloses.then(|| form.text())
}

fn targets(
    model: &Model,
    graph: &mut Graph,
    functionals: &mut Vec<Functional>,
    requests: &[String],
) -> Result<Vec<Target>, IntegralError> {
    let value = |value: &crate::language::NamedValue| Target {
        name: value.name.clone(),
        components: value.components.clone(),
        dimension: value.dimension,
        shown_as: value.shown_as.clone(),
        depends_on: value.depends_on.clone(),
        span: value.span,
    };
    let mut chosen = Vec::new();
    if requests.is_empty() {
        chosen.extend(model.values.iter().filter(|value| value.is_answer).map(value));
        if chosen.is_empty() {
            for (index, patch) in model.patches.iter().enumerate().filter(|(_, patch)| patch.named) {
                let chain = Chain { terms: vec![(1, crate::language::PatchId(index))] };
                chosen.push(area_of(model, &patch.name, chain, graph, functionals));
            }
        }
        return Ok(chosen);
    }
    for name in requests {
        if let Some(found) = model.values.iter().find(|value| value.name == *name) {
            chosen.push(value(found));
        } else if let Some(patch) = model.patches.iter().position(|patch| patch.named && patch.name == *name) {
            let chain = Chain { terms: vec![(1, crate::language::PatchId(patch))] };
            chosen.push(area_of(model, name, chain, graph, functionals));
        } else if let Some(chain) = model.chains.iter().find(|chain| chain.name == *name) {
            chosen.push(area_of(model, name, chain.chain.clone(), graph, functionals));
        } else {
            let known = model
                .values
                .iter()
                .map(|value| value.name.as_str())
                .chain(model.chains.iter().map(|chain| chain.name.as_str()))
                .chain(model.patches.iter().filter(|patch| patch.named).map(|patch| patch.name.as_str()));
            let error = IntegralError::new("unknown-name", format!("the sheet has no value or surface `{name}`"));
            return Err(match nearest(name, known) {
                Some(near) => error.with_hint(format!("did you mean `{near}`?")),
                None => error,
            });
        }
    }
    Ok(chosen)
}

/// The area of a chain that the sheet does not ask for by itself.
fn area_of(model: &Model, name: &str, chain: Chain, graph: &mut Graph, functionals: &mut Vec<Functional>) -> Target {
    let text = format!("area({name})");
    let symbol = graph.new_symbol(&text);
    let length = chain.terms.first().map_or(Dimension::NONE, |(_, patch)| model.patches[patch.0].dimension);
    let span = chain.terms.first().map_or_else(Default::default, |(_, patch)| model.patches[patch.0].span);
    let id = FunctionalId(functionals.len());
    functionals.push(Functional {
        text: text.clone(),
        kind: FunctionalKind::Area,
        chain,
        results: vec![symbol],
        depends_on: Vec::new(),
        span,
    });
    Target {
        name: text,
        components: vec![graph.symbol(symbol)],
        dimension: length.multiply(length).unwrap_or(length),
        shown_as: None,
        depends_on: vec![id],
        span,
    }
}

/// Labels of the components of a number, a vector and a tensor.
fn labels(count: usize) -> &'static [&'static str] {
    match count {
        3 => &["x", "y", "z"],
        6 => &["xx", "yy", "zz", "xy", "xz", "yz"],
        _ => &[""],
    }
}

fn assemble(target: &Target, run: &mut Run<'_>, outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>) -> Answer {
    let known = results(run.functionals, outcomes);
    let combined: Vec<Outcome> = target.components.iter().map(|&component| combine(component, run, &known)).collect();
    let components: Vec<Component> = combined
        .iter()
        .zip(labels(combined.len()))
        .map(|(outcome, label)| Component { label, value: outcome.bounded.value, error: outcome.bounded.error })
        .collect();
    let behind: Vec<FunctionalId> = closure(run.functionals, &target.depends_on);
    let largest = combined.iter().map(|outcome| outcome.bounded.value.abs()).fold(0.0, f64::max);
    let magnitude = combined.iter().map(|outcome| outcome.magnitude).fold(0.0, f64::max);
    let negligible = largest < NEGLIGIBLE * magnitude;
    let reference = if negligible { magnitude } else { largest };
    // A value that is zero within its rounding cannot be had more exactly, whatever the tolerance.
    let rounding = combined.iter().map(|outcome| outcome.rounding).fold(0.0, f64::max);
    let zero =
        !behind.is_empty() && combined.iter().all(|outcome| outcome.bounded.value.abs() <= outcome.bounded.error);
    let floor = if zero { 4.0 * rounding } else { 0.0 };
    let allowed = run.settings.absolute.max(run.settings.relative * reference).max(floor);
    let worst = components.iter().map(|component| component.error).fold(0.0, f64::max);
    let finite = components.iter().all(|component| component.value.is_finite() && component.error.is_finite());
    let reached = finite && worst <= allowed;
    let mut warnings = Vec::new();
    if zero && floor >= run.settings.relative * reference {
        warnings.push("zero within the rounding errors of the integrand".to_owned());
    } else if negligible && magnitude > 0.0 && !behind.is_empty() {
        warnings.push(format!(
            "the value is negligible beside the integral of |f| ({magnitude:.3e}); the tolerance is relative to that"
        ));
    }
    for id in &behind {
        for warning in chain_warnings(run, *id) {
            if !warnings.contains(&warning) {
                warnings.push(warning);
            }
        }
    }
    let limit = behind.iter().find_map(|id| outcomes.get(id).and_then(|outcome| outcome.limit));
    let doubt = behind.iter().find_map(|id| {
        let doubt = outcomes.get(id)?.doubt.as_ref()?;
        Some(format!("in `{}`, {doubt}", run.functionals[id.0].text))
    });
    let failure = failure(target, &components, &behind, run, outcomes);
    let reason = match &failure {
        Some(failure) => Some(failure.error.message.clone()),
        None => {
            (!reached).then(|| doubt.unwrap_or_else(|| reason(finite, limit, allowed < FINEST * largest, behind.len())))
        }
    };
    Answer {
        name: target.name.clone(),
        closed_form: None,
        allowed: (!reached && finite && failure.is_none()).then_some(allowed),
        principal: (combined.len() == 6).then(|| principal(&components)).flatten(),
        kind: if reached { AnswerKind::Estimate } else { AnswerKind::Unreached },
        reason,
        dimension: target.dimension,
        shown_as: target.shown_as.clone(),
        evaluations: behind.iter().filter_map(|id| outcomes.get(id)).map(|outcome| outcome.evaluations).sum(),
        seconds: behind.iter().filter_map(|id| outcomes.get(id)).map(|outcome| outcome.seconds).sum(),
        components,
        warnings,
        failure,
    }
}

/// Why the target has no value: the first integral behind it that has none, or a formula of results that is undefined.
fn failure(
    target: &Target,
    components: &[Component],
    behind: &[FunctionalId],
    run: &Run<'_>,
    outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>,
) -> Option<Box<AnswerFailure>> {
    let name = &target.name;
    let failed = behind.iter().find_map(|id| Some((id, outcomes.get(id)?.failure.as_ref()?)));
    let error = if let Some((id, error)) = failed {
        let mut error = error.clone();
        let text = &run.functionals[id.0].text;
        let part = if text == name { String::new() } else { format!(" in `{text}`") };
        error.message = format!("`{name}` has no value:{part} {}", error.message);
        error
    } else if components.iter().any(|component| !component.value.is_finite()) {
        let why = "a divisor is zero, or an argument is outside the domain of its function";
        IntegralError::new("undefined", format!("`{name}` has no value: its formula is undefined there, {why}"))
    } else {
        return None;
    };
    let (line, column) = run.model.source.line_column(target.span.start);
    Some(Box::new(AnswerFailure { error, span: target.span, line, column }))
}

fn reason(finite: bool, limit: Option<Limit>, too_fine: bool, integrals: usize) -> String {
    if !finite && limit.is_none() {
        return "there is no error bound: a divisor is zero within its error".to_owned();
    }
    let why = match limit {
        Some(Limit::Evaluations) => "the budget of evaluations is spent (raise --evaluations or loosen --rel)",
        Some(Limit::Rounding) => "rounding errors of the integrand are larger than the tolerance",
        Some(Limit::Stopped) => "the run was interrupted",
        Some(Limit::Growth(_)) => "whether the integral exists cannot be told from samples",
        None if integrals == 1 => "the error bound of the integral stays above the tolerance",
        None => "the errors of the integrals add up to more than the tolerance",
    };
    if !finite {
        return format!("{why}; there is no error bound");
    }
    if too_fine {
        return "the tolerance is below what double precision can give, about 4e-15 of the value".to_owned();
    }
    why.to_owned()
}

fn closure(functionals: &[Functional], wanted: &[FunctionalId]) -> Vec<FunctionalId> {
    let mut all: Vec<FunctionalId> = Vec::new();
    let mut todo = wanted.to_vec();
    while let Some(id) = todo.pop() {
        if !all.contains(&id) {
            all.push(id);
            todo.extend(&functionals[id.0].depends_on);
        }
    }
    all.sort_unstable();
    all
}

fn results(
    functionals: &[Functional],
    outcomes: &FxHashMap<FunctionalId, FunctionalOutcome>,
) -> FxHashMap<SymbolId, Outcome> {
    let mut known = FxHashMap::default();
    for (id, outcome) in outcomes {
        for (&symbol, &result) in functionals[id.0].results.iter().zip(&outcome.results) {
            known.insert(symbol, result);
        }
    }
    known
}

/// A formula over results: its value, the errors of the results times the slopes, and its own rounding.
///
/// Slopes are taken at the values and at both ends of each result's interval, so that a curved formula is covered too;
/// each result counts once, however often it stands in the formula.
fn combine(component: ExpressionId, run: &mut Run<'_>, known: &FxHashMap<SymbolId, Outcome>) -> Outcome {
    if let Some(symbol) = run.graph.as_symbol(component)
        && let Some(outcome) = known.get(&symbol)
    {
        return *outcome;
    }
    let used: Vec<SymbolId> =
        run.graph.symbols_of(&[component]).into_iter().filter(|symbol| known.contains_key(symbol)).collect();
    let own = evaluate_bounded(&run.graph, &[component], |symbol| run.bindings.value(symbol))[0];
    let mut error = own.error;
    let mut rounding = own.error;
    let mut magnitude = if used.is_empty() { own.value.abs() } else { 0.0 };
    for &symbol in &used {
        let slope = differentiate(&mut run.graph, component, symbol);
        let result = known[&symbol];
        let at = |shift: f64| {
            evaluate(&run.graph, &[slope], |other| {
                if other == symbol { result.bounded.value + shift } else { run.bindings.value(other) }
            })[0]
                .abs()
        };
        let steepest = at(0.0).max(at(result.bounded.error)).max(at(-result.bounded.error));
        error += steepest * result.bounded.error;
        magnitude += at(0.0) * result.magnitude;
        rounding += at(0.0) * result.rounding;
    }
    // Slopes at a few points say nothing where a divisor may be zero between them.
    let whole = evaluate_with_errors(&run.graph, &[component], |symbol| match known.get(&symbol) {
        Some(result) => result.bounded,
        None => Bounded::exact(run.bindings.value(symbol)),
    })[0];
    let error = if error.is_nan() || whole.error.is_infinite() { f64::INFINITY } else { error };
    Outcome { bounded: Bounded { value: own.value, error }, magnitude, rounding }
}

/// Principal moments and axes of a symmetric tensor; the moments move by at most the norm of the error (Weyl).
fn principal(components: &[Component]) -> Option<Principal> {
    let [xx, yy, zz, xy, xz, yz] = components else { return None };
    if components.iter().any(|component| !component.value.is_finite()) {
        return None;
    }
    let matrix = |part: fn(&Component) -> f64| {
        Matrix3::new(part(xx), part(xy), part(xz), part(xy), part(yy), part(yz), part(xz), part(yz), part(zz))
    };
    let values = matrix(|component| component.value);
    let errors = matrix(|component| component.error);
    let eigen = values.symmetric_eigen();
    let mut order = [0, 1, 2];
    order.sort_by(|&a, &b| eigen.eigenvalues[a].total_cmp(&eigen.eigenvalues[b]));
    let column = |index: usize| eigen.eigenvectors.column(order[index]).into_owned();
    let (first, second) = (column(0), column(1));
    let third = first.cross(&second);
    let row = |axis: &nalgebra::Vector3<f64>| [axis.x, axis.y, axis.z];
    Some(Principal {
        moments: order.map(|index| eigen.eigenvalues[index]),
        error: errors.norm() + 16.0 * f64::EPSILON * values.norm(),
        axes: [row(&first), row(&second), row(&third)],
    })
}
