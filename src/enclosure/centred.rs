//! The centred form: a range from the value at the middle of a box and the ranges of the derivatives.
//!
//! For f with derivatives in the intervals G_i over a box with middle c, f(x) lies in f(c) + sum of G_i (x_i - c_i) by the mean
//! value theorem. The excess of this range shrinks with the square of the size of the box, that of plain evaluation only
//! with the size; so it wins on small boxes, also where plain evaluation loses the dependence between operands. It is
//! intersected with the plain range, and it is only used where f is proved continuous and its derivatives are proved to
//! exist (a kink as of abs is allowed: the sign as its derivative then covers both sides).

use super::evaluate::Ranges;
use super::image::{Defined, Image};
use super::interval::Interval;
use crate::expression::{ExpressionId, Graph, SymbolId};

/// A formula and its derivatives, prepared for evaluation over many boxes.
pub struct Centred<'g> {
    /// The formula alone.
    value: Ranges<'g>,
    /// The formula and then its derivatives.
    all: Ranges<'g>,
    symbols: Vec<SymbolId>,
}

impl<'g> Centred<'g> {
    /// Prepares `formula` with its derivative by each symbol that varies.
    pub fn new(graph: &'g Graph, formula: ExpressionId, gradient: &[(SymbolId, ExpressionId)]) -> Centred<'g> {
        let roots: Vec<ExpressionId> =
            [formula].into_iter().chain(gradient.iter().map(|&(_, derivative)| derivative)).collect();
        let symbols = gradient.iter().map(|&(symbol, _)| symbol).collect();
        Centred { value: Ranges::new(graph, &[formula]), all: Ranges::new(graph, &roots), symbols }
    }

    /// The image over a box. A symbol without a derivative in the gradient keeps its whole range in f(c).
    pub fn evaluate(&self, range_of: impl Fn(SymbolId) -> Interval) -> Image {
        let images = self.all.evaluate(&range_of);
        let (plain, gradient) = (images[0], &images[1..]);
        let smooth = plain.continuous && gradient.iter().all(|slope| slope.defined == Defined::Everywhere);
        if !smooth {
            return plain;
        }
        let middle = |symbol: SymbolId| {
            let range = range_of(symbol);
            if self.symbols.contains(&symbol) { Interval::point(range.midpoint()) } else { range }
        };
        let centre = self.value.evaluate(middle)[0];
        let mut range = centre.range;
        for (&symbol, slope) in self.symbols.iter().zip(gradient) {
            range = range + slope.range * (range_of(symbol) - middle(symbol));
        }
        Image { range: plain.range.intersection(range), ..plain }
    }
}

/// The image of `formula` over a box by its centred form, see [`Centred`]; `gradient` holds its derivative by each symbol
/// that varies.
pub fn centred(
    graph: &Graph,
    formula: ExpressionId,
    gradient: &[(SymbolId, ExpressionId)],
    range_of: impl Fn(SymbolId) -> Interval,
) -> Image {
    Centred::new(graph, formula, gradient).evaluate(range_of)
}
