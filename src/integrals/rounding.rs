//! Rounding errors of a formula evaluated in double precision, by running error analysis.
//!
//! Each node gets a bound for the difference between its computed and its exact value, to first order: what its operands
//! bring in, plus its own rounding. Functions are moved by their argument's error to see how much they change.

use super::bounded::Bounded;
use crate::expression::{ExpressionId, Function, Graph, Node, SymbolId, power, print_limited};

/// Relative error of one function of the table, a few units in the last place (measured in `tests/functions.rs`).
const FUNCTION_ERROR: f64 = 8.0 * f64::EPSILON;

/// A symbol's value, rounded once.
fn rounded(value: f64) -> Bounded {
    Bounded { value, error: f64::EPSILON * value.abs() }
}

/// Values of `roots` with their rounding errors, when symbols have the given values, each rounded once.
pub(super) fn evaluate_bounded(
    graph: &Graph,
    roots: &[ExpressionId],
    value_of: impl Fn(SymbolId) -> f64,
) -> Vec<Bounded> {
    evaluate_with_errors(graph, roots, |symbol| rounded(value_of(symbol)))
}

/// The same when symbols have errors of their own. An error is infinite where a divisor may be zero.
pub(super) fn evaluate_with_errors(
    graph: &Graph,
    roots: &[ExpressionId],
    bounded_of: impl Fn(SymbolId) -> Bounded,
) -> Vec<Bounded> {
    let known = every_node(graph, roots, bounded_of);
    roots.iter().map(|root| known[root.index()]).collect()
}

/// The first node under `root` that is undefined for some argument within the rounding error of its own: where
/// differently rounded arithmetic may find no value.
pub(super) fn at_edge_of_domain(
    graph: &Graph,
    root: ExpressionId,
    value_of: impl Fn(SymbolId) -> f64,
) -> Option<ExpressionId> {
    let known = every_node(graph, &[root], |symbol| rounded(value_of(symbol)));
    graph.reachable(&[root]).into_iter().find(|id| {
        let at = |child: ExpressionId| known[child.index()];
        let somewhere = |a: Bounded, f: &dyn Fn(f64) -> f64| {
            [a.value - a.error, a.value + a.error].iter().any(|&x| !f(x).is_finite())
        };
        match graph.node(*id) {
            Node::Call(function, a) => somewhere(at(a), &|x| function.evaluate(x)),
            Node::Power(a, b) => somewhere(at(a), &|x| power(x, at(b).value)),
            Node::Divide(_, b) => at(b).value.abs() <= at(b).error,
            _ => false,
        }
    })
}

/// For an undefined node whose argument is outside the domain by no more than its rounding error: how to write it.
pub(super) fn remedy(graph: &Graph, undefined: ExpressionId, value_of: impl Fn(SymbolId) -> f64) -> Option<String> {
    let (argument, exponent) = match graph.node(undefined) {
        Node::Call(_, argument) => (argument, None),
        Node::Power(base, exponent) => (base, Some(exponent)),
        _ => return None,
    };
    let values = evaluate_bounded(graph, &[argument, exponent.unwrap_or(argument)], value_of);
    let evaluate = |x: f64| match graph.node(undefined) {
        Node::Call(function, _) => function.evaluate(x),
        _ => power(x, values[1].value),
    };
    let Bounded { value, error } = values[0];
    if ![value - error, value + error].iter().any(|&x| evaluate(x).is_finite()) {
        return None;
    }
    let inside = print_limited(graph, argument, 80);
    let better = match graph.node(undefined) {
        Node::Call(Function::Sqrt, _) => format!("sqrt(max(0, {inside}))"),
        Node::Call(function @ (Function::Asin | Function::Acos), _) => {
            let name = function.name();
            format!("{name}(max(-1, min(1, {inside})))")
        }
        Node::Power(..) => format!("max(0, {inside})"),
        _ => return None,
    };
    Some(format!("only rounding takes the argument out of the domain: write `{better}`"))
}

/// All nodes under `roots`, by index.
fn every_node(graph: &Graph, roots: &[ExpressionId], bounded_of: impl Fn(SymbolId) -> Bounded) -> Vec<Bounded> {
    let Some(last) = roots.iter().max() else { return Vec::new() };
    let mut known = vec![Bounded::exact(f64::NAN); last.index() + 1];
    for id in graph.reachable(roots) {
        let at = |child: ExpressionId| known[child.index()];
        let moved = |a: Bounded, f: &dyn Fn(f64) -> f64| {
            let value = f(a.value);
            let change = [a.value - a.error, a.value + a.error]
                .map(|x| (f(x) - value).abs())
                .into_iter()
                .filter(|change| !change.is_nan())
                .fold(0.0, f64::max);
            Bounded { value, error: change + FUNCTION_ERROR * value.abs() }
        };
        let moved2 = |a: Bounded, b: Bounded, f: &dyn Fn(f64, f64) -> f64| {
            let first = moved(a, &|x| f(x, b.value));
            let second = moved(b, &|y| f(a.value, y));
            Bounded { value: first.value, error: first.error + second.error }
        };
        let truth = |value: bool| Bounded::exact(if value { 1.0 } else { 0.0 });
        known[id.index()] = match graph.node(id) {
            Node::Number(number) => {
                let exact = graph.number_value(number);
                let value = exact.to_f64();
                let error = if exact.is_integer() { 0.0 } else { f64::EPSILON * value.abs() };
                Bounded { value, error }
            }
            Node::Pi => Bounded { value: std::f64::consts::PI, error: f64::EPSILON },
            Node::Symbol(symbol) => bounded_of(symbol),
            Node::Truth(value) => truth(value),
            Node::Negate(a) => Bounded { value: -at(a).value, error: at(a).error },
            Node::Add(a, b) => at(a).add(at(b)),
            Node::Subtract(a, b) => at(a).subtract(at(b)),
            Node::Multiply(a, b) => at(a).multiply(at(b)),
            Node::Divide(a, b) => at(a).divide(at(b)),
            Node::Power(a, b) => moved2(at(a), at(b), &power),
            Node::Call(function, a) => moved(at(a), &|x| function.evaluate(x)),
            Node::Call2(function, a, b) => moved2(at(a), at(b), &|x, y| function.evaluate(x, y)),
            Node::Less(a, b) => truth(at(a).value < at(b).value),
            Node::LessEqual(a, b) => truth(at(a).value <= at(b).value),
            Node::And(a, b) => truth(at(a).value != 0.0 && at(b).value != 0.0),
            Node::Or(a, b) => truth(at(a).value != 0.0 || at(b).value != 0.0),
            Node::Not(a) => truth(at(a).value == 0.0),
            Node::Select(condition, yes, no) => {
                if at(condition).value != 0.0 {
                    at(yes)
                } else {
                    at(no)
                }
            }
        };
    }
    known
}
