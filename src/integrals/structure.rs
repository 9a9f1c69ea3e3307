//! What a formula says about its own smoothness: where it has kinks, along which variable it is periodic, and where it
//! is nearly singular or sharply peaked.
//!
//! Everything here steers the quadrature: splits, rules and substitutions. None of it is trusted for the error figure,
//! which comes from differences between rules.

use crate::expression::{BinaryFunction, ExpressionId, Function, Graph, Node, SymbolId, evaluate};
use rustc_hash::FxHashSet;

/// A formula whose zero set holds kinks or jumps.
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Kink {
    pub(super) formula: ExpressionId,
    /// Whether it depends on each variable; on one of them at least.
    pub(super) along: [bool; 2],
}

/// The kinks and jumps of `roots`: arguments of abs and sign, differences of the two sides of min, max and comparisons.
pub(super) fn kinks(graph: &mut Graph, roots: &[ExpressionId], variables: [SymbolId; 2]) -> Vec<Kink> {
    let order = graph.reachable(roots);
    let along = dependence(graph, &order, variables);
    let mut known = FxHashSet::default();
    let mut found = Vec::new();
    for id in order {
        let (formula, along) = match graph.node(id) {
            Node::Call(Function::Abs | Function::Sign, a) => (a, along[a.index()]),
            Node::Call2(BinaryFunction::Min | BinaryFunction::Max, a, b) | Node::Less(a, b) | Node::LessEqual(a, b) => {
                let (first, second) = (along[a.index()], along[b.index()]);
                (graph.subtract(a, b), [first[0] || second[0], first[1] || second[1]])
            }
            _ => continue,
        };
        if along != [false, false] && known.insert(formula) {
            found.push(Kink { formula, along });
        }
    }
    found
}

/// Whether each node of `order`, operands before users, depends on each variable; by the index of the node.
fn dependence(graph: &Graph, order: &[ExpressionId], variables: [SymbolId; 2]) -> Vec<[bool; 2]> {
    let mut along = vec![[false; 2]; order.last().map_or(0, |last| last.index() + 1)];
    for &id in order {
        along[id.index()] = match graph.node(id) {
            Node::Symbol(symbol) => variables.map(|variable| variable == symbol),
            node => node.children().as_slice().iter().fold([false; 2], |all, child| {
                let own = along[child.index()];
                [all[0] || own[0], all[1] || own[1]]
            }),
        };
    }
    along
}

/// A formula whose extreme values mark a place that needs attention.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub(super) enum Feature {
    /// Where this is smallest in absolute value, the integrand is nearly singular: divisors, bases of roots and logarithms.
    Small(ExpressionId),
    /// Where this is largest, the integrand peaks: exponents, arguments that a bump is made of.
    Large(ExpressionId),
    /// Where this crosses zero, the integrand has a steep step: arguments of tanh, erf, atan, which saturate.
    Step(ExpressionId),
}

impl Feature {
    pub(super) fn formula(self) -> ExpressionId {
        let (Feature::Small(formula) | Feature::Large(formula) | Feature::Step(formula)) = self;
        formula
    }
}

/// The features of `roots` that depend on a variable.
pub(super) fn features(graph: &Graph, roots: &[ExpressionId], variables: [SymbolId; 2]) -> Vec<Feature> {
    let order = graph.reachable(roots);
    let along = dependence(graph, &order, variables);
    let mut known = FxHashSet::default();
    let mut found = Vec::new();
    for id in order {
        let feature = match graph.node(id) {
            Node::Call(Function::Exp, a) => Feature::Large(a),
            Node::Call(Function::Tanh | Function::Erf | Function::Erfc | Function::Atan, a) => Feature::Step(a),
            Node::Call(Function::Sqrt | Function::Log, a) => Feature::Small(a),
            Node::Divide(_, b) => Feature::Small(b),
            Node::Power(base, exponent) => match graph.as_number(exponent) {
                Some(number) if number.is_integer() && !number.is_negative() => continue,
                _ => Feature::Small(base),
            },
            _ => continue,
        };
        if along[feature.formula().index()] != [false, false] && known.insert(feature) {
            found.push(feature);
        }
    }
    found
}

/// How a node depends on the variable that is tested for a period.
#[derive(Clone, Copy, PartialEq)]
enum Dependence {
    None,
    /// A constant slope times the variable plus something independent of it.
    Linear(f64),
    Periodic,
    Other,
}

/// Whether every formula of `roots` is proved to repeat when `variable` grows by `period`: the variable occurs only inside
/// sin, cos and tan of arguments whose slope times the period is a multiple of the function's own period.
///
/// Slopes are evaluated for the parameter values at hand; a multiple is accepted within 4 units in the last place, which
/// is the rounding of the slope itself.
pub(super) fn is_periodic(
    graph: &Graph,
    roots: &[ExpressionId],
    variables: [SymbolId; 2],
    variable: SymbolId,
    period: f64,
    value_of: &dyn Fn(SymbolId) -> f64,
) -> bool {
    use Dependence::*;
    let Some(last) = roots.iter().max() else { return true };
    let order = graph.reachable(roots);
    let mut dependences = vec![None; last.index() + 1];
    let mut constant = vec![true; last.index() + 1];
    for &id in &order {
        let node = graph.node(id);
        constant[id.index()] = match node {
            Node::Symbol(symbol) => !variables.contains(&symbol),
            _ => node.children().as_slice().iter().all(|child| constant[child.index()]),
        };
    }
    let constants: Vec<ExpressionId> = order.iter().copied().filter(|id| constant[id.index()]).collect();
    let mut numbers = vec![f64::NAN; last.index() + 1];
    for (id, value) in constants.iter().zip(evaluate(graph, &constants, value_of)) {
        numbers[id.index()] = value;
    }
    let whole = |slope: f64, own_period: f64| {
        let turns = slope * period / own_period;
        turns.is_finite() && (turns - turns.round()).abs() <= 4.0 * f64::EPSILON * turns.abs()
    };
    for &id in &order {
        let of = |child: ExpressionId| dependences[child.index()];
        dependences[id.index()] = match graph.node(id) {
            Node::Symbol(symbol) if symbol == variable => Linear(1.0),
            Node::Negate(a) => match of(a) {
                Linear(slope) => Linear(-slope),
                other => other,
            },
            Node::Add(a, b) => match (of(a), of(b)) {
                (Linear(s), Linear(t)) => Linear(s + t),
                (Linear(s), None) | (None, Linear(s)) => Linear(s),
                (x, y) => join(x, y),
            },
            Node::Subtract(a, b) => match (of(a), of(b)) {
                (Linear(s), Linear(t)) => Linear(s - t),
                (Linear(s), None) => Linear(s),
                (None, Linear(s)) => Linear(-s),
                (x, y) => join(x, y),
            },
            Node::Multiply(a, b) => match (of(a), of(b)) {
                (Linear(s), None) if constant[b.index()] => Linear(s * numbers[b.index()]),
                (None, Linear(s)) if constant[a.index()] => Linear(s * numbers[a.index()]),
                (x, y) => join(x, y),
            },
            Node::Divide(a, b) => match (of(a), of(b)) {
                (Linear(s), None) if constant[b.index()] => Linear(s / numbers[b.index()]),
                (x, y) => join(x, y),
            },
            Node::Call(Function::Sin | Function::Cos, a) => match of(a) {
                Linear(slope) if whole(slope, std::f64::consts::TAU) => Periodic,
                Linear(_) => Other,
                other => other,
            },
            Node::Call(Function::Tan, a) => match of(a) {
                Linear(slope) if whole(slope, std::f64::consts::PI) => Periodic,
                Linear(_) => Other,
                other => other,
            },
            node => node.children().as_slice().iter().fold(None, |all, &child| join(all, of(child))),
        };
    }
    roots.iter().all(|root| matches!(dependences[root.index()], None | Periodic))
}

fn join(a: Dependence, b: Dependence) -> Dependence {
    use Dependence::*;
    match (a, b) {
        (None, Linear(_)) | (Linear(_), None) | (Linear(_), _) | (_, Linear(_)) | (Other, _) | (_, Other) => Other,
        (Periodic, _) | (_, Periodic) => Periodic,
        (None, None) => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn periods_are_proved_from_the_slopes() {
        let mut g = Graph::new();
        let (su, sv) = (g.new_symbol("u"), g.new_symbol("v"));
        let (u, v) = (g.symbol(su), g.symbol(sv));
        let two = g.integer(2);
        let doubled = g.multiply(two, u);
        let shifted = g.add(doubled, v);
        let cosine = g.call(Function::Cos, shifted);
        let whole = std::f64::consts::TAU;
        let periodic = |root, period| is_periodic(&g, &[root], [su, sv], su, period, &|_| f64::NAN);
        assert!(periodic(cosine, whole));
        assert!(periodic(cosine, whole / 2.0));
        assert!(!periodic(cosine, whole / 4.0));
        assert!(!periodic(shifted, whole));
        let product = {
            let mut g2 = g.clone();
            let product = g2.multiply(cosine, u);
            is_periodic(&g2, &[product], [su, sv], su, whole, &|_| f64::NAN)
        };
        assert!(!product);
    }
}
