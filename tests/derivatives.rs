//! Derivatives against two independent methods: differences at 40 digits from mpmath (`data/derivatives.csv`, made by
//! `data/derivatives.py`) for every function, and hyper-dual numbers (crate `num-dual`) on generated formulas.

use num_dual::{DualNum, HyperDual64};
use proptest::prelude::*;
use quadrel::expression::{
    BinaryFunction, ExpressionId, Function, Graph, SymbolId, differentiate, differentiate_all, evaluate,
};

struct Plane {
    graph: Graph,
    symbols: [SymbolId; 2],
    x: ExpressionId,
    y: ExpressionId,
}

impl Plane {
    fn new() -> Self {
        let mut graph = Graph::new();
        let symbols = ["x", "y"].map(|name| graph.new_symbol(name));
        let [x, y] = symbols.map(|symbol| graph.symbol(symbol));
        Self { graph, symbols, x, y }
    }

    /// fx, fy, fxx, fxy, fyy at a point.
    fn derivatives(&mut self, formula: ExpressionId, point: [f64; 2]) -> Vec<f64> {
        let [x, y] = self.symbols;
        let (fx, fy) = (differentiate(&mut self.graph, formula, x), differentiate(&mut self.graph, formula, y));
        let by_x = differentiate_all(&mut self.graph, &[fx, fy], x);
        let fyy = differentiate(&mut self.graph, fy, y);
        let roots = [fx, fy, by_x[0], by_x[1], fyy];
        evaluate(&self.graph, &roots, |symbol| if symbol == x { point[0] } else { point[1] })
    }

    /// A formula in postfix notation.
    fn parse(&mut self, text: &str) -> ExpressionId {
        let mut stack = Vec::new();
        for token in text.split(' ') {
            let id = self.token(token, &mut stack);
            stack.push(id);
        }
        assert_eq!(stack.len(), 1, "{text}");
        stack[0]
    }

    fn token(&mut self, token: &str, stack: &mut Vec<ExpressionId>) -> ExpressionId {
        let graph = &mut self.graph;
        let mut pop = || stack.pop().expect("an operand");
        match token {
            "x" => return self.x,
            "y" => return self.y,
            "neg" => return graph.negate(pop()),
            "if" => {
                let (d, c, b, a) = (pop(), pop(), pop(), pop());
                let condition = graph.less(a, b);
                return graph.select(condition, c, d);
            }
            _ => {}
        }
        if let Some(function) = unary(token) {
            return graph.call(function, pop());
        }
        if let Ok(number) = token.parse() {
            return graph.integer(number);
        }
        if let Some((top, bottom)) = token.split_once('/')
            && let (Ok(top), Ok(bottom)) = (top.parse(), bottom.parse())
        {
            return graph.fraction(top, bottom);
        }
        let (b, a) = (pop(), pop());
        match token {
            "+" => graph.add(a, b),
            "-" => graph.subtract(a, b),
            "*" => graph.multiply(a, b),
            "/" => graph.divide(a, b),
            "pow" => graph.power(a, b),
            name => {
                let function = BinaryFunction::NAMED.iter().find(|function| function.name() == name);
                graph.call2(*function.unwrap_or_else(|| panic!("unknown token {name}")), a, b)
            }
        }
    }
}

fn unary(token: &str) -> Option<Function> {
    if let Some((family, order)) = token.split_once(':') {
        let n = order.parse().ok()?;
        return match family {
            "polygamma" => Some(Function::Polygamma(n)),
            "bessel_j" => Some(Function::BesselJ(n)),
            "bessel_y" => Some(Function::BesselY(n)),
            "elliptic_k" => Some(Function::EllipticK(n)),
            "elliptic_e" => Some(Function::EllipticE(n)),
            _ => None,
        };
    }
    Function::NAMED.iter().copied().find(|function| function.name() == token)
}

/// A wrong rule is wrong by much more; this allows for the rounding of intermediate values of at most 1e4.
const TOLERANCE: f64 = 1e-10;

#[test]
fn derivatives_agree_with_differences_at_40_digits() {
    let mut seen = String::new();
    let mut lines = 0;
    for line in include_str!("data/derivatives.csv").lines() {
        let mut fields = line.split(';');
        let formula = fields.next().expect("a formula");
        let numbers: Vec<f64> = fields.map(|field| field.parse().expect("a number")).collect();
        let mut plane = Plane::new();
        let root = plane.parse(formula);
        let values = plane.derivatives(root, [numbers[0], numbers[1]]);
        let scale = numbers[2..].iter().fold(1.0_f64, |scale, value| scale.max(value.abs()));
        for ((value, expected), name) in values.iter().zip(&numbers[2..]).zip(["fx", "fy", "fxx", "fxy", "fyy"]) {
            let close = (value - expected).abs() <= TOLERANCE * scale;
            assert!(close, "{name} of {formula} at {:?}: {value} instead of {expected}", &numbers[..2]);
        }
        seen.push(' ');
        seen.push_str(formula);
        seen.push(' ');
        lines += 1;
    }
    assert!(lines > 800);
    for function in Function::NAMED {
        assert!(seen.contains(&format!(" {} ", function.name())), "{function:?} is not in the file");
    }
}

/// One step of a generated formula: an operation and the operands it picks among the values so far.
type Step = (u8, usize, usize, usize);

/// The node and the hyper-dual value of one step, or `None` where the value is undefined, large, or beside a kink.
fn step(
    graph: &mut Graph,
    (operation, i, j, k): Step,
    nodes: &[(ExpressionId, HyperDual64)],
) -> Option<(ExpressionId, HyperDual64)> {
    let pick = |index: usize| nodes[nodes.len() - 1 - index % nodes.len()];
    let ((a, p), (b, q), (c, r)) = (pick(i), pick(j), pick(k));
    let exponents = [(2, 1), (3, 1), (-1, 1), (-2, 1), (1, 2), (3, 2), (-1, 2), (1, 3), (-5, 4)];
    let (top, bottom) = exponents[k % exponents.len()];
    let (node, value) = match operation % 30 {
        0 | 1 => (graph.add(a, b), p + q),
        2 | 3 => (graph.subtract(a, b), p - q),
        4 | 5 => (graph.multiply(a, b), p * q),
        6 | 7 if q.re.abs() > 0.05 => (graph.divide(a, b), p / q),
        8 => (graph.call(Function::Sin, a), p.sin()),
        9 => (graph.call(Function::Cos, a), p.cos()),
        10 if p.re.cos().abs() > 0.05 => (graph.call(Function::Tan, a), p.tan()),
        11 if p.re.abs() < 0.98 => (graph.call(Function::Asin, a), p.asin()),
        12 if p.re.abs() < 0.98 => (graph.call(Function::Acos, a), p.acos()),
        13 => (graph.call(Function::Atan, a), p.atan()),
        14 => (graph.call(Function::Sinh, a), p.sinh()),
        15 => (graph.call(Function::Cosh, a), p.cosh()),
        16 => (graph.call(Function::Tanh, a), p.tanh()),
        17 => (graph.call(Function::Asinh, a), p.asinh()),
        18 if p.re > 1.05 => (graph.call(Function::Acosh, a), p.acosh()),
        19 if p.re.abs() < 0.98 => (graph.call(Function::Atanh, a), p.atanh()),
        20 => (graph.call(Function::Exp, a), p.exp()),
        21 if p.re > 0.05 => (graph.call(Function::Log, a), p.ln()),
        22 if p.re > 0.05 => (graph.call(Function::Sqrt, a), p.sqrt()),
        23 if p.re.abs() > 0.05 => (graph.call(Function::Cbrt, a), p.cbrt()),
        24 if p.re.abs() > 0.05 => (graph.call(Function::Abs, a), if p.re < 0.0 { -p } else { p }),
        25 if p.re > 0.05 || (bottom == 1 && p.re < -0.05) => {
            let exponent = graph.fraction(top, bottom);
            let value = if bottom == 1 { p.powi(top as i32) } else { p.powf(top as f64 / bottom as f64) };
            (graph.power(a, exponent), value)
        }
        26 if p.re > 0.05 => (graph.power(a, b), (q * p.ln()).exp()),
        27 if p.re.hypot(q.re) > 0.1 => match k % 2 {
            0 => (graph.call2(BinaryFunction::Hypot, a, b), (p * p + q * q).sqrt()),
            _ if q.re > 0.05 => (graph.call2(BinaryFunction::Atan2, a, b), (p / q).atan()),
            _ => return None,
        },
        28 if (p.re - q.re).abs() > 0.01 => match k % 2 {
            0 => (graph.call2(BinaryFunction::Min, a, b), if q.re < p.re { q } else { p }),
            _ => (graph.call2(BinaryFunction::Max, a, b), if q.re > p.re { q } else { p }),
        },
        29 if (p.re - q.re).abs() > 0.01 => {
            let condition = graph.less_equal(a, b);
            (graph.select(condition, c, a), if p.re <= q.re { r } else { p })
        }
        _ => return None,
    };
    let parts = [value.re, value.eps1, value.eps2, value.eps1eps2];
    parts.iter().all(|part| part.abs() < 1e3).then_some((node, value))
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(10_000))]

    /// Formulas with shared parts, their last node differentiated by x, by y, and by both.
    #[test]
    fn derivatives_agree_with_hyper_dual_numbers(
        steps in prop::collection::vec((any::<u8>(), 0usize..6, 0usize..6, 0usize..18), 1..30),
        x in 0.1..2.0_f64,
        y in -2.0..2.0_f64,
    ) {
        let mut plane = Plane::new();
        let third = plane.graph.fraction(1, 3);
        let mut nodes = vec![
            (third, HyperDual64::from_re(1.0 / 3.0)),
            (plane.x, HyperDual64::new(x, 1.0, 0.0, 0.0)),
            (plane.y, HyperDual64::new(y, 0.0, 1.0, 0.0)),
        ];
        for instruction in steps {
            if let Some(next) = step(&mut plane.graph, instruction, &nodes) {
                nodes.push(next);
            }
        }
        let (root, expected) = nodes[nodes.len() - 1];
        let values = plane.derivatives(root, [x, y]);
        for (value, expected) in [values[0], values[1], values[3]].iter().zip([expected.eps1, expected.eps2, expected.eps1eps2]) {
            prop_assert!((value - expected).abs() <= 1e-7, "{value} instead of {expected}");
        }
    }
}
