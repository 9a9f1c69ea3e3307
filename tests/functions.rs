//! Accuracy of every function of the table against mpmath values (`data/functions.csv`, made by `data/functions.py`),
//! and their values at the ends of their domains.

use quadrel::expression::{BinaryFunction, Function, power};
use std::collections::BTreeMap;

/// What each function promises on the arguments of the file: an error of at most so many units in the last place of the
/// true value, or of the absolute amount beside it where that is larger. The absolute amount is 0 unless the function
/// has zeros where we do not promise relative accuracy.
const BOUNDS: &[(&str, f64, f64)] = &[
    ("abs", 0.0, 0.0),
    ("acos", 0.51, 0.0),
    ("acosh", 0.51, 0.0),
    ("asin", 0.51, 0.0),
    ("asinh", 0.51, 0.0),
    ("atan", 0.51, 0.0),
    ("atan2", 0.51, 0.0),
    ("atanh", 0.51, 0.0),
    ("bessel_j 0", 0.51, 0.0),
    ("bessel_j 1", 0.51, 0.0),
    // Orders from 2 on come from recurrences, whose error beside the zeros is absolute.
    ("bessel_j 2", 4.0, 5e-17),
    ("bessel_j 3", 4.0, 5e-17),
    ("bessel_j 4", 4.0, 5e-17),
    ("bessel_j 40", 12.0, 1e-16),
    ("bessel_j 5", 4.0, 5e-17),
    ("bessel_j 9", 12.0, 1e-16),
    ("bessel_y 0", 0.51, 0.0),
    ("bessel_y 1", 0.51, 0.0),
    ("bessel_y 2", 5.0, 1e-16),
    ("bessel_y 3", 5.0, 1e-16),
    ("bessel_y 4", 5.0, 1e-16),
    ("bessel_y 40", 12.0, 1e-16),
    ("bessel_y 5", 5.0, 1e-16),
    ("bessel_y 9", 12.0, 1e-16),
    ("cbrt", 0.51, 0.0),
    ("cos", 0.51, 0.0),
    ("cosh", 0.51, 0.0),
    ("elliptic_e 0", 0.51, 0.0),
    ("elliptic_e 1", 0.51, 0.0),
    ("elliptic_e 12", 1.0, 0.0),
    ("elliptic_e 130", 1.0, 0.0),
    ("elliptic_e 2", 0.51, 0.0),
    ("elliptic_e 3", 0.51, 0.0),
    ("elliptic_e 4", 0.51, 0.0),
    ("elliptic_e 60", 1.0, 0.0),
    ("elliptic_k 0", 0.51, 0.0),
    ("elliptic_k 1", 0.51, 0.0),
    ("elliptic_k 12", 1.0, 0.0),
    ("elliptic_k 130", 1.0, 0.0),
    ("elliptic_k 2", 0.51, 0.0),
    ("elliptic_k 3", 0.51, 0.0),
    ("elliptic_k 4", 0.51, 0.0),
    ("elliptic_k 60", 1.0, 0.0),
    ("erf", 0.51, 0.0),
    ("erfc", 0.51, 0.0),
    ("exp", 0.51, 0.0),
    ("gamma", 0.8, 0.0),
    ("hypot", 1.0, 0.0),
    // Beside the zeros left of -2 the error is absolute.
    ("lgamma", 0.75, 1e-20),
    ("log", 0.51, 0.0),
    ("max", 0.0, 0.0),
    ("min", 0.0, 0.0),
    // Even orders have a zero between any two poles; beside it the error is absolute.
    ("polygamma 0", 0.75, 2e-21),
    ("polygamma 1", 0.75, 0.0),
    ("polygamma 2", 4.0, 5e-16),
    ("polygamma 3", 5.0, 0.0),
    ("polygamma 4", 9.0, 2e-15),
    ("polygamma 40", 40.0, 0.0),
    ("polygamma 9", 12.0, 0.0),
    // Integer exponents up to 64 are products: each multiplication adds half a unit to what it multiplies.
    ("pow", 32.0, 0.0),
    ("sign", 0.0, 0.0),
    ("sin", 0.51, 0.0),
    ("sinh", 0.51, 0.0),
    ("sqrt", 0.5, 0.0),
    ("tan", 0.51, 0.0),
    ("tanh", 0.51, 0.0),
];

/// The value that the program computes for a name of the file.
fn computed(name: &str, arguments: &[f64]) -> f64 {
    if let Some(function) = BinaryFunction::NAMED.iter().find(|function| function.name() == name) {
        return function.evaluate(arguments[0], arguments[1]);
    }
    if name == "pow" {
        return power(arguments[0], arguments[1]);
    }
    let function = match name.split_once(' ') {
        None => *Function::NAMED.iter().find(|function| function.name() == name).expect("a known name"),
        Some((family, order)) => {
            let n = order.parse().expect("an order");
            match family {
                "polygamma" => Function::Polygamma(n),
                "bessel_j" => Function::BesselJ(n),
                "bessel_y" => Function::BesselY(n),
                "elliptic_k" => Function::EllipticK(n),
                "elliptic_e" => Function::EllipticE(n),
                _ => panic!("unknown family {family}"),
            }
        }
    };
    function.evaluate(arguments[0])
}

/// One unit in the last place of `x`.
fn ulp(x: f64) -> f64 {
    let x = x.abs().max(f64::MIN_POSITIVE);
    x.next_up() - x
}

#[test]
fn every_function_keeps_its_bound() {
    let mut points: BTreeMap<&str, usize> = BTreeMap::new();
    // Function, units in the last place, absolute error and where, of the worst point by either measure.
    let mut failures: BTreeMap<&str, (f64, f64, String)> = BTreeMap::new();
    for line in include_str!("data/functions.csv").lines() {
        let (name, numbers) = line.split_once(',').expect("a name and numbers");
        let numbers: Vec<f64> = numbers.split(',').map(|field| field.parse().expect("a number")).collect();
        let (arguments, expected) = numbers.split_at(numbers.len() - 2);
        let &(_, units, absolute) =
            BOUNDS.iter().find(|(bound, ..)| *bound == name).unwrap_or_else(|| panic!("{name} has no bound"));
        let value = computed(name, arguments);
        // The true value is expected[0] + expected[1]; the first difference is exact where it matters.
        let error = ((value - expected[0]) - expected[1]).abs();
        *points.entry(name).or_default() += 1;
        // Written so that a NaN fails.
        let kept = error <= units * ulp(expected[0]) || error <= absolute;
        if !kept {
            let worst = failures.entry(name).or_insert((0.0, f64::INFINITY, String::new()));
            let in_units = error / ulp(expected[0]);
            if in_units.is_nan() || in_units > worst.0 {
                *worst = (in_units, error, format!("at {arguments:?}: {value:e} instead of {:e}", expected[0]));
            }
        }
    }
    for &(name, ..) in BOUNDS {
        assert!(points.get(name).is_some_and(|&count| count >= 20), "{name} is not in the file");
    }
    let report: Vec<String> = failures
        .iter()
        .map(|(name, (units, error, place))| format!("{name}: {units:.2} ulp, {error:.1e} {place}"))
        .collect();
    assert!(report.is_empty(), "{}", report.join("\n"));
}

/// Values at the ends of the domains and beyond: NaN outside, an infinity where the function goes to one from inside the
/// domain, NaN at poles where the two sides differ. From the definitions of the functions.
#[test]
fn ends_of_domains_are_as_documented() {
    use std::f64::consts::{FRAC_PI_2, PI};
    const INF: f64 = f64::INFINITY;
    const NAN: f64 = f64::NAN;
    let cases = [
        (Function::Asin, 1.0 + f64::EPSILON, NAN),
        (Function::Asin, 1.0, FRAC_PI_2),
        (Function::Acos, -1.0, PI),
        (Function::Acos, -1.1, NAN),
        (Function::Acosh, 1.0, 0.0),
        (Function::Acosh, 1.0 - f64::EPSILON, NAN),
        (Function::Atanh, 1.0, INF),
        (Function::Atanh, -1.0, -INF),
        (Function::Atanh, 1.5, NAN),
        (Function::Log, 0.0, -INF),
        (Function::Log, -1.0, NAN),
        (Function::Sqrt, -1e-300, NAN),
        (Function::Sqrt, 0.0, 0.0),
        (Function::Cbrt, -27.0, -3.0),
        (Function::Exp, 710.0, INF),
        (Function::Exp, -800.0, 0.0),
        (Function::Sinh, -711.0, -INF),
        (Function::Tanh, 1e300, 1.0),
        (Function::Sign, -0.0, 0.0),
        (Function::Sign, NAN, NAN),
        (Function::Erf, INF, 1.0),
        (Function::Erfc, 1e3, 0.0),
        (Function::Erfc, -INF, 2.0),
        (Function::Gamma, 0.0, NAN),
        (Function::Gamma, -3.0, NAN),
        (Function::Gamma, 171.0, 7.257415615307999e306), // 170!
        (Function::Gamma, 172.0, INF),
        (Function::LogGamma, 1.0, 0.0),
        (Function::LogGamma, 2.0, 0.0),
        (Function::Polygamma(0), -2.0, NAN),
        (Function::Polygamma(1), 0.0, NAN),
        (Function::Polygamma(2), -1.0, NAN),
        (Function::BesselJ(0), 0.0, 1.0),
        (Function::BesselJ(3), 0.0, 0.0),
        (Function::BesselY(0), 0.0, -INF),
        (Function::BesselY(1), 0.0, -INF),
        (Function::BesselY(2), 0.0, -INF),
        (Function::BesselY(0), -1.0, NAN),
        (Function::BesselY(1), -1.0, NAN),
        (Function::BesselY(2), -1.0, NAN),
        (Function::EllipticK(0), 1.0, INF),
        (Function::EllipticK(0), 1.1, NAN),
        (Function::EllipticK(3), 1.0, INF),
        (Function::EllipticK(0), 0.0, FRAC_PI_2),
        (Function::EllipticE(0), 1.0, 1.0),
        (Function::EllipticE(0), 1.1, NAN),
        (Function::EllipticE(1), 1.0, -INF),
        (Function::EllipticE(0), 0.0, FRAC_PI_2),
        (Function::EllipticE(1), 0.0, -PI / 8.0),
    ];
    for (function, x, expected) in cases {
        let value = function.evaluate(x);
        assert!(value == expected || (value.is_nan() && expected.is_nan()), "{function:?} at {x}: {value}");
    }
}

/// Nothing panics or runs long, whatever the argument and the order.
#[test]
fn extreme_arguments_are_survived() {
    let arguments = [0.0, -0.0, 1.0, -1.0, 0.5, 1e-310, -1e-310, 1e-30, 170.7, -170.7, 1e17, -1e17, 1e300, -1e300]
        .into_iter()
        .chain([f64::MAX, f64::MIN, f64::INFINITY, f64::NEG_INFINITY, f64::NAN]);
    for x in arguments {
        for n in [0, 1, 2, 3, 30, 170, 171, 200, 254, 255] {
            let families = [
                Function::Polygamma(n),
                Function::BesselJ(n),
                Function::BesselY(n),
                Function::EllipticK(n),
                Function::EllipticE(n),
            ];
            for function in families.iter().chain(Function::NAMED) {
                let value = function.evaluate(x);
                assert!(!x.is_nan() || value.is_nan(), "{function:?} of an undefined number is {value}");
            }
        }
    }
}
