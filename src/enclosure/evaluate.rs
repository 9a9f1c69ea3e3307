//! Ranges of whole formulas over a box, one sweep in index order.
//!
//! A choice whose condition is not decided on the box has the hull of both branches as its range, each judged under its
//! condition: `a < b` bounds the ranges of the two compared nodes, and what depends on them is evaluated again within
//! these bounds. So `if(u < 0, 0, sqrt(u))` is defined on [-1, 4]. The work for that is bounded; when it is used up,
//! branches are judged on the whole box, which is wider and still true.

use super::functions::{image_of, image_of_two};
use super::image::{Defined, Image, Truth};
use super::interval::Interval;
use super::power::{power, rational_power};
use crate::expression::{ExpressionId, Function, Graph, Node, SymbolId};
use rustc_hash::FxHashMap;

/// The images of `roots` when every symbol ranges over `range_of(symbol)`, independently.
pub fn enclose(graph: &Graph, roots: &[ExpressionId], range_of: impl Fn(SymbolId) -> Interval) -> Vec<Image> {
    Ranges::new(graph, roots).evaluate(range_of)
}

/// The image of one formula, see [`enclose`].
pub fn enclose_one(graph: &Graph, root: ExpressionId, range_of: impl Fn(SymbolId) -> Interval) -> Image {
    enclose(graph, &[root], range_of)[0]
}

/// Formulas prepared for evaluation over many boxes.
pub struct Ranges<'g> {
    graph: &'g Graph,
    roots: Vec<ExpressionId>,
    /// The nodes that the roots depend on, in evaluation order.
    order: Vec<ExpressionId>,
    /// The place in `order` of each node of the graph that stands there.
    places: Vec<u32>,
    /// Intervals around the numbers, by place; empty for other nodes.
    numbers: Vec<Interval>,
}

/// Nodes that stand for a choice nested deeper than this are judged on the whole box.
const DEEPEST_CHOICE: usize = 8;

/// What may be evaluated again for undecided choices: so many times the number of nodes, and a fixed number.
const REPEATS: usize = 8;
const FREE_NODES: usize = 1000;

impl<'g> Ranges<'g> {
    /// Prepares `roots`.
    pub fn new(graph: &'g Graph, roots: &[ExpressionId]) -> Ranges<'g> {
        let order = graph.reachable(roots);
        let mut places = vec![u32::MAX; order.last().map_or(0, |last| last.index() + 1)];
        for (place, id) in order.iter().enumerate() {
            places[id.index()] = place as u32;
        }
        let numbers =
            order.iter().map(|&id| graph.as_number(id).map_or(Interval::EMPTY, Interval::from_exact)).collect();
        Ranges { graph, roots: roots.to_vec(), order, places, numbers }
    }

    /// The images of the roots when every symbol ranges over `range_of(symbol)`.
    pub fn evaluate(&self, range_of: impl Fn(SymbolId) -> Interval) -> Vec<Image> {
        let mut sweep = Sweep {
            ranges: self,
            images: Vec::with_capacity(self.order.len()),
            budget: REPEATS * self.order.len() + FREE_NODES,
        };
        for (place, &id) in self.order.iter().enumerate() {
            let image = match self.graph.node(id) {
                Node::Symbol(symbol) => {
                    let range = range_of(symbol);
                    if range.is_empty() { Image::NOWHERE } else { Image::everywhere(range) }
                }
                Node::Select(condition, yes, no) => sweep.choice((condition, yes, no), &Narrowed::default(), 0),
                node => self.operation(node, place, |id| sweep.images[self.place(id)]),
            };
            sweep.images.push(image);
        }
        self.roots.iter().map(|&root| sweep.images[self.place(root)]).collect()
    }

    fn place(&self, id: ExpressionId) -> usize {
        self.places[id.index()] as usize
    }

    /// The places of the nodes that `root` depends on, itself included, in evaluation order.
    fn needed(&self, root: ExpressionId) -> Vec<usize> {
        let last = self.place(root);
        let mut needed = vec![false; last + 1];
        needed[last] = true;
        for place in (0..=last).rev() {
            if needed[place] {
                for &child in self.graph.node(self.order[place]).children().as_slice() {
                    needed[self.place(child)] = true;
                }
            }
        }
        (0..=last).filter(|&place| needed[place]).collect()
    }

    /// The image of a node that is neither a symbol nor a choice, from those of its operands.
    fn operation(&self, node: Node, place: usize, at: impl Fn(ExpressionId) -> Image) -> Image {
        let image = self.bare_operation(node, place, &at);
        Image { nonzero: image.nonzero || is_never_zero(node, at), ..image }
    }

    fn bare_operation(&self, node: Node, place: usize, at: impl Fn(ExpressionId) -> Image) -> Image {
        match node {
            Node::Number(_) => Image::everywhere(self.numbers[place]),
            Node::Pi => Image::everywhere(Interval::pi()),
            Node::Truth(truth) => Image::everywhere(if truth { Interval::ONE } else { Interval::ZERO }),
            Node::Symbol(_) | Node::Select(..) => Image::unknown(),
            Node::Negate(a) => unary(at(a), |a| -a),
            Node::Add(a, b) => binary(at(a), at(b), |a, b| a + b),
            Node::Subtract(a, b) => binary(at(a), at(b), |a, b| a - b),
            Node::Multiply(a, b) if a == b => unary(at(a), Interval::square),
            Node::Multiply(a, b) => binary(at(a), at(b), |a, b| a * b),
            Node::Divide(a, b) => quotient(at(a), at(b)),
            Node::Power(a, b) => {
                let (base, exponent) = (at(a), at(b));
                let image = match self.graph.as_number(b) {
                    Some(literal) => rational_power(base.range, literal),
                    None => power(base.range, exponent.range),
                };
                open_at_zero(image, base).given(&[base, exponent])
            }
            Node::Call(function, a) => {
                let argument = at(a);
                let image = image_of(function, argument.range);
                let image = if is_defined_above_zero(function) { open_at_zero(image, argument) } else { image };
                image.given(&[argument])
            }
            Node::Call2(function, a, b) => {
                let (a, b) = (at(a), at(b));
                image_of_two(function, a.range, b.range).given(&[a, b])
            }
            Node::Less(a, b) => comparison(at(a), at(b), Interval::less),
            Node::LessEqual(a, b) => comparison(at(a), at(b), Interval::less_equal),
            Node::And(a, b) => binary(at(a), at(b), Interval::min),
            Node::Or(a, b) => binary(at(a), at(b), Interval::max),
            Node::Not(a) => unary(at(a), |a| Interval::ONE - a),
        }
    }
}

fn unary(a: Image, operation: impl Fn(Interval) -> Interval) -> Image {
    Image::everywhere(operation(a.range)).given(&[a])
}

fn binary(a: Image, b: Image, operation: impl Fn(Interval, Interval) -> Interval) -> Image {
    Image::everywhere(operation(a.range, b.range)).given(&[a, b])
}

/// A condition is continuous where it does not change.
fn comparison(a: Image, b: Image, compare: impl Fn(Interval, Interval) -> Truth) -> Image {
    let truth = compare(a.range, b.range);
    let image = Image::everywhere(truth.range()).given(&[a, b]);
    Image { continuous: truth != Truth::Unknown && image.defined == Defined::Everywhere, ..image }
}

fn quotient(a: Image, b: Image) -> Image {
    let image = a.range.divide(b.range);
    let only_zero_is_missing = b.nonzero && image.defined == Defined::Partly;
    if only_zero_is_missing { Image::everywhere(image.range) } else { image }.given(&[a, b])
}

/// The image of a function that is defined on all x > 0, when a condition says that the argument is never 0.
fn open_at_zero(image: Image, argument: Image) -> Image {
    if argument.nonzero && argument.range.lower() == 0.0 && image.defined == Defined::Partly {
        Image::everywhere(image.range)
    } else {
        image
    }
}

/// Whether a node is not 0 for a reason that its range need not show: because its operands are not, or because the function
/// has no zeros (its range may still have an end at 0).
fn is_never_zero(node: Node, at: impl Fn(ExpressionId) -> Image) -> bool {
    use Function::*;
    let nonzero = |a: ExpressionId| at(a).nonzero;
    match node {
        Node::Negate(a) | Node::Divide(a, _) | Node::Power(a, _) => nonzero(a),
        Node::Multiply(a, b) => nonzero(a) && nonzero(b),
        Node::Add(a, b) => at(a).range.lower() >= 0.0 && at(b).range.lower() >= 0.0 && (nonzero(a) || nonzero(b)),
        Node::Call(Exp | Erfc | Cosh | Gamma | EllipticK(_) | EllipticE(_), _) => true,
        Node::Call(Abs | Sign | Sqrt | Cbrt | Sinh | Asinh | Atan | Asin | Tanh | Atanh | Erf, a) => nonzero(a),
        _ => false,
    }
}

/// Whether a function is defined on all x > 0.
fn is_defined_above_zero(function: Function) -> bool {
    use Function::*;
    matches!(function, Log | Gamma | LogGamma | Polygamma(_) | BesselY(_))
}

/// Images of nodes that a condition has narrowed, and of nodes that depend on these.
type Narrowed = FxHashMap<ExpressionId, Image>;

/// One evaluation of all nodes.
struct Sweep<'r, 'g> {
    ranges: &'r Ranges<'g>,
    /// Images on the whole box, by place.
    images: Vec<Image>,
    /// How many nodes may still be evaluated again.
    budget: usize,
}

impl Sweep<'_, '_> {
    fn at(&self, id: ExpressionId, narrowed: &Narrowed) -> Image {
        narrowed.get(&id).copied().unwrap_or_else(|| self.images[self.ranges.place(id)])
    }

    /// `if(condition, yes, no)`
    fn choice(
        &mut self,
        (condition, yes, no): (ExpressionId, ExpressionId, ExpressionId),
        narrowed: &Narrowed,
        depth: usize,
    ) -> Image {
        let decision = self.at(condition, narrowed);
        if decision.defined == Defined::Nowhere {
            return Image::NOWHERE;
        }
        let chosen = match Truth::from_range(decision.range) {
            Truth::True => self.at(yes, narrowed),
            Truth::False => self.at(no, narrowed),
            Truth::Unknown => {
                let yes = self.branch((condition, true), yes, narrowed, depth);
                let no = self.branch((condition, false), no, narrowed, depth);
                match (yes, no) {
                    (Some(yes), Some(no)) => either(yes, no),
                    (Some(only), None) | (None, Some(only)) => only,
                    (None, None) => return Image::NOWHERE,
                }
            }
        };
        // A decided condition does not jump, whatever it compares.
        chosen.given(&[Image { continuous: decision.defined == Defined::Everywhere, ..decision }])
    }

    /// The image of a branch where `condition` has the given truth; `None` if it never has.
    fn branch(
        &mut self,
        (condition, holds): (ExpressionId, bool),
        root: ExpressionId,
        narrowed: &Narrowed,
        depth: usize,
    ) -> Option<Image> {
        let work = self.ranges.place(root) + narrowed.len();
        if depth >= DEEPEST_CHOICE || work > self.budget {
            return Some(self.at(root, narrowed));
        }
        self.budget -= work;
        let mut inner = narrowed.clone();
        self.assume(condition, holds, &mut inner)?;
        self.evaluate_within(root, &mut inner, depth + 1);
        Some(self.at(root, &inner))
    }

    /// Narrows what `condition` compares, for the points where it has the given truth; `None` if there are none.
    fn assume(&self, condition: ExpressionId, holds: bool, narrowed: &mut Narrowed) -> Option<()> {
        let mut claims = vec![(condition, holds)];
        while let Some((condition, holds)) = claims.pop() {
            narrowed.insert(condition, Image::everywhere(if holds { Interval::ONE } else { Interval::ZERO }));
            match (self.ranges.graph.node(condition), holds) {
                (Node::Truth(truth), _) if truth != holds => return None,
                (Node::Not(a), _) => claims.push((a, !holds)),
                (Node::And(a, b), true) | (Node::Or(a, b), false) => claims.extend([(a, holds), (b, holds)]),
                (Node::Less(a, b), true) => self.narrow(a, b, true, narrowed)?,
                (Node::Less(a, b), false) => self.narrow(b, a, false, narrowed)?,
                (Node::LessEqual(a, b), true) => self.narrow(a, b, false, narrowed)?,
                (Node::LessEqual(a, b), false) => self.narrow(b, a, true, narrowed)?,
                _ => {}
            }
        }
        Some(())
    }

    /// Uses `low <= high`, or `low < high` if `strict`; `None` if that is impossible.
    fn narrow(&self, low: ExpressionId, high: ExpressionId, strict: bool, narrowed: &mut Narrowed) -> Option<()> {
        let (a, b) = (self.at(low, narrowed), self.at(high, narrowed));
        let (least, greatest) = (a.range.lower(), b.range.upper());
        let below = a.range.intersection(Interval::new(f64::NEG_INFINITY, greatest));
        let above = b.range.intersection(Interval::new(least, f64::INFINITY));
        if below.is_empty() || above.is_empty() || (strict && least >= greatest) {
            return None;
        }
        let nonzero = |range: Interval, known: bool, strictly: bool| known || strictly || !range.contains(0.0);
        let below_zero = nonzero(below, a.nonzero, strict && greatest <= 0.0);
        let above_zero = nonzero(above, b.nonzero, strict && least >= 0.0);
        narrowed.insert(low, Image { range: below, nonzero: below_zero, ..a });
        narrowed.insert(high, Image { range: above, nonzero: above_zero, ..b });
        Some(())
    }

    /// Evaluates again what `root` needs and what depends on narrowed nodes.
    fn evaluate_within(&mut self, root: ExpressionId, narrowed: &mut Narrowed, depth: usize) {
        let ranges = self.ranges;
        for place in ranges.needed(root) {
            let id = ranges.order[place];
            let node = ranges.graph.node(id);
            let changed = node.children().as_slice().iter().any(|child| narrowed.contains_key(child));
            if narrowed.contains_key(&id) || !changed {
                continue;
            }
            let image = match node {
                Node::Select(condition, yes, no) => self.choice((condition, yes, no), narrowed, depth),
                node => ranges.operation(node, place, |id| self.at(id, narrowed)),
            };
            narrowed.insert(id, image);
        }
    }
}

/// The image of a choice that is not decided.
fn either(yes: Image, no: Image) -> Image {
    let defined = yes.defined.or_else(no.defined);
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    Image { range: yes.range.hull(no.range), defined, continuous: false, nonzero: yes.nonzero && no.nonzero }
}
