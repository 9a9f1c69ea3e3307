//! Formulas as text in the sheet's own syntax, with the fewest parentheses that parse back to the same formula.

use super::Function;
use super::graph::{ExpressionId, Graph, Node};

/// The formula at `root`, whole.
///
/// A formula with shared parts is written out in full, which can be long: prefer [`print_limited`] for messages.
pub fn print(graph: &Graph, root: ExpressionId) -> String {
    print_limited(graph, root, usize::MAX)
}

/// The formula at `root`, cut with `...` once it is longer than `limit` bytes.
pub fn print_limited(graph: &Graph, root: ExpressionId, limit: usize) -> String {
    let mut text = String::new();
    let mut todo = vec![Piece::Formula(root, Binding::Loosest)];
    while let Some(piece) = todo.pop() {
        if text.len() > limit {
            text.push_str("...");
            break;
        }
        match piece {
            Piece::Text(part) => text.push_str(part),
            Piece::Formula(id, context) => push_pieces(graph, id, context, &mut todo, &mut text),
        }
    }
    text
}

enum Piece {
    Text(&'static str),
    Formula(ExpressionId, Binding),
}

/// How tightly the surroundings bind; a formula that binds less tightly gets parentheses.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Binding {
    Loosest,
    Or,
    And,
    Not,
    Comparison,
    Sum,
    Product,
    Factor,
    Sign,
    Base,
}

fn push_pieces(graph: &Graph, id: ExpressionId, context: Binding, todo: &mut Vec<Piece>, text: &mut String) {
    use Binding::*;
    let infix = |own: Binding, operator: &'static str, a, left, b, right| {
        (own, vec![Piece::Formula(a, left), Piece::Text(operator), Piece::Formula(b, right)])
    };
    let (own, pieces) = match graph.node(id) {
        Node::Number(number) => {
            let value = graph.number_value(number);
            let shown = value.to_string();
            let own = if value.is_negative() {
                Sign
            } else if shown.contains('/') {
                Product
            } else {
                Base
            };
            return wrap(own < context, &shown, text);
        }
        Node::Symbol(symbol) => return text.push_str(graph.symbol_name(symbol)),
        Node::Pi => return text.push_str("pi"),
        Node::Truth(truth) => return text.push_str(if truth { "(0 < 1)" } else { "(1 < 0)" }),
        Node::Negate(a) => (Sign, vec![Piece::Text("-"), Piece::Formula(a, Sign)]),
        Node::Add(a, b) => infix(Sum, " + ", a, Sum, b, Product),
        Node::Subtract(a, b) => infix(Sum, " - ", a, Sum, b, Product),
        Node::Multiply(a, b) => infix(Product, "*", a, Product, b, Factor),
        Node::Divide(a, b) => infix(Product, "/", a, Product, b, Factor),
        Node::Power(a, b) => infix(Base, "^", a, Base, b, Base),
        Node::Call(function, a) => return call(function_prefix(function), &[a], todo, text),
        Node::Call2(function, a, b) => return call(function.name().to_owned() + "(", &[a, b], todo, text),
        Node::Less(a, b) => infix(Comparison, " < ", a, Sum, b, Sum),
        Node::LessEqual(a, b) => infix(Comparison, " <= ", a, Sum, b, Sum),
        Node::And(a, b) => infix(And, " and ", a, And, b, Not),
        Node::Or(a, b) => infix(Or, " or ", a, Or, b, And),
        Node::Not(a) => (Not, vec![Piece::Text("not "), Piece::Formula(a, Not)]),
        Node::Select(c, a, b) => return call("if(".to_owned(), &[c, a, b], todo, text),
    };
    // `^` groups to the right, so that a power inside a power needs parentheses on the left only; we always set them.
    let parentheses = own < context || (own == Base && context == Base);
    if parentheses {
        text.push('(');
        todo.push(Piece::Text(")"));
    }
    todo.extend(pieces.into_iter().rev());
}

fn call(prefix: String, arguments: &[ExpressionId], todo: &mut Vec<Piece>, text: &mut String) {
    text.push_str(&prefix);
    todo.push(Piece::Text(")"));
    for (position, &argument) in arguments.iter().enumerate().rev() {
        todo.push(Piece::Formula(argument, Binding::Loosest));
        if position > 0 {
            todo.push(Piece::Text(", "));
        }
    }
}

/// The text up to the argument. Derivatives of elliptic integrals and polygamma functions have no name in a sheet; they
/// are shown with their order first.
fn function_prefix(function: Function) -> String {
    match function {
        Function::BesselJ(n) | Function::BesselY(n) | Function::Polygamma(n) => format!("{}({n}, ", function.name()),
        Function::EllipticK(n) | Function::EllipticE(n) if n > 0 => format!("{}_derivative({n}, ", function.name()),
        _ => format!("{}(", function.name()),
    }
}

fn wrap(parentheses: bool, shown: &str, text: &mut String) {
    if parentheses {
        text.push('(');
        text.push_str(shown);
        text.push(')');
    } else {
        text.push_str(shown);
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn parentheses_stand_only_where_needed() {
        let mut g = Graph::new();
        let su = g.new_symbol("u");
        let u = g.symbol(su);
        let sv = g.new_symbol("v");
        let v = g.symbol(sv);
        let two = g.integer(2);
        let sum = g.add(u, v);
        let difference = g.subtract(u, sum);
        assert_eq!(print(&g, difference), "u - (u + v)");
        let product = g.multiply(sum, two);
        assert_eq!(print(&g, product), "(u + v)*2");
        let negative = g.negate(u);
        let square = g.square(u);
        let minus_square = g.negate(square);
        assert_eq!(print(&g, minus_square), "-u^2");
        let power = g.power(negative, v);
        assert_eq!(print(&g, power), "(-u)^v");
        let third = g.fraction(1, 3);
        let root = g.power(u, third);
        assert_eq!(print(&g, root), "u^(1/3)");
        let quotient = g.divide(u, product);
        assert_eq!(print(&g, quotient), "u/((u + v)*2)");
        let sine = g.call(Function::Sin, sum);
        assert_eq!(print(&g, sine), "sin(u + v)");
    }

    #[test]
    fn long_formulas_are_cut() {
        let mut g = Graph::new();
        let su = g.new_symbol("u");
        let mut x = g.symbol(su);
        for _ in 0..60 {
            let sine = g.call(Function::Sin, x);
            x = g.multiply(x, sine);
        }
        assert!(print_limited(&g, x, 100).ends_with("..."));
    }
}
