//! Three evaluators agree: tree evaluation, block interpreter, machine code.
//!
//! Interpreter and machine code at every level of lanes are equal bit for bit (NaN payloads aside). Against the tree they differ by the single
//! rounding of fused multiply-add; where a program has none they are equal bit for bit, else within a running error bound.

use quadrel::expression::{BinaryFunction, ExpressionId, Function, Graph, Node, SymbolId, evaluate};
use quadrel::kernel::{Engine, Instruction, Kernel, KernelError, Lanes, Program};
use std::collections::HashMap;

/// xorshift64*: reproducible, with a seed for each case.
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        self.0.wrapping_mul(0x2545_F491_4F6C_DD1D)
    }

    fn below(&mut self, n: usize) -> usize {
        (self.next() >> 33) as usize % n
    }

    /// Mostly ordinary numbers, sometimes the edges of the format.
    fn number(&mut self) -> f64 {
        match self.below(16) {
            0 => 0.0,
            1 => -0.0,
            2 => f64::INFINITY,
            3 => f64::NEG_INFINITY,
            4 => f64::NAN,
            5 => 5e-324,
            6 => 1e308,
            7 => 1.0,
            _ => (self.next() >> 11) as f64 / (1u64 << 53) as f64 * 6.0 - 3.0,
        }
    }
}

/// Machine code at each level that this machine has.
fn compiled(program: &Program) -> Vec<Kernel> {
    let supported = [Lanes::Two, Lanes::Four].into_iter().filter(|lanes| lanes.is_supported());
    supported.map(|lanes| Kernel::compiled_for(program.clone(), lanes).unwrap()).collect()
}

struct Formula {
    graph: Graph,
    root: ExpressionId,
    variables: [SymbolId; 2],
    parameter: SymbolId,
}

/// A formula of about `size` nodes over u, v and a parameter, with every kind of node.
fn formula(random: &mut Random, size: usize, fused: bool) -> Formula {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let parameter = graph.new_symbol("p");
    let mut values: Vec<ExpressionId> =
        [variables[0], variables[1], parameter].into_iter().map(|symbol| graph.symbol(symbol)).collect();
    values.push(graph.fraction(3, 7));
    values.push(graph.pi());
    let mut truths: Vec<ExpressionId> = Vec::new();
    for _ in 0..size {
        // Recent values more often, so that formulas grow deep.
        let mut pick = |values: &[ExpressionId]| {
            let low = if random.below(2) == 0 { values.len().saturating_sub(6) } else { 0 };
            values[low + random.below(values.len() - low)]
        };
        let (a, b) = (pick(&values), pick(&values));
        let kind = random.below(18);
        let value = match kind {
            0 if fused => graph.add(a, b),
            1 if fused => graph.subtract(a, b),
            0..=3 => graph.multiply(a, b),
            4 => graph.divide(a, b),
            5 => graph.negate(a),
            6..=8 => {
                let functions = Function::NAMED;
                graph.call(functions[random.below(functions.len())], a)
            }
            9 => graph.call2(BinaryFunction::NAMED[random.below(4)], a, b),
            10 => graph.power(a, b),
            11 => {
                let exponents = [(2, 1), (3, 1), (-1, 1), (-2, 1), (1, 2), (3, 2), (-1, 2), (7, 1), (1, 3), (65, 1)];
                let (numerator, denominator) = exponents[random.below(exponents.len())];
                let exponent = graph.fraction(numerator, denominator);
                graph.power(a, exponent)
            }
            12 => graph.call(Function::Sqrt, a),
            13 => graph.call(Function::Abs, a),
            _ => {
                let truth = match kind {
                    14 => graph.less(a, b),
                    15 => graph.less_equal(a, b),
                    16 if truths.len() > 1 => {
                        let (x, y) = (truths[random.below(truths.len())], truths[random.below(truths.len())]);
                        if random.below(2) == 0 { graph.and(x, y) } else { graph.or(x, y) }
                    }
                    _ if !truths.is_empty() => {
                        let x = truths[random.below(truths.len())];
                        graph.not(x)
                    }
                    _ => graph.less(b, a),
                };
                truths.push(truth);
                graph.select(truth, a, b)
            }
        };
        values.push(value);
    }
    let root = *values.last().unwrap();
    Formula { graph, root, variables, parameter }
}

fn same_bits(a: f64, b: f64) -> bool {
    a.to_bits() == b.to_bits() || (a.is_nan() && b.is_nan())
}

fn points(random: &mut Random, count: usize) -> (Vec<f64>, Vec<f64>) {
    ((0..count).map(|_| random.number()).collect(), (0..count).map(|_| random.number()).collect())
}

#[test]
fn interpreter_and_machine_code_give_the_same_bits() {
    for seed in 1..400u64 {
        let mut random = Random(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15));
        let size = 3 + random.below(40);
        let f = formula(&mut random, size, true);
        let program = Program::new(&f.graph, &[f.root], f.variables, &[f.parameter]).unwrap();
        let interpreted = Kernel::interpreted(program.clone());
        let compiled = compiled(&program);
        let count = [1, 3, 64, 257, 2_051, 4_100][random.below(6)];
        let (u, v) = points(&mut random, count);
        let p = [random.number()];
        let (mut a, mut b) = (vec![0.0; count], vec![0.0; count]);
        interpreted.evaluate(&p, &u, &v, &mut a);
        for kernel in compiled {
            assert_eq!(kernel.engine(), Engine::MachineCode);
            kernel.evaluate(&p, &u, &v, &mut b);
            for i in 0..count {
                let lanes = kernel.lanes();
                assert!(
                    same_bits(a[i], b[i]),
                    "{lanes:?}, seed {seed}, point {i} ({}, {}): {} and {}",
                    u[i],
                    v[i],
                    a[i],
                    b[i]
                );
            }
        }
    }
}

#[test]
fn without_sums_the_tree_gives_the_same_bits_too() {
    for seed in 1..400u64 {
        let mut random = Random(seed.wrapping_mul(0xD134_2543_DE82_EF95));
        let size = 3 + random.below(40);
        let f = formula(&mut random, size, false);
        let program = Program::new(&f.graph, &[f.root], f.variables, &[f.parameter]).unwrap();
        let kernel = Kernel::interpreted(program);
        let (u, v) = points(&mut random, 20);
        let p = random.number();
        let mut out = vec![0.0; 20];
        kernel.evaluate(&[p], &u, &v, &mut out);
        for i in 0..20 {
            let tree = evaluate(&f.graph, &[f.root], |symbol| {
                if symbol == f.variables[0] {
                    u[i]
                } else if symbol == f.variables[1] {
                    v[i]
                } else {
                    p
                }
            })[0];
            assert!(
                same_bits(tree, out[i]),
                "seed {seed} at ({}, {}), p = {p}: tree {tree}, kernel {}",
                u[i],
                v[i],
                out[i]
            );
        }
    }
}

/// Unit roundoff.
const ROUNDOFF: f64 = f64::EPSILON / 2.0;

/// Tree value of a node and a bound on how far the kernel's value may be from it.
#[derive(Clone, Copy)]
struct Near {
    value: f64,
    bound: f64,
}

/// Running error analysis (Higham, Accuracy and Stability of Numerical Algorithms, 2nd ed., section 3.3) of the one
/// difference there is: a product that a sum takes in is rounded by the tree and may not be by the kernel. Where no
/// operand differs and nothing can be fused the bound is 0. Infinite where a branch or a domain hangs on the difference.
fn bound_at(graph: &Graph, node: Node, value: f64, at: impl Fn(ExpressionId) -> Near) -> f64 {
    let children = node.children();
    let operands: Vec<Near> = children.as_slice().iter().map(|&child| at(child)).collect();
    let differs = operands.iter().any(|operand| operand.bound != 0.0);
    let is_product = |id: &ExpressionId| matches!(graph.node(*id), Node::Multiply(..) | Node::Power(..));
    let (spread, roundings) = match (node, &operands[..]) {
        (Node::Add(..) | Node::Subtract(..), &[a, b]) => {
            let products = children.as_slice().iter().zip(&operands).filter(|(id, _)| is_product(id));
            let unrounded: f64 = products.map(|(_, product)| ROUNDOFF * product.value.abs() + 5e-324).sum();
            (a.bound + b.bound + unrounded, 2.0)
        }
        _ if !differs => return 0.0,
        (Node::Multiply(..), &[a, b]) => {
            (a.value.abs() * b.bound + b.value.abs() * a.bound + a.bound * b.bound + 5e-324, 2.0)
        }
        (Node::Divide(..), &[a, b]) if b.value.abs() > b.bound => {
            ((a.bound + value.abs() * b.bound) / (b.value.abs() - b.bound), 2.0)
        }
        (Node::Power(_, exponent), &[a, _]) => {
            let n = graph.as_number(exponent).map_or(f64::NAN, |n| n.to_f64());
            if !(n >= 1.0 && n.fract() == 0.0) {
                return f64::INFINITY;
            }
            (n * (a.value.abs() + a.bound).powf(n - 1.0) * a.bound, 2.0 * n)
        }
        (Node::Negate(_) | Node::Call(Function::Abs, _), &[a]) => (a.bound, 0.0),
        // Slopes of at most 1; the functions themselves are good to a unit in the last place on either side.
        (Node::Call(Function::Sin | Function::Cos | Function::Atan | Function::Tanh, _), &[a]) => (a.bound, 4.0),
        (Node::Call(Function::Sqrt, _), &[a]) if a.value > a.bound => {
            (a.bound / (value + (a.value - a.bound).sqrt()), 2.0)
        }
        (Node::Call2(BinaryFunction::Min | BinaryFunction::Max, ..), &[a, b]) => (a.bound.max(b.bound), 0.0),
        (Node::Less(..) | Node::LessEqual(..), &[a, b]) if (a.value - b.value).abs() > a.bound + b.bound => (0.0, 0.0),
        (Node::Select(..), &[condition, yes, no]) if condition.bound == 0.0 => {
            (if condition.value != 0.0 { yes.bound } else { no.bound }, 0.0)
        }
        _ => return f64::INFINITY,
    };
    let bound = if spread == 0.0 { 0.0 } else { spread + roundings * ROUNDOFF * (value.abs() + spread) };
    // 0 times infinity: nothing is known, and a NaN would be dropped by the next maximum.
    if bound.is_nan() { f64::INFINITY } else { bound }
}

/// Tree evaluation with the bound beside each value.
fn evaluate_near(f: &Formula, u: f64, v: f64, p: f64) -> Near {
    let reachable = f.graph.reachable(&[f.root]);
    let symbol = |s: SymbolId| {
        if s == f.variables[0] {
            u
        } else if s == f.variables[1] {
            v
        } else {
            p
        }
    };
    let values = evaluate(&f.graph, &reachable, symbol);
    let mut near: HashMap<ExpressionId, Near> = HashMap::new();
    for (&id, value) in reachable.iter().zip(values) {
        let bound = bound_at(&f.graph, f.graph.node(id), value, |child| near[&child]);
        near.insert(id, Near { value, bound });
    }
    near[&f.root]
}

/// Sums, differences, products, quotients, powers, roots, functions, extremes and nested branches, with cancellation.
fn formula_with_sums(random: &mut Random, size: usize) -> Formula {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let parameter = graph.new_symbol("p");
    let mut values: Vec<ExpressionId> =
        [variables[0], variables[1], parameter].into_iter().map(|symbol| graph.symbol(symbol)).collect();
    for _ in 0..size {
        let mut pick = || {
            let low = if random.below(2) == 0 { values.len().saturating_sub(5) } else { 0 };
            values[low + random.below(values.len() - low)]
        };
        let (a, b, c) = (pick(), pick(), pick());
        let product = graph.multiply(a, b);
        let value = match random.below(11) {
            0 | 1 => graph.add(product, c),
            2 => graph.subtract(product, c),
            3 => graph.subtract(c, product),
            4 => graph.divide(a, b),
            5 => {
                let functions =
                    [Function::Sin, Function::Cos, Function::Atan, Function::Tanh, Function::Sqrt, Function::Abs];
                graph.call(functions[random.below(functions.len())], a)
            }
            6 => {
                let exponent = graph.integer(2 + random.below(2) as i64);
                graph.power(a, exponent)
            }
            7 => graph.call2(BinaryFunction::NAMED[2 + random.below(2)], a, b),
            8 => {
                let condition = if random.below(2) == 0 { graph.less(a, b) } else { graph.less_equal(a, b) };
                graph.select(condition, c, product)
            }
            9 => graph.negate(a),
            _ => graph.add(a, b),
        };
        values.push(value);
    }
    let root = *values.last().unwrap();
    Formula { graph, root, variables, parameter }
}

/// 20 ordinary points for each formula; points where the bound is infinite say nothing and are left out.
#[test]
fn fused_formulas_stay_within_the_running_error_bound() {
    let (mut held, mut tight) = (0, 0);
    for seed in 1..1_500u64 {
        let mut random = Random(seed.wrapping_mul(0xA076_1D64_78BD_642F));
        let size = 3 + random.below(25);
        let f = formula_with_sums(&mut random, size);
        let kernel = Kernel::interpreted(Program::new(&f.graph, &[f.root], f.variables, &[f.parameter]).unwrap());
        let mut ordinary = || (random.next() >> 11) as f64 / (1u64 << 53) as f64 * 6.0 - 3.0;
        for _ in 0..20 {
            let (u, v, p) = (ordinary(), ordinary(), ordinary());
            let Near { value, bound } = evaluate_near(&f, u, v, p);
            if !(value.is_finite() && bound.is_finite()) {
                continue;
            }
            let mut out = [0.0];
            kernel.evaluate(&[p], &[u], &[v], &mut out);
            // The bound itself is computed with rounding, far below this factor.
            let allowed = bound * (1.0 + 1e-9);
            let found = out[0];
            assert!(
                (found - value).abs() <= allowed,
                "seed {seed} at ({u}, {v}), p = {p}: tree {value}, kernel {found}, bound {bound:e}"
            );
            held += 1;
            tight += usize::from(bound > 0.0 && bound <= 1e-12 * value.abs());
        }
    }
    // A bound that is infinite or huge would hold for any kernel.
    assert!(held > 10_000 && tight > 3_000, "{held} bounds were finite, {tight} of them tight");
}

#[test]
fn grid_sums_agree_between_engines_and_for_any_thread_count() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let p = graph.new_symbol("p");
    let (u, v, pe) = (graph.symbol(variables[0]), graph.symbol(variables[1]), graph.symbol(p));
    let (su, cv) = (graph.call(Function::Sin, u), graph.call(Function::Cos, v));
    let product = graph.multiply(su, cv);
    let shifted = graph.add(product, pe);
    let square = graph.square(shifted);
    let uv = graph.multiply(u, v);
    let mixed = graph.call(Function::Exp, uv);
    let sum = graph.add(square, mixed);
    let root = graph.call(Function::Sqrt, sum);
    let program = Program::new(&graph, &[root, su, cv, pe], variables, &[p]).unwrap();
    let axis = |n: usize| -> (Vec<f64>, Vec<f64>) {
        ((0..n).map(|i| (i as f64 + 0.5) / n as f64).collect(), vec![1.0 / n as f64; n])
    };
    let ((u, wu), (v, wv)) = (axis(531), axis(777));
    let interpreted = Kernel::interpreted(program.clone()).sum_grid(&[0.5], &u, &wu, &v, &wv);
    let mut results = Vec::new();
    for kernel in compiled(&program) {
        for threads in [1, 2, 4] {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            results.push(pool.install(|| kernel.sum_grid(&[0.5], &u, &wu, &v, &wv)));
            assert_eq!(results.last(), results.first(), "{:?}, {threads} threads", kernel.lanes());
        }
    }
    for (a, b) in interpreted.iter().zip(&results[0]) {
        assert!((a - b).abs() <= 1e-13 * a.abs(), "{a} and {b}");
    }
    // Midpoint sums of sin over (0, 1): 1 - cos 1 up to 1/(24 n^2), exact calculus.
    assert!((results[0][1] - (1.0 - 1f64.cos())).abs() < 1e-6);
    assert!((results[0][3] - 0.5).abs() < 1e-14);
}

#[test]
fn large_programs_fall_back_and_finish() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    let mut chain = u;
    for i in 0..12_000 {
        let sine = if i % 2 == 0 { graph.call(Function::Cos, chain) } else { graph.multiply(chain, v) };
        chain = graph.add(sine, u);
    }
    let program = Program::new(&graph, &[chain], variables, &[]).unwrap();
    assert!(matches!(Kernel::compiled(program.clone()), Err(KernelError::TooLargeToCompile(_))));
    let kernel = Kernel::new(program, u64::MAX);
    assert_eq!(kernel.engine(), Engine::Interpreter);
    let mut out = [0.0];
    kernel.evaluate(&[], &[0.3], &[0.7], &mut out);
    assert!(out[0].is_finite());
    while graph.reachable(&[chain]).len() <= Graph::MAXIMUM_FORMULA_NODES {
        let sine = graph.call(Function::Sin, chain);
        chain = graph.add(sine, u);
    }
    assert!(matches!(Program::new(&graph, &[chain], variables, &[]), Err(KernelError::TooLarge(_))));
}

#[test]
fn parameters_are_inputs() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let p = graph.new_symbol("p");
    let (u, pe) = (graph.symbol(variables[0]), graph.symbol(p));
    let root = graph.multiply(u, pe);
    let kernel = Kernel::compiled(Program::new(&graph, &[root], variables, &[p]).unwrap()).unwrap();
    for value in [1.0, 2.5, -3.0] {
        let mut out = [0.0; 5];
        kernel.evaluate(&[value], &[2.0; 5], &[0.0; 5], &mut out);
        assert_eq!(out, [2.0 * value; 5]);
    }
}

#[test]
fn every_kind_of_node_occurs_in_generated_formulas() {
    let mut kinds = std::collections::HashSet::new();
    let mut fused = 0;
    for seed in 1..200u64 {
        let mut random = Random(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15));
        let f = formula(&mut random, 30, true);
        for id in f.graph.reachable(&[f.root]) {
            kinds.insert(std::mem::discriminant(&f.graph.node(id)));
        }
        let program = Program::new(&f.graph, &[f.root], f.variables, &[f.parameter]).unwrap();
        fused += program
            .instructions()
            .iter()
            .filter(|i| {
                matches!(
                    i,
                    Instruction::MultiplyAdd(..)
                        | Instruction::NegateMultiplyAdd(..)
                        | Instruction::MultiplySubtract(..)
                )
            })
            .count();
    }
    assert!(kinds.len() >= 16, "only {} kinds of nodes occur", kinds.len());
    assert!(fused >= 5, "only {fused} fused instructions occur");
}

/// All engines sum in one order. Against a plain sum of tree values the difference is the rounding of the sum alone,
/// because these formulas have no sums that could be fused.
#[test]
fn grid_sums_of_both_engines_have_the_same_bits() {
    let mut finite = 0;
    for seed in 1..200u64 {
        let mut random = Random(seed.wrapping_mul(0x2127_599B_F432_5C37));
        let (size, fused) = (3 + random.below(30), random.below(2) == 0);
        let f = formula(&mut random, size, fused);
        let axis = |random: &mut Random, n: usize| -> (Vec<f64>, Vec<f64>) {
            let mut share = || (random.next() >> 11) as f64 / (1u64 << 53) as f64;
            ((0..n).map(|_| 0.1 + share()).collect(), (0..n).map(|_| share()).collect())
        };
        let (rows, columns) = (1 + random.below(40), 1 + random.below(530));
        let ((u, wu), (v, wv)) = (axis(&mut random, rows), axis(&mut random, columns));
        let p = 0.7;
        let program = Program::new(&f.graph, &[f.root], f.variables, &[f.parameter]).unwrap();
        let interpreted = Kernel::interpreted(program.clone()).sum_grid(&[p], &u, &wu, &v, &wv)[0];
        let mut compiled_sum = f64::NAN;
        for kernel in compiled(&program) {
            compiled_sum = kernel.sum_grid(&[p], &u, &wu, &v, &wv)[0];
            let lanes = kernel.lanes();
            assert!(same_bits(interpreted, compiled_sum), "{lanes:?}, seed {seed}: {interpreted} and {compiled_sum}");
        }
        if fused {
            continue;
        }
        let (mut sum, mut size) = (0.0, 0.0);
        for (&u, &wu) in u.iter().zip(&wu) {
            for (&v, &wv) in v.iter().zip(&wv) {
                let symbol = |s: SymbolId| {
                    if s == f.variables[0] {
                        u
                    } else if s == f.variables[1] {
                        v
                    } else {
                        p
                    }
                };
                let value = wu * wv * evaluate(&f.graph, &[f.root], symbol)[0];
                sum += value;
                size += value.abs();
            }
        }
        if size.is_finite() {
            let terms = (rows * columns) as f64;
            assert!((sum - compiled_sum).abs() <= terms * f64::EPSILON * size, "seed {seed}: {sum} and {compiled_sum}");
            finite += 1;
        } else {
            assert!(compiled_sum.is_nan(), "seed {seed}: {compiled_sum}");
        }
    }
    assert!(finite > 20, "only {finite} sums were finite");
}

/// Arithmetic of both variables only, long enough to spill, over rows that end anywhere in a turn. Sums of all engines have
/// the same bits. A row of one point with weight 1 shows its value: it is that of tree evaluation where nothing could be
/// fused, up to the sign of a zero (0 + -0 is 0); a sum is NaN where a value is not finite.
#[test]
fn short_rows_at_the_edges_of_the_format() {
    let (mut finite, mut undefined) = (0, 0);
    for seed in 1..300u64 {
        let mut random = Random(seed.wrapping_mul(0x9FB2_1C65_1E98_DF25));
        let fused = random.below(2) == 0;
        let size = 3 + random.below(120);
        let (f, outputs) = arithmetic(&mut random, size, fused);
        let program = Program::new(&f.graph, &outputs, f.variables, &[f.parameter]).unwrap();
        let interpreted = Kernel::interpreted(program.clone());
        let kernels = compiled(&program);
        let p = random.number();
        for columns in 0..=9 {
            let (v, u) = points(&mut random, columns);
            let (u, weights) = ([u.first().copied().unwrap_or(0.3)], vec![1.0; columns]);
            let expected = interpreted.sum_grid(&[p], &u, &[1.0], &v, &weights);
            for kernel in &kernels {
                let sums = kernel.sum_grid(&[p], &u, &[1.0], &v, &weights);
                let lanes = kernel.lanes();
                for (k, (&sum, &other)) in sums.iter().zip(&expected).enumerate() {
                    let place = format!("{lanes:?}, seed {seed}, {columns} columns, value {k}");
                    assert!(same_bits(sum, other), "{place}: {sum} and {other}");
                }
                if columns != 1 || fused {
                    continue;
                }
                let at = |s: SymbolId| {
                    if s == f.variables[0] {
                        u[0]
                    } else if s == f.variables[1] {
                        v[0]
                    } else {
                        p
                    }
                };
                for (&sum, tree) in sums.iter().zip(evaluate(&f.graph, &outputs, at)) {
                    let same = if tree.is_finite() { sum == tree } else { sum.is_nan() };
                    assert!(same, "{lanes:?}, seed {seed}: {sum} and tree {tree}");
                    finite += usize::from(tree.is_finite());
                    undefined += usize::from(tree.is_nan());
                }
            }
        }
    }
    assert!(finite > 1_000 && undefined > 100, "{finite} finite and {undefined} undefined values were checked");
}

/// Values without functions of the table, so that all of them are one loop; each may use any before it, so that many are
/// alive at a time.
fn arithmetic(random: &mut Random, size: usize, fused: bool) -> (Formula, Vec<ExpressionId>) {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let parameter = graph.new_symbol("p");
    let mut values: Vec<ExpressionId> =
        [variables[0], variables[1], parameter].into_iter().map(|symbol| graph.symbol(symbol)).collect();
    values.push(graph.fraction(3, 7));
    values.push(graph.multiply(values[0], values[1]));
    for _ in 0..size {
        let mut pick = || values[random.below(values.len())];
        let (a, b, c) = (pick(), pick(), pick());
        let value = match random.below(11) {
            0 | 1 if fused => {
                let product = graph.multiply(a, b);
                graph.add(product, c)
            }
            2 if fused => {
                let product = graph.multiply(a, b);
                graph.subtract(c, product)
            }
            0..=3 => graph.multiply(a, b),
            4 => graph.divide(a, b),
            5 => graph.negate(a),
            6 => graph.call(Function::Sqrt, a),
            7 => graph.call(Function::Abs, a),
            8 => graph.call2(BinaryFunction::NAMED[2 + random.below(2)], a, b),
            _ => {
                let (less, not_more) = (graph.less(a, b), graph.less_equal(b, c));
                let opposite = graph.not(not_more);
                let condition = if random.below(2) == 0 { graph.and(less, opposite) } else { graph.or(less, opposite) };
                graph.select(condition, b, c)
            }
        };
        values.push(value);
    }
    let root = values[values.len() - 1];
    (Formula { graph, root, variables, parameter }, values)
}

/// More outputs than sums in registers, and more tables than pointers in registers: sum over j of wv[j] v[j]^k u, which is
/// u times sums of powers of small integers, exact in every order (Nicomachus and elementary algebra: 1 + ... + n = n (n + 1)/2,
/// 1 + ... + n^2 = n (n + 1) (2 n + 1)/6, 1 + ... + n^3 = (n (n + 1)/2)^2).
#[test]
fn many_outputs_and_many_tables() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    let mut outputs = Vec::new();
    let mut all = graph.multiply(u, v);
    for power in 1..=12 {
        let exponent = graph.integer(power);
        let table = graph.power(v, exponent);
        let product = graph.multiply(u, table);
        all = graph.add(all, product);
        outputs.push(product);
    }
    outputs.push(all);
    outputs.push(v);
    outputs.push(u);
    let program = Program::new(&graph, &outputs, variables, &[]).unwrap();
    let nodes: Vec<f64> = (1..=7).map(f64::from).collect();
    for kernel in compiled(&program) {
        let sums = kernel.sum_grid(&[], &[2.0, 3.0], &[1.0; 2], &nodes, &[1.0; 7]);
        assert_eq!(sums[..3], [5.0 * 28.0, 5.0 * 140.0, 5.0 * 784.0], "{:?}", kernel.lanes());
        assert_eq!(sums[12], 5.0 * 28.0 + sums[..12].iter().sum::<f64>(), "{:?}", kernel.lanes());
        assert_eq!(sums[13..], [2.0 * 28.0, 7.0 * 5.0]);
    }
}

#[test]
fn lanes_that_the_machine_has_not_are_refused() {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let root = graph.symbol(variables[0]);
    let program = Program::new(&graph, &[root], variables, &[]).unwrap();
    for lanes in [Lanes::Two, Lanes::Four] {
        match Kernel::compiled_for(program.clone(), lanes) {
            Ok(kernel) => assert!(lanes.is_supported() && kernel.lanes() == Some(lanes)),
            Err(error) => {
                assert!(!lanes.is_supported(), "{error}");
                assert_eq!(error, KernelError::UnsupportedLanes(lanes.count()));
            }
        }
    }
    assert!(Lanes::widest().is_supported());
    assert_eq!(Kernel::interpreted(program).lanes(), None);
}
