//! Plain evaluation in double precision: the reference that the block interpreter and the machine code are held to.

use super::graph::{ExpressionId, Graph, Node, SymbolId};

/// Values of `roots` when every symbol has the value `value_of(symbol)`.
///
/// Truth values are 1 and 0. Undefined results are NaN or infinite, never an error.
pub fn evaluate(graph: &Graph, roots: &[ExpressionId], value_of: impl Fn(SymbolId) -> f64) -> Vec<f64> {
    let Some(last) = roots.iter().max() else { return Vec::new() };
    let mut values = vec![f64::NAN; last.index() + 1];
    for id in graph.reachable(roots) {
        values[id.index()] = node_value(graph, graph.node(id), &values, &value_of);
    }
    roots.iter().map(|root| values[root.index()]).collect()
}

/// Value of one formula, see [`evaluate`].
pub fn evaluate_one(graph: &Graph, root: ExpressionId, value_of: impl Fn(SymbolId) -> f64) -> f64 {
    evaluate(graph, &[root], value_of)[0]
}

/// Where and how a formula stops being defined.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Undefined {
    /// The innermost sub-expression that is not finite although its operands are.
    pub expression: ExpressionId,
    /// Its value: NaN or an infinity.
    pub value: f64,
}

/// The innermost cause for `root` not being finite, or `None` if it is finite.
///
/// Branches that are not selected are not looked at.
pub fn first_undefined(graph: &Graph, root: ExpressionId, value_of: impl Fn(SymbolId) -> f64) -> Option<Undefined> {
    let mut values = vec![f64::NAN; root.index() + 1];
    for id in graph.reachable(&[root]) {
        values[id.index()] = node_value(graph, graph.node(id), &values, &value_of);
    }
    if values[root.index()].is_finite() {
        return None;
    }
    let mut current = root;
    loop {
        let value = values[current.index()];
        let next = match graph.node(current) {
            Node::Select(condition, yes, no) => {
                if values[condition.index()].is_nan() {
                    condition
                } else if values[condition.index()] != 0.0 {
                    yes
                } else {
                    no
                }
            }
            node => match node.children().as_slice().iter().find(|child| !values[child.index()].is_finite()) {
                Some(&child) => child,
                None => return Some(Undefined { expression: current, value }),
            },
        };
        current = next;
    }
}

fn node_value(graph: &Graph, node: Node, values: &[f64], value_of: &impl Fn(SymbolId) -> f64) -> f64 {
    let at = |id: ExpressionId| values[id.index()];
    let holds = |truth: bool| if truth { 1.0 } else { 0.0 };
    match node {
        Node::Number(number) => graph.number_value(number).to_f64(),
        Node::Pi => std::f64::consts::PI,
        Node::Symbol(symbol) => value_of(symbol),
        Node::Negate(a) => -at(a),
        Node::Add(a, b) => at(a) + at(b),
        Node::Subtract(a, b) => at(a) - at(b),
        Node::Multiply(a, b) => at(a) * at(b),
        Node::Divide(a, b) => at(a) / at(b),
        Node::Power(a, b) => power(at(a), at(b)),
        Node::Call(function, a) => function.evaluate(at(a)),
        Node::Call2(function, a, b) => function.evaluate(at(a), at(b)),
        Node::Truth(truth) => holds(truth),
        Node::Less(a, b) => comparison(at(a), at(b), |x, y| x < y),
        Node::LessEqual(a, b) => comparison(at(a), at(b), |x, y| x <= y),
        Node::And(a, b) => {
            if at(a).is_nan() || at(b).is_nan() {
                f64::NAN
            } else {
                at(a) * at(b)
            }
        }
        Node::Or(a, b) => {
            if at(a).is_nan() || at(b).is_nan() {
                f64::NAN
            } else {
                holds(at(a) + at(b) > 0.0)
            }
        }
        Node::Not(a) => 1.0 - at(a),
        Node::Select(condition, yes, no) => {
            if at(condition).is_nan() {
                f64::NAN
            } else if at(condition) != 0.0 {
                at(yes)
            } else {
                at(no)
            }
        }
    }
}

/// A comparison with an undefined side is undefined, so that a domain error in a condition does not pick a branch.
fn comparison(a: f64, b: f64, holds: impl Fn(f64, f64) -> bool) -> f64 {
    if a.is_nan() || b.is_nan() {
        f64::NAN
    } else if holds(a, b) {
        1.0
    } else {
        0.0
    }
}

/// `base ^ exponent` as the sheet language means it.
///
/// Integer exponents up to 64 are products, half-integer ones up to 32 are products with one square root. `0^0` is
/// undefined here (only a literal exponent 0 gives 1, and that is folded away), and so is a negative base with an
/// exponent that is not an integer.
pub fn power(base: f64, exponent: f64) -> f64 {
    if exponent.is_nan() || base.is_nan() || (base == 0.0 && exponent == 0.0) {
        return f64::NAN;
    }
    if exponent.fract() == 0.0 && exponent.abs() <= 64.0 {
        let product = integer_power(base, exponent.abs() as u32);
        return if exponent < 0.0 { 1.0 / product } else { product };
    }
    let doubled = 2.0 * exponent;
    if doubled.fract() == 0.0 && doubled.abs() <= 64.0 {
        let product = base.sqrt() * integer_power(base, exponent.abs() as u32);
        return if exponent < 0.0 { 1.0 / product } else { product };
    }
    pxfm::f_pow(base, exponent)
}

/// `base ^ n` by binary powering, most significant bit first: the order in which the kernels multiply.
fn integer_power(base: f64, n: u32) -> f64 {
    if n == 0 {
        return 1.0;
    }
    let mut product = base;
    for bit in (0..n.ilog2()).rev() {
        product *= product;
        if n & (1 << bit) != 0 {
            product *= base;
        }
    }
    product
}

#[cfg(test)]
mod tests {
    use super::super::Function;
    use super::*;

    #[test]
    fn powers_follow_the_language() {
        assert_eq!(power(3.0, 5.0), 243.0);
        assert_eq!(power(2.0, -2.0), 0.25);
        assert_eq!(power(4.0, 1.5), 8.0);
        assert_eq!(power(4.0, -0.5), 0.5);
        assert!(power(-8.0, 1.0 / 3.0).is_nan());
        assert!(power(0.0, 0.0).is_nan());
        assert_eq!(power(0.0, 2.0), 0.0);
    }

    #[test]
    fn the_unselected_branch_leaks_nothing() {
        let mut g = Graph::new();
        let su = g.new_symbol("u");
        let u = g.symbol(su);
        let zero = g.integer(0);
        let root = g.call(Function::Sqrt, u);
        let condition = g.less(u, zero);
        let value = g.select(condition, zero, root);
        assert_eq!(evaluate_one(&g, value, |_| -1.0), 0.0);
        assert_eq!(evaluate_one(&g, value, |_| 4.0), 2.0);
    }

    #[test]
    fn the_innermost_cause_is_named() {
        let mut g = Graph::new();
        let su = g.new_symbol("u");
        let u = g.symbol(su);
        let one = g.integer(1);
        let inner = g.subtract(u, one);
        let log = g.call(Function::Log, inner);
        let whole = g.multiply(log, u);
        assert_eq!(first_undefined(&g, whole, |_| 0.5).unwrap().expression, log);
        assert_eq!(first_undefined(&g, whole, |_| 2.0), None);
    }

    #[test]
    fn long_chains_need_no_stack() {
        let mut g = Graph::new();
        let su = g.new_symbol("u");
        let u = g.symbol(su);
        let mut x = u;
        for _ in 0..50_000 {
            let sine = g.call(Function::Sin, x);
            x = g.add(sine, u);
        }
        assert!(evaluate_one(&g, x, |_| 0.5).is_finite());
    }
}
