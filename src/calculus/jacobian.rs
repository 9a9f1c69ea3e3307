//! The matrix of all first partial derivatives of several formulas.

use crate::expression::{ExpressionId, Graph, SymbolId, differentiate_all};

/// `matrix[i][j]` is the derivative of `functions[i]` by `variables[j]`.
///
/// ```
/// use quadrel::calculus::jacobian;
/// use quadrel::expression::{Graph, print};
///
/// let mut graph = Graph::new();
/// let (u, v) = (graph.new_symbol("u"), graph.new_symbol("v"));
/// let (x, y) = (graph.symbol(u), graph.symbol(v));
/// let product = graph.multiply(x, y);
/// let square = graph.square(y);
/// let matrix = jacobian(&mut graph, &[product, square], &[u, v]);
/// let shown: Vec<Vec<String>> =
///     matrix.iter().map(|row| row.iter().map(|&entry| print(&graph, entry)).collect()).collect();
/// assert_eq!(shown, [["v", "u"], ["0", "2*v"]]);
/// ```
pub fn jacobian(graph: &mut Graph, functions: &[ExpressionId], variables: &[SymbolId]) -> Vec<Vec<ExpressionId>> {
    let columns: Vec<_> = variables.iter().map(|&variable| differentiate_all(graph, functions, variable)).collect();
    (0..functions.len()).map(|row| columns.iter().map(|column| column[row]).collect()).collect()
}
