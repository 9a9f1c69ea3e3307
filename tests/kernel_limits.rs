//! Kernels at their limits: long formulas, wrong lengths, undefined values, several threads.

use quadrel::expression::{BinaryFunction, ExpressionId, Function, Graph, SymbolId};
use quadrel::kernel::{Engine, Kernel, KernelError, Lanes, Program};
use std::panic::{AssertUnwindSafe, catch_unwind};

struct Plane {
    graph: Graph,
    variables: [SymbolId; 2],
    u: ExpressionId,
    v: ExpressionId,
}

fn plane() -> Plane {
    let mut graph = Graph::new();
    let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
    let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
    Plane { graph, variables, u, v }
}

impl Plane {
    fn program(&self, root: ExpressionId) -> Program {
        Program::new(&self.graph, &[root], self.variables, &[]).unwrap()
    }

    /// The terms (u + k) v for k = 1, 2, ..., `count`.
    fn terms(&mut self, count: i64) -> Vec<ExpressionId> {
        (1..=count)
            .map(|k| {
                let k = self.graph.integer(k);
                let factor = self.graph.add(self.u, k);
                self.graph.multiply(factor, self.v)
            })
            .collect()
    }

    fn chained(&mut self, terms: &[ExpressionId]) -> ExpressionId {
        terms[1..].iter().fold(terms[0], |sum, &term| self.graph.add(sum, term))
    }

    fn balanced(&mut self, terms: &[ExpressionId]) -> ExpressionId {
        let mut level = terms.to_vec();
        while level.len() > 1 {
            level = level.chunks(2).map(|pair| pair[1..].iter().fold(pair[0], |a, &b| self.graph.add(a, b))).collect();
        }
        level[0]
    }
}

/// Machine code at each level that this machine has.
fn compiled(program: &Program) -> impl Iterator<Item = Kernel> {
    let supported = [Lanes::Two, Lanes::Four].into_iter().filter(|lanes| lanes.is_supported());
    supported.filter_map(|lanes| Kernel::compiled_for(program.clone(), lanes).ok())
}

/// Values at 5 points and the sum over a 3 x 5 grid of unit weights, by the engine that is chosen for many points;
/// where that is machine code, every level of lanes gives the same.
fn by_best_engine(program: Program, u: f64, v: f64) -> (Engine, f64, f64) {
    let kernel = Kernel::new(program.clone(), u64::MAX);
    let results = |kernel: &Kernel| {
        let mut out = [0.0; 5];
        kernel.evaluate(&[], &[u; 5], &[v; 5], &mut out);
        assert!(out.iter().all(|value| value.to_bits() == out[0].to_bits()));
        (out[0], kernel.sum_grid(&[], &[u; 3], &[1.0; 3], &[v; 5], &[1.0; 5])[0])
    };
    let (value, sum) = results(&kernel);
    for other in compiled(&program) {
        assert_eq!(results(&other), (value, sum), "{:?}", other.lanes());
    }
    (kernel.engine(), value, sum)
}

/// Sum over k <= n of (u + k) v = v (n u + n (n + 1)/2), elementary algebra. At u = 1/2, v = 1/4 every partial sum is a
/// multiple of 1/8 below 2^53/8, so each order of summation is exact, fused or not.
#[test]
fn long_sums_are_exact_in_any_shape() {
    for (count, engine) in [(10, Engine::MachineCode), (300, Engine::MachineCode), (10_000, Engine::Interpreter)] {
        for shape in [Plane::chained, Plane::balanced] {
            let mut plane = plane();
            let terms = plane.terms(count);
            let root = shape(&mut plane, &terms);
            let (found, value, sum) = by_best_engine(plane.program(root), 0.5, 0.25);
            let n = count as f64;
            let exact = 0.25 * (0.5 * n + n * (n + 1.0) / 2.0);
            assert_eq!((found, value, sum), (engine, exact, 15.0 * exact), "{count} terms");
        }
    }
}

/// A term or product of the first half is used again in the second half: half of them are alive at once. The sum of
/// t_k t_(n+1-k) over k, t_k = (u + k) v, is v^2 (n u^2 + n (n + 1) u + n (n + 1) (n + 2)/6): sums of powers.
#[test]
fn more_live_values_than_registers() {
    for count in [20, 240, 480, 900] {
        let mut plane = plane();
        let terms = plane.terms(count);
        let products: Vec<ExpressionId> =
            terms.iter().zip(terms.iter().rev()).map(|(&a, &b)| plane.graph.multiply(a, b)).collect();
        let all = plane.chained(&products);
        let program = plane.program(all);
        let n = count as f64;
        let exact = 0.0625 * (0.25 * n + n * (n + 1.0) * 0.5 + n * (n + 1.0) * (n + 2.0) / 6.0);
        assert_eq!(by_best_engine(program, 0.5, 0.25), (Engine::MachineCode, exact, 15.0 * exact), "{count} terms");
    }
}

/// x -> x v + u at u = 1, v = 1/2 from x = 1 has the limit u/(1 - v) = 2, reached to the last place after 53 steps.
#[test]
fn chains_of_the_largest_formula() {
    for steps in [600, 1_800, 24_900] {
        let mut plane = plane();
        let mut x = plane.u;
        for _ in 0..steps {
            let product = plane.graph.multiply(x, plane.v);
            x = plane.graph.add(product, plane.u);
        }
        let (engine, value, sum) = by_best_engine(plane.program(x), 1.0, 0.5);
        assert_eq!((value, sum), (2.0, 30.0), "{steps} steps");
        assert_eq!(engine == Engine::MachineCode, steps < 4_000, "{steps} steps");
    }
}

/// A long part that depends on one variable only: a row of a grid is short, scattered points are not. Compiling is
/// refused as a whole, so that `engine` tells what runs `evaluate` too.
#[test]
fn a_long_table_is_refused_for_scattered_points_too() {
    let mut plane = plane();
    let mut x = plane.u;
    for _ in 0..5_000 {
        let half = plane.graph.fraction(1, 2);
        let product = plane.graph.multiply(x, half);
        x = plane.graph.add(product, plane.u);
    }
    let root = plane.graph.multiply(x, plane.v);
    let program = plane.program(root);
    assert_eq!(program.mixed_count(), 1);
    assert!(matches!(Kernel::compiled(program.clone()), Err(KernelError::TooLargeToCompile(_))));
    // x -> x/2 + u from x = u has the limit 2 u; at u = 1, v = 1/2 the value is 1.
    assert_eq!(by_best_engine(program, 1.0, 0.5), (Engine::Interpreter, 1.0, 15.0));
}

/// A chain of calls: each call is a loop of its own with its scratch array.
#[test]
fn chains_of_calls() {
    for steps in [100, 3_000] {
        let mut plane = plane();
        let mut x = plane.graph.multiply(plane.u, plane.v);
        for _ in 0..steps {
            x = plane.graph.call(Function::Cos, x);
        }
        // The attracting fixed point of cos (OEIS A003957); its slope is -sin(0.739...) = -0.674, so 100 steps leave
        // less than 1e-17.
        let (engine, value, sum) = by_best_engine(plane.program(x), 1.0, 0.5);
        assert_eq!(engine, Engine::MachineCode);
        assert!((value - 0.739_085_133_215_160_6).abs() < 2e-16, "{value}");
        assert!((sum - 15.0 * value).abs() < 1e-14);
    }
}

#[test]
fn wrong_lengths_are_named_before_any_code_runs() {
    let mut plane = plane();
    let parameter = plane.graph.new_symbol("p");
    let p = plane.graph.symbol(parameter);
    let uv = plane.graph.multiply(plane.u, plane.v);
    let root = plane.graph.add(uv, p);
    let program = Program::new(&plane.graph, &[root], plane.variables, &[parameter]).unwrap();
    for kernel in std::iter::once(Kernel::interpreted(program.clone())).chain(compiled(&program)) {
        let evaluate = |parameters: &[f64], u: usize, v: usize, out: usize| {
            kernel.evaluate(parameters, &vec![1.0; u], &vec![1.0; v], &mut vec![0.0; out]);
        };
        let grid = |parameters: &[f64], lengths: [usize; 4]| {
            let [u, wu, v, wv] = lengths.map(|n| vec![1.0; n]);
            kernel.sum_grid(parameters, &u, &wu, &v, &wv);
        };
        evaluate(&[1.0], 3, 3, 3);
        evaluate(&[1.0], 0, 0, 0);
        grid(&[1.0], [3, 3, 5, 5]);
        let refused = |call: &dyn Fn(), reason: &str| {
            let panic = catch_unwind(AssertUnwindSafe(call)).expect_err(reason);
            let text = panic.downcast_ref::<String>().expect("a message");
            assert!(text.contains(reason), "{text}");
        };
        refused(&|| evaluate(&[1.0], 3, 2, 3), "as many values of both variables");
        refused(&|| evaluate(&[1.0], 3, 3, 2), "room for every output");
        refused(&|| evaluate(&[], 3, 3, 3), "one value for each parameter");
        refused(&|| evaluate(&[1.0, 2.0], 3, 3, 3), "one value for each parameter");
        refused(&|| grid(&[1.0], [3, 2, 5, 5]), "a weight for each value of the first");
        refused(&|| grid(&[1.0], [3, 3, 5, 6]), "a weight for each value of the second");
        refused(&|| grid(&[], [3, 3, 5, 5]), "one value for each parameter");
    }
}

/// IEEE 754 for arithmetic and roots; the rules of the sheet language for conditions and extremes (an undefined operand
/// makes them undefined).
#[test]
fn undefined_values_and_signed_zeros() {
    let nan = f64::NAN;
    let mut plane = plane();
    let (g, u, v) = (&mut plane.graph, plane.u, plane.v);
    let less = g.less(u, v);
    let roots = [
        g.call(Function::Sqrt, u),
        g.divide(u, v),
        g.call2(BinaryFunction::Min, u, v),
        g.call2(BinaryFunction::Max, u, v),
        g.select(less, u, v),
        g.negate(u),
        g.call(Function::Abs, u),
        g.call(Function::Sign, u),
    ];
    let infinity = f64::INFINITY;
    #[rustfmt::skip]
    let cases = [
        // u, v: sqrt u, u / v, min, max, if u < v then u else v, -u, |u|, sign u
        (-1.0, 2.0, [nan, -0.5, -1.0, 2.0, -1.0, 1.0, 1.0, -1.0]),
        (-0.0, 5.0, [-0.0, -0.0, -0.0, 5.0, -0.0, 0.0, 0.0, 0.0]),
        (1.0, 0.0, [1.0, infinity, 0.0, 1.0, 0.0, -1.0, 1.0, 1.0]),
        (1.0, -0.0, [1.0, -infinity, -0.0, 1.0, -0.0, -1.0, 1.0, 1.0]),
        (0.0, 0.0, [0.0, nan, 0.0, 0.0, 0.0, -0.0, 0.0, 0.0]),
        (nan, 1.0, [nan, nan, nan, nan, nan, nan, nan, nan]),
        (4.0, nan, [2.0, nan, nan, nan, nan, -4.0, 4.0, 1.0]),
        (-infinity, infinity, [nan, nan, -infinity, infinity, -infinity, infinity, infinity, -1.0]),
        (5e-324, 0.5, [2.2227587494850775e-162, 1e-323, 5e-324, 0.5, 5e-324, -5e-324, 5e-324, 1.0]),
    ];
    let program = Program::new(&plane.graph, &roots, plane.variables, &[]).unwrap();
    for kernel in std::iter::once(Kernel::interpreted(program.clone())).chain(compiled(&program)) {
        let us: Vec<f64> = cases.iter().map(|case| case.0).collect();
        let vs: Vec<f64> = cases.iter().map(|case| case.1).collect();
        let mut out = vec![0.0; us.len() * roots.len()];
        kernel.evaluate(&[], &us, &vs, &mut out);
        for (point, (u, v, expected)) in cases.iter().enumerate() {
            for (output, &expected) in expected.iter().enumerate() {
                let found = out[output * us.len() + point];
                // The sign of a zero sign(-0) is not fixed by the language.
                let same = if output == 7 { found == expected } else { found.to_bits() == expected.to_bits() };
                assert!(
                    same || (found.is_nan() && expected.is_nan()),
                    "{:?}, output {output} at ({u}, {v}): {found} instead of {expected}",
                    kernel.engine()
                );
            }
        }
    }
}

#[test]
fn one_kernel_serves_several_threads() {
    let mut plane = plane();
    let product = plane.graph.multiply(plane.u, plane.v);
    let sine = plane.graph.call(Function::Sin, product);
    let sum = plane.graph.add(sine, plane.u);
    let root = plane.graph.call(Function::Sqrt, sum);
    let kernel = Kernel::compiled(plane.program(root)).unwrap();
    let values = |shift: f64| {
        let u: Vec<f64> = (0..3_001).map(|i| 1.0 + shift + i as f64 / 777.0).collect();
        let mut out = vec![0.0; u.len()];
        kernel.evaluate(&[], &u, &u, &mut out);
        out
    };
    let alone: Vec<Vec<f64>> = (0..4).map(|shift| values(shift as f64)).collect();
    std::thread::scope(|scope| {
        let values = &values;
        let threads: Vec<_> = (0..4).map(|shift| scope.spawn(move || values(shift as f64))).collect();
        for (thread, alone) in threads.into_iter().zip(&alone) {
            assert_eq!(&thread.join().unwrap(), alone);
        }
    });
}

#[test]
fn unknown_symbols_are_named() {
    let mut plane = plane();
    let stranger = plane.graph.new_symbol("stranger");
    let root = plane.graph.symbol(stranger);
    let error = Program::new(&plane.graph, &[root], plane.variables, &[]).unwrap_err();
    assert_eq!(error, KernelError::UnknownSymbol("stranger".to_owned()));
}
