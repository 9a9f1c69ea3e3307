//! Formulas from short texts and reproducible random numbers, independent of the sheet language.

use quadrel::expression::{BinaryFunction, ExpressionId, Function, Graph, SymbolId, evaluate_one};

/// A graph in which symbols are found by name.
pub struct Formulas {
    pub graph: Graph,
    known: Vec<(String, SymbolId)>,
}

impl Formulas {
    pub fn new() -> Self {
        Self { graph: Graph::new(), known: Vec::new() }
    }

    pub fn symbol(&mut self, name: &str) -> SymbolId {
        if let Some((_, symbol)) = self.known.iter().find(|(known, _)| known == name) {
            return *symbol;
        }
        let symbol = self.graph.new_symbol(name);
        self.known.push((name.to_owned(), symbol));
        symbol
    }

    /// The formula of an infix text with `+ - * / ^`, parentheses, integers, names and functions.
    pub fn parse(&mut self, text: &str) -> ExpressionId {
        let mut parser = Parser { formulas: self, rest: text };
        let formula = parser.sum();
        assert!(parser.rest.trim().is_empty(), "unread text {:?} in {text:?}", parser.rest);
        formula
    }

    pub fn value(&mut self, text: &str, values: &[(SymbolId, f64)]) -> f64 {
        let formula = self.parse(text);
        evaluate_one(&self.graph, formula, |symbol| {
            values.iter().find(|(known, _)| *known == symbol).map_or(f64::NAN, |(_, value)| *value)
        })
    }
}

/// Recursive descent; `^` binds tighter than a minus before it and groups to the right.
struct Parser<'a> {
    formulas: &'a mut Formulas,
    rest: &'a str,
}

impl Parser<'_> {
    fn eat(&mut self, symbol: char) -> bool {
        match self.rest.trim_start().strip_prefix(symbol) {
            Some(rest) => {
                self.rest = rest;
                true
            }
            None => false,
        }
    }

    fn sum(&mut self) -> ExpressionId {
        let mut left = self.product();
        loop {
            if self.eat('+') {
                let right = self.product();
                left = self.formulas.graph.add(left, right);
            } else if self.eat('-') {
                let right = self.product();
                left = self.formulas.graph.subtract(left, right);
            } else {
                return left;
            }
        }
    }

    fn product(&mut self) -> ExpressionId {
        let mut left = self.sign();
        loop {
            if self.eat('*') {
                let right = self.sign();
                left = self.formulas.graph.multiply(left, right);
            } else if self.eat('/') {
                let right = self.sign();
                left = self.formulas.graph.divide(left, right);
            } else {
                return left;
            }
        }
    }

    fn sign(&mut self) -> ExpressionId {
        if self.eat('-') {
            let operand = self.sign();
            return self.formulas.graph.negate(operand);
        }
        let base = self.atom();
        if self.eat('^') {
            let exponent = self.sign();
            return self.formulas.graph.power(base, exponent);
        }
        base
    }

    fn atom(&mut self) -> ExpressionId {
        if self.eat('(') {
            let inner = self.sum();
            assert!(self.eat(')'), "a closing parenthesis before {:?}", self.rest);
            return inner;
        }
        self.rest = self.rest.trim_start();
        let length = self.rest.find(|c: char| !c.is_ascii_alphanumeric()).unwrap_or(self.rest.len());
        let (word, rest) = self.rest.split_at(length);
        self.rest = rest;
        if let Ok(number) = word.parse() {
            return self.formulas.graph.integer(number);
        }
        if word == "pi" {
            return self.formulas.graph.pi();
        }
        if !self.eat('(') {
            let symbol = self.formulas.symbol(word);
            return self.formulas.graph.symbol(symbol);
        }
        let first = self.sum();
        let second = self.eat(',').then(|| self.sum());
        assert!(self.eat(')'), "a closing parenthesis before {:?}", self.rest);
        let graph = &mut self.formulas.graph;
        match second {
            None => {
                let function = Function::NAMED.iter().find(|function| function.name() == word);
                graph.call(*function.unwrap_or_else(|| panic!("no function {word}")), first)
            }
            Some(second) => {
                let function = BinaryFunction::NAMED.iter().find(|function| function.name() == word);
                graph.call2(*function.unwrap_or_else(|| panic!("no function {word}")), first, second)
            }
        }
    }
}

/// A small generator of reproducible numbers (xorshift64*, Marsaglia 2003 and Vigna 2016).
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1)
    }

    /// A number in [low, high).
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        let bits = self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11;
        low + (high - low) * bits as f64 / (1u64 << 53) as f64
    }
}
