//! Formulas as C, Rust, Fortran, Python and Julia source: compiled under strict flags, run, and held to the evaluator of the
//! graph. The compilers and their libraries are the outside source. Julia, which cannot be installed everywhere, is
//! read for balance only.

use quadrel::calculus::Vector;
use quadrel::expression::{BinaryFunction, ExpressionId, Function, Graph, Node, SymbolId, evaluate, evaluate_one};
use quadrel::geometry::Surface;
use quadrel::language::{Source, check};
use quadrel::report::source::{Language, Request, SourceError, source};
use std::collections::HashMap;
use std::path::Path;
use std::process::Command;

/// Surfaces by the bodies of their sheets; the patch is `s`, regions are open so that points stay inside.
const SHEETS: &[(&str, &str)] = &[
    (
        "torus",
        "R = 3\nr = 1\ns(u, v) = ((R + r*cos(v))*cos(u), (R + r*cos(v))*sin(u), r*sin(v)) on u in [0, 6], v in [0, 6]",
    ),
    (
        "ellipsoid",
        "a = 3\nb = 2\nc = 1\ns(u, v) = (a*sin(v)*cos(u), b*sin(v)*sin(u), c*cos(v)) on u in [0, 6], v in [0.1, 3]",
    ),
    ("catenoid", "c = 1.3\ns(u, t1) = (c*cosh(t1/c)*cos(u), c*cosh(t1/c)*sin(u), t1) on u in [0, 6], t1 in [-1, 1]"),
    ("helicoid", "pitch = 0.18\ns(u, v) = (v*cos(u), v*sin(u), pitch*u/(2*pi)) on u in [0, 6], v in [0.1, 1]"),
    ("paraboloid", "f = 1.45\ns(ρ, λ) = (ρ*cos(λ), ρ*sin(λ), ρ^2/(4*f)) on ρ in [0.2, 2], λ in [0, 6]"),
    (
        "spheroid",
        "a = 6378137\nf = 1/298.257222101\ne2 = f*(2 - f)\nn(lat) = a/sqrt(1 - e2*sin(lat)^2)\n\
      s(lon, lat) = (n(lat)*cos(lat)*cos(lon), n(lat)*cos(lat)*sin(lon), n(lat)*(1 - e2)*sin(lat)) on lon in [0, 6], lat in [-1.4, 1.4]",
    ),
    ("enneper", "s(u, v) = (u - u^3/3 + u*v^2, v - v^3/3 + v*u^2, u^2 - v^2) on u in [0.1, 1], v in [0.1, 1]"),
    ("pseudosphere", "s(u, v) = (cos(u)/cosh(v), sin(u)/cosh(v), v - tanh(v)) on u in [0, 6], v in [0.3, 2]"),
    (
        "graph",
        "k = 2.5\ns(u, v) = (u, v, exp(-u^2/k)*atan2(v, u) + log(1 + v^2)^(3/2) + cbrt(u)*erf(v)^0) on u in [0.2, 1], v in [0.2, 1]",
    ),
    (
        "powers",
        "p = 1.7\ns(u, v) = (u^p + v^7, u^(-3) + v^(1/3), (u + v)^(5/2) + u^70/2^70 + hypot(u, v)) on u in [0.5, 1.5], v in [0.5, 1.5]",
    ),
    (
        "inverse",
        "s(u, v) = (asin(u)*acosh(1 + v), acos(u)*asinh(v), atanh(u)*atan(v)*tan(u)*sinh(v)) on u in [0.1, 0.9], v in [0.1, 2]",
    ),
    (
        "pieces",
        "k = 0.7\nh(x) = if(x < k and x > 0.2, x^2, if(x < 0.2 or x > 1.2, sqrt(x) + log(x + 0.1), if(x < 1, sqrt(1 - x), sqrt(x - 1))))\n\
      s(u, v) = (h(u), v + if(v < k, sqrt(k - v), u*sqrt(v - k)), min(u, v^2) + max(u*v, k)*sign(u - v) + abs(u - v)) on u in [0, 1.5], v in [0, 1.5]",
    ),
    (
        "capitals",
        "R = 2\nr = 0.5\nR_capital = 1\nlambda = 0.3\nint = 1.5\ny1 = 2\nfn = 0.25\ndef = 1.25\nend = 0.75\n\
      s(u, U) = ((R + r*cos(u))*lambda, (R_capital*int + y1*U)*fn, def*U^2 + end*u) on u in [0, 1], U in [0, 1]",
    ),
    (
        "constants",
        "s(u, v) = (u/3 + 0.1*v - 2/7, pi*u + 1e-7*v^2 + 123456789012345678901*u, (1/3)^(1/2)*v - 3*u) on u in [0, 1], v in [0, 1]",
    ),
];

/// Functions that only some languages have.
const SPECIAL: &str = "s(u, v) = (erf(u) + erfc(v), gamma(u + 1), lgamma(v + 0.5)) on u in [0.1, 1], v in [0.1, 1]";
const BESSEL: &str = "s(u, v) = (bessel_j(0, u)*bessel_y(1, v), bessel_j(1, u), v) on u in [0.1, 1], v in [0.1, 1]";

struct Case {
    name: String,
    graph: Graph,
    inputs: Vec<SymbolId>,
    outputs: Vec<(String, ExpressionId)>,
    points: Vec<Vec<f64>>,
}

/// Points of (0, 1) without a pattern: fractions of multiples of irrational numbers.
fn spread(index: usize, side: usize) -> f64 {
    ((index + 1) as f64 * [2.0_f64.sqrt(), 3.0_f64.sqrt()][side]).fract()
}

/// A patch with its parameters and twenty points: parameters as in the sheet, variables inside the region.
fn case(name: &str, sheet: &str, outputs: impl Fn(&mut Graph, &Surface) -> Vec<(String, ExpressionId)>) -> Case {
    let model = check(Source::new("s.sheet", sheet)).unwrap_or_else(|errors| panic!("{name}: {errors:?}"));
    let bindings = model.bind(&[]).unwrap_or_else(|errors| panic!("{name}: {errors:?}"));
    let mut graph = model.graph.clone();
    let patch = model.patches.iter().find(|patch| patch.name == "s").expect("the patch s");
    let surface = Surface::new(&mut graph, patch);
    let outputs = outputs(&mut graph, &surface);
    let mut inputs = patch.variables.to_vec();
    inputs.extend(model.parameters.iter().map(|parameter| parameter.symbol));
    let points = (0..20)
        .map(|index| {
            let mut point: Vec<f64> = (0..2)
                .map(|side| {
                    let ends = [patch.intervals[side].lower, patch.intervals[side].upper].map(|end| match end {
                        quadrel::language::Bound::Finite(end) => {
                            evaluate_one(&graph, end, |symbol| bindings.value(symbol))
                        }
                        _ => panic!("finite regions"),
                    });
                    ends[0] + spread(index, side) * (ends[1] - ends[0])
                })
                .collect();
            point.extend(model.parameters.iter().map(|parameter| bindings.value(parameter.symbol)));
            point
        })
        .collect();
    Case { name: name.to_owned(), graph, inputs, outputs, points }
}

fn vector(name: &str, vector: &Vector) -> Vec<(String, ExpressionId)> {
    ["x", "y", "z"].iter().zip(vector).map(|(axis, id)| (format!("{name}_{axis}"), *id)).collect()
}

/// Position, first form, dA, curvatures.
fn everything(graph: &mut Graph, surface: &Surface) -> Vec<(String, ExpressionId)> {
    let form = surface.first_form(graph);
    let normal = surface.unit_normal(graph);
    let mut outputs = vector("position", &surface.position);
    outputs.extend([("E".into(), form.e), ("F".into(), form.f), ("G".into(), form.g), ("dA".into(), surface.element)]);
    outputs.extend(vector("n", &normal));
    let (gauss, mean) = (surface.gauss_curvature(graph), surface.mean_curvature(graph));
    outputs.extend([("K".into(), gauss), ("H".into(), mean)]);
    outputs
}

fn cases() -> Vec<Case> {
    let mut cases: Vec<Case> = SHEETS.iter().map(|(name, sheet)| case(name, sheet, everything)).collect();
    // One result: the function returns it.
    cases.push(case("element", SHEETS[0].1, |_, surface| vec![("dA".into(), surface.element)]));
    cases.extend((0..30).map(mixed_case));
    cases
}

/// Formulas without a pattern, with parts shared in and out of branches that are undefined where they are not selected.
fn mixed_case(seed: u64) -> Case {
    let mut state = seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1;
    let mut next = |count: usize| {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 33) as usize % count
    };
    let mut graph = Graph::new();
    let inputs = ["u", "v"].map(|name| graph.new_symbol(name));
    let mut nodes = inputs.map(|symbol| graph.symbol(symbol)).to_vec();
    nodes.push(graph.fraction(1, 3));
    let points: Vec<Vec<f64>> =
        (0..20).map(|index| [0, 1].map(|side| 0.1 + 2.0 * spread(index, side)).to_vec()).collect();
    let functions = [Function::Sin, Function::Atan, Function::Abs, Function::Tanh, Function::Cbrt, Function::Sign];
    let partial = [Function::Sqrt, Function::Log, Function::Acosh, Function::Asin, Function::Atanh];
    for _ in 0..200 {
        let [a, b, c] = [0; 3].map(|_| nodes[nodes.len() - 1 - next(nodes.len().min(9))]);
        let node = match next(12) {
            0 => graph.add(a, b),
            1 => graph.subtract(a, b),
            2 => graph.multiply(a, b),
            3 => graph.divide(a, b),
            4 => graph.negate(a),
            5 => graph.integer_power(a, [2, 3, 4, 5, 7, -1, -2][next(7)]),
            6 => graph.call2(BinaryFunction::NAMED[next(4)], a, b),
            7 => graph.call(functions[next(functions.len())], a),
            8 => graph.power(a, b),
            kind => {
                let (difference, back) = (graph.subtract(b, a), graph.subtract(a, b));
                let (less, other) = (graph.less(a, b), graph.less_equal(c, a));
                let condition = match kind {
                    9 => less,
                    10 => graph.and(less, other),
                    _ => graph.or(other, less),
                };
                let yes = graph.call(partial[next(partial.len())], difference);
                let no = graph.call(partial[next(partial.len())], back);
                let (yes, no) = (graph.add(yes, c), graph.multiply(no, c));
                if next(2) == 0 { graph.select(condition, yes, no) } else { graph.select(condition, yes, c) }
            }
        };
        // No result may hang on the last digits: operands stay away from zeros, from each other, and where a function of
        // a difference is involved, from the ends of its domain.
        let good = |point: &Vec<f64>| {
            let value = |id| evaluate_one(&graph, id, |symbol| point[usize::from(symbol != inputs[0])]);
            let [a, b, c, node] = [a, b, c, node].map(value);
            let apart = [a, b, a - b, c - a, (a - b).abs() - 1.0].iter().all(|distance| distance.abs() > 0.02);
            apart && node.abs() < 1e3
        };
        if points.iter().all(good) {
            nodes.push(node);
        }
    }
    let outputs =
        nodes[nodes.len() - 3..].iter().enumerate().map(|(place, id)| (format!("value{place}"), *id)).collect();
    Case { name: format!("mixed_{seed}"), graph, inputs: inputs.to_vec(), outputs, points }
}

fn request<'a>(case: &'a Case, notes: &'a str) -> Request<'a> {
    Request { graph: &case.graph, function: &case.name, inputs: &case.inputs, outputs: &case.outputs, notes }
}

const NOTES: &str = "Area element and forms of a patch\nLengths in m, angles in rad. Ends in a backslash \\\nquadrel 0.1.0 /* not a comment */ ??/";

/// First-order bound of the difference of two evaluations, each operation of which is good to a unit in the last place or
/// so: the sum over all nodes of |d root/d node| |node| eps. Derivatives of functions are differences.
fn rounding(graph: &Graph, root: ExpressionId, value: &dyn Fn(SymbolId) -> f64) -> f64 {
    let order = graph.reachable(&[root]);
    let values: HashMap<ExpressionId, f64> = order.iter().copied().zip(evaluate(graph, &order, value)).collect();
    let slope = |f: &dyn Fn(f64) -> f64, x: f64| {
        let h = 1e-7 * (x.abs() + 1e-3);
        let sides = [(f(x + h) - f(x)) / h, (f(x) - f(x - h)) / h];
        // At the end of a domain there is one side only.
        sides.iter().filter(|slope| slope.is_finite()).fold(0.0_f64, |most, slope| most.max(slope.abs()))
    };
    let mut weights: HashMap<ExpressionId, f64> = HashMap::from([(root, 1.0)]);
    let mut bound = 0.0;
    for id in order.iter().rev() {
        let Some(&weight) = weights.get(id) else { continue };
        bound += weight * values[id].abs() * f64::EPSILON;
        let at = |id: ExpressionId| values[&id];
        let mut add = |child: ExpressionId, partial: f64| *weights.entry(child).or_default() += weight * partial.abs();
        match graph.node(*id) {
            Node::Negate(a) => add(a, 1.0),
            Node::Add(a, b) | Node::Subtract(a, b) => {
                add(a, 1.0);
                add(b, 1.0);
            }
            Node::Multiply(a, b) => {
                add(a, at(b));
                add(b, at(a));
            }
            Node::Divide(a, b) => {
                add(a, 1.0 / at(b));
                add(b, at(a) / (at(b) * at(b)));
            }
            Node::Power(a, b) => {
                let (base, exponent) = (at(a), at(b));
                add(a, slope(&|x| quadrel::expression::power(x, exponent), base));
                // A power by multiplications rounds once for each of them.
                bound += weight * values[id].abs() * f64::EPSILON * 6.0;
                add(b, if base > 0.0 { base.ln() * values[id] } else { 0.0 });
            }
            Node::Call(function, a) => {
                add(a, slope(&|x| function.evaluate(x), at(a)));
                // Python's own gamma and lgamma are good to some units in the last place, lgamma beside its zeros to
                // 1e-15 (comments in CPython's mathmodule.c).
                if matches!(function, Function::Gamma | Function::LogGamma) {
                    bound += weight * (values[id].abs() + 1.0) * f64::EPSILON * 4.0;
                }
            }
            Node::Call2(function, a, b) => {
                add(a, slope(&|x| function.evaluate(x, at(b)), at(a)));
                add(b, slope(&|x| function.evaluate(at(a), x), at(b)));
            }
            Node::Select(condition, yes, no) => add(if at(condition) != 0.0 { yes } else { no }, 1.0),
            _ => {}
        }
    }
    bound
}

/// Compares what a program printed, one number a line, in the order of cases, points, outputs.
fn compare(language: &str, cases: &[Case], printed: &str) {
    let mut numbers = printed.split_whitespace().map(|number| number.parse::<f64>().expect("a number"));
    for case in cases {
        for point in &case.points {
            let value = |symbol: SymbolId| {
                let place = case.inputs.iter().position(|input| *input == symbol).expect("an input");
                point[place]
            };
            for (name, root) in &case.outputs {
                let expected = evaluate_one(&case.graph, *root, value);
                let found = numbers.next().expect("a number for each output");
                let what = format!("{language}, {} at {point:?}, {name}: {found} instead of {expected}", case.name);
                if expected.is_nan() {
                    assert!(found.is_nan(), "{what}");
                    continue;
                }
                let bound = 4.0 * rounding(&case.graph, *root, &value);
                assert!((found - expected).abs() <= bound, "{what}, {:e} beyond {bound:e}", (found - expected).abs());
                // Well-conditioned results in the plain measure: 4 ulp times 1 + sum |x df/dx| / |f|.
                if name == "dA" && !["graph", "powers", "inverse", "pieces"].contains(&case.name.as_str()) {
                    let moved: f64 = (0..point.len())
                        .map(|place| {
                            let h = 1e-7 * (point[place].abs() + 1e-3);
                            let shifted = |by: f64| {
                                let mut point = point.clone();
                                point[place] += by;
                                evaluate_one(&case.graph, *root, |symbol| {
                                    point[case.inputs.iter().position(|input| *input == symbol).expect("an input")]
                                })
                            };
                            (point[place] * (shifted(h) - shifted(-h)) / (2.0 * h)).abs()
                        })
                        .sum();
                    let plain = 4.0 * f64::EPSILON * (expected.abs() + moved);
                    assert!((found - expected).abs() <= plain, "{what}, beyond {plain:e}");
                }
            }
        }
    }
    assert_eq!(numbers.next(), None, "{language} printed more than asked");
}

/// The standard output of a command that must succeed and say nothing on standard error; `None` if it is not installed.
fn output(folder: &Path, program: &str, arguments: &[&str]) -> Option<String> {
    let output = Command::new(program).args(arguments).current_dir(folder).output().ok()?;
    let errors = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(output.status.success() && errors.is_empty(), "{program} {arguments:?}: {errors}");
    Some(String::from_utf8(output.stdout).expect("numbers are ASCII"))
}

fn written(language: Language, case: &Case) -> String {
    source(language, &request(case, NOTES)).unwrap_or_else(|error| panic!("{}: {error}", case.name))
}

/// The name of the function as the source has it.
fn function_name(text: &str, before: &str) -> String {
    let at = text.find(before).expect("the head of the function") + before.len();
    text[at..].chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()
}

fn literals(point: &[f64]) -> String {
    point.iter().map(|number| format!("{number:?}")).collect::<Vec<_>>().join(", ")
}

#[test]
fn c_computes_the_same() {
    let cases = cases();
    let mut text = "#include <stdio.h>\n".to_owned();
    let mut body = String::new();
    for case in &cases {
        text += &written(Language::C, case);
        for point in &case.points {
            if let [_] = case.outputs[..] {
                body += &format!("    printf(\"%.17g\\n\", {}({}));\n", case.name, literals(point));
                continue;
            }
            let places: Vec<String> = (0..case.outputs.len()).map(|place| format!("&r[{place}]")).collect();
            body += &format!("    {}({}, {});\n", case.name, literals(point), places.join(", "));
            body += &format!("    for (int i = 0; i < {}; i++) {{ printf(\"%.17g\\n\", r[i]); }}\n", places.len());
        }
    }
    text += &format!("int main(void)\n{{\n    double r[20];\n{body}    return 0;\n}}\n");
    let branches = text.matches("} else if").count();
    assert!(branches > 100, "only {branches} conditions are tested");
    let folder = tempfile::tempdir().expect("a folder");
    std::fs::write(folder.path().join("f.c"), text).expect("a writable folder");
    let strict = ["-std=c99", "-Wall", "-Wextra", "-Wpedantic", "-Wconversion", "-Werror", "f.c", "-o", "f", "-lm"];
    if output(folder.path(), "gcc", &strict).is_none() {
        return eprintln!("skipped: gcc is not installed");
    }
    let printed = output(folder.path(), "./f", &[]).expect("the program was just built");
    compare("C", &cases, &printed);
}

#[test]
fn rust_computes_the_same() {
    let cases = cases();
    let (mut text, mut body) = ("#![deny(warnings)]\n".to_owned(), String::new());
    for case in &cases {
        let code = written(Language::Rust, case);
        let name = function_name(&code, "pub fn ");
        text += &code;
        for point in &case.points {
            let call = format!("{name}({})", literals(point));
            body += &match case.outputs[..] {
                [_] => format!("    println!(\"{{:?}}\", {call});\n"),
                _ => format!("    {call}.iter().for_each(|x| println!(\"{{x:?}}\"));\n"),
            };
        }
    }
    text += &format!("fn main() {{\n{body}}}\n");
    let folder = tempfile::tempdir().expect("a folder");
    std::fs::write(folder.path().join("f.rs"), text).expect("a writable folder");
    output(folder.path(), "rustc", &["--edition", "2024", "f.rs", "-o", "f"]).expect("rustc runs the tests");
    let printed = output(folder.path(), "./f", &[]).expect("the program was just built");
    compare("Rust", &cases, &printed);
}

#[test]
fn fortran_computes_the_same() {
    let mut cases = cases();
    cases.push(case("special", SPECIAL, |_, surface| vector("position", &surface.position)));
    cases.push(case("waves", BESSEL, |_, surface| vector("position", &surface.position)));
    let (mut text, mut uses, mut body) = (String::new(), String::new(), String::new());
    for case in &cases {
        let code = written(Language::Fortran, case);
        assert!(code.lines().all(|line| line.chars().count() <= 120), "long lines in {}", case.name);
        let name = function_name(&code, "public :: ");
        text += &code;
        uses += &format!("    use {name}_formulas\n");
        for point in &case.points {
            let numbers: Vec<String> = point.iter().map(|number| format!("{number:?}_real64")).collect();
            let arguments = numbers.join(", &\n        ");
            match case.outputs[..] {
                [_] => body += &format!("    r(1) = {name}({arguments})\n"),
                _ => {
                    let places: Vec<String> = (1..=case.outputs.len()).map(|place| format!("r({place})")).collect();
                    body += &format!("    call {name}({arguments}, &\n        {})\n", places.join(", &\n        "));
                }
            }
            body += &format!("    call show({})\n", case.outputs.len());
        }
    }
    text += &format!(
        "program all\n    use, intrinsic :: iso_fortran_env, only: real64\n{uses}    implicit none\n    real(real64) :: r(20)\n{body}contains\n\
         subroutine show(n)\n    integer, intent(in) :: n\n    integer :: i\n    do i = 1, n\n        print '(es25.17e3)', r(i)\n    end do\n\
         end subroutine show\nend program all\n"
    );
    let folder = tempfile::tempdir().expect("a folder");
    std::fs::write(folder.path().join("f.f90"), text).expect("a writable folder");
    let strict = ["-std=f2008", "-Wall", "-Wextra", "-Werror", "f.f90", "-o", "f"];
    if output(folder.path(), "gfortran", &strict).is_none() {
        return eprintln!("skipped: gfortran is not installed");
    }
    let printed = output(folder.path(), "./f", &[]).expect("the program was just built");
    compare("Fortran", &cases, &printed);
}

#[test]
fn python_computes_the_same() {
    let mut cases = cases();
    cases.push(case("special", SPECIAL, |_, surface| vector("position", &surface.position)));
    let mut text = String::new();
    for case in &cases {
        let code = written(Language::Python, case);
        // Functions that help stand before it.
        let name = function_name(&code[code.rfind("def ").expect("a function")..], "def ");
        text += &code;
        for point in &case.points {
            let call = format!("{name}({})", literals(point));
            text += &match case.outputs[..] {
                [_] => format!("print(repr({call}))\n"),
                _ => format!("for value in {call}:\n    print(repr(value))\n"),
            };
        }
    }
    let folder = tempfile::tempdir().expect("a folder");
    std::fs::write(folder.path().join("f.py"), text).expect("a writable folder");
    match output(folder.path(), "python3", &["-W", "error", "f.py"]) {
        Some(printed) => compare("Python", &cases, &printed),
        None => eprintln!("skipped: python3 is not installed"),
    }
}

/// Blocks and brackets close, and every line is one of the few kinds that are written.
#[test]
fn julia_is_balanced() {
    let mut cases = cases();
    cases.push(case("special", SPECIAL, |_, surface| vector("position", &surface.position)));
    cases.push(case("waves", BESSEL, |_, surface| vector("position", &surface.position)));
    for case in &cases {
        let code = written(Language::Julia, case);
        let (mut blocks, mut brackets) = (0, 0);
        for line in code.lines().map(|line| line.split('#').next().unwrap_or("").trim()) {
            let first = line.split([' ', '(']).next().unwrap_or("");
            blocks += match first {
                "function" | "if" => 1,
                "end" => -1,
                _ => 0,
            };
            let count = |sign: char| line.matches(sign).count() as i32;
            brackets += count('(') - count(')');
            assert!(blocks >= 0 && brackets >= 0, "{line} in {code}");
            let assignment =
                line.split_once(" = ").is_some_and(|(name, _)| name.chars().all(|c| c.is_alphanumeric() || c == '_'));
            let known = ["", "function", "if", "elseif", "else", "end", "return", "using", ")"].contains(&first);
            assert!(known || assignment || brackets > 0, "{line} in {code}");
        }
        assert_eq!((blocks, brackets), (0, 0), "{code}");
    }
}

#[test]
fn what_a_language_lacks_is_an_error() {
    let mut graph = Graph::new();
    let symbol = graph.new_symbol("m");
    let m = graph.symbol(symbol);
    let mut refused = |call: Function, language: Language| {
        let root = graph.call(call, m);
        let outputs = [("value".to_owned(), root)];
        let request = Request { graph: &graph, function: "f", inputs: &[symbol], outputs: &outputs, notes: "" };
        source(language, &request).err()
    };
    let unsupported = |function: &str, language: Language| {
        Some(SourceError::Unsupported { function: function.to_owned(), language: language.name() })
    };
    for language in [Language::C, Language::Python, Language::Rust, Language::Fortran] {
        assert_eq!(refused(Function::EllipticK(0), language), unsupported("elliptic_k", language));
        assert_eq!(refused(Function::Polygamma(1), language), unsupported("polygamma", language));
    }
    for language in [Language::C, Language::Python, Language::Rust] {
        assert_eq!(refused(Function::BesselJ(0), language), unsupported("bessel_j", language));
    }
    assert_eq!(refused(Function::Erf, Language::Rust), unsupported("erf", Language::Rust));
    assert_eq!(refused(Function::EllipticE(0), Language::Julia), None);
    let shown = refused(Function::Gamma, Language::Rust).expect("Rust lacks it").to_string();
    assert_eq!(shown, "Rust has no function gamma in its standard library");
}

/// Names, conditions, numbers and depth beyond what can be written.
#[test]
fn other_refusals_name_their_cause() {
    let mut graph = Graph::new();
    let (su, sv) = (graph.new_symbol("u"), graph.new_symbol("v"));
    let (u, v) = (graph.symbol(su), graph.symbol(sv));
    let less = graph.less(u, v);
    let sum = graph.add(u, v);
    let ten = graph.integer(10);
    let large = graph.integer_power(ten, 400);
    let large = graph.multiply(large, u);
    let mut deep = u;
    for k in 0..200 {
        let bound = graph.integer(k);
        let condition = graph.less(deep, bound);
        let sine = graph.call(Function::Sin, v);
        let value = graph.call2(BinaryFunction::Hypot, deep, sine);
        let inner = graph.add(value, bound);
        deep = graph.select(condition, inner, bound);
    }
    let mut nested = u;
    for k in 0..200 {
        let bound = graph.integer(k);
        let condition = graph.less(v, bound);
        let grown = graph.call(Function::Sin, nested);
        nested = graph.select(condition, grown, bound);
    }
    let written = |root: ExpressionId, inputs: &[SymbolId]| {
        let outputs = [("value".to_owned(), root)];
        source(Language::Rust, &Request { graph: &graph, function: "f", inputs, outputs: &outputs, notes: "" })
    };
    assert_eq!(written(less, &[su, sv]), Err(SourceError::Condition { name: "value".into() }));
    assert_eq!(written(sum, &[su]), Err(SourceError::MissingInput { name: "v".into() }));
    assert_eq!(written(large, &[su]), Err(SourceError::Constant));
    assert!(matches!(written(nested, &[su, sv]), Err(SourceError::TooDeep { .. })));
    assert!(written(deep, &[su, sv]).is_ok(), "the tested value is shared, so nothing is nested");
}

#[test]
fn sources_read_well() {
    let cases = cases();
    let shown = |name: &str| cases.iter().find(|case| case.name == name).expect("a case");
    let mut page = String::new();
    for language in Language::ALL {
        for name in ["element", "pieces", "capitals"] {
            let case = shown(name);
            let few: Vec<_> =
                case.outputs.iter().filter(|(name, _)| name == "dA" || name.starts_with("position")).cloned().collect();
            let request = Request { outputs: &few, ..request(case, "Lengths in m, angles in rad\nquadrel 0.1.0") };
            page +=
                &format!("== {}, {name}\n{}\n", language.name(), source(*language, &request).expect("a plain patch"));
        }
    }
    insta::assert_snapshot!("source_code", page);
}
