//! From the graph to statements.
//!
//! Every node is written where it is used: in the body of the function, or in the branch of an `if` that alone needs it.
//! Where several branches need it, each has its own copy, so that nothing is computed that the selected branches do not
//! need: in Python the square root of a negative number is an exception, elsewhere it can be made a trap. What is defined
//! for all arguments is computed once. Operands come before the nodes that use them, so index order is a right order.

use super::identifier::Names;
use super::language::{Branch, Called, Dialect, Helper, Named, Program, Select, Statement, Value};
use super::{Language, Request, SourceError};
use crate::expression::{Exact, ExpressionId, Function, Graph, Node, SymbolId};
use rustc_hash::{FxHashMap, FxHashSet};
use std::collections::BTreeSet;

/// Longest text of an expression without a name of its own.
const LONGEST: usize = 60;

/// Deepest nesting of branches: Python takes 100 levels of indentation, a C compiler must take 127 blocks.
const DEEPEST: usize = 90;

/// Most statements and pieces of expressions, copies in branches included.
const MOST_COPIES: usize = 100_000;

/// How tightly a text binds. A leading minus binds like a sum, because Fortran has no `a*-b`.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Debug)]
enum Level {
    Or,
    And,
    Relation,
    Sum,
    Product,
    Atom,
}

/// The text of a node.
#[derive(Clone, Debug)]
struct Text {
    text: String,
    level: Level,
    /// For conditions: tests that hold where it is undefined.
    undefined: Vec<String>,
}

impl Text {
    fn new(text: impl Into<String>, level: Level) -> Self {
        Self { text: text.into(), level, undefined: Vec::new() }
    }

    fn within(&self, level: Level) -> String {
        if self.level < level { format!("({})", self.text) } else { self.text.clone() }
    }
}

/// A branch of an `if`, or the body (its own parent).
struct Region {
    parent: usize,
    depth: usize,
}

pub(super) fn lower(
    language: Language,
    dialect: &'static dyn Dialect,
    request: &Request<'_>,
) -> Result<Program, SourceError> {
    let graph = request.graph;
    let roots: Vec<ExpressionId> = request.outputs.iter().map(|(_, root)| *root).collect();
    for (name, root) in request.outputs {
        if is_truth(graph.node(*root)) {
            return Err(SourceError::Condition { name: name.clone() });
        }
    }
    let needed = graph.symbols_of(&roots);
    if let Some(missing) = needed.iter().find(|symbol| !request.inputs.contains(symbol)) {
        return Err(SourceError::MissingInput { name: graph.symbol_name(*missing).to_owned() });
    }

    let mut names = Names::new(language, dialect.reserved());
    let function = names.assign(&[request.function]).remove(0);
    Helper::ALL.iter().for_each(|helper| names.reserve(&helper.name_beside(&function)));
    let originals: Vec<&str> = request.inputs.iter().map(|symbol| graph.symbol_name(*symbol)).collect();
    let inputs = names.assign(&originals);
    let output_originals: Vec<&str> = request.outputs.iter().map(|(name, _)| name.as_str()).collect();
    let outputs = names.assign(&output_originals);
    let named = |names: &[String], originals: &[&str]| -> Vec<Named> {
        let pairs = names.iter().zip(originals);
        pairs.map(|(name, original)| Named { name: name.clone(), original: (*original).to_owned() }).collect()
    };
    let unused = request.inputs.iter().zip(&inputs).filter(|(symbol, _)| !needed.contains(symbol));
    let mut notes: Vec<String> = request.notes.lines().map(harmless).collect();
    notes.push(format!("Results: {}", harmless(&output_originals.join(", "))));
    // The other languages return the results without names.
    let named_results = matches!(language, Language::C | Language::Fortran);
    let results = outputs.iter().zip(&output_originals).filter(|_| named_results);
    for (name, original) in inputs.iter().zip(&originals).chain(results) {
        if name != original {
            notes.push(format!("{name} stands for {}", harmless(original)));
        }
    }
    let program = Program {
        notes,
        unused: unused.map(|(_, name)| name.clone()).collect(),
        inputs: named(&inputs, &originals),
        outputs: named(&outputs, &output_originals),
        function,
        statements: Vec::new(),
        results: Vec::new(),
        helpers: BTreeSet::new(),
        package: BTreeSet::new(),
    };
    let symbols = request.inputs.iter().copied().zip(inputs).collect();
    Lowering::new(language, dialect, graph, &roots, symbols, names.prefix(), program)?.run(&roots)
}

/// A line of a comment that ends the comment in no language, and has no signs that compilers warn about: line
/// continuations, trigraphs, direction marks.
fn harmless(line: &str) -> String {
    let line: String = line
        .chars()
        .map(|c| {
            if c.is_control()
                || matches!(c, '\u{200e}'..='\u{200f}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}')
            {
                ' '
            } else {
                c
            }
        })
        .collect();
    line.replace("*/", "* /").replace("/*", "/ *").replace("??", "? ?").replace('\\', "/").replace("\"\"\"", "'")
}

struct Lowering<'a> {
    language: Language,
    dialect: &'static dyn Dialect,
    graph: &'a Graph,
    roots: FxHashSet<ExpressionId>,
    plan: Plan,
    /// Statements of each region so far.
    statements: Vec<Vec<Statement>>,
    texts: FxHashMap<(ExpressionId, usize), Text>,
    symbols: FxHashMap<SymbolId, String>,
    prefix: String,
    temporaries: usize,
    program: Program,
}

/// Where each node is written.
struct Plan {
    regions: Vec<Region>,
    /// Nodes in evaluation order, each with the regions that have a copy of it.
    order: Vec<(ExpressionId, Vec<usize>)>,
    /// How often a copy is used.
    uses: FxHashMap<(ExpressionId, usize), usize>,
    /// The two regions of a copy of an `if`.
    branches: FxHashMap<(ExpressionId, usize), [usize; 2]>,
}

impl Plan {
    fn new(graph: &Graph, roots: &[ExpressionId]) -> Result<Self, SourceError> {
        let reachable = graph.reachable(roots);
        let mut total: FxHashSet<ExpressionId> = FxHashSet::default();
        for &id in &reachable {
            let node = graph.node(id);
            if is_total(node) && node.children().as_slice().iter().all(|child| total.contains(child)) {
                total.insert(id);
            }
        }
        let mut plan = Self {
            regions: vec![Region { parent: 0, depth: 0 }],
            order: Vec::new(),
            uses: FxHashMap::default(),
            branches: FxHashMap::default(),
        };
        let mut wanted: FxHashMap<ExpressionId, Vec<(usize, usize)>> = FxHashMap::default();
        roots.iter().for_each(|root| wanted.entry(*root).or_default().push((0, 1)));
        for &id in reachable.iter().rev() {
            let uses = wanted.remove(&id).unwrap_or_default();
            let places = plan.cover(&uses, total.contains(&id));
            for &(place, count) in &uses {
                let copy = plan.holder(place, |region| places.contains(&region));
                *plan.uses.entry((id, copy)).or_default() += count;
            }
            let node = graph.node(id);
            // The sides of a comparison are also tested for being undefined.
            let count = if matches!(node, Node::Less(..) | Node::LessEqual(..)) { 2 } else { 1 };
            for &place in &places {
                let inside = match node {
                    Node::Select(..) => {
                        let [yes, no] = plan.open_branches(id, place)?;
                        [place, yes, no]
                    }
                    _ => [place; 3],
                };
                for (child, place) in node.children().as_slice().iter().zip(inside) {
                    wanted.entry(*child).or_default().push((place, count));
                }
            }
            plan.order.push((id, places));
            if plan.uses.len() > MOST_COPIES {
                return Err(SourceError::TooLong { limit: MOST_COPIES });
            }
        }
        plan.order.reverse();
        Ok(plan)
    }

    fn open_branches(&mut self, id: ExpressionId, place: usize) -> Result<[usize; 2], SourceError> {
        let depth = self.regions[place].depth + 1;
        if depth > DEEPEST {
            return Err(SourceError::TooDeep { limit: DEEPEST });
        }
        let first = self.regions.len();
        self.regions.extend([Region { parent: place, depth }, Region { parent: place, depth }]);
        self.branches.insert((id, place), [first, first + 1]);
        Ok([first, first + 1])
    }

    /// The regions that must have a copy: the one that holds all uses if the node is defined everywhere, otherwise the
    /// outermost ones among those that use it.
    fn cover(&self, uses: &[(usize, usize)], is_total: bool) -> Vec<usize> {
        let mut places: Vec<usize> = uses.iter().map(|(place, _)| *place).collect();
        places.sort_unstable();
        places.dedup();
        if is_total {
            let first = places[0];
            return vec![places.iter().fold(first, |all, place| common(&self.regions, all, *place))];
        }
        // A parent comes before its branches, so that one pass drops what an outer region holds already.
        let mut kept: Vec<usize> = Vec::new();
        let mut known: FxHashSet<usize> = FxHashSet::default();
        for place in places {
            let mut outer = place;
            while outer != 0 && !known.contains(&outer) {
                outer = self.regions[outer].parent;
            }
            if !known.contains(&outer) {
                known.insert(place);
                kept.push(place);
            }
        }
        kept
    }

    /// The innermost region around `place` that has the property.
    fn holder(&self, place: usize, has: impl Fn(usize) -> bool) -> usize {
        let mut place = place;
        while place != 0 && !has(place) {
            place = self.regions[place].parent;
        }
        place
    }
}

impl<'a> Lowering<'a> {
    fn new(
        language: Language,
        dialect: &'static dyn Dialect,
        graph: &'a Graph,
        roots: &[ExpressionId],
        symbols: FxHashMap<SymbolId, String>,
        prefix: String,
        program: Program,
    ) -> Result<Self, SourceError> {
        let plan = Plan::new(graph, roots)?;
        let statements = plan.regions.iter().map(|_| Vec::new()).collect();
        let (texts, roots) = (FxHashMap::default(), roots.iter().copied().collect());
        Ok(Self { language, dialect, graph, roots, plan, statements, texts, symbols, prefix, temporaries: 0, program })
    }

    fn run(mut self, roots: &[ExpressionId]) -> Result<Program, SourceError> {
        for (id, places) in std::mem::take(&mut self.plan.order) {
            for place in places {
                let text = match self.graph.node(id) {
                    Node::Select(condition, yes, no) => self.select((id, place), condition, [yes, no]),
                    node => {
                        let text = self.node(node, place)?;
                        self.name_if_shared(id, place, text)
                    }
                };
                self.texts.insert((id, place), text);
            }
        }
        self.program.results = roots.iter().map(|root| self.texts[&(*root, 0)].text.clone()).collect();
        self.program.statements = std::mem::take(&mut self.statements[0]);
        Ok(self.program)
    }

    /// The text of an operand as it is used in a region.
    fn text(&self, id: ExpressionId, place: usize) -> &Text {
        let holder = self.plan.holder(place, |region| self.texts.contains_key(&(id, region)));
        &self.texts[&(id, holder)]
    }

    fn uses(&self, id: ExpressionId, place: usize) -> usize {
        let holder = self.plan.holder(place, |region| self.texts.contains_key(&(id, region)));
        self.plan.uses[&(id, holder)]
    }

    /// Gives a name to what is used more than once and to what is long.
    fn name_if_shared(&mut self, id: ExpressionId, region: usize, text: Text) -> Text {
        let trivial = matches!(self.graph.node(id), Node::Number(_) | Node::Pi | Node::Symbol(_) | Node::Truth(_));
        let long = text.text.len() > LONGEST && !self.roots.contains(&id);
        let shared = self.plan.uses[&(id, region)] > 1;
        if trivial || !(shared || long) { text } else { self.named(id, region, text) }
    }

    fn named(&mut self, id: ExpressionId, region: usize, text: Text) -> Text {
        let is_truth = is_truth(self.graph.node(id));
        let name = self.assign(region, is_truth, text.text);
        let mut undefined = text.undefined;
        if undefined.len() > 4 {
            let test = undefined.join(&format!(" {} ", self.dialect.words().or));
            undefined = vec![self.assign(region, true, test)];
        }
        Text { text: name, level: Level::Atom, undefined }
    }

    fn assign(&mut self, region: usize, is_truth: bool, text: String) -> String {
        let name = self.temporary();
        self.statements[region].push(Statement::Assign { name: name.clone(), is_truth, text });
        name
    }

    fn temporary(&mut self) -> String {
        self.temporaries += 1;
        format!("{}{}", self.prefix, self.temporaries)
    }

    fn select(&mut self, copy: (ExpressionId, usize), condition: ExpressionId, values: [ExpressionId; 2]) -> Text {
        let (_, place) = copy;
        let condition = self.text(condition, place).clone();
        let [yes, no] = [0, 1].map(|side| {
            let inside = self.plan.branches[&copy][side];
            let mut statements = std::mem::take(&mut self.statements[inside]);
            let text = self.text(values[side], inside).text.clone();
            // An `if` that is nothing but the value of this branch needs no name.
            let value = match statements.pop() {
                Some(Statement::Select { name, select }) if name == text && self.uses(values[side], inside) == 1 => {
                    Value::Select(Box::new(select))
                }
                last => {
                    statements.extend(last);
                    Value::Text(text)
                }
            };
            Branch { statements, value }
        });
        let name = self.temporary();
        let select = Select { undefined: condition.undefined, condition: condition.text, yes, no };
        self.statements[place].push(Statement::Select { name: name.clone(), select });
        Text::new(name, Level::Atom)
    }

    fn node(&mut self, node: Node, place: usize) -> Result<Text, SourceError> {
        let get = |id: ExpressionId| self.text(id, place);
        let infix = |sign: &str, level: Level, a: ExpressionId, left: Level, b: ExpressionId, right: Level| {
            Text::new(format!("{} {sign} {}", get(a).within(left), get(b).within(right)), level)
        };
        let words = self.dialect.words();
        Ok(match node {
            Node::Number(number) => self.literal(self.graph.number_value(number))?,
            Node::Pi => Text::new(words.pi, Level::Atom),
            Node::Symbol(symbol) => Text::new(self.symbols[&symbol].clone(), Level::Atom),
            Node::Negate(a) => Text::new(format!("-{}", get(a).within(Level::Product)), Level::Sum),
            Node::Add(a, b) => infix("+", Level::Sum, a, Level::Sum, b, Level::Product),
            Node::Subtract(a, b) => infix("-", Level::Sum, a, Level::Sum, b, Level::Product),
            Node::Multiply(a, b) => infix("*", Level::Product, a, Level::Product, b, Level::Atom),
            Node::Divide(a, b) => infix("/", Level::Product, a, Level::Product, b, Level::Atom),
            Node::Power(a, b) => self.power(place, a, b)?,
            Node::Call(function, a) => {
                let argument = get(a).text.clone();
                self.call(self.dialect.function(function), &[argument], function.name())?
            }
            Node::Call2(function, a, b) => {
                let arguments = [a, b].map(|id| get(id).text.clone());
                self.call(self.dialect.binary(function), &arguments, function.name())?
            }
            Node::Truth(truth) => {
                let (left, right) = if truth { ("0.0", "1.0") } else { ("1.0", "0.0") };
                Text::new(format!("{left}{} < {right}{}", words.suffix, words.suffix), Level::Relation)
            }
            Node::Less(a, b) => self.comparison("<", [a, b], place),
            Node::LessEqual(a, b) => self.comparison("<=", [a, b], place),
            Node::And(a, b) => self.join(words.and, Level::And, get(a), get(b)),
            Node::Or(a, b) => self.join(words.or, Level::Or, get(a), get(b)),
            Node::Not(a) => {
                let inner = get(a);
                Text {
                    text: format!("{}{}", words.not, inner.within(Level::Atom)),
                    level: Level::Relation,
                    undefined: inner.undefined.clone(),
                }
            }
            Node::Select(..) => unreachable!("select is written by its own function"),
        })
    }

    fn comparison(&self, sign: &str, sides: [ExpressionId; 2], place: usize) -> Text {
        let [left, right] = sides.map(|id| self.text(id, place).within(Level::Sum));
        let [before, after] = self.dialect.words().is_nan;
        let mut undefined: Vec<String> = Vec::new();
        for side in sides {
            if !matches!(self.graph.node(side), Node::Number(_) | Node::Pi) {
                undefined.push(format!("{before}{}{after}", self.text(side, place).text));
            }
        }
        Text { text: format!("{left} {sign} {right}"), level: Level::Relation, undefined }
    }

    /// `and`, `or`: mixed ones get parentheses, which C compilers ask for.
    fn join(&self, word: &str, level: Level, left: &Text, right: &Text) -> Text {
        let left_text = left.within(if left.level == level { level } else { Level::Relation });
        let mut undefined = left.undefined.clone();
        let known: FxHashSet<&String> = left.undefined.iter().collect();
        undefined.extend(right.undefined.iter().filter(|test| !known.contains(test)).cloned());
        Text { text: format!("{left_text} {word} {}", right.within(Level::Relation)), level, undefined }
    }

    /// A number exactly, as `p/q` or as the literal that rounds to it.
    fn literal(&self, value: &Exact) -> Result<Text, SourceError> {
        let suffix = self.dialect.words().suffix;
        let double = |number: f64| format!("{number:?}{suffix}");
        let magnitude = value.magnitude();
        let sign = if value.is_negative() { "-" } else { "" };
        let exact = |n: i64| n.unsigned_abs() < 1 << 53;
        if let Some((p, q)) = magnitude.to_fraction()
            && q > 1
            && exact(p)
            && exact(q)
            && magnitude.to_string().contains('/')
            && !is_short_decimal(q)
        {
            let level = if value.is_negative() { Level::Sum } else { Level::Product };
            return Ok(Text::new(format!("{sign}{} / {}", double(p as f64), double(q as f64)), level));
        }
        let number = magnitude.to_f64();
        if !number.is_finite() {
            return Err(SourceError::Constant);
        }
        let level = if value.is_negative() { Level::Sum } else { Level::Atom };
        Ok(Text::new(format!("{sign}{}", double(number)), level))
    }

    fn call(&mut self, called: Called, arguments: &[String], name: &str) -> Result<Text, SourceError> {
        let arguments = arguments.join(", ");
        let text = match called {
            Called::Around(before, after) => format!("{before}{arguments}{after}"),
            Called::Helper(helper) => {
                self.program.helpers.insert(helper);
                format!("{}({arguments})", self.program.helper(helper))
            }
            Called::Package(function, order, after) => {
                self.program.package.insert(function);
                let order = order.map_or(String::new(), |order| format!("{order}, "));
                format!("{function}({order}{arguments}){after}")
            }
            Called::Missing => {
                let language = self.language.name();
                return Err(SourceError::Unsupported { function: name.to_owned(), language });
            }
        };
        Ok(Text::new(text, Level::Atom))
    }

    /// Integer and half-integer exponents are products, in the order of [`crate::expression::power`].
    fn power(&mut self, region: usize, a: ExpressionId, b: ExpressionId) -> Result<Text, SourceError> {
        let exponent = self.graph.as_number(b).map(Exact::to_f64);
        let arguments = [a, b].map(|id| self.text(id, region).text.clone());
        let Some(exponent) = exponent else {
            return self.call(Called::Helper(Helper::Power), &arguments, "power");
        };
        let whole = exponent.fract() == 0.0 && exponent.abs() <= 64.0;
        let half = !whole && (2.0 * exponent).fract() == 0.0 && exponent.abs() <= 32.0;
        if !whole && !half {
            return self.call(self.dialect.power(), &arguments, "power");
        }
        let base = match self.graph.node(a) {
            Node::Symbol(_) => arguments[0].clone(),
            _ if self.uses(a, region) > 1 && self.text(a, region).level == Level::Atom => arguments[0].clone(),
            _ => self.assign(region, false, arguments[0].clone()),
        };
        let n = exponent.abs() as u32;
        let mut product = Text::new(base.clone(), Level::Atom);
        for bit in (0..n.max(1).ilog2()).rev() {
            if product.level != Level::Atom {
                product = Text::new(self.assign(region, false, product.text), Level::Atom);
            }
            product = Text::new(format!("{} * {}", product.text, product.text), Level::Product);
            if n & (1 << bit) != 0 {
                product = Text::new(format!("{} * {base}", product.text), Level::Product);
            }
        }
        if half {
            let root = self.call(self.dialect.function(Function::Sqrt), &[base], "sqrt")?;
            product = match n {
                0 => root,
                _ => Text::new(format!("{} * {}", root.text, product.within(Level::Atom)), Level::Product),
            };
        }
        if exponent < 0.0 {
            let one = format!("1.0{}", self.dialect.words().suffix);
            product = Text::new(format!("{one} / {}", product.within(Level::Atom)), Level::Product);
        }
        Ok(product)
    }
}

/// The innermost region that holds both; a region comes after its parent.
fn common(regions: &[Region], mut a: usize, mut b: usize) -> usize {
    while a != b {
        if a > b {
            a = regions[a].parent;
        } else {
            b = regions[b].parent;
        }
    }
    a
}

fn is_truth(node: Node) -> bool {
    use Node::{And, Less, LessEqual, Not, Or, Truth};
    matches!(node, Truth(_) | Less(..) | LessEqual(..) | And(..) | Or(..) | Not(_))
}

/// Whether an operation on finite numbers is defined whatever they are; its overflow is an infinity in every language.
fn is_total(node: Node) -> bool {
    use Node::{Add, Call, Multiply, Negate, Number, Pi, Subtract, Symbol, Truth};
    match node {
        Number(_) | Pi | Symbol(_) | Truth(_) | Negate(_) | Add(..) | Subtract(..) | Multiply(..) => true,
        Call(function, _) => {
            matches!(function, Function::Sin | Function::Cos | Function::Atan | Function::Tanh | Function::Abs)
        }
        _ => false,
    }
}

/// Whether 1/q has few decimals: 1, 2, 4, 5, 8, 10, 16 among the denominators that are written as fractions.
fn is_short_decimal(q: i64) -> bool {
    q <= 16 && 10_000 % q == 0
}
