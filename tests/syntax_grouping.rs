//! Grouping of operators, compared with a second reader written the classical way.
//!
//! The product groups a flat list of operands with two stacks; the reader below descends through one function for each
//! level of precedence. Both must give the same fully bracketed text for any expression.

use proptest::prelude::*;
use proptest::sample::select;
use quadrel::language::syntax::{Comparison, Operator, Sheet, Statement, SyntaxKind};
use quadrel::language::{Source, parse};

/// Every operation in brackets, as the product groups it. Operands come before what contains them in the arena.
fn grouped(text: &str) -> String {
    let (sheet, diagnostics) = parse(&Source::new("grouping.sheet", format!("value = {text}")));
    assert!(diagnostics.is_empty(), "{text}: {diagnostics:?}");
    let Some(Statement::Definition(definition)) = sheet.statements.first() else { panic!("{text} is not read") };
    let shown = bracketed(&sheet);
    shown[definition.value.0 as usize].clone()
}

fn bracketed(sheet: &Sheet) -> Vec<String> {
    let mut shown: Vec<String> = Vec::new();
    for syntax in &sheet.expressions {
        let of = |id: &quadrel::language::syntax::SyntaxId| shown[id.0 as usize].as_str();
        let text = match &syntax.kind {
            SyntaxKind::Name(name) => name.clone(),
            SyntaxKind::Negate(a) => format!("(-{})", of(a)),
            SyntaxKind::Not(a) => format!("(not {})", of(a)),
            SyntaxKind::Binary { operator, left, right, .. } => {
                format!("({}{}{})", of(left), sign(*operator), of(right))
            }
            SyntaxKind::Compare { first, rest } => {
                let rest: String =
                    rest.iter().map(|(comparison, id)| format!("{}{}", relation(*comparison), of(id))).collect();
                format!("({}{rest})", of(first))
            }
            other => panic!("{other:?} is not in these expressions"),
        };
        shown.push(text);
    }
    shown
}

fn sign(operator: Operator) -> &'static str {
    match operator {
        Operator::Add => "+",
        Operator::Subtract => "-",
        Operator::Multiply => "*",
        Operator::Divide => "/",
        Operator::Power => "^",
        Operator::And => "and",
        Operator::Or => "or",
    }
}

fn relation(comparison: Comparison) -> &'static str {
    match comparison {
        Comparison::Less => "<",
        Comparison::LessEqual => "<=",
        Comparison::Greater => ">",
        Comparison::GreaterEqual => ">=",
    }
}

/// The second reader: `or`, `and`, `not`, comparisons, `+ -`, `* /`, unary `-`, `^`, from loose to tight.
struct Descent<'a> {
    words: std::iter::Peekable<std::slice::Iter<'a, &'a str>>,
}

impl Descent<'_> {
    fn take(&mut self, words: &[&str]) -> Option<String> {
        self.words.next_if(|word| words.contains(word)).map(|word| (*word).to_owned())
    }

    fn left(&mut self, operators: &[&str], operand: fn(&mut Self) -> String) -> String {
        let mut left = operand(self);
        while let Some(operator) = self.take(operators) {
            left = format!("({left}{operator}{})", operand(self));
        }
        left
    }

    fn or(&mut self) -> String {
        self.left(&["or"], |reader| reader.left(&["and"], Self::not))
    }

    fn not(&mut self) -> String {
        match self.take(&["not"]) {
            Some(_) => format!("(not {})", self.not()),
            None => self.comparison(),
        }
    }

    fn comparison(&mut self) -> String {
        let mut chain = self.sum();
        let first = chain.len();
        while let Some(relation) = self.take(&["<", "<=", ">", ">="]) {
            chain += &(relation + &self.sum());
        }
        if chain.len() > first { format!("({chain})") } else { chain }
    }

    fn sum(&mut self) -> String {
        self.left(&["+", "-"], |reader| reader.left(&["*", "/"], Self::signed))
    }

    fn signed(&mut self) -> String {
        match self.take(&["-"]) {
            Some(_) => format!("(-{})", self.signed()),
            None => self.power(),
        }
    }

    fn power(&mut self) -> String {
        let base = self.atom();
        match self.take(&["^"]) {
            Some(_) => format!("({base}^{})", self.signed()),
            None => base,
        }
    }

    fn atom(&mut self) -> String {
        if self.take(&["("]).is_some() {
            let inside = self.or();
            assert!(self.take(&[")"]).is_some());
            return inside;
        }
        (*self.words.next().expect("generated expressions are complete")).to_owned()
    }
}

/// Words of an arithmetic expression.
fn arithmetic() -> impl Strategy<Value = Vec<&'static str>> {
    let operand = (0..3usize, select(&["a", "b", "x"][..])).prop_map(|(signs, name)| {
        let mut words = vec!["-"; signs.saturating_sub(1)];
        words.push(name);
        words
    });
    operand.prop_recursive(4, 40, 6, |inner| {
        let operators = select(&["+", "-", "*", "/", "^", "^"][..]);
        (any::<bool>(), prop::collection::vec((operators, inner), 1..6))
            .prop_map(|(brackets, parts)| joined(brackets, parts))
    })
}

/// Words of a condition.
fn condition() -> impl Strategy<Value = Vec<&'static str>> {
    let relations = select(&["<", "<=", ">", ">="][..]);
    let chain = prop::collection::vec((relations, arithmetic()), 2..4).prop_map(|parts| joined(false, parts));
    chain.prop_recursive(3, 30, 4, |inner| {
        let parts = prop::collection::vec((select(&["and", "or"][..]), inner), 1..4);
        (any::<bool>(), any::<bool>(), parts).prop_map(|(negated, brackets, parts)| {
            let mut words = if negated { vec!["not"] } else { vec![] };
            words.extend(joined(brackets, parts));
            words
        })
    })
}

/// The parts with their operators between them, the first one's left out.
fn joined(brackets: bool, parts: Vec<(&'static str, Vec<&'static str>)>) -> Vec<&'static str> {
    let mut words = if brackets { vec!["("] } else { vec![] };
    for (at, (operator, part)) in parts.into_iter().enumerate() {
        if at > 0 {
            words.push(operator);
        }
        words.extend(part);
    }
    words.extend(brackets.then_some(")"));
    words
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 2_000, failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn both_readers_group_alike(words in prop_oneof![arithmetic(), condition()]) {
        let mut reader = Descent { words: words.iter().peekable() };
        let expected = reader.or();
        prop_assert!(reader.words.next().is_none());
        prop_assert_eq!(grouped(&words.join(" ")), expected);
    }
}

#[test]
fn the_second_reader_follows_the_rules_of_the_language() {
    for (text, expected) in
        [("- a ^ b ^ x", "(-(a^(b^x)))"), ("a ^ - b * x", "((a^(-b))*x)"), ("a < b <= x", "(a<b<=x)")]
    {
        let words: Vec<&str> = text.split(' ').collect();
        assert_eq!(Descent { words: words.iter().peekable() }.or(), expected);
        assert_eq!(grouped(text), expected);
    }
}
