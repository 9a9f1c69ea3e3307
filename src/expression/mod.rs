//! Formulas as a graph in which equal nodes exist once.
//!
//! A [`Graph`] is an arena: every node refers to its operands by [`ExpressionId`], and an operand always has a smaller
//! index than the node that uses it. Index order is therefore an evaluation order, and every pass over a formula
//! (evaluate, differentiate, substitute, print) is a sweep over indices, never a recursion on depth.

mod bessel;
mod derivative;
mod elliptic;
mod evaluate;
mod function;
mod graph;
mod number;
mod polygamma;
mod print;
mod wide;

pub use derivative::{differentiate, differentiate_all};
pub use evaluate::{Undefined, evaluate, evaluate_one, first_undefined, power};
pub use function::{BinaryFunction, Function};
pub use graph::{Children, ExpressionId, Graph, Node, SymbolId};
pub use number::{Exact, MAXIMUM_BITS};
pub use print::{print, print_limited};
