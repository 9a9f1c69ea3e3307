//! Exact partial derivatives of formulas.
//!
//! One sweep over the nodes in evaluation order gives each node its derivative from those of its operands (forward
//! differentiation on the graph), so that there is no recursion on depth and shared parts are differentiated once.
//! Of the equal forms of a derivative we build the one that reuses the node itself (`exp`, `sqrt`, `tan`, quotients)
//! unless that one cancels: `1 - tanh(x)^2` loses all digits for large x, so `tanh` has `1/cosh(x)^2`, and
//! `1 - x^2` is written `(1 - x)*(1 + x)`.
//!
//! Where a function has a kink or a jump (`abs`, `sign`, `min`, `max`, `if`) the result is the derivative on either
//! side; the jump itself contributes nothing.

use super::function::{BinaryFunction, Function};
use super::graph::{ExpressionId, Graph, Node, SymbolId};

/// The partial derivative of `root` by `by`, every other symbol held fixed.
///
/// The rules are exact for real arguments inside the domains of the functions. `x^y` with `y` depending on `by` contains
/// `log(x)` and is undefined at x = 0. The only function without a derivative here is the polygamma function of order
/// 255, whose values are beyond double precision anyway: its derivative is `0/0`, undefined.
pub fn differentiate(graph: &mut Graph, root: ExpressionId, by: SymbolId) -> ExpressionId {
    differentiate_all(graph, &[root], by)[0]
}

/// The partial derivatives of several formulas in one sweep, see [`differentiate`].
pub fn differentiate_all(graph: &mut Graph, roots: &[ExpressionId], by: SymbolId) -> Vec<ExpressionId> {
    let Some(last) = roots.iter().max() else { return Vec::new() };
    let mut derivatives: Vec<Derivative> = vec![None; last.index() + 1];
    for id in graph.reachable(roots) {
        let node = graph.node(id);
        derivatives[id.index()] = match node {
            Node::Symbol(symbol) if symbol == by => Some(graph.integer(1)),
            _ if node.children().as_slice().iter().all(|child| derivatives[child.index()].is_none()) => None,
            _ => node_derivative(graph, id, node, |child: ExpressionId| derivatives[child.index()])
                .filter(|&derivative| !graph.as_number(derivative).is_some_and(|number| number.is_zero())),
        };
    }
    let zero = graph.integer(0);
    roots.iter().map(|root| derivatives[root.index()].unwrap_or(zero)).collect()
}

/// `None` is the derivative 0 of a node that does not depend on the symbol.
type Derivative = Option<ExpressionId>;

/// The derivative of `node` (at `id`), of which at least one operand has a derivative.
fn node_derivative(
    graph: &mut Graph,
    id: ExpressionId,
    node: Node,
    slope: impl Fn(ExpressionId) -> Derivative,
) -> Derivative {
    match node {
        Node::Number(_) | Node::Pi | Node::Symbol(_) => None,
        Node::Truth(_) | Node::Less(..) | Node::LessEqual(..) | Node::And(..) | Node::Or(..) | Node::Not(_) => None,
        Node::Negate(a) => slope(a).map(|da| graph.negate(da)),
        Node::Add(a, b) => sum(graph, slope(a), slope(b)),
        Node::Subtract(a, b) => difference(graph, slope(a), slope(b)),
        Node::Multiply(a, b) if a == b => {
            let two = graph.integer(2);
            let twice = graph.multiply(two, a);
            slope(a).map(|da| graph.multiply(twice, da))
        }
        Node::Multiply(a, b) => {
            let left = slope(a).map(|da| graph.multiply(da, b));
            let right = slope(b).map(|db| graph.multiply(a, db));
            sum(graph, left, right)
        }
        // (a/b)' = (a' - (a/b) b')/b
        Node::Divide(a, b) => {
            let change = slope(b).map(|db| graph.multiply(id, db));
            difference(graph, slope(a), change).map(|top| graph.divide(top, b))
        }
        Node::Power(base, exponent) => power_derivative(graph, id, (base, slope(base)), (exponent, slope(exponent))),
        Node::Call(function, a) => {
            let da = slope(a)?;
            match function_derivative(graph, function, a, id) {
                Outer::Zero => None,
                Outer::Times(factor) => Some(graph.multiply(factor, da)),
                Outer::Over(divisor) => Some(graph.divide(da, divisor)),
            }
        }
        Node::Call2(function, a, b) => function2_derivative(graph, function, id, (a, slope(a)), (b, slope(b))),
        Node::Select(condition, yes, no) => choose(graph, condition, slope(yes), slope(no)),
    }
}

/// x^y: y x^(y-1) x' where y is constant, else x^y (y' log(x) + y x'/x).
fn power_derivative(
    graph: &mut Graph,
    value: ExpressionId,
    (x, dx): (ExpressionId, Derivative),
    (y, dy): (ExpressionId, Derivative),
) -> Derivative {
    let Some(dy) = dy else {
        let dx = dx?;
        let one = graph.integer(1);
        let lower = graph.subtract(y, one);
        let reduced = graph.power(x, lower);
        let factor = graph.multiply(y, reduced);
        return Some(graph.multiply(factor, dx));
    };
    let log = graph.call(Function::Log, x);
    let by_exponent = graph.multiply(dy, log);
    let by_base = dx.map(|dx| {
        let top = graph.multiply(y, dx);
        graph.divide(top, x)
    });
    sum(graph, Some(by_exponent), by_base).map(|rate| graph.multiply(value, rate))
}

/// How the derivative of f(x) follows from that of x.
enum Outer {
    /// 0 wherever it exists.
    Zero,
    /// `factor * x'`
    Times(ExpressionId),
    /// `x' / divisor`
    Over(ExpressionId),
}

/// f'(x) for `value` = f(x).
fn function_derivative(graph: &mut Graph, function: Function, x: ExpressionId, value: ExpressionId) -> Outer {
    use Outer::{Over, Times, Zero};
    let one = graph.integer(1);
    match function {
        Function::Sin => Times(graph.call(Function::Cos, x)),
        Function::Cos => {
            let sine = graph.call(Function::Sin, x);
            Times(graph.negate(sine))
        }
        Function::Tan => {
            let square = graph.square(value);
            Times(graph.add(one, square))
        }
        Function::Asin => {
            let product = one_minus_square(graph, x);
            Over(graph.square_root(product))
        }
        Function::Acos => {
            let product = one_minus_square(graph, x);
            let root = graph.square_root(product);
            Over(graph.negate(root))
        }
        Function::Atan => Over(one_plus_square(graph, x)),
        Function::Sinh => Times(graph.call(Function::Cosh, x)),
        Function::Cosh => Times(graph.call(Function::Sinh, x)),
        Function::Tanh => {
            let cosine = graph.call(Function::Cosh, x);
            Over(graph.square(cosine))
        }
        Function::Asinh => {
            let sum = one_plus_square(graph, x);
            Over(graph.square_root(sum))
        }
        Function::Acosh => {
            let (low, high) = (graph.subtract(x, one), graph.add(x, one));
            let (low, high) = (graph.square_root(low), graph.square_root(high));
            Over(graph.multiply(low, high))
        }
        Function::Atanh => Over(one_minus_square(graph, x)),
        Function::Exp => Times(value),
        Function::Log => Over(x),
        Function::Sqrt => {
            let two = graph.integer(2);
            Over(graph.multiply(two, value))
        }
        Function::Cbrt => {
            let three = graph.integer(3);
            let square = graph.square(value);
            Over(graph.multiply(three, square))
        }
        Function::Abs => Times(graph.call(Function::Sign, x)),
        Function::Sign => Zero,
        Function::Erf => Times(gauss(graph, x)),
        Function::Erfc => {
            let density = gauss(graph, x);
            Times(graph.negate(density))
        }
        Function::Gamma => {
            let digamma = graph.call(Function::Polygamma(0), x);
            Times(graph.multiply(value, digamma))
        }
        Function::LogGamma => Times(graph.call(Function::Polygamma(0), x)),
        Function::Polygamma(u8::MAX) => {
            let zero = graph.integer(0);
            Times(graph.divide(zero, zero))
        }
        Function::Polygamma(n) => Times(graph.call(Function::Polygamma(n + 1), x)),
        Function::BesselJ(n) => Times(bessel_derivative(graph, Function::BesselJ, n, x, value)),
        Function::BesselY(n) => Times(bessel_derivative(graph, Function::BesselY, n, x, value)),
        Function::EllipticK(u8::MAX) => Times(next_elliptic(graph, true, x, value)),
        Function::EllipticK(n) => Times(graph.call(Function::EllipticK(n + 1), x)),
        Function::EllipticE(u8::MAX) => Times(next_elliptic(graph, false, x, value)),
        Function::EllipticE(n) => Times(graph.call(Function::EllipticE(n + 1), x)),
    }
}

/// `hypot`, `atan2`, `min`, `max`.
fn function2_derivative(
    graph: &mut Graph,
    function: BinaryFunction,
    value: ExpressionId,
    (a, da): (ExpressionId, Derivative),
    (b, db): (ExpressionId, Derivative),
) -> Derivative {
    match function {
        // d atan2(a, b) = (b a' - a b')/(a^2 + b^2)
        BinaryFunction::Atan2 => {
            let left = da.map(|da| graph.multiply(b, da));
            let right = db.map(|db| graph.multiply(a, db));
            let (a2, b2) = (graph.square(a), graph.square(b));
            let norm = graph.add(a2, b2);
            difference(graph, left, right).map(|top| graph.divide(top, norm))
        }
        BinaryFunction::Hypot => {
            let left = da.map(|da| graph.multiply(a, da));
            let right = db.map(|db| graph.multiply(b, db));
            sum(graph, left, right).map(|top| graph.divide(top, value))
        }
        BinaryFunction::Min => {
            let second = graph.less(b, a);
            choose(graph, second, db, da)
        }
        BinaryFunction::Max => {
            let second = graph.less(a, b);
            choose(graph, second, db, da)
        }
    }
}

fn sum(graph: &mut Graph, a: Derivative, b: Derivative) -> Derivative {
    match (a, b) {
        (Some(a), Some(b)) => Some(graph.add(a, b)),
        (one, None) | (None, one) => one,
    }
}

fn difference(graph: &mut Graph, a: Derivative, b: Derivative) -> Derivative {
    match (a, b) {
        (Some(a), Some(b)) => Some(graph.subtract(a, b)),
        (a, None) => a,
        (None, Some(b)) => Some(graph.negate(b)),
    }
}

fn choose(graph: &mut Graph, condition: ExpressionId, yes: Derivative, no: Derivative) -> Derivative {
    if yes.is_none() && no.is_none() {
        return None;
    }
    let zero = graph.integer(0);
    Some(graph.select(condition, yes.unwrap_or(zero), no.unwrap_or(zero)))
}

/// (1 - x)(1 + x)
fn one_minus_square(graph: &mut Graph, x: ExpressionId) -> ExpressionId {
    let one = graph.integer(1);
    let (low, high) = (graph.subtract(one, x), graph.add(one, x));
    graph.multiply(low, high)
}

fn one_plus_square(graph: &mut Graph, x: ExpressionId) -> ExpressionId {
    let one = graph.integer(1);
    let square = graph.square(x);
    graph.add(one, square)
}

/// 2/sqrt(pi) exp(-x^2), the derivative of erf.
fn gauss(graph: &mut Graph, x: ExpressionId) -> ExpressionId {
    let (two, pi) = (graph.integer(2), graph.pi());
    let root = graph.square_root(pi);
    let scale = graph.divide(two, root);
    let square = graph.square(x);
    let exponent = graph.negate(square);
    let exponential = graph.call(Function::Exp, exponent);
    graph.multiply(scale, exponential)
}

/// C_0' = -C_1, C_n' = (C_(n-1) - C_(n+1))/2 for C = J and Y (DLMF 10.6.1, 10.6.3); at the highest order that a node
/// can hold C_n' = C_(n-1) - (n/x) C_n (DLMF 10.6.2).
fn bessel_derivative(
    graph: &mut Graph,
    family: impl Fn(u8) -> Function,
    n: u8,
    x: ExpressionId,
    value: ExpressionId,
) -> ExpressionId {
    if n == 0 {
        let first = graph.call(family(1), x);
        return graph.negate(first);
    }
    let below = graph.call(family(n - 1), x);
    if n == u8::MAX {
        let order = graph.integer(i64::from(n));
        let ratio = graph.divide(order, x);
        let own = graph.multiply(ratio, value);
        return graph.subtract(below, own);
    }
    let above = graph.call(family(n + 1), x);
    let twice = graph.subtract(below, above);
    let half = graph.fraction(1, 2);
    graph.multiply(half, twice)
}

/// The 256th derivative of K(m) or E(m), which has no node of its own, from the two below it by the differential
/// equations (see `elliptic.rs`) differentiated j = 254 times:
///
///   m(1-m) K^(j+2) = (j + 1/2)^2 K^(j) - (j+1)(1-2m) K^(j+1),
///   m(1-m) E^(j+2) = (j^2 - 1/4) E^(j) - (j + 1 - (2j+1) m) E^(j+1).
fn next_elliptic(graph: &mut Graph, first_kind: bool, m: ExpressionId, value: ExpressionId) -> ExpressionId {
    let j = i64::from(u8::MAX) - 1;
    let below = u8::MAX - 1;
    let (lower, lower_factor, constant, slope) = if first_kind {
        (Function::EllipticK(below), graph.fraction((2 * j + 1) * (2 * j + 1), 4), j + 1, 2 * (j + 1))
    } else {
        (Function::EllipticE(below), graph.fraction(4 * j * j - 1, 4), j + 1, 2 * j + 1)
    };
    let lower = graph.call(lower, m);
    let low = graph.multiply(lower_factor, lower);
    let (constant, slope) = (graph.integer(constant), graph.integer(slope));
    let linear = graph.multiply(slope, m);
    let factor = graph.subtract(constant, linear);
    let high = graph.multiply(factor, value);
    let top = graph.subtract(low, high);
    let one = graph.integer(1);
    let rest = graph.subtract(one, m);
    let bottom = graph.multiply(m, rest);
    graph.divide(top, bottom)
}

#[cfg(test)]
mod tests {
    use super::super::{evaluate_one, print};
    use super::*;

    fn with_x() -> (Graph, SymbolId, ExpressionId) {
        let mut graph = Graph::new();
        let symbol = graph.new_symbol("x");
        let x = graph.symbol(symbol);
        (graph, symbol, x)
    }

    #[test]
    fn nodes_are_reused() {
        let (mut g, sx, x) = with_x();
        let root = g.square_root(x);
        let derivative = differentiate(&mut g, root, sx);
        assert_eq!(print(&g, derivative), "1/(2*sqrt(x))");
        let exponential = g.call(Function::Exp, x);
        assert_eq!(differentiate(&mut g, exponential, sx), exponential);
        let seven = g.integer(7);
        let power = g.power(x, seven);
        let derivative = differentiate(&mut g, power, sx);
        assert_eq!(print(&g, derivative), "7*x^6");
    }

    #[test]
    fn constants_build_nothing() {
        let (mut g, sx, x) = with_x();
        let other = g.new_symbol("a");
        let a = g.symbol(other);
        let sine = g.call(Function::Sin, a);
        let deep = g.power(sine, a);
        let size = g.len();
        let derivative = differentiate(&mut g, deep, sx);
        assert!(g.as_number(derivative).unwrap().is_zero());
        assert_eq!(g.len(), size);
        let less = g.less(x, a);
        let zero = g.integer(0);
        let step = g.select(less, a, zero);
        assert_eq!(differentiate(&mut g, step, sx), zero);
    }

    #[test]
    fn the_highest_orders_have_derivatives_or_are_undefined() {
        let (mut g, sx, x) = with_x();
        let polygamma = g.call(Function::Polygamma(255), x);
        let derivative = differentiate(&mut g, polygamma, sx);
        assert!(evaluate_one(&g, derivative, |_| 2.0).is_nan());
        for function in
            [Function::BesselJ(255), Function::BesselY(255), Function::EllipticK(255), Function::EllipticE(255)]
        {
            let value = g.call(function, x);
            let derivative = differentiate(&mut g, value, sx);
            assert!(g.as_number(derivative).is_none(), "{function:?}");
        }
    }

    #[test]
    fn long_chains_need_no_stack() {
        let (mut g, sx, x) = with_x();
        let mut y = x;
        for _ in 0..20_000 {
            let sine = g.call(Function::Sin, y);
            y = g.add(sine, x);
        }
        let derivative = differentiate(&mut g, y, sx);
        assert!(evaluate_one(&g, derivative, |_| 0.5).is_finite());
    }

    #[test]
    fn many_derivatives_end_in_a_full_graph_not_in_a_panic() {
        let (mut g, sx, x) = with_x();
        let mut y = x;
        for _ in 0..40 {
            let tangent = g.call(Function::Tan, y);
            y = g.multiply(tangent, x);
        }
        for _ in 0..60 {
            y = differentiate(&mut g, y, sx);
            if g.is_full() {
                return;
            }
        }
        panic!("the bound was never reached");
    }
}
