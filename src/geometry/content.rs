//! Common factors of the components of a vector.
//!
//! The tangents of most surfaces carry factors that all their components share: a scale, the distance from the axis, the
//! sine of the colatitude. Taken out before the cross product, a factor is multiplied once instead of six times, and
//! |g a| = |g| |a| keeps the zero of g at a pole out of the square root. This looks at products as they are written;
//! finding hidden factors is the simplifier's job.

use crate::calculus::Vector;
use crate::expression::{BinaryFunction, ExpressionId, Function, Graph, Node};
use std::collections::BTreeMap;

/// The most factors a component is taken apart into; what is left is one factor.
const MAXIMUM_FACTORS: usize = 64;

/// A factor g and a vector a with `vector` = g a; g is 1 if nothing is shared.
pub(super) fn take_content(graph: &mut Graph, vector: &Vector) -> (ExpressionId, Vector) {
    let products: Vec<Option<Product>> = vector
        .iter()
        .map(|&component| {
            let zero = graph.as_number(component).is_some_and(|number| number.is_zero());
            (!zero).then(|| Product::of(graph, component))
        })
        .collect();
    let common = products.iter().flatten().map(|product| product.powers.clone()).reduce(|a, b| shared(&a, &b));
    let Some(common) = common.filter(|common| !common.is_empty()) else {
        return (graph.integer(1), *vector);
    };
    let reduced = [0, 1, 2].map(|axis| match &products[axis] {
        None => vector[axis],
        Some(product) => product.without(&common).build(graph),
    });
    let content = Product { negative: false, powers: common };
    (content.build(graph), reduced)
}

/// The product of `factors` with equal factors collected, and its absolute value.
///
/// Factors that cannot be negative (even powers, roots, exponentials, `cosh`) stand outside the bars.
pub(super) fn collect(graph: &mut Graph, factors: [ExpressionId; 3]) -> (ExpressionId, ExpressionId) {
    let partial = graph.multiply(factors[0], factors[1]);
    let all = graph.multiply(partial, factors[2]);
    let product = Product::of(graph, all);
    let value = product.build(graph);
    let (outside, inside): (Powers, Powers) =
        product.powers.into_iter().partition(|&(base, exponent)| exponent % 2 == 0 || never_negative(graph, base));
    let [outside, inside] = [outside, inside].map(|powers| Product { negative: false, powers }.build(graph));
    let bars = graph.call(Function::Abs, inside);
    (value, graph.multiply(outside, bars))
}

fn never_negative(graph: &Graph, formula: ExpressionId) -> bool {
    match graph.node(formula) {
        Node::Call(Function::Sqrt | Function::Exp | Function::Cosh | Function::Abs, _)
        | Node::Call2(BinaryFunction::Hypot, ..)
        | Node::Pi => true,
        Node::Number(number) => !graph.number_value(number).is_negative(),
        _ => false,
    }
}

/// Factors with their exponents.
type Powers = BTreeMap<ExpressionId, i64>;

/// A product of powers with a sign.
struct Product {
    negative: bool,
    powers: Powers,
}

impl Product {
    fn of(graph: &Graph, formula: ExpressionId) -> Self {
        let mut product = Product { negative: false, powers: BTreeMap::new() };
        let mut todo = vec![(formula, 1)];
        let mut steps = 0;
        while let Some((id, exponent)) = todo.pop() {
            steps += 1;
            match graph.node(id) {
                Node::Negate(a) => {
                    product.negative ^= exponent % 2 != 0;
                    todo.push((a, exponent));
                }
                Node::Multiply(a, b) if steps < MAXIMUM_FACTORS => todo.extend([(a, exponent), (b, exponent)]),
                Node::Divide(a, b) if steps < MAXIMUM_FACTORS => todo.extend([(a, exponent), (b, -exponent)]),
                node => {
                    let (base, power) = match node {
                        Node::Power(base, power) => match graph.as_number(power).and_then(|number| number.to_i64()) {
                            Some(n) if n.abs() <= MAXIMUM_FACTORS as i64 => (base, n),
                            _ => (id, 1),
                        },
                        _ => (id, 1),
                    };
                    *product.powers.entry(base).or_insert(0) += exponent * power;
                }
            }
        }
        product
    }

    fn without(&self, common: &Powers) -> Product {
        let left = self.powers.iter().map(|(&base, exponent)| (base, exponent - common.get(&base).unwrap_or(&0)));
        Product { negative: self.negative, powers: left.collect() }
    }

    fn build(&self, graph: &mut Graph) -> ExpressionId {
        let one = graph.integer(1);
        let (mut top, mut bottom) = (one, one);
        for (&base, &exponent) in &self.powers {
            let power = graph.integer_power(base, exponent.abs());
            if exponent > 0 {
                top = graph.multiply(top, power);
            } else {
                bottom = graph.multiply(bottom, power);
            }
        }
        let magnitude = graph.divide(top, bottom);
        if self.negative { graph.negate(magnitude) } else { magnitude }
    }
}

/// The powers in both: for each base with exponents of one sign the smaller magnitude.
fn shared(a: &Powers, b: &Powers) -> Powers {
    let both = a.iter().filter_map(|(&base, &first)| {
        let &second = b.get(&base)?;
        let smaller = first.abs().min(second.abs());
        (first.signum() == second.signum() && smaller > 0).then_some((base, first.signum() * smaller))
    });
    both.collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expression::print;

    #[test]
    fn shared_factors_come_out_with_their_smallest_power() {
        let mut g = Graph::new();
        let [a, b, c] = ["a", "b", "c"].map(|name| {
            let symbol = g.new_symbol(name);
            g.symbol(symbol)
        });
        // (a^3 b/c, -a^2/c, 0) = a^2/c (a b, -1, 0)
        let cube = g.integer_power(a, 3);
        let product = g.multiply(cube, b);
        let x = g.divide(product, c);
        let square = g.square(a);
        let quotient = g.divide(square, c);
        let y = g.negate(quotient);
        let zero = g.integer(0);
        let (content, reduced) = take_content(&mut g, &[x, y, zero]);
        assert_eq!(print(&g, content), "a^2/c");
        assert_eq!(reduced.map(|component| print(&g, component)), ["a*b", "-1", "0"]);
    }

    #[test]
    fn without_shared_factors_nothing_changes() {
        let mut g = Graph::new();
        let [a, b] = ["a", "b"].map(|name| {
            let symbol = g.new_symbol(name);
            g.symbol(symbol)
        });
        let sum = g.add(a, b);
        let product = g.multiply(a, b);
        let vector = [sum, product, a];
        let (content, reduced) = take_content(&mut g, &vector);
        assert_eq!((print(&g, content).as_str(), reduced), ("1", vector));
    }

    #[test]
    fn equal_factors_are_collected_and_even_powers_leave_the_bars() {
        let mut g = Graph::new();
        let [r, u] = ["r", "u"].map(|name| {
            let symbol = g.new_symbol(name);
            g.symbol(symbol)
        });
        let sine = g.call(Function::Sin, u);
        let wave = g.multiply(r, sine);
        let root = g.square_root(u);
        let (value, size) = collect(&mut g, [r, wave, root]);
        assert_eq!(print(&g, value), "r^2*sin(u)*sqrt(u)");
        assert_eq!(print(&g, size), "r^2*sqrt(u)*abs(sin(u))");
        let minus = g.negate(r);
        let one = g.integer(1);
        let (value, size) = collect(&mut g, [minus, one, one]);
        assert_eq!([print(&g, value), print(&g, size)], ["-r", "abs(r)"]);
    }

    #[test]
    fn repeated_squares_are_not_written_out() {
        let mut g = Graph::new();
        let symbol = g.new_symbol("a");
        let mut x = g.symbol(symbol);
        for _ in 0..200 {
            x = g.multiply(x, x);
        }
        let (content, _) = take_content(&mut g, &[x, x, x]);
        assert!(g.as_number(content).is_none());
    }
}
