//! Whether a short form may be evaluated, or only printed.
//!
//! Equal formulas lose different numbers of digits: 1 - cos(u) near u = 0 keeps none. Both the closed form and the norm of
//! the cross product are evaluated at points of the region, many of them close to its edges, with a running error bound
//! (every operation adds half a unit in the last place and passes on the errors of its operands). The closed form is
//! evaluated only where its bound is at most four times that of the norm.

use crate::expression::{BinaryFunction, ExpressionId, Graph, Node, SymbolId, power};

/// How much larger the error bound of the form that is evaluated may be.
const LARGEST_RATIO: f64 = 4.0;

/// A value and a bound on what rounding did to it.
#[derive(Clone, Copy, Debug)]
struct Bounded {
    value: f64,
    error: f64,
}

/// Where along an interval points are taken, as parts of its length: the inside, then closer and closer to both ends.
const PLACES: [f64; 11] = [0.5, 0.31, 0.73, 0.11, 0.91, 1e-2, 1e-4, 1e-6, 1.0 - 1e-2, 1.0 - 1e-4, 1.0 - 1e-6];

/// Whether `form` is at least about as accurate as `norm` on the region; false where that cannot be told.
pub(super) fn is_stable(
    graph: &Graph,
    form: ExpressionId,
    norm: ExpressionId,
    variables: [SymbolId; 2],
    limits: [(f64, f64); 2],
    value_of: &dyn Fn(SymbolId) -> f64,
) -> bool {
    if limits.iter().any(|(lower, upper)| !(lower.is_finite() && upper.is_finite())) {
        return false;
    }
    let at = |(lower, upper): (f64, f64), place: f64| lower + (upper - lower) * place;
    PLACES.iter().all(|&first| {
        PLACES.iter().all(|&second| {
            let point = [at(limits[0], first), at(limits[1], second)];
            let values = |symbol| match variables.iter().position(|&variable| variable == symbol) {
                Some(place) => point[place],
                None => value_of(symbol),
            };
            let [form, norm] = running_errors(graph, [form, norm], &values);
            let relative = |bounded: Bounded| bounded.error / bounded.value.abs();
            let (own, other) = (relative(form), relative(norm));
            // Where the norm itself is undefined or all noise the closed form can only be better.
            !other.is_finite() || own <= LARGEST_RATIO * other.max(f64::EPSILON)
        })
    })
}

/// Values with running error bounds, inputs taken as exact.
fn running_errors<const N: usize>(
    graph: &Graph,
    roots: [ExpressionId; N],
    value_of: &dyn Fn(SymbolId) -> f64,
) -> [Bounded; N] {
    let mut known: rustc_hash::FxHashMap<ExpressionId, Bounded> = rustc_hash::FxHashMap::default();
    let rounded = |value: f64, error: f64| Bounded { value, error: error + 0.5 * f64::EPSILON * value.abs() };
    for id in graph.reachable(&roots) {
        let get = |a: ExpressionId| known[&a];
        let bounded = match graph.node(id) {
            Node::Number(number) => rounded(graph.number_value(number).to_f64(), 0.0),
            Node::Pi => rounded(std::f64::consts::PI, 0.0),
            Node::Symbol(symbol) => Bounded { value: value_of(symbol), error: 0.0 },
            Node::Negate(a) => Bounded { value: -get(a).value, ..get(a) },
            Node::Add(a, b) => rounded(get(a).value + get(b).value, get(a).error + get(b).error),
            Node::Subtract(a, b) => rounded(get(a).value - get(b).value, get(a).error + get(b).error),
            Node::Multiply(a, b) => {
                let (x, y) = (get(a), get(b));
                rounded(x.value * y.value, x.value.abs() * y.error + y.value.abs() * x.error)
            }
            Node::Divide(a, b) => {
                let (x, y) = (get(a), get(b));
                let value = x.value / y.value;
                rounded(value, (x.error + value.abs() * y.error) / y.value.abs())
            }
            Node::Power(a, b) => {
                let (x, y) = (get(a), get(b).value);
                varied(x, |x| power(x, y))
            }
            Node::Call(function, a) => varied(get(a), |x| function.evaluate(x)),
            Node::Call2(function, a, b) => {
                let (x, y) = (get(a), get(b));
                match function {
                    BinaryFunction::Hypot => rounded(function.evaluate(x.value, y.value), x.error + y.error),
                    _ => {
                        let along = varied(x, |x| function.evaluate(x, y.value));
                        let across = varied(y, |y| function.evaluate(x.value, y));
                        Bounded { value: along.value, error: along.error + across.error }
                    }
                }
            }
            Node::Select(c, a, b) => {
                if get(c).value == 1.0 {
                    get(a)
                } else {
                    get(b)
                }
            }
            Node::Truth(truth) => Bounded { value: f64::from(u8::from(truth)), error: 0.0 },
            Node::Less(a, b) => Bounded { value: f64::from(u8::from(get(a).value < get(b).value)), error: 0.0 },
            Node::LessEqual(a, b) => Bounded { value: f64::from(u8::from(get(a).value <= get(b).value)), error: 0.0 },
            Node::And(a, b) => Bounded { value: get(a).value * get(b).value, error: 0.0 },
            Node::Or(a, b) => Bounded { value: get(a).value.max(get(b).value), error: 0.0 },
            Node::Not(a) => Bounded { value: 1.0 - get(a).value, error: 0.0 },
        };
        known.insert(id, bounded);
    }
    roots.map(|root| known[&root])
}

/// A function of a value with an error: the largest change at the ends of the error, and the rounding of the result.
fn varied(x: Bounded, function: impl Fn(f64) -> f64) -> Bounded {
    let value = function(x.value);
    // An argument without error still has half a unit from being a double; a change below that is not seen.
    let step = x.error.max(f64::EPSILON * x.value.abs());
    let change = (function(x.value + step) - value).abs().max((function(x.value - step) - value).abs());
    let change = if x.error == 0.0 { 0.0 } else { change };
    Bounded { value, error: change + 0.5 * f64::EPSILON * value.abs() }
}
