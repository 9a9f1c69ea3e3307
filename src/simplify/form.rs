//! A formula as it is printed: sums, products and powers in the order a reader expects.
//!
//! The graph holds each formula once and in no particular order; a [`Form`] is a tree for the page. Its text is the sheet's
//! own syntax, and other notations are made from the same tree.

use crate::expression::{BinaryFunction, Exact, ExpressionId, Function, Graph, Node, SymbolId};
use std::fmt::Write;

/// A formula for the page.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub enum Form {
    /// An unsigned number as it is written: `12`, `6378137`, `0.0067`.
    Number(String),
    /// The circle constant.
    Pi,
    /// A parameter or a variable.
    Name(String, NameKind),
    /// A function with its arguments, `sqrt`, `abs` and `if` included.
    Call(String, Vec<Form>),
    /// Terms with their signs (true: subtracted); at least two.
    Sum(Vec<(bool, Form)>),
    /// Factors above and below the fraction bar; together at least two, or one below.
    Product(Vec<Form>, Vec<Form>),
    /// Base and exponent.
    Power(Box<Form>, Box<Form>),
    /// `-a`
    Negate(Box<Form>),
    /// `<`, `<=`, `and`, `or` between two formulas.
    Relation(&'static str, Box<Form>, Box<Form>),
    /// `not a`
    Not(Box<Form>),
}

/// What a name stands for; parameters are written before variables.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
pub enum NameKind {
    /// A parameter of the sheet.
    Parameter,
    /// A variable of the patch.
    Variable,
}

/// How tightly a form binds on the page.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Binding {
    Or,
    And,
    Not,
    Relation,
    Sum,
    Product,
    Negate,
    Power,
    Atom,
}

impl Form {
    /// A nonnegative integer.
    pub fn integer(value: u64) -> Self {
        Form::Number(value.to_string())
    }

    /// Operations on the fully written form: each `+ - * / ^`, each minus sign and each call counts 1.
    pub fn operations(&self) -> usize {
        match self {
            Form::Number(_) | Form::Pi | Form::Name(..) => 0,
            Form::Call(_, arguments) => 1 + arguments.iter().map(Form::operations).sum::<usize>(),
            Form::Sum(terms) => {
                let inner: usize = terms.iter().map(|(_, term)| term.operations()).sum();
                inner + terms.len() - 1 + usize::from(terms[0].0)
            }
            Form::Product(above, below) => {
                let inner: usize = above.iter().chain(below).map(Form::operations).sum();
                inner + above.len().saturating_sub(1) + below.len()
            }
            Form::Power(base, exponent) => 1 + base.operations() + exponent.operations(),
            Form::Negate(inner) | Form::Not(inner) => 1 + inner.operations(),
            Form::Relation(_, left, right) => 1 + left.operations() + right.operations(),
        }
    }

    /// Whether a variable of the patch occurs.
    pub fn has_variables(&self) -> bool {
        match self {
            Form::Number(_) | Form::Pi => false,
            Form::Name(_, kind) => *kind == NameKind::Variable,
            Form::Call(_, arguments) => arguments.iter().any(Form::has_variables),
            Form::Sum(terms) => terms.iter().any(|(_, term)| term.has_variables()),
            Form::Product(above, below) => above.iter().chain(below).any(Form::has_variables),
            Form::Power(base, exponent) => base.has_variables() || exponent.has_variables(),
            Form::Negate(inner) | Form::Not(inner) => inner.has_variables(),
            Form::Relation(_, left, right) => left.has_variables() || right.has_variables(),
        }
    }

    /// Whether it is shorter, or as long and reads better.
    pub(super) fn is_better_than(&self, other: &Self) -> bool {
        let order = self.operations().cmp(&other.operations());
        order.then_with(|| self.clutter().cmp(&other.clutter())).is_lt()
    }

    /// How many sums, and how many numbers besides exponents: of equally long forms the one with fewer reads better.
    pub(super) fn clutter(&self) -> (usize, usize) {
        let total = |forms: &mut dyn Iterator<Item = &Form>| {
            forms.map(Form::clutter).fold((0, 0), |total, own| (total.0 + own.0, total.1 + own.1))
        };
        match self {
            Form::Number(_) => (0, 1),
            Form::Pi | Form::Name(..) => (0, 0),
            Form::Call(_, arguments) => total(&mut arguments.iter()),
            Form::Sum(terms) => {
                let (sums, numbers) = total(&mut terms.iter().map(|(_, term)| term));
                (1 + sums, numbers)
            }
            Form::Product(above, below) => total(&mut above.iter().chain(below)),
            Form::Power(base, _) => base.clutter(),
            Form::Negate(inner) | Form::Not(inner) => inner.clutter(),
            Form::Relation(_, left, right) => total(&mut [&**left, &**right].into_iter()),
        }
    }

    fn binding(&self) -> Binding {
        match self {
            Form::Number(_) | Form::Pi | Form::Name(..) | Form::Call(..) => Binding::Atom,
            Form::Power(..) => Binding::Power,
            Form::Negate(_) => Binding::Negate,
            Form::Product(..) => Binding::Product,
            Form::Sum(_) => Binding::Sum,
            Form::Relation("or", ..) => Binding::Or,
            Form::Relation("and", ..) => Binding::And,
            Form::Relation(..) => Binding::Relation,
            Form::Not(_) => Binding::Not,
        }
    }

    /// The text in the sheet's syntax.
    pub fn text(&self) -> String {
        let mut text = String::new();
        self.write(&mut text);
        text
    }

    fn write(&self, out: &mut String) {
        match self {
            Form::Number(number) => out.push_str(number),
            Form::Pi => out.push_str("pi"),
            Form::Name(name, _) => out.push_str(name),
            Form::Call(name, arguments) => {
                let _ = write!(out, "{name}(");
                for (place, argument) in arguments.iter().enumerate() {
                    out.push_str(if place > 0 { ", " } else { "" });
                    argument.write(out);
                }
                out.push(')');
            }
            Form::Sum(terms) => {
                for (place, (negative, term)) in terms.iter().enumerate() {
                    out.push_str(match (place, negative) {
                        (0, false) => "",
                        (0, true) => "-",
                        (_, false) => " + ",
                        (_, true) => " - ",
                    });
                    // A minus sign in front binds a product as a whole: -a*b.
                    term.write_within(Binding::Product, out);
                }
            }
            Form::Product(above, below) => {
                if above.is_empty() {
                    out.push('1');
                }
                for (place, factor) in above.iter().enumerate() {
                    out.push_str(if place > 0 { "*" } else { "" });
                    factor.write_within(if place == 0 { Binding::Product } else { Binding::Power }, out);
                }
                match &below[..] {
                    [] => {}
                    [one] => {
                        out.push('/');
                        one.write_within(Binding::Power, out);
                    }
                    several => {
                        out.push_str("/(");
                        for (place, factor) in several.iter().enumerate() {
                            out.push_str(if place > 0 { "*" } else { "" });
                            factor.write_within(Binding::Power, out);
                        }
                        out.push(')');
                    }
                }
            }
            Form::Power(base, exponent) => {
                base.write_within(Binding::Atom, out);
                out.push('^');
                exponent.write_within(Binding::Atom, out);
            }
            Form::Negate(inner) => {
                // -a*b is -(a*b) in value.
                out.push('-');
                inner.write_within(Binding::Product, out);
            }
            Form::Relation(operator, left, right) => {
                let own = self.binding();
                let tighter = if own == Binding::Relation { Binding::Sum } else { Binding::Relation };
                left.write_within(tighter, out);
                let _ = write!(out, " {operator} ");
                right.write_within(tighter, out);
            }
            Form::Not(inner) => {
                out.push_str("not ");
                inner.write_within(Binding::Relation, out);
            }
        }
    }

    fn write_within(&self, context: Binding, out: &mut String) {
        // A number such as 3/4 is written with its fraction bar and must not be torn apart.
        if self.binding() < context {
            out.push('(');
            self.write(out);
            out.push(')');
        } else {
            self.write(out);
        }
    }

    /// The formula of the graph as it stands; `None` if it would be longer than `limit` operations.
    ///
    /// `variables` are written as variables, every other symbol as a parameter.
    pub fn of(graph: &Graph, root: ExpressionId, variables: &[SymbolId], limit: usize) -> Option<Self> {
        let mut forms: rustc_hash::FxHashMap<ExpressionId, (Form, usize)> = rustc_hash::FxHashMap::default();
        for id in graph.reachable(&[root]) {
            let get = |a: ExpressionId| forms[&a].0.clone();
            let form = match graph.node(id) {
                Node::Number(number) => Form::exact(graph.number_value(number)),
                Node::Pi => Form::Pi,
                Node::Symbol(symbol) => {
                    let kind = if variables.contains(&symbol) { NameKind::Variable } else { NameKind::Parameter };
                    Form::Name(graph.symbol_name(symbol).to_owned(), kind)
                }
                Node::Negate(a) => Form::Negate(Box::new(get(a))),
                Node::Add(a, b) => Form::Sum([Form::terms(get(a)), Form::terms(get(b))].concat()),
                Node::Subtract(a, b) => Form::Sum([Form::terms(get(a)), vec![(true, get(b))]].concat()),
                Node::Multiply(a, b) => match (get(a), get(b)) {
                    (Form::Product(mut above, below), b) if below.is_empty() => {
                        above.push(b);
                        Form::Product(above, below)
                    }
                    (a, b) => Form::Product(vec![a, b], Vec::new()),
                },
                Node::Divide(a, b) => match get(a) {
                    Form::Product(above, below) if below.is_empty() => Form::Product(above, vec![get(b)]),
                    Form::Number(one) if one == "1" => Form::Product(Vec::new(), vec![get(b)]),
                    a => Form::Product(vec![a], vec![get(b)]),
                },
                Node::Power(a, b) => Form::Power(Box::new(get(a)), Box::new(get(b))),
                Node::Call(function, a) => Form::function(function, get(a)),
                Node::Call2(function, a, b) => Form::Call(binary_name(function).to_owned(), vec![get(a), get(b)]),
                Node::Truth(truth) => {
                    let (small, large) = (Form::integer(0), Form::integer(1));
                    let (left, right) = if truth { (small, large) } else { (large, small) };
                    Form::Relation("<", Box::new(left), Box::new(right))
                }
                Node::Less(a, b) => Form::Relation("<", Box::new(get(a)), Box::new(get(b))),
                Node::LessEqual(a, b) => Form::Relation("<=", Box::new(get(a)), Box::new(get(b))),
                Node::And(a, b) => Form::Relation("and", Box::new(get(a)), Box::new(get(b))),
                Node::Or(a, b) => Form::Relation("or", Box::new(get(a)), Box::new(get(b))),
                Node::Not(a) => Form::Not(Box::new(get(a))),
                Node::Select(c, a, b) => Form::Call("if".to_owned(), vec![get(c), get(a), get(b)]),
            };
            // Sizes add up over shared parts, so that a form never grows beyond the limit before it is refused.
            let size = graph.node(id).children().as_slice().iter().map(|child| forms[child].1).sum::<usize>() + 1;
            if size > 4 * limit {
                return None;
            }
            forms.insert(id, (form, size));
        }
        forms.remove(&root).map(|(form, _)| form).filter(|form| form.operations() <= limit)
    }

    /// A function of one argument; the order of a family comes first.
    pub(super) fn function(function: Function, argument: Form) -> Self {
        let (name, order) = call_name(function);
        let order = order.map(|order| Form::integer(u64::from(order)));
        Form::Call(name, order.into_iter().chain([argument]).collect())
    }

    /// An exact number; a negative one is a negated form.
    pub fn exact(value: &Exact) -> Self {
        let text = value.magnitude().to_string();
        let magnitude = match text.split_once('/') {
            Some((p, q)) => Form::Product(vec![Form::Number(p.to_owned())], vec![Form::Number(q.to_owned())]),
            None => Form::Number(text),
        };
        if value.is_negative() { Form::Negate(Box::new(magnitude)) } else { magnitude }
    }

    /// The terms of a sum, or the form as one term.
    fn terms(form: Form) -> Vec<(bool, Form)> {
        match form {
            Form::Sum(terms) => terms,
            Form::Negate(inner) => vec![(true, *inner)],
            other => vec![(false, other)],
        }
    }
}

/// The name of a function in a sheet, and the order of the families.
fn call_name(function: Function) -> (String, Option<u8>) {
    match function {
        Function::BesselJ(n) | Function::BesselY(n) | Function::Polygamma(n) => (function.name().to_owned(), Some(n)),
        Function::EllipticK(n) | Function::EllipticE(n) if n > 0 => {
            (format!("{}_derivative", function.name()), Some(n))
        }
        _ => (function.name().to_owned(), None),
    }
}

fn binary_name(function: BinaryFunction) -> &'static str {
    function.name()
}
