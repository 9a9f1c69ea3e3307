//! The hash-consed arena of formula nodes and its constructors.
//!
//! Constructors fold exact numbers and apply the neutral-element identities (`x + 0`, `1*x`, `0*x`, `x^1`, `--x`, ...);
//! everything deeper is the simplifier's job. A formula that a fold removes is taken to be defined: `0*f` is 0.

use super::function::{BinaryFunction, Function};
use super::number::Exact;
use rustc_hash::FxHashMap;
use std::collections::BinaryHeap;

/// Index of a node in its [`Graph`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct ExpressionId(u32);

/// Index of a named unknown (a parameter, a variable, the result of an integral) in its [`Graph`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct SymbolId(u32);

/// Index of an exact number in its [`Graph`].
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub struct NumberId(u32);

impl ExpressionId {
    /// The position in the arena; operands come before the nodes that use them.
    pub fn index(self) -> usize {
        self.0 as usize
    }
}

impl SymbolId {
    /// The position in the list of symbols.
    pub fn index(self) -> usize {
        self.0 as usize
    }
}

/// One node of a formula. Truth values are nodes too: a comparison is 1 or 0 when evaluated.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub enum Node {
    /// An exact rational number.
    Number(NumberId),
    /// The circle constant.
    Pi,
    /// A named unknown.
    Symbol(SymbolId),
    /// `-a`
    Negate(ExpressionId),
    /// `a + b`
    Add(ExpressionId, ExpressionId),
    /// `a - b`
    Subtract(ExpressionId, ExpressionId),
    /// `a * b`
    Multiply(ExpressionId, ExpressionId),
    /// `a / b`
    Divide(ExpressionId, ExpressionId),
    /// `a ^ b`
    Power(ExpressionId, ExpressionId),
    /// A function of one argument.
    Call(Function, ExpressionId),
    /// A function of two arguments.
    Call2(BinaryFunction, ExpressionId, ExpressionId),
    /// A constant truth value.
    Truth(bool),
    /// `a < b`
    Less(ExpressionId, ExpressionId),
    /// `a <= b`
    LessEqual(ExpressionId, ExpressionId),
    /// `a and b`
    And(ExpressionId, ExpressionId),
    /// `a or b`
    Or(ExpressionId, ExpressionId),
    /// `not a`
    Not(ExpressionId),
    /// `if(condition, yes, no)`; the branch that is not selected has no influence, not even when it is undefined.
    Select(ExpressionId, ExpressionId, ExpressionId),
}

/// The operands of a node, in order.
#[derive(Clone, Copy, Debug)]
pub struct Children {
    items: [ExpressionId; 3],
    count: usize,
}

impl Children {
    /// The operands as a slice.
    pub fn as_slice(&self) -> &[ExpressionId] {
        &self.items[..self.count]
    }
}

impl Node {
    /// The operands of the node, in order.
    pub fn children(&self) -> Children {
        use Node::*;
        let none = ExpressionId(0);
        let (items, count) = match *self {
            Number(_) | Pi | Symbol(_) | Truth(_) => ([none; 3], 0),
            Negate(a) | Call(_, a) | Not(a) => ([a, none, none], 1),
            Add(a, b)
            | Subtract(a, b)
            | Multiply(a, b)
            | Divide(a, b)
            | Power(a, b)
            | Call2(_, a, b)
            | Less(a, b)
            | LessEqual(a, b)
            | And(a, b)
            | Or(a, b) => ([a, b, none], 2),
            Select(c, a, b) => ([c, a, b], 3),
        };
        Children { items, count }
    }

    /// The same node with every operand replaced by `replace(operand)`.
    fn map(self, mut replace: impl FnMut(ExpressionId) -> ExpressionId) -> Node {
        use Node::*;
        match self {
            Number(_) | Pi | Symbol(_) | Truth(_) => self,
            Negate(a) => Negate(replace(a)),
            Call(f, a) => Call(f, replace(a)),
            Not(a) => Not(replace(a)),
            Add(a, b) => Add(replace(a), replace(b)),
            Subtract(a, b) => Subtract(replace(a), replace(b)),
            Multiply(a, b) => Multiply(replace(a), replace(b)),
            Divide(a, b) => Divide(replace(a), replace(b)),
            Power(a, b) => Power(replace(a), replace(b)),
            Call2(f, a, b) => Call2(f, replace(a), replace(b)),
            Less(a, b) => Less(replace(a), replace(b)),
            LessEqual(a, b) => LessEqual(replace(a), replace(b)),
            And(a, b) => And(replace(a), replace(b)),
            Or(a, b) => Or(replace(a), replace(b)),
            Select(c, a, b) => Select(replace(c), replace(a), replace(b)),
        }
    }

    /// The key under which equal nodes meet: operands of commutative operations in index order.
    fn key(self) -> Node {
        use Node::*;
        match self {
            Add(a, b) if b < a => Add(b, a),
            Multiply(a, b) if b < a => Multiply(b, a),
            And(a, b) if b < a => And(b, a),
            Or(a, b) if b < a => Or(b, a),
            Call2(f, a, b) if b < a && f.is_commutative() => Call2(f, b, a),
            other => other,
        }
    }
}

/// An arena of formula nodes in which equal nodes exist once.
///
/// A graph holds at most [`Graph::MAXIMUM_NODES`] nodes. When it is full, constructors return an arbitrary existing
/// node and [`Graph::is_full`] turns true for good; a stage that builds formulas checks it before it trusts them.
#[derive(Clone, Debug)]
pub struct Graph {
    nodes: Vec<Node>,
    known: FxHashMap<Node, ExpressionId>,
    numbers: Vec<Exact>,
    known_numbers: FxHashMap<Exact, NumberId>,
    symbols: Vec<String>,
    full: bool,
}

impl Default for Graph {
    fn default() -> Self {
        Self::new()
    }
}

impl Graph {
    /// The largest number of nodes in one graph, about 100 MB.
    pub const MAXIMUM_NODES: usize = 1_000_000;

    /// The largest number of nodes in one formula after differentiation.
    pub const MAXIMUM_FORMULA_NODES: usize = 50_000;

    /// An empty graph.
    pub fn new() -> Self {
        let mut graph = Self {
            nodes: Vec::new(),
            known: FxHashMap::default(),
            numbers: Vec::new(),
            known_numbers: FxHashMap::default(),
            symbols: Vec::new(),
            full: false,
        };
        graph.integer(0);
        graph
    }

    /// Whether a constructor ran out of room; formulas built since then are meaningless.
    pub fn is_full(&self) -> bool {
        self.full
    }

    /// Number of nodes in the arena.
    pub fn len(&self) -> usize {
        self.nodes.len()
    }

    /// Whether the arena holds no node (it never does: 0 is always there).
    pub fn is_empty(&self) -> bool {
        self.nodes.is_empty()
    }

    /// The nodes from the `first`-th on, in index order: each after its children.
    pub fn ids_from(&self, first: usize) -> impl Iterator<Item = ExpressionId> + use<> {
        (first..self.nodes.len()).map(|index| ExpressionId(index as u32))
    }

    /// The node at `id`.
    pub fn node(&self, id: ExpressionId) -> Node {
        self.nodes[id.index()]
    }

    /// The exact number behind a [`Node::Number`].
    pub fn number_value(&self, id: NumberId) -> &Exact {
        &self.numbers[id.0 as usize]
    }

    /// The exact number at `id`, if the node is one.
    pub fn as_number(&self, id: ExpressionId) -> Option<&Exact> {
        match self.node(id) {
            Node::Number(number) => Some(self.number_value(number)),
            _ => None,
        }
    }

    /// The symbol at `id`, if the node is one.
    pub fn as_symbol(&self, id: ExpressionId) -> Option<SymbolId> {
        match self.node(id) {
            Node::Symbol(symbol) => Some(symbol),
            _ => None,
        }
    }

    /// The name of a symbol, as printed.
    pub fn symbol_name(&self, symbol: SymbolId) -> &str {
        &self.symbols[symbol.index()]
    }

    /// Number of symbols.
    pub fn symbol_count(&self) -> usize {
        self.symbols.len()
    }

    /// A new symbol; two symbols of one name are different unknowns.
    pub fn new_symbol(&mut self, name: &str) -> SymbolId {
        let id = SymbolId(u32::try_from(self.symbols.len()).expect("fewer symbols than nodes"));
        self.symbols.push(name.to_owned());
        id
    }

    /// The expression that consists of `symbol`.
    pub fn symbol(&mut self, symbol: SymbolId) -> ExpressionId {
        self.intern(Node::Symbol(symbol))
    }

    /// An exact number.
    pub fn number(&mut self, value: Exact) -> ExpressionId {
        let id = match self.known_numbers.get(&value) {
            Some(&id) => id,
            None => {
                let id = NumberId(u32::try_from(self.numbers.len()).expect("fewer numbers than nodes"));
                self.numbers.push(value.clone());
                self.known_numbers.insert(value, id);
                id
            }
        };
        self.intern(Node::Number(id))
    }

    /// A small integer.
    pub fn integer(&mut self, value: i64) -> ExpressionId {
        self.fraction(value, 1)
    }

    /// The fraction `numerator / denominator`.
    ///
    /// # Panics
    /// If the denominator is 0.
    pub fn fraction(&mut self, numerator: i64, denominator: i64) -> ExpressionId {
        self.number(Exact::fraction(numerator, denominator).expect("the denominator is not zero"))
    }

    /// The circle constant.
    pub fn pi(&mut self) -> ExpressionId {
        self.intern(Node::Pi)
    }

    /// A truth value.
    pub fn truth(&mut self, value: bool) -> ExpressionId {
        self.intern(Node::Truth(value))
    }

    /// `-a`
    pub fn negate(&mut self, a: ExpressionId) -> ExpressionId {
        match self.node(a) {
            Node::Number(n) => {
                let value = self.number_value(n).negate();
                self.number(value)
            }
            Node::Negate(inner) => inner,
            Node::Subtract(x, y) => self.subtract(y, x),
            _ => self.intern(Node::Negate(a)),
        }
    }

    /// `a + b`
    pub fn add(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => match x.add(y) {
                Some(sum) => self.number(sum),
                None => self.intern(Node::Add(a, b)),
            },
            (Some(x), _) if x.is_zero() => b,
            (_, Some(y)) if y.is_zero() => a,
            _ => match (self.node(a), self.node(b)) {
                (_, Node::Negate(y)) => self.subtract(a, y),
                (Node::Negate(x), _) => self.subtract(b, x),
                _ => self.intern(Node::Add(a, b)),
            },
        }
    }

    /// `a - b`
    pub fn subtract(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        if a == b {
            return self.integer(0);
        }
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => match x.subtract(y) {
                Some(difference) => self.number(difference),
                None => self.intern(Node::Subtract(a, b)),
            },
            (Some(x), _) if x.is_zero() => self.negate(b),
            (_, Some(y)) if y.is_zero() => a,
            _ => match self.node(b) {
                Node::Negate(y) => self.add(a, y),
                _ => self.intern(Node::Subtract(a, b)),
            },
        }
    }

    /// `a * b`
    pub fn multiply(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        let one_sided = |value: &Exact| (value.is_zero(), value.is_one(), value.negate().is_one());
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => match x.multiply(y) {
                Some(product) => self.number(product),
                None => self.intern(Node::Multiply(a, b)),
            },
            (Some(x), None) => match one_sided(x) {
                (true, _, _) => a,
                (_, true, _) => b,
                (_, _, true) => self.negate(b),
                _ => self.multiply_nontrivial(a, b),
            },
            (None, Some(y)) => match one_sided(y) {
                (true, _, _) => b,
                (_, true, _) => a,
                (_, _, true) => self.negate(a),
                _ => self.multiply_nontrivial(a, b),
            },
            (None, None) => self.multiply_nontrivial(a, b),
        }
    }

    /// Minus signs leave a product: `(-a)*(-b) = a*b`, `(-a)*b = -(a*b)`.
    fn multiply_nontrivial(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.node(a), self.node(b)) {
            (Node::Negate(x), Node::Negate(y)) => self.multiply(x, y),
            (Node::Negate(x), _) => {
                let product = self.multiply(x, b);
                self.negate(product)
            }
            (_, Node::Negate(y)) => {
                let product = self.multiply(a, y);
                self.negate(product)
            }
            _ => self.intern(Node::Multiply(a, b)),
        }
    }

    /// `a / b`
    pub fn divide(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => match x.divide(y) {
                Some(quotient) => self.number(quotient),
                None => self.intern(Node::Divide(a, b)),
            },
            (Some(x), _) if x.is_zero() => a,
            (_, Some(y)) if y.is_one() => a,
            _ => match (self.node(a), self.node(b)) {
                (Node::Negate(x), Node::Negate(y)) => self.divide(x, y),
                (Node::Negate(x), _) => {
                    let quotient = self.divide(x, b);
                    self.negate(quotient)
                }
                (_, Node::Negate(y)) => {
                    let quotient = self.divide(a, y);
                    self.negate(quotient)
                }
                _ => self.intern(Node::Divide(a, b)),
            },
        }
    }

    /// `a ^ b`
    pub fn power(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        if let Some(exponent) = self.as_number(b) {
            if exponent.is_one() {
                return a;
            }
            if exponent.is_zero() {
                return self.integer(1);
            }
            if let (Some(base), Some(n)) = (self.as_number(a), exponent.to_i64())
                && let Some(value) = base.power(n)
            {
                return self.number(value);
            }
            if let Node::Negate(x) = self.node(a)
                && let Some(n) = exponent.to_i64()
            {
                let magnitude = self.intern(Node::Power(x, b));
                return if n % 2 == 0 { magnitude } else { self.negate(magnitude) };
            }
        }
        self.intern(Node::Power(a, b))
    }

    /// `a ^ n` for a literal integer exponent.
    pub fn integer_power(&mut self, a: ExpressionId, n: i64) -> ExpressionId {
        let exponent = self.integer(n);
        self.power(a, exponent)
    }

    /// `a ^ 2`
    pub fn square(&mut self, a: ExpressionId) -> ExpressionId {
        self.integer_power(a, 2)
    }

    /// `sqrt(a)`
    pub fn square_root(&mut self, a: ExpressionId) -> ExpressionId {
        self.call(Function::Sqrt, a)
    }

    /// A function of one argument, folded where its exact value is rational.
    pub fn call(&mut self, function: Function, a: ExpressionId) -> ExpressionId {
        if let Some(value) = self.as_number(a)
            && let Some(exact) = function.exact_value(value)
        {
            return self.number(exact);
        }
        self.intern(Node::Call(function, a))
    }

    /// A function of two arguments, folded where its exact value is rational.
    pub fn call2(&mut self, function: BinaryFunction, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        if let (Some(x), Some(y)) = (self.as_number(a), self.as_number(b))
            && let Some(exact) = function.exact_value(x, y)
        {
            return self.number(exact);
        }
        self.intern(Node::Call2(function, a, b))
    }

    /// `a < b`
    pub fn less(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => {
                let truth = x < y;
                self.truth(truth)
            }
            _ => self.intern(Node::Less(a, b)),
        }
    }

    /// `a <= b`
    pub fn less_equal(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.as_number(a), self.as_number(b)) {
            (Some(x), Some(y)) => {
                let truth = x <= y;
                self.truth(truth)
            }
            _ => self.intern(Node::LessEqual(a, b)),
        }
    }

    /// `a and b`
    pub fn and(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.node(a), self.node(b)) {
            (Node::Truth(true), _) => b,
            (_, Node::Truth(true)) => a,
            (Node::Truth(false), _) | (_, Node::Truth(false)) => self.truth(false),
            _ if a == b => a,
            _ => self.intern(Node::And(a, b)),
        }
    }

    /// `a or b`
    pub fn or(&mut self, a: ExpressionId, b: ExpressionId) -> ExpressionId {
        match (self.node(a), self.node(b)) {
            (Node::Truth(false), _) => b,
            (_, Node::Truth(false)) => a,
            (Node::Truth(true), _) | (_, Node::Truth(true)) => self.truth(true),
            _ if a == b => a,
            _ => self.intern(Node::Or(a, b)),
        }
    }

    /// `not a`
    pub fn not(&mut self, a: ExpressionId) -> ExpressionId {
        match self.node(a) {
            Node::Truth(value) => self.truth(!value),
            Node::Not(inner) => inner,
            _ => self.intern(Node::Not(a)),
        }
    }

    /// `if(condition, yes, no)`
    pub fn select(&mut self, condition: ExpressionId, yes: ExpressionId, no: ExpressionId) -> ExpressionId {
        match self.node(condition) {
            Node::Truth(true) => yes,
            Node::Truth(false) => no,
            _ if yes == no => yes,
            _ => self.intern(Node::Select(condition, yes, no)),
        }
    }

    /// Builds `node` through the folding constructors.
    fn rebuild(&mut self, node: Node) -> ExpressionId {
        use Node::*;
        match node {
            Number(_) | Pi | Symbol(_) | Truth(_) => self.intern(node),
            Negate(a) => self.negate(a),
            Add(a, b) => self.add(a, b),
            Subtract(a, b) => self.subtract(a, b),
            Multiply(a, b) => self.multiply(a, b),
            Divide(a, b) => self.divide(a, b),
            Power(a, b) => self.power(a, b),
            Call(f, a) => self.call(f, a),
            Call2(f, a, b) => self.call2(f, a, b),
            Less(a, b) => self.less(a, b),
            LessEqual(a, b) => self.less_equal(a, b),
            And(a, b) => self.and(a, b),
            Or(a, b) => self.or(a, b),
            Not(a) => self.not(a),
            Select(c, a, b) => self.select(c, a, b),
        }
    }

    /// The nodes that `roots` depend on, themselves included, in evaluation order.
    pub fn reachable(&self, roots: &[ExpressionId]) -> Vec<ExpressionId> {
        let Some(last) = roots.iter().max() else { return Vec::new() };
        if let Some(order) = self.reachable_few(roots, last.index() / 64) {
            return order;
        }
        let mut needed = vec![false; last.index() + 1];
        for root in roots {
            needed[root.index()] = true;
        }
        let mut order = Vec::new();
        for index in (0..needed.len()).rev() {
            if needed[index] {
                order.push(ExpressionId(index as u32));
                for child in self.nodes[index].children().as_slice() {
                    needed[child.index()] = true;
                }
            }
        }
        order.reverse();
        order
    }

    /// [`Graph::reachable`] of formulas that are small beside the graph, in time that does not depend on the graph; `None`
    /// for more than `limit` nodes. A child has a smaller index than its parent, so the largest index left is complete.
    fn reachable_few(&self, roots: &[ExpressionId], limit: usize) -> Option<Vec<ExpressionId>> {
        if roots.len() > limit {
            return None;
        }
        let mut waiting: BinaryHeap<ExpressionId> = roots.iter().copied().collect();
        let mut order: Vec<ExpressionId> = Vec::new();
        while let Some(id) = waiting.pop() {
            if order.last() == Some(&id) {
                continue;
            }
            if order.len() == limit || waiting.len() > 4 * limit {
                return None;
            }
            order.push(id);
            waiting.extend(self.node(id).children().as_slice());
        }
        order.reverse();
        Some(order)
    }

    /// The symbols that `roots` depend on, in index order.
    pub fn symbols_of(&self, roots: &[ExpressionId]) -> Vec<SymbolId> {
        let mut symbols: Vec<_> = self.reachable(roots).into_iter().filter_map(|id| self.as_symbol(id)).collect();
        symbols.sort_unstable();
        symbols
    }

    /// Whether `root` depends on `symbol`.
    pub fn depends_on(&self, root: ExpressionId, symbol: SymbolId) -> bool {
        self.symbols_of(&[root]).contains(&symbol)
    }

    /// `roots` with every symbol of `replacements` replaced, all at once.
    pub fn substitute(
        &mut self,
        roots: &[ExpressionId],
        replacements: &[(SymbolId, ExpressionId)],
    ) -> Vec<ExpressionId> {
        let mut new_ids: FxHashMap<ExpressionId, ExpressionId> = FxHashMap::default();
        for id in self.reachable(roots) {
            let node = self.node(id);
            let new_id = match node {
                Node::Symbol(symbol) => replacements.iter().find(|(from, _)| *from == symbol).map_or(id, |(_, to)| *to),
                _ => {
                    let mapped = node.map(|child| new_ids[&child]);
                    if mapped == node { id } else { self.rebuild(mapped) }
                }
            };
            new_ids.insert(id, new_id);
        }
        roots.iter().map(|root| new_ids[root]).collect()
    }

    fn intern(&mut self, node: Node) -> ExpressionId {
        let key = node.key();
        if let Some(&id) = self.known.get(&key) {
            return id;
        }
        if self.nodes.len() >= Self::MAXIMUM_NODES {
            self.full = true;
            return ExpressionId(0);
        }
        let id = ExpressionId(self.nodes.len() as u32);
        self.nodes.push(node);
        self.known.insert(key, id);
        id
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn equal_formulas_are_one_node() {
        let mut g = Graph::new();
        let u = g.new_symbol("u");
        let u = g.symbol(u);
        let v = g.new_symbol("v");
        let v = g.symbol(v);
        let a = g.multiply(u, v);
        let b = g.multiply(v, u);
        assert_eq!(a, b);
        assert_ne!(g.subtract(u, v), g.subtract(v, u));
    }

    #[test]
    fn numbers_fold_exactly() {
        let mut g = Graph::new();
        let tenth = g.fraction(1, 10);
        let fifth = g.fraction(2, 10);
        let sum = g.add(tenth, fifth);
        assert_eq!(sum, g.fraction(3, 10));
        let nine = g.integer(9);
        let big = g.power(nine, nine);
        let huge = g.power(nine, big);
        assert!(g.as_number(huge).is_none(), "9^9^9 stays a formula");
    }

    #[test]
    fn substitution_is_simultaneous() {
        let mut g = Graph::new();
        let (su, sv) = (g.new_symbol("u"), g.new_symbol("v"));
        let (u, v) = (g.symbol(su), g.symbol(sv));
        let quotient = g.divide(u, v);
        let swapped = g.substitute(&[quotient], &[(su, v), (sv, u)])[0];
        assert_eq!(swapped, g.divide(v, u));
    }

    #[test]
    fn a_full_graph_says_so() {
        let mut g = Graph::new();
        let u = g.new_symbol("u");
        let mut x = g.symbol(u);
        let u = x;
        for _ in 0..Graph::MAXIMUM_NODES + 10 {
            let s = g.call(Function::Sin, x);
            x = g.add(s, u);
        }
        assert!(g.is_full());
    }
}
