//! Vectors whose three components are formulas.
//!
//! Zero components fold away in the constructors of the graph, so that a plane curve or a surface over a plane costs
//! no more than its own terms.

use crate::expression::{ExpressionId, Function, Graph, SymbolId, differentiate_all};

/// A vector of space, by its Cartesian components.
pub type Vector = [ExpressionId; 3];

/// The zero vector.
pub fn zero(graph: &mut Graph) -> Vector {
    [graph.integer(0); 3]
}

/// `a + b`
pub fn add(graph: &mut Graph, a: &Vector, b: &Vector) -> Vector {
    [0, 1, 2].map(|i| graph.add(a[i], b[i]))
}

/// `a - b`
pub fn subtract(graph: &mut Graph, a: &Vector, b: &Vector) -> Vector {
    [0, 1, 2].map(|i| graph.subtract(a[i], b[i]))
}

/// `-a`
pub fn negate(graph: &mut Graph, a: &Vector) -> Vector {
    a.map(|component| graph.negate(component))
}

/// `factor * a`
pub fn scale(graph: &mut Graph, factor: ExpressionId, a: &Vector) -> Vector {
    a.map(|component| graph.multiply(factor, component))
}

/// `a / divisor`
pub fn divide(graph: &mut Graph, a: &Vector, divisor: ExpressionId) -> Vector {
    a.map(|component| graph.divide(component, divisor))
}

/// `a . b`
pub fn dot(graph: &mut Graph, a: &Vector, b: &Vector) -> ExpressionId {
    let [x, y, z] = [0, 1, 2].map(|i| if a[i] == b[i] { graph.square(a[i]) } else { graph.multiply(a[i], b[i]) });
    let partial = graph.add(x, y);
    graph.add(partial, z)
}

/// `a x b`, right-handed.
pub fn cross(graph: &mut Graph, a: &Vector, b: &Vector) -> Vector {
    [(1, 2), (2, 0), (0, 1)].map(|(i, j)| {
        let positive = graph.multiply(a[i], b[j]);
        let negative = graph.multiply(a[j], b[i]);
        graph.subtract(positive, negative)
    })
}

/// `a . a`
pub fn squared_norm(graph: &mut Graph, a: &Vector) -> ExpressionId {
    dot(graph, a, a)
}

/// `|a|`: the square root of the sum of squares, or the absolute value where only one component is not zero.
pub fn norm(graph: &mut Graph, a: &Vector) -> ExpressionId {
    let is_zero = |id: ExpressionId| graph.as_number(id).is_some_and(|number| number.is_zero());
    let present: Vec<ExpressionId> = a.iter().copied().filter(|&component| !is_zero(component)).collect();
    match present[..] {
        [] => graph.integer(0),
        [only] => graph.call(Function::Abs, only),
        _ => {
            let square = squared_norm(graph, a);
            graph.square_root(square)
        }
    }
}

/// The partial derivative of each component by `by`.
pub fn differentiate_vector(graph: &mut Graph, a: &Vector, by: SymbolId) -> Vector {
    let derivatives = differentiate_all(graph, a, by);
    [derivatives[0], derivatives[1], derivatives[2]]
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expression::print;

    #[test]
    fn zero_components_fold_away() {
        let mut g = Graph::new();
        let symbols = ["a", "b"].map(|name| g.new_symbol(name));
        let [a, b] = symbols.map(|symbol| g.symbol(symbol));
        let o = g.integer(0);
        let product = cross(&mut g, &[a, o, o], &[o, b, o]);
        assert_eq!(product.map(|c| print(&g, c)), ["0", "0", "a*b"]);
        let length = norm(&mut g, &product);
        assert_eq!(print(&g, length), "abs(a*b)");
        let length = norm(&mut g, &[a, o, b]);
        assert_eq!(print(&g, length), "sqrt(a^2 + b^2)");
        let nothing = norm(&mut g, &[o, o, o]);
        assert_eq!(nothing, o);
    }

    #[test]
    fn the_cross_product_is_right_handed() {
        let mut g = Graph::new();
        let (o, one) = (g.integer(0), g.integer(1));
        assert_eq!(cross(&mut g, &[one, o, o], &[o, one, o]), [o, o, one]);
        assert_eq!(cross(&mut g, &[o, one, o], &[o, o, one]), [one, o, o]);
        assert_eq!(cross(&mut g, &[o, o, one], &[one, o, o]), [o, one, o]);
    }
}
