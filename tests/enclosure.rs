//! Ranges contain the truth. The truth comes from mpmath values (`data/functions.csv`) and, on many random arguments, from
//! functions of about 28 digits written for this purpose (`support/double_double.rs`), which are checked against the
//! same file first.
//!
//! `QUADREL_ENCLOSURE_ARGUMENTS=100000000` sets the number of random arguments for each function (default 10^6).

#[path = "support/double_double.rs"]
mod double_double;

use double_double::Double;
use quadrel::enclosure::{
    Centred, Defined, Image, Interval, Truth, centred, enclose_one, image_of, image_of_two, integer_power,
};
use quadrel::enclosure::{power, rational_power};
use quadrel::expression::{BinaryFunction, Exact, ExpressionId, Function, Graph, Node, SymbolId, differentiate};

/// What is allowed for the error of the oracle, relative to the value.
const SLACK: f64 = 1e-24;

/// Whether `interval` contains `truth`, give or take the error of the oracle.
fn contains(interval: Interval, truth: Double) -> bool {
    let slack = Double::from(SLACK * truth.high.abs());
    let (above, below) = (truth + slack, truth - slack);
    let is_least = |x: f64| x < above.high || (x == above.high && above.low >= 0.0);
    let is_greatest = |x: f64| x > below.high || (x == below.high && below.low <= 0.0);
    is_least(interval.lower()) && is_greatest(interval.upper())
}

fn truth(function: Function, x: f64) -> Double {
    let x = Double::from(x);
    match function {
        Function::Sin => x.sin(),
        Function::Cos => x.cos(),
        Function::Tan => x.tan(),
        Function::Asin => x.asin(),
        Function::Acos => x.acos(),
        Function::Atan => x.atan(),
        Function::Sinh => x.sinh(),
        Function::Cosh => x.cosh(),
        Function::Tanh => x.tanh(),
        Function::Asinh => x.asinh(),
        Function::Acosh => x.acosh(),
        Function::Atanh => x.atanh(),
        Function::Exp => x.exp(),
        Function::Log => x.log(),
        Function::Sqrt => x.sqrt(),
        Function::Cbrt => x.cbrt(),
        Function::Erf => x.erf(),
        Function::Erfc => x.erfc(),
        _ => panic!("{function:?} has no oracle"),
    }
}

/// The elementary functions and the arguments between which they are tried: where their values are normal doubles, and
/// for sine and its kin where the oracle knows enough digits of pi.
const ELEMENTARY: &[(Function, f64, f64)] = &[
    (Function::Sin, -1e8, 1e8),
    (Function::Cos, -1e8, 1e8),
    (Function::Tan, -1e8, 1e8),
    (Function::Asin, -1.0, 1.0),
    (Function::Acos, -1.0, 1.0),
    (Function::Atan, -1e100, 1e100),
    (Function::Sinh, -700.0, 700.0),
    (Function::Cosh, -700.0, 700.0),
    (Function::Tanh, -700.0, 700.0),
    (Function::Asinh, -1e100, 1e100),
    (Function::Acosh, 1.0, 1e100),
    (Function::Atanh, -1.0, 1.0),
    (Function::Exp, -700.0, 700.0),
    (Function::Log, 1e-300, 1e300),
    (Function::Sqrt, 1e-280, 1e300),
    (Function::Cbrt, -1e280, 1e280),
    (Function::Erf, -7.0, 7.0),
    (Function::Erfc, -6.0, 26.0),
];

/// A small generator of reproducible numbers (xorshift64*, Marsaglia 2003 and Vigna 2016).
struct Random(u64);

impl Random {
    fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1)
    }

    fn bits(&mut self) -> u64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        self.0.wrapping_mul(0x2545_F491_4F6C_DD1D)
    }

    /// A number in [low, high).
    fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * (self.bits() >> 11) as f64 / (1u64 << 53) as f64
    }

    fn below(&mut self, count: usize) -> usize {
        (self.bits() >> 33) as usize % count
    }

    /// A number of any size between two ends: uniform, or uniform in the logarithm of the size, or beside an end.
    fn spread(&mut self, low: f64, high: f64) -> f64 {
        let x = match self.below(4) {
            0 => self.between(low, high),
            1 | 2 => {
                let largest = low.abs().max(high.abs()).ln();
                let smallest = if low > 0.0 { low.ln() } else { -60.0 };
                let size = self.between(smallest, largest).exp();
                if low < 0.0 && self.below(2) == 0 { -size } else { size }
            }
            _ => {
                let distance = self.between(-36.0, 0.0).exp();
                if self.below(2) == 0 { low + distance * low.abs() } else { high - distance * high.abs() }
            }
        };
        x.clamp(low, high)
    }

    /// An interval around `x` of any width, often none, within two ends.
    fn around(&mut self, x: f64, low: f64, high: f64) -> Interval {
        if self.below(3) == 0 {
            return Interval::point(x);
        }
        let mut end = |sign: f64| {
            let width = self.between(-40.0, 3.0).exp() * x.abs().max(1e-3);
            (x + sign * width).clamp(low, high)
        };
        Interval::new(end(-1.0), end(1.0))
    }
}

fn argument_count() -> u64 {
    let given = std::env::var("QUADREL_ENCLOSURE_ARGUMENTS").ok();
    given.map_or(1_000_000, |text| text.parse().expect("a number of arguments"))
}

/// Values of `functions.csv`: name, arguments, value and rest.
fn tabled() -> impl Iterator<Item = (&'static str, Vec<f64>, Double)> {
    include_str!("data/functions.csv").lines().map(|line| {
        let (name, numbers) = line.split_once(',').expect("a name and numbers");
        let mut numbers: Vec<f64> = numbers.split(',').map(|field| field.parse().expect("a number")).collect();
        let low = numbers.pop().expect("a rest");
        let high = numbers.pop().expect("a value");
        (name, numbers, Double { high, low })
    })
}

#[test]
fn the_oracle_agrees_with_mpmath() {
    let mut compared = 0;
    for (name, arguments, expected) in tabled() {
        let entry = ELEMENTARY.iter().find(|(function, ..)| function.name() == name);
        let found = match (entry, name) {
            (Some(&(function, low, high)), _) if (low..=high).contains(&arguments[0]) => truth(function, arguments[0]),
            (None, "hypot") => Double::from(arguments[0]).hypot(Double::from(arguments[1])),
            (None, "atan2") => Double::angle(Double::from(arguments[0]), Double::from(arguments[1])),
            (None, "pow") if arguments[0] > 0.0 => Double::from(arguments[0]).power(Double::from(arguments[1])),
            _ => continue,
        };
        // The rest of the file, at most 2^-53 of the value, has seven digits.
        let error = ((found - expected).high / expected.high).abs();
        assert!(
            found.high == expected.high && expected.high == 0.0 || error < 6e-23,
            "{name} at {arguments:?}: {error:e}"
        );
        compared += 1;
    }
    assert!(compared > 3500, "{compared}");
}

/// Random arguments and intervals around them; thin intervals also give narrow ranges.
fn try_function(index: usize) {
    let (function, low, high) = ELEMENTARY[index];
    let mut random = Random::new(17 + index as u64);
    for _ in 0..argument_count() {
        let x = random.spread(low, high);
        let around = random.around(x, low, high);
        let expected = truth(function, x);
        let image = image_of(function, around);
        if expected.is_nan() {
            assert!(image.defined != Defined::Everywhere, "{function:?} over {around}");
            continue;
        }
        assert!(
            contains(image.range, expected),
            "{function:?} over {around}: {} without {expected:?} at {x}",
            image.range
        );
        assert!(image.defined != Defined::Nowhere, "{function:?} over {around}");
        if around.is_thin() && image.defined == Defined::Everywhere {
            let narrow = image.range.width() <= 10.0 * f64::EPSILON * image.range.magnitude();
            assert!(narrow, "{function:?} at {x}: {}", image.range);
        }
    }
}

macro_rules! each_function {
    ($($name:ident $index:literal)*) => {$(
        #[test]
        fn $name() {
            try_function($index);
        }
    )*};
}

each_function! {
    sine_is_enclosed 0
    cosine_is_enclosed 1
    tangent_is_enclosed 2
    arc_sine_is_enclosed 3
    arc_cosine_is_enclosed 4
    arc_tangent_is_enclosed 5
    hyperbolic_sine_is_enclosed 6
    hyperbolic_cosine_is_enclosed 7
    hyperbolic_tangent_is_enclosed 8
    area_sine_is_enclosed 9
    area_cosine_is_enclosed 10
    area_tangent_is_enclosed 11
    exponential_is_enclosed 12
    logarithm_is_enclosed 13
    square_root_is_enclosed 14
    cube_root_is_enclosed 15
    error_function_is_enclosed 16
    complementary_error_function_is_enclosed 17
}

/// Functions of two arguments against the oracle, over boxes around random points.
#[test]
fn functions_of_two_arguments_are_enclosed() {
    let mut random = Random::new(99);
    for _ in 0..argument_count() {
        let (y, x) = (random.spread(-1e3, 1e3), random.spread(-1e3, 1e3));
        let (around_y, around_x) = (random.around(y, -1e4, 1e4), random.around(x, -1e4, 1e4));
        let (a, b) = (Double::from(y), Double::from(x));
        let found = image_of_two(BinaryFunction::Hypot, around_y, around_x);
        assert!(contains(found.range, a.hypot(b)), "hypot over {around_y}, {around_x}: {}", found.range);
        if x != 0.0 || y != 0.0 {
            let found = image_of_two(BinaryFunction::Atan2, around_y, around_x);
            let expected = Double::angle(a, b);
            assert!(contains(found.range, expected), "atan2 over {around_y}, {around_x}: {}", found.range);
            let crosses_cut = around_y.lower() < 0.0 && around_y.upper() >= 0.0 && around_x.lower() < 0.0;
            assert!(!found.continuous || !crosses_cut, "atan2 over {around_y}, {around_x} is not continuous");
        }
    }
}

/// Powers with real, integer and fractional exponents.
#[test]
fn powers_are_enclosed() {
    let mut random = Random::new(7);
    for _ in 0..argument_count() {
        let (x, y) = (random.spread(1e-6, 1e6), random.spread(-30.0, 30.0));
        let (base, exponent) = (random.around(x, 0.0, 1e7), random.around(y, -40.0, 40.0));
        let expected = Double::from(x).power(Double::from(y));
        let found = power(base, exponent).range;
        assert!(contains(found, expected), "{base} ^ {exponent}: {found} without {expected:?}");
        if base.is_thin() && exponent.is_thin() {
            assert!(found.width() <= 10.0 * f64::EPSILON * found.magnitude(), "{base} ^ {exponent}: {found}");
        }

        let n = random.below(81) as i64 - 40;
        let sign = if random.below(2) == 0 { 1.0 } else { -1.0 };
        let base = if sign > 0.0 { base } else { -base };
        let product = (0..n.abs()).fold(Double::from(1.0), |product, _| product * Double::from(sign * x));
        let expected = if n < 0 { Double::from(1.0) / product } else { product };
        let found = integer_power(base, n).range;
        assert!(contains(found, expected), "{base} ^ {n}: {found} without {expected:?}");

        let denominator = 2 + random.below(5) as i64;
        let fraction = Double::from(n as f64) / Double::from(denominator as f64);
        let expected = Double::from(x).power(fraction);
        let exact = Exact::fraction(n, denominator).expect("not 0");
        let found = rational_power(base, &exact);
        let inside = sign > 0.0 || exact.is_integer() || base.upper() >= 0.0;
        assert!(inside || found.defined == Defined::Nowhere, "{base} ^ {exact}: {found:?}");
        if sign > 0.0 {
            assert!(contains(found.range, expected), "{base} ^ {exact}: {} without {expected:?}", found.range);
        }
    }
}

/// Sums, products, quotients, squares and roots: the exact results in exact rational arithmetic.
#[test]
fn arithmetic_is_enclosed_and_tight() {
    let mut random = Random::new(5);
    let exact = |x: f64| Exact::from_f64(x).expect("small enough");
    for round in 0..20_000 {
        let size = if round % 4 == 0 { 1e-150 } else { 1e3 };
        let (x, y) = (random.spread(-size, size), random.spread(-1e3, 1e3));
        let (a, b) = (Interval::point(x), Interval::point(y));
        let mut results = vec![
            ("+", a + b, exact(x).add(&exact(y))),
            ("-", a - b, exact(x).subtract(&exact(y))),
            ("*", a * b, exact(x).multiply(&exact(y))),
            ("square", a.square(), exact(x).multiply(&exact(x))),
        ];
        if y != 0.0 {
            results.push(("/", a.divide(b).range, exact(x).divide(&exact(y))));
        }
        for (name, found, expected) in results {
            let expected = expected.expect("a small number");
            let (lower, upper) = (exact(found.lower()), exact(found.upper()));
            assert!(lower <= expected && expected <= upper, "{x:e} {name} {y:e}: {found}");
            // The smallest interval around the exact result, unless that is next to nothing.
            let tight = if lower == upper { lower == expected } else { found.lower().next_up() >= found.upper() };
            assert!(tight || found.magnitude() < 1e-280, "{x:e} {name} {y:e}: {found}");
            let enclosed = Interval::from_exact(&expected);
            assert!(enclosed.is_within(found), "{expected}: {enclosed}, {found}");
            assert!(
                exact(enclosed.lower()) <= expected && expected <= exact(enclosed.upper()),
                "{expected}: {enclosed}"
            );
        }
        let root = Interval::point(x.abs()).square_root();
        let squared = |end: f64| exact(end).multiply(&exact(end)).expect("a small number");
        assert!(squared(root.lower()) <= exact(x.abs()) && exact(x.abs()) <= squared(root.upper()), "{x}: {root}");
        assert!(root.lower().next_up() >= root.upper());
    }
}

/// Over intervals every operation contains the results of members, and nothing beyond those of the ends.
#[test]
fn interval_arithmetic_contains_that_of_members() {
    let mut random = Random::new(6);
    for _ in 0..argument_count() {
        let (x, y) = (random.spread(-1e3, 1e3), random.spread(-1e3, 1e3));
        let (a, b) = (random.around(x, -1e4, 1e4), random.around(y, -1e4, 1e4));
        let (p, q) = (Double::from(x), Double::from(y));
        for (found, truth) in [
            (a + b, p + q),
            (a - b, p - q),
            (a * b, p * q),
            (a.square(), p * p),
            (a.min(b), if x < y { p } else { q }),
            (a.max(b), if x > y { p } else { q }),
            (a.abs(), p.abs()),
            (a.hull(b), p),
            (a.intersection(Interval::new(x, f64::INFINITY)), p),
        ] {
            assert!(contains(found, truth), "{a}, {b}: {found} without {truth:?}");
        }
        if y != 0.0 {
            let quotient = a.divide(b);
            assert!(contains(quotient.range, p / q), "{a} / {b}: {}", quotient.range);
            assert_eq!(quotient.defined == Defined::Everywhere, !b.contains(0.0), "{a} / {b}");
        }
        let corners = [a.lower(), a.upper()].map(|x| [b.lower(), b.upper()].map(|y| x * y)).concat();
        let (least, greatest) =
            corners.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(l, g), &c| (l.min(c), g.max(c)));
        let product = a * b;
        assert!(product.lower() >= least.next_down() && product.upper() <= greatest.next_up(), "{a} * {b}: {product}");
    }
}

const INF: f64 = f64::INFINITY;

fn interval(lower: f64, upper: f64) -> Interval {
    Interval::new(lower, upper)
}

#[test]
fn exact_results_stay_exact() {
    let point = Interval::point;
    assert_eq!(point(2.0) + point(3.0), point(5.0));
    assert_eq!(point(0.5) * point(-6.0), point(-3.0));
    assert_eq!(Interval::ZERO * Interval::ENTIRE, Interval::ZERO);
    assert_eq!(point(6.0).divide(point(3.0)), Image::everywhere(point(2.0)));
    assert_eq!(interval(-1.0, 2.0).square(), interval(0.0, 4.0));
    assert_eq!(integer_power(interval(-2.0, 3.0), 3).range, interval(-8.0, 27.0));
    assert_eq!(integer_power(point(2.0), -2).range, point(0.25));
    assert_eq!(rational_power(point(4.0), &Exact::fraction(3, 2).unwrap()).range, point(8.0));
    assert_eq!(rational_power(point(27.0), &Exact::fraction(2, 3).unwrap()).range, point(9.0));
    assert_eq!(point(9.0).square_root(), point(3.0));
    let exact = [
        (Function::Sin, 0.0, 0.0),
        (Function::Cos, 0.0, 1.0),
        (Function::Exp, 0.0, 1.0),
        (Function::Log, 1.0, 0.0),
        (Function::Cbrt, -27.0, -3.0),
        (Function::Acos, 1.0, 0.0),
        (Function::Gamma, 6.0, 120.0),
        (Function::LogGamma, 2.0, 0.0),
        (Function::BesselJ(0), 0.0, 1.0),
        (Function::BesselJ(3), 0.0, 0.0),
        (Function::EllipticE(0), 1.0, 1.0),
        (Function::Erfc, 0.0, 1.0),
    ];
    for (function, x, expected) in exact {
        assert_eq!(image_of(function, point(x)).range, point(expected), "{function:?} at {x}");
    }
    assert_eq!(image_of_two(BinaryFunction::Hypot, point(0.0), point(-3.0)).range, point(3.0));
    assert_eq!(image_of_two(BinaryFunction::Atan2, point(0.0), interval(1.0, 2.0)).range, point(0.0));
}

/// Pi lies between neighbors (3.14159265358979311600 and 3.14159265358979356009 around 3.14159265358979323846).
#[test]
fn pi_is_enclosed_tightly() {
    let digits = Exact::parse_decimal("3.14159265358979323846264338327950288").unwrap();
    let pi = Interval::pi();
    assert!(Exact::from_f64(pi.lower()).unwrap() < digits && digits < Exact::from_f64(pi.upper()).unwrap());
    assert_eq!(pi.lower().next_up(), pi.upper());
    assert_eq!(Interval::half_pi() + Interval::half_pi(), pi);
}

/// Where operations are defined, and their ranges at the edges; from the definitions.
#[test]
fn edges_of_domains_are_judged() {
    use Defined::{Everywhere, Nowhere, Partly};
    let cases = [
        (Function::Sqrt, interval(-1.0, 4.0), interval(0.0, 2.0), Partly),
        (Function::Sqrt, interval(-2.0, -1.0), Interval::EMPTY, Nowhere),
        (Function::Sqrt, interval(0.0, INF), interval(0.0, INF), Everywhere),
        (Function::Log, interval(0.0, 1.0), interval(-INF, 0.0), Partly),
        (Function::Log, interval(0.0, 0.0), Interval::EMPTY, Nowhere),
        (Function::Log, interval(1.0, INF), interval(0.0, INF), Everywhere),
        (Function::Atanh, interval(0.0, 1.0), interval(0.0, INF), Partly),
        (Function::Atanh, interval(1.0, 2.0), Interval::EMPTY, Nowhere),
        (Function::Acosh, interval(0.0, 1.0), Interval::ZERO, Partly),
        (Function::Asin, interval(2.0, 3.0), Interval::EMPTY, Nowhere),
        (Function::Tan, interval(1.0, 2.0), Interval::ENTIRE, Partly),
        (Function::Sin, Interval::ENTIRE, interval(-1.0, 1.0), Everywhere),
        (Function::Sin, interval(1e300, 1.1e300), interval(-1.0, 1.0), Everywhere),
        (Function::Cos, interval(0.0, INF), interval(-1.0, 1.0), Everywhere),
        (Function::Exp, Interval::ENTIRE, interval(0.0, INF), Everywhere),
        (Function::Tanh, Interval::ENTIRE, interval(-1.0, 1.0), Everywhere),
        (Function::Cosh, interval(-INF, 0.0), interval(1.0, INF), Everywhere),
        (Function::Abs, interval(-3.0, 2.0), interval(0.0, 3.0), Everywhere),
        (Function::Sign, interval(0.0, 2.0), interval(0.0, 1.0), Everywhere),
        (Function::Sinh, Interval::EMPTY, Interval::EMPTY, Nowhere),
        (Function::Gamma, interval(-1.0, -1.0), Interval::EMPTY, Nowhere),
        (Function::Gamma, interval(-0.5, 0.5), Interval::ENTIRE, Partly),
        (Function::Polygamma(1), interval(-1.5, 0.5), interval(0.0, INF), Partly),
        (Function::Polygamma(2), interval(0.0, INF), interval(-INF, 0.0), Partly),
        (Function::EllipticK(0), interval(1.0, 2.0), Interval::EMPTY, Nowhere),
        (Function::EllipticE(0), Interval::ENTIRE, interval(1.0, INF), Partly),
        (Function::EllipticK(2), interval(-INF, 1.0), interval(0.0, INF), Partly),
        (Function::BesselY(0), interval(-2.0, 0.0), Interval::EMPTY, Nowhere),
    ];
    for (function, x, range, defined) in cases {
        let image = image_of(function, x);
        assert_eq!((image.range, image.defined), (range, defined), "{function:?} over {x}");
    }
    assert!(!image_of(Function::Sign, interval(0.0, 1.0)).continuous);
    assert!(image_of(Function::Sign, interval(1.0, 2.0)).continuous);
    let quotients = [
        (interval(1.0, 2.0), interval(0.0, 4.0), interval(0.25, INF), Partly),
        (interval(1.0, 2.0), interval(-4.0, 0.0), interval(-INF, -0.25), Partly),
        (interval(1.0, 2.0), interval(-1.0, 1.0), Interval::ENTIRE, Partly),
        (Interval::ZERO, interval(-1.0, 1.0), Interval::ZERO, Partly),
        (interval(1.0, 2.0), Interval::ZERO, Interval::EMPTY, Nowhere),
        (interval(0.0, 1.0), interval(0.0, 1.0), interval(0.0, INF), Partly),
        (interval(1.0, INF), interval(1.0, INF), interval(0.0, INF), Everywhere),
        (Interval::EMPTY, interval(1.0, 2.0), Interval::EMPTY, Nowhere),
    ];
    for (a, b, range, defined) in quotients {
        let image = a.divide(b);
        assert_eq!((image.range, image.defined), (range, defined), "{a} / {b}");
    }
    let powers = [
        (interval(0.0, 2.0), interval(-1.0, -1.0), interval(0.5, INF), Partly),
        (interval(-2.0, -1.0), interval(0.5, 0.75), Interval::EMPTY, Nowhere),
        (interval(0.0, 0.0), interval(0.0, 0.0), Interval::EMPTY, Nowhere),
        (interval(0.0, 0.0), interval(1.5, 2.5), Interval::ZERO, Everywhere),
        (interval(0.0, 0.5), interval(0.0, 2.0), interval(0.0, 1.0), Partly),
        (interval(1.0, INF), interval(0.0, INF), interval(1.0, INF), Everywhere),
        (interval(-8.0, 8.0), interval(1.0, 2.5), interval(-64.0, 8.0_f64.powf(2.5)), Partly),
    ];
    for (base, exponent, range, defined) in powers {
        let image = power(base, exponent);
        let widest = range.upper().max(64.0) * 1e-14;
        let close = range.is_within(image.range) && image.range.is_within(range + interval(-widest, widest));
        assert!((close || image.range == range) && image.defined == defined, "{base} ^ {exponent}: {image:?}");
    }
    let angles = [
        (interval(-1.0, 1.0), interval(-2.0, -1.0), false, Everywhere),
        (interval(-1.0, 0.0), interval(-2.0, -1.0), false, Everywhere),
        (interval(0.0, 1.0), interval(-2.0, -1.0), true, Everywhere),
        (interval(-1.0, 1.0), interval(1.0, 2.0), true, Everywhere),
        (interval(-1.0, 1.0), interval(0.0, 2.0), false, Partly),
    ];
    for (y, x, continuous, defined) in angles {
        let image = image_of_two(BinaryFunction::Atan2, y, x);
        assert_eq!((image.continuous, image.defined), (continuous, defined), "atan2 over {y}, {x}");
        if y.lower() < 0.0 && y.upper() >= 0.0 && x.upper() < 0.0 {
            // On the cut the angle is pi, below it -pi is approached.
            assert!(interval(-3.1, 3.1).is_within(image.range), "atan2 over {y}, {x}: {}", image.range);
        }
    }
}

/// Overflow, underflow, subnormal numbers and the ends of the doubles.
#[test]
fn ends_of_the_doubles_are_no_trap() {
    let point = Interval::point;
    let tiny = 5e-324;
    assert_eq!(point(f64::MAX) + point(f64::MAX), interval(f64::MAX, INF));
    assert_eq!(point(f64::MAX) * point(-2.0), interval(-INF, f64::MIN));
    assert_eq!(point(tiny) * point(tiny), interval(0.0, tiny));
    assert_eq!(point(-tiny) * point(tiny), interval(-tiny, 0.0));
    assert_eq!(point(tiny).divide(point(2.0)).range, interval(0.0, tiny));
    assert_eq!(point(1.0).divide(point(tiny)).range, interval(f64::MAX, INF));
    assert!(point(tiny).square_root().contains(2.2227587494850775e-162), "sqrt(2^-1074) = 2^-537");
    assert!(image_of(Function::Exp, point(1000.0)).range.lower() > 1e308);
    assert_eq!(image_of(Function::Exp, point(1000.0)).range.upper(), INF);
    let underflow = image_of(Function::Exp, point(-1000.0)).range;
    assert!(underflow.lower() == 0.0 && underflow.upper() > 0.0 && underflow.upper() < 1e-320, "{underflow}");
    let small_sine = image_of(Function::Sin, point(tiny)).range;
    assert!(small_sine.contains(tiny) && small_sine.upper() < 4.0 * tiny, "{small_sine}");
    let inverse = integer_power(point(1e-200), -2);
    assert!(inverse.range.upper() == INF && inverse.range.lower() > 1e307 && inverse.defined == Defined::Everywhere);
    let huge = integer_power(point(1e200), -2).range;
    assert!(huge.upper() > 0.0 && huge.upper() < 1e-300 && huge.lower() >= 0.0, "{huge}");
    assert_eq!(interval(f64::NAN, 1.0), Interval::ENTIRE);
    assert!(point(INF).is_empty());
    assert!(interval(2.0, 1.0).is_empty());
    assert_eq!(interval(f64::MIN, f64::MAX).midpoint(), 0.0);
    assert_eq!(interval(f64::MIN, f64::MAX).width(), INF);
    assert!(interval(3.0, INF).contains(interval(3.0, INF).midpoint()));
    assert!(interval(-INF, -3.0).contains(interval(-INF, -3.0).midpoint()));
    for function in Function::NAMED.iter().copied().chain([0, 1, 2, 3, 41, 170, 255].into_iter().flat_map(|n| {
        [
            Function::Polygamma(n),
            Function::BesselJ(n),
            Function::BesselY(n),
            Function::EllipticK(n),
            Function::EllipticE(n),
        ]
    })) {
        let ends = [-INF, f64::MIN, -1e17, -170.5, -1.0, -tiny, 0.0, tiny, 0.5, 1.0, 1.5, 170.7, 1e17, f64::MAX, INF];
        for (i, &lower) in ends.iter().enumerate() {
            for &upper in &ends[i..] {
                let x = interval(lower, upper);
                let image = image_of(function, x);
                // The plain value at any of the ends lies inside, if it is one.
                for at in ends.into_iter().filter(|&at| x.contains(at)) {
                    let value = function.evaluate(at);
                    let inside = !value.is_finite() || image.range.contains(value);
                    assert!(inside, "{function:?} over {x}: {} without {value} at {at}", image.range);
                }
            }
        }
    }
}

#[test]
fn comparisons_are_true_false_or_unknown() {
    let (low, high) = (interval(0.0, 1.0), interval(1.0, 2.0));
    assert_eq!(low.less(high), Truth::Unknown);
    assert_eq!(low.less_equal(high), Truth::True);
    assert_eq!(high.less(low), Truth::False);
    assert_eq!(high.less_equal(low), Truth::Unknown);
    assert_eq!(low.less(interval(1.5, 2.0)), Truth::True);
    assert_eq!(Interval::EMPTY.less(low), Truth::Unknown);
}

/// The function of a name of `functions.csv`, if its range is to be compared there.
fn named(name: &str) -> Option<Function> {
    let Some((family, order)) = name.split_once(' ') else {
        return Function::NAMED.iter().copied().find(|function| function.name() == name);
    };
    let n = order.parse().expect("an order");
    Some(match family {
        "polygamma" => Function::Polygamma(n),
        "bessel_j" => Function::BesselJ(n),
        "bessel_y" => Function::BesselY(n),
        "elliptic_k" => Function::EllipticK(n),
        "elliptic_e" => Function::EllipticE(n),
        _ => panic!("unknown family {family}"),
    })
}

/// Every value of the file lies in the range over its argument, and in that over intervals between arguments of the file.
#[test]
fn ranges_contain_the_values_of_mpmath() {
    let mut values: std::collections::BTreeMap<&str, Vec<(f64, Double)>> = Default::default();
    for (name, arguments, value) in tabled() {
        match (name, arguments.as_slice()) {
            ("pow", &[a, b]) => {
                let found = power(Interval::point(a), Interval::point(b)).range;
                assert!(contains(found, value), "{a} ^ {b}: {found} without {value:?}");
            }
            (_, &[a, b]) => {
                let function = BinaryFunction::NAMED.iter().find(|function| function.name() == name).unwrap();
                let found = image_of_two(*function, Interval::point(a), Interval::point(b)).range;
                assert!(contains(found, value), "{name}({a}, {b}): {found} without {value:?}");
            }
            (_, &[x]) => values.entry(name).or_default().push((x, value)),
            _ => panic!("{name} has {} arguments", arguments.len()),
        }
    }
    assert!(values.len() > 50);
    for (name, points) in &mut values {
        let function = named(name).expect("a known function");
        points.sort_by(|a, b| a.0.total_cmp(&b.0));
        for count in [1, 2, 3, 5, 17, 60] {
            for window in points.windows(count) {
                let x = interval(window[0].0, window[count - 1].0);
                let image = image_of(function, x);
                for (at, value) in window {
                    assert!(
                        contains(image.range, *value),
                        "{name} over {x}: {} without {value:?} at {at}",
                        image.range
                    );
                }
                assert_ne!(image.defined, Defined::Nowhere, "{name} over {x}");
            }
        }
    }
}

/// The range over a thin interval is thin for the special functions too, except where their accuracy is absolute.
#[test]
fn special_functions_have_useful_ranges() {
    let cases = [
        (Function::Gamma, -1.5, 1e-14),
        (Function::Gamma, 1.4616321449683622, 1e-14),
        (Function::LogGamma, 30.0, 1e-14),
        (Function::LogGamma, -3.3, 1e-14),
        (Function::Polygamma(0), 2.5, 1e-14),
        (Function::Polygamma(1), -2.5, 1e-14),
        (Function::Polygamma(3), 0.5, 1e-13),
        (Function::BesselJ(0), 2.0, 1e-14),
        (Function::BesselJ(4), 7.0, 1e-13),
        (Function::BesselY(1), 30.0, 1e-14),
        (Function::BesselY(3), 0.5, 1e-13),
        (Function::EllipticK(0), 0.9, 1e-14),
        (Function::EllipticE(2), -3.0, 1e-14),
    ];
    for (function, x, bound) in cases {
        let found = image_of(function, Interval::point(x)).range;
        assert!(found.width() <= bound * found.magnitude(), "{function:?} at {x}: {found}");
        // A small interval has a range that is wider by a slope of moderate size.
        let wide = image_of(function, interval(x - 1e-6, x + 1e-6)).range;
        assert!(found.is_within(wide), "{function:?} beside {x}: {wide}, {found}");
        assert!(wide.width() <= 1e-3 * wide.magnitude().max(1.0), "{function:?} beside {x}: {wide}");
    }
}

/// Values of every node in the arithmetic of the oracle: an evaluator of its own, undefined as NaN. `None` where its
/// digits may not decide: beside a comparison that is nearly equal, or with intermediate values of very different sizes.
fn oracle_value(graph: &Graph, root: ExpressionId, at: &[(SymbolId, f64)]) -> Option<Double> {
    let mut values: Vec<Double> = vec![double_double::NAN; root.index() + 1];
    for id in graph.reachable(&[root]) {
        let of = |id: ExpressionId| values[id.index()];
        let undecided = |a: ExpressionId, b: ExpressionId| (of(a) - of(b)).high.abs() < 1e-12;
        let truth = |holds: bool| Double::from(if holds { 1.0 } else { 0.0 });
        let both = |a: ExpressionId, b: ExpressionId, value: Double| {
            if of(a).is_nan() || of(b).is_nan() { double_double::NAN } else { value }
        };
        let value = match graph.node(id) {
            Node::Number(number) => {
                let (top, bottom) = graph.number_value(number).to_fraction().expect("a small fraction");
                Double::from(top as f64) / Double::from(bottom as f64)
            }
            Node::Pi => Double::from(1.0).atan() * Double::from(4.0),
            Node::Symbol(symbol) => at.iter().find(|(known, _)| *known == symbol).expect("a value").1.into(),
            Node::Negate(a) => -of(a),
            Node::Add(a, b) => of(a) + of(b),
            Node::Subtract(a, b) => of(a) - of(b),
            Node::Multiply(a, b) => of(a) * of(b),
            Node::Divide(_, b) if of(b).high == 0.0 => double_double::NAN,
            Node::Divide(a, b) => of(a) / of(b),
            Node::Power(a, b) if (of(a).abs().log() * of(b)).high.abs() > 300.0 => return None,
            Node::Power(a, b) => oracle_power(of(a), of(b)),
            Node::Call(Function::Exp, a) if of(a).high.abs() > 300.0 => return None,
            Node::Call(Function::Abs, a) => of(a).abs(),
            Node::Call(Function::Sign, a) if of(a).is_nan() => of(a),
            Node::Call(Function::Sign, a) => Double::from(if of(a).high == 0.0 { 0.0 } else { of(a).high.signum() }),
            Node::Call(function, a) => of_oracle(function, of(a)),
            Node::Call2(BinaryFunction::Hypot, a, b) => (of(a) * of(a) + of(b) * of(b)).sqrt(),
            Node::Call2(BinaryFunction::Atan2, a, b) if of(a).high == 0.0 && of(b).high <= 0.0 => return None,
            Node::Call2(BinaryFunction::Atan2, a, b) => Double::angle(of(a), of(b)),
            Node::Call2(BinaryFunction::Min, a, b) => {
                both(a, b, if (of(a) - of(b)).is_negative() { of(a) } else { of(b) })
            }
            Node::Call2(BinaryFunction::Max, a, b) => {
                both(a, b, if (of(a) - of(b)).is_negative() { of(b) } else { of(a) })
            }
            Node::Less(a, b) | Node::LessEqual(a, b) if undecided(a, b) => return None,
            Node::Less(a, b) | Node::LessEqual(a, b) => both(a, b, truth((of(a) - of(b)).is_negative())),
            Node::Truth(holds) => truth(holds),
            Node::And(a, b) => of(a) * of(b),
            Node::Or(a, b) => both(a, b, truth((of(a) + of(b)).high > 0.0)),
            Node::Not(a) => Double::from(1.0) - of(a),
            Node::Select(condition, _, _) if of(condition).is_nan() => of(condition),
            Node::Select(condition, yes, no) => {
                if of(condition).high > 0.0 {
                    of(yes)
                } else {
                    of(no)
                }
            }
        };
        let size = value.high.abs();
        if size > 1e6 || (size > 0.0 && size < 1e-9) {
            return None;
        }
        values[id.index()] = value;
    }
    Some(values[root.index()])
}

fn oracle_power(base: Double, exponent: Double) -> Double {
    let n = exponent.high;
    if base.is_nan() || exponent.is_nan() {
        return double_double::NAN;
    }
    if n.fract() == 0.0 && exponent.low == 0.0 && n.abs() < 100.0 {
        let product = (0..n.abs() as u32).fold(Double::from(1.0), |product, _| product * base);
        return match n > 0.0 {
            true => product,
            false if base.high == 0.0 => double_double::NAN,
            false => Double::from(1.0) / product,
        };
    }
    match base.high == 0.0 && n > 0.0 {
        true => base,
        false => base.power(exponent),
    }
}

fn of_oracle(function: Function, x: Double) -> Double {
    match function {
        Function::Sqrt => x.sqrt(),
        Function::Sin => x.sin(),
        Function::Cos => x.cos(),
        Function::Tan => x.tan(),
        Function::Exp => x.exp(),
        Function::Log => x.log(),
        Function::Atan => x.atan(),
        Function::Tanh => x.tanh(),
        Function::Asinh => x.asinh(),
        Function::Acosh => x.acosh(),
        Function::Asin => x.asin(),
        Function::Cbrt => x.cbrt(),
        Function::Erf => x.erf(),
        _ => panic!("{function:?} is not generated"),
    }
}

const GENERATED: &[Function] = &[
    Function::Sqrt,
    Function::Sin,
    Function::Cos,
    Function::Tan,
    Function::Exp,
    Function::Log,
    Function::Atan,
    Function::Tanh,
    Function::Asinh,
    Function::Acosh,
    Function::Asin,
    Function::Cbrt,
    Function::Erf,
    Function::Abs,
    Function::Sign,
];

/// A formula of some twenty nodes in the symbols `x` and `y`.
fn random_formula(random: &mut Random, graph: &mut Graph, symbols: [SymbolId; 2]) -> ExpressionId {
    let mut numbers = symbols.map(|symbol| graph.symbol(symbol)).to_vec();
    let mut conditions = vec![graph.truth(true)];
    for _ in 0..3 + random.below(12) {
        let recent = |random: &mut Random, count: usize| count - 1 - random.below(count.min(5));
        let [a, b, c, d] = [0; 4].map(|_| numbers[recent(random, numbers.len())]);
        let [p, q] = [0; 2].map(|_| conditions[recent(random, conditions.len())]);
        let exponent =
            [(2, 1), (3, 1), (-1, 1), (-2, 1), (1, 2), (3, 2), (-1, 2), (1, 3), (2, 5), (9, 1)][random.below(10)];
        let new = match random.below(24) {
            0 | 1 => graph.add(a, b),
            2 | 3 => graph.subtract(a, b),
            4 | 5 => graph.multiply(a, b),
            6 => graph.divide(a, b),
            7 => {
                let exponent = graph.fraction(exponent.0, exponent.1);
                graph.power(a, exponent)
            }
            8 => graph.power(a, b),
            9 => graph.negate(a),
            10 => {
                let number = graph.fraction(random.below(9) as i64 - 4, 1 + random.below(5) as i64);
                graph.add(a, number)
            }
            11 => {
                let pi = graph.pi();
                graph.multiply(a, pi)
            }
            12 => graph.call2(BinaryFunction::NAMED[random.below(4)], a, b),
            13 | 14 => {
                let condition = match random.below(5) {
                    0 => graph.less_equal(a, b),
                    1 => graph.and(p, q),
                    2 => graph.or(p, q),
                    3 => graph.not(p),
                    _ => graph.less(a, b),
                };
                conditions.push(condition);
                continue;
            }
            15 | 16 => graph.select(p, a, b),
            17 => {
                let condition = graph.less(a, b);
                graph.select(condition, c, d)
            }
            // A branch that its condition protects.
            18 => {
                let zero = graph.integer(0);
                let condition = graph.less(zero, a);
                let function = [Function::Log, Function::Sqrt][random.below(2)];
                let inner = graph.call(function, a);
                graph.select(condition, inner, b)
            }
            _ => graph.call(GENERATED[random.below(GENERATED.len())], a),
        };
        numbers.push(new);
    }
    numbers[numbers.len() - 1]
}

/// Ranges of random formulas over thin and wide boxes, plain and centred, contain the values at points inside, and what
/// they say about domains is true there.
#[test]
fn ranges_of_random_formulas_contain_their_values() {
    let mut random = Random::new(2024);
    let (mut values, mut defined_everywhere, mut nowhere, mut thin, mut narrow) = (0u64, 0, 0, 0, 0);
    let (mut centred_tried, mut centred_won) = (0u64, 0);
    for _ in 0..argument_count() / 30 {
        let mut graph = Graph::new();
        let symbols = [graph.new_symbol("x"), graph.new_symbol("y")];
        let formula = random_formula(&mut random, &mut graph, symbols);
        let gradient = symbols.map(|symbol| (symbol, differentiate(&mut graph, formula, symbol)));
        let text = quadrel::expression::print(&graph, formula);
        let centred_form = Centred::new(&graph, formula, &gradient);
        for _ in 0..6 {
            let corner = symbols.map(|_| random.spread(-3.0, 3.0));
            let is_thin = random.below(3) == 0;
            let width = if is_thin { 0.0 } else { random.between(-16.0, 1.5).exp() };
            let region = corner.map(|low| interval(low, low + width));
            let range_of = |symbol: SymbolId| region[symbol.index()];
            let plain = enclose_one(&graph, formula, range_of);
            let tight = centred_form.evaluate(range_of);
            assert!(tight.range.is_within(plain.range));
            defined_everywhere += u64::from(plain.defined == Defined::Everywhere);
            nowhere += u64::from(plain.defined == Defined::Nowhere);
            centred_tried += u64::from(plain.continuous && !is_thin);
            centred_won += u64::from(plain.continuous && !is_thin && tight.range.width() < 0.5 * plain.range.width());
            for _ in 0..if is_thin { 1 } else { 4 } {
                let point = region.map(|side| random.between(side.lower(), side.upper()).min(side.upper()));
                let at = [(symbols[0], point[0]), (symbols[1], point[1])];
                let Some(value) = oracle_value(&graph, formula, &at) else { continue };
                if value.is_nan() {
                    assert!(plain.defined != Defined::Everywhere, "{text} over {region:?} is undefined at {point:?}");
                    continue;
                }
                assert!(plain.defined != Defined::Nowhere, "{text} over {region:?} is {value:?} at {point:?}");
                let slack = Interval::new(-1e-20, 1e-20);
                for range in [plain.range, tight.range] {
                    let inside = contains(range, value) || contains(range + slack, value) && value.high.abs() < 1e-3;
                    assert!(inside, "{text} over {region:?}: {range} without {value:?} at {point:?}");
                }
                values += 1;
                if is_thin && plain.continuous {
                    thin += 1;
                    narrow += u64::from(plain.range.width() <= 1e-10 * plain.range.magnitude().max(1e-3));
                }
            }
        }
    }
    // What was tried is worth something: most formulas have values, thin boxes have narrow ranges, both words occur.
    assert!(values > 20 * argument_count() / 100 && defined_everywhere > 5 * argument_count() / 100, "{values}");
    assert!(nowhere > argument_count() / 100, "{nowhere}");
    assert!(narrow * 100 > thin * 98, "{narrow} of {thin}");
    assert!(centred_won * 20 > centred_tried, "{centred_won} of {centred_tried}");
}

/// A formula in `x`, written by a closure, with its image over an interval.
fn image_over(x: Interval, build: impl Fn(&mut Graph, ExpressionId) -> ExpressionId) -> Image {
    let mut graph = Graph::new();
    let symbol = graph.new_symbol("x");
    let variable = graph.symbol(symbol);
    let formula = build(&mut graph, variable);
    enclose_one(&graph, formula, |_| x)
}

/// `if(x < 0, 0, sqrt(x))`, `if(0 < x, sin(x)/x, 1)` and the like are defined everywhere, because each branch is judged
/// under its condition; a branch without protection is not.
#[test]
fn branches_are_judged_under_their_conditions() {
    let wide = interval(-1.0, 4.0);
    let root = image_over(wide, |g, x| {
        let zero = g.integer(0);
        let (condition, root) = (g.less(x, zero), g.call(Function::Sqrt, x));
        g.select(condition, zero, root)
    });
    assert_eq!((root.range, root.defined, root.continuous), (interval(0.0, 2.0), Defined::Everywhere, false));
    let quotient = image_over(wide, |g, x| {
        let (zero, one) = (g.integer(0), g.integer(1));
        let (condition, sine) = (g.less(zero, x), g.call(Function::Sin, x));
        let quotient = g.divide(sine, x);
        g.select(condition, quotient, one)
    });
    assert_eq!(quotient.defined, Defined::Everywhere, "x is not 0 where 0 < x");
    let closed = image_over(wide, |g, x| {
        let (zero, one) = (g.integer(0), g.integer(1));
        let (condition, log) = (g.less_equal(zero, x), g.call(Function::Log, x));
        g.select(condition, log, one)
    });
    assert_eq!(closed.defined, Defined::Partly, "x may be 0 where 0 <= x");
    let closed = image_over(wide, |g, x| {
        let (zero, one) = (g.integer(0), g.integer(1));
        let (condition, inverse) = (g.less_equal(x, zero), g.divide(one, x));
        g.select(condition, inverse, one)
    });
    assert_eq!(closed.defined, Defined::Partly, "x may be 0 where x <= 0");
    // x > 0 passes on to 2x, x^2 + y^2, sqrt and so on.
    let derived = image_over(wide, |g, x| {
        let (zero, one, two) = (g.integer(0), g.integer(1), g.integer(2));
        let (condition, double, square) = (g.less(zero, x), g.multiply(two, x), g.square(x));
        let sum = g.add(double, square);
        let root = g.call(Function::Sqrt, sum);
        let inverse = g.divide(one, root);
        g.select(condition, inverse, one)
    });
    assert_eq!(derived.defined, Defined::Everywhere);
    let repeated = image_over(wide, |g, x| {
        let (zero, one) = (g.integer(0), g.integer(1));
        let (condition, log, nothing) = (g.less_equal(x, one), g.call(Function::Log, x), g.divide(one, zero));
        let inner = g.select(condition, zero, nothing);
        let outer = g.select(condition, inner, log);
        g.add(outer, one)
    });
    assert_eq!(repeated.defined, Defined::Everywhere, "the same condition is not asked twice");
    let both = image_over(wide, |g, x| {
        let (low, high) = (g.fraction(1, 2), g.integer(2));
        let (above, below) = (g.less(low, x), g.less(x, high));
        let (condition, inverse) = (g.and(above, below), g.power(x, low));
        let (log, one) = (g.call(Function::Log, inverse), g.integer(1));
        g.select(condition, log, one)
    });
    assert_eq!(both.defined, Defined::Everywhere);
    // log(1/2)/2 = -0.3466 and log(2)/2 = 0.3466, and 1 from the other branch.
    assert!(both.range.lower() > -0.3467 && both.range.upper() == 1.0, "{}", both.range);
    let impossible = image_over(wide, |g, x| {
        let (zero, five) = (g.integer(0), g.integer(5));
        let (above, low) = (g.less(five, x), g.less(x, zero));
        let nothing = g.divide(x, zero);
        let inner = g.select(above, nothing, five);
        g.select(low, inner, zero)
    });
    assert_eq!((impossible.range, impossible.defined), (interval(0.0, 5.0), Defined::Everywhere));
    let undefined_condition = image_over(interval(-2.0, -1.0), |g, x| {
        let (zero, root) = (g.integer(0), g.call(Function::Sqrt, x));
        let condition = g.less(zero, root);
        g.select(condition, x, zero)
    });
    assert_eq!(undefined_condition.defined, Defined::Nowhere);
}

/// Long chains need no stack, and choices within choices end.
#[test]
fn large_formulas_are_survived() {
    let chain = image_over(interval(0.0, 1.0), |g, x| {
        (0..50_000).fold(x, |sum, _| {
            let sine = g.call(Function::Sin, sum);
            g.add(sine, x)
        })
    });
    assert!(chain.range.is_bounded() && chain.defined == Defined::Everywhere);
    let choices = image_over(interval(-1.0, 1.0), |g, x| {
        let zero = g.integer(0);
        (0..5_000).fold(x, |value, _| {
            let (up, down) = (g.call(Function::Atan, value), g.call(Function::Tanh, value));
            let condition = g.less(zero, value);
            let inner = g.select(condition, up, down);
            g.add(inner, x)
        })
    });
    assert!(choices.range.contains(0.5) && choices.range.is_bounded(), "{}", choices.range);
    let claims = image_over(interval(-1.0, 1.0), |g, x| {
        let condition = (1..5_000).fold(g.truth(true), |condition, i| {
            let bound = g.fraction(i, 5_000);
            let claim = g.less(x, bound);
            g.and(condition, claim)
        });
        let one = g.integer(1);
        g.select(condition, x, one)
    });
    assert_eq!(claims.range, interval(-1.0, 1.0));
}

/// The centred form of x - x^2 on [0.45, 0.55], whose range is [0.2475, 0.25]: the plain range is wider than 0.19, the
/// centred one by the mean value theorem at most 0.01 wide. A function that jumps keeps its plain range.
#[test]
fn centred_forms_are_tighter_and_refuse_jumps() {
    let mut graph = Graph::new();
    let symbol = graph.new_symbol("x");
    let x = graph.symbol(symbol);
    let square = graph.square(x);
    let formula = graph.subtract(x, square);
    let side = interval(0.45, 0.55);
    let derivative = differentiate(&mut graph, formula, symbol);
    let found = centred(&graph, formula, &[(symbol, derivative)], |_| side).range;
    assert!(interval(0.2475, 0.25).is_within(found) && found.width() < 0.011, "{found}");
    assert!(enclose_one(&graph, formula, |_| side).range.width() > 0.19);

    let shifted = graph.fraction(1, 2);
    let shifted = graph.subtract(x, shifted);
    let jump = graph.call(Function::Sign, shifted);
    let slope = differentiate(&mut graph, jump, symbol);
    assert_eq!(centred(&graph, jump, &[(symbol, slope)], |_| side).range, interval(-1.0, 1.0));
    let kink = graph.call(Function::Abs, shifted);
    let slope = differentiate(&mut graph, kink, symbol);
    let found = centred(&graph, kink, &[(symbol, slope)], |_| side).range;
    assert!(found.contains(0.05) && found.contains(0.0), "{found}");
}
