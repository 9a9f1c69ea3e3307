//! Reads a printed form back into the graph.
//!
//! Deliberately apart from the language of sheets: a mistake in the printer must not be hidden by a reader that shares its
//! ideas. Precedence climbing over the printed text; anything it does not know is a failure of the proof.

use crate::expression::{BinaryFunction, Exact, ExpressionId, Function, Graph, SymbolId};

/// Deepest nesting of a printed form.
const MAXIMUM_DEPTH: usize = 200;

/// The formula that `text` says, names looked up in `names`; `None` for text that is not understood.
pub(super) fn parse_back(graph: &mut Graph, text: &str, names: &[(String, SymbolId)]) -> Option<ExpressionId> {
    let mut reader = TextReader { graph, names, rest: text, depth: 0 };
    let value = reader.disjunction()?;
    (reader.rest.is_empty() && !reader.graph.is_full()).then_some(value)
}

struct TextReader<'a> {
    graph: &'a mut Graph,
    names: &'a [(String, SymbolId)],
    rest: &'a str,
    depth: usize,
}

impl TextReader<'_> {
    fn accept(&mut self, token: &str) -> bool {
        match self.rest.trim_start().strip_prefix(token) {
            Some(rest) => {
                self.rest = rest.trim_start();
                true
            }
            None => false,
        }
    }

    fn disjunction(&mut self) -> Option<ExpressionId> {
        let mut value = self.conjunction()?;
        while self.accept("or ") {
            let right = self.conjunction()?;
            value = self.graph.or(value, right);
        }
        Some(value)
    }

    fn conjunction(&mut self) -> Option<ExpressionId> {
        let mut value = self.comparison()?;
        while self.accept("and ") {
            let right = self.comparison()?;
            value = self.graph.and(value, right);
        }
        Some(value)
    }

    fn comparison(&mut self) -> Option<ExpressionId> {
        if self.accept("not ") {
            let inner = self.comparison()?;
            return Some(self.graph.not(inner));
        }
        let left = self.sum()?;
        if self.accept("<=") {
            let right = self.sum()?;
            Some(self.graph.less_equal(left, right))
        } else if self.accept("<") {
            let right = self.sum()?;
            Some(self.graph.less(left, right))
        } else {
            Some(left)
        }
    }

    fn sum(&mut self) -> Option<ExpressionId> {
        let mut value = self.product()?;
        loop {
            if self.accept("+") {
                let right = self.product()?;
                value = self.graph.add(value, right);
            } else if self.accept("-") {
                let right = self.product()?;
                value = self.graph.subtract(value, right);
            } else {
                return Some(value);
            }
        }
    }

    fn product(&mut self) -> Option<ExpressionId> {
        let mut value = self.signed()?;
        loop {
            if self.accept("*") {
                let right = self.signed()?;
                value = self.graph.multiply(value, right);
            } else if self.accept("/") {
                let right = self.signed()?;
                value = self.graph.divide(value, right);
            } else {
                return Some(value);
            }
        }
    }

    fn signed(&mut self) -> Option<ExpressionId> {
        if self.accept("-") {
            self.enter()?;
            let inner = self.signed()?;
            self.depth -= 1;
            return Some(self.graph.negate(inner));
        }
        self.power()
    }

    fn power(&mut self) -> Option<ExpressionId> {
        let base = self.atom()?;
        if !self.accept("^") {
            return Some(base);
        }
        self.enter()?;
        let exponent = self.signed()?;
        self.depth -= 1;
        Some(self.graph.power(base, exponent))
    }

    fn atom(&mut self) -> Option<ExpressionId> {
        if self.accept("(") {
            self.enter()?;
            let inner = self.disjunction()?;
            self.depth -= 1;
            return self.accept(")").then_some(inner);
        }
        let digits = self.rest.find(|c: char| !c.is_ascii_digit() && c != '.').unwrap_or(self.rest.len());
        if digits > 0 {
            let number = Exact::parse_decimal(&self.rest[..digits])?;
            self.rest = self.rest[digits..].trim_start();
            return Some(self.graph.number(number));
        }
        let letters = self.rest.find(|c: char| !c.is_alphanumeric() && c != '_').unwrap_or(self.rest.len());
        let name = self.rest.get(..letters).filter(|name| !name.is_empty())?;
        self.rest = self.rest[letters..].trim_start();
        if self.accept("(") {
            return self.call(name);
        }
        if name == "pi" {
            return Some(self.graph.pi());
        }
        let symbol = self.names.iter().find(|(known, _)| known == name)?.1;
        Some(self.graph.symbol(symbol))
    }

    fn call(&mut self, name: &str) -> Option<ExpressionId> {
        self.enter()?;
        let mut arguments = vec![self.disjunction()?];
        while self.accept(",") {
            arguments.push(self.disjunction()?);
        }
        self.depth -= 1;
        if !self.accept(")") {
            return None;
        }
        let order = |graph: &Graph, id: ExpressionId| -> Option<u8> {
            graph.as_number(id).and_then(Exact::to_i64).and_then(|order| u8::try_from(order).ok())
        };
        match (name, &arguments[..]) {
            ("if", &[condition, yes, no]) => Some(self.graph.select(condition, yes, no)),
            ("atan2", &[y, x]) => Some(self.graph.call2(BinaryFunction::Atan2, y, x)),
            ("hypot", &[x, y]) => Some(self.graph.call2(BinaryFunction::Hypot, x, y)),
            ("min", &[x, y]) => Some(self.graph.call2(BinaryFunction::Min, x, y)),
            ("max", &[x, y]) => Some(self.graph.call2(BinaryFunction::Max, x, y)),
            ("bessel_j", &[n, x]) => {
                let function = Function::BesselJ(order(self.graph, n)?);
                Some(self.graph.call(function, x))
            }
            ("bessel_y", &[n, x]) => {
                let function = Function::BesselY(order(self.graph, n)?);
                Some(self.graph.call(function, x))
            }
            ("polygamma", &[n, x]) => {
                let function = Function::Polygamma(order(self.graph, n)?);
                Some(self.graph.call(function, x))
            }
            ("elliptic_k_derivative", &[n, x]) => {
                let function = Function::EllipticK(order(self.graph, n)?);
                Some(self.graph.call(function, x))
            }
            ("elliptic_e_derivative", &[n, x]) => {
                let function = Function::EllipticE(order(self.graph, n)?);
                Some(self.graph.call(function, x))
            }
            (_, &[x]) => {
                let function = *Function::NAMED.iter().find(|function| function.name() == name)?;
                Some(self.graph.call(function, x))
            }
            _ => None,
        }
    }

    fn enter(&mut self) -> Option<()> {
        self.depth += 1;
        (self.depth <= MAXIMUM_DEPTH).then_some(())
    }
}
