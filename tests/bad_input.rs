//! No input panics, takes over a second of processor time or over 256 MB: random bytes, sheets put together at random,
//! and hostile sheets. `PROPTEST_CASES=100000` runs more.

#[path = "support/measure.rs"]
mod measure;

use measure::{Counting, MOST_SECONDS, bounded};
use proptest::prelude::*;
use quadrel::integrals::{NoProgress, Settings, answer};
use quadrel::language::{Source, check};

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Checks, binds and answers with a small budget; errors are fine, panics are not.
fn use_sheet(text: &str) {
    bounded(&|| text.chars().take(300).collect(), MOST_SECONDS, || read_and_answer(text));
}

fn read_and_answer(text: &str) {
    let Ok(model) = check(Source::new("random.sheet", text)) else { return };
    let Ok(bindings) = model.bind(&[]) else { return };
    let settings = Settings { relative: 1e-3, evaluations: Some(2_000), ..Settings::default() };
    let _ = answer(&model, &bindings, &[], &settings, &NoProgress);
}

fn number() -> impl Strategy<Value = String> {
    prop_oneof![
        Just("0".to_owned()),
        Just("1e300".to_owned()),
        Just("1/3".to_owned()),
        Just("2 [m]".to_owned()),
        Just("3 [mm]".to_owned()),
        Just("45 [deg]".to_owned()),
        (0u32..20).prop_map(|n| n.to_string()),
        Just("pi".to_owned()),
    ]
}

fn expression() -> impl Strategy<Value = String> {
    let leaf = prop_oneof![
        number(),
        prop::sample::select(vec!["a", "b", "c", "u", "v", "x", "y", "z", "nx", "K", "H", "s", "t", "f"])
            .prop_map(str::to_owned),
    ];
    leaf.prop_recursive(4, 24, 3, |inner| {
        prop_oneof![
            (inner.clone(), prop::sample::select(vec!["+", "-", "*", "/", "^", "<", "and"]), inner.clone())
                .prop_map(|(a, op, b)| format!("({a} {op} {b})")),
            (
                prop::sample::select(vec![
                    "sin", "sqrt", "log", "exp", "abs", "gamma", "f", "area", "volume", "norm", "tan"
                ]),
                inner.clone()
            )
                .prop_map(|(f, a)| format!("{f}({a})")),
            (
                prop::sample::select(vec![
                    "integral",
                    "flux",
                    "diff",
                    "atan2",
                    "dot",
                    "cross",
                    "centroid",
                    "translate",
                    "bessel_j"
                ]),
                inner.clone(),
                inner.clone()
            )
                .prop_map(|(f, a, b)| format!("{f}({a}, {b})")),
            (inner.clone(), inner.clone(), inner.clone()).prop_map(|(a, b, c)| format!("({a}, {b}, {c})")),
            (inner.clone(), inner.clone(), inner.clone()).prop_map(|(a, b, c)| format!("if({a} < {b}, {b}, {c})")),
            inner.clone().prop_map(|a| format!("-{a}")),
            inner.prop_map(|a| format!("{a}.x")),
        ]
    })
}

fn definition() -> impl Strategy<Value = String> {
    prop_oneof![
        (prop::sample::select(vec!["a", "b", "c"]), expression()).prop_map(|(name, e)| format!("{name} = {e}\n")),
        expression().prop_map(|e| format!("f(x) = {e}\n")),
        (prop::sample::select(vec!["s", "t"]), expression(), expression(), number(), expression()).prop_map(
            |(name, x, z, low, high)| format!("{name}(u, v) = ({x}, v, {z}) on u in [{low}, {high}], v in [0, 1]\n")
        ),
        expression().prop_map(|e| format!("s(u, v) = (u, v, {e}) on u in [0, 1], v in [0, 2]\n")),
        expression().prop_map(|e| format!("assume {e} > 0\n")),
        (expression(), number()).prop_map(|(e, n)| format!("c = {e} in [0, {n}]\n")),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig { cases: ProptestConfig::default().cases.max(10_000), failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn random_bytes(bytes in prop::collection::vec(any::<u8>(), 0..200)) {
        use_sheet(&String::from_utf8_lossy(&bytes));
    }

    #[test]
    fn random_sheets(definitions in prop::collection::vec(definition(), 1..6)) {
        use_sheet(&definitions.concat());
    }
}

/// Sheets made to hang or to fill the memory.
fn hostile() -> Vec<(&'static str, String)> {
    const SQUARE: &str = "p(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\n";
    let question = |integrand: &str| format!("{SQUARE}q = integral({integrand}, p)\n");
    let lines = |count: usize, line: &dyn Fn(usize) -> String| (0..count).map(line).collect::<String>();
    let nested = |open: &str, inside: &str, close: &str, depth: usize| {
        format!("{}{inside}{}", open.repeat(depth), close.repeat(depth))
    };
    let doubling = |twice: &str| {
        let steps = lines(40, &|i| format!("f{}(x) = {}\n", i + 1, twice.replace('f', &format!("f{i}"))));
        format!("f0(x) = sin(x) + 1\n{steps}{}", question("f40(u)"))
    };
    vec![
        ("nesting at the limit", format!("a = {}\n", nested("(", "1", ")", 255))),
        ("calls at the limit", question(&nested("sin(", "u", ")", 250))),
        ("signs", format!("a = {}1\n", "-".repeat(100_000))),
        ("a mebibyte of round brackets", "(".repeat(1 << 20)),
        ("a mebibyte of square brackets", "[".repeat(1 << 20)),
        ("a mebibyte of closing brackets", format!("a = {}", ")".repeat((1 << 20) - 4))),
        ("a tower of powers", format!("a = {}2\n", "2^".repeat(200))),
        ("a tower of nines", "a = 9^9^9^9\nb = 2^(10^9)\nc = 10^-(10^9)\n".to_owned()),
        ("an integer that outgrows", "a = 7^4000*3^4000/5^4000\n".to_owned()),
        ("a sum without end", question("sum(i in 1..10^15, u^i)")),
        ("a sum of many sums", question("sum(i in 1..999, sum(j in 1..999, sin(i*j*u)))")),
        ("functions that double", doubling("f(x) + f(x + 1)")),
        ("functions that nest", doubling("f(f(x))")),
        ("functions that multiply", doubling("f(x)*f(2*x)")),
        ("repeated derivatives", question(&nested("diff(", "exp(sin(u)*u)/(1 + u^2)", ", u)", 30))),
        ("thousands of patches", lines(3_000, &|i| format!("p{i}(u, v) = (u, v, {i}) on u in [0, 1], v in [0, 1]\n"))),
        ("a formula of 50,000 nodes", question(&format!("u{}", " + u*v".repeat(49_000)))),
        ("a name of 100 kB", format!("{0} = 1\nb = {0}x + 1\n", "n".repeat(100_000))),
        ("a number of 10,000 digits", format!("a = {}\nb = 0.{}\n", "9".repeat(10_000), "3".repeat(10_000))),
        ("a huge exponent", "a = 1e999999999\nb = 1e-999999999\nc = 1e99999999999999999999\n".to_owned()),
        ("many errors", lines(20_000, &|i| format!("a{i} = 1 + * {i}\n"))),
        ("many unknown names", lines(5_000, &|i| format!("a{i} = unknown{i} + 1\n"))),
        ("one name again and again", "a = 1\n".repeat(50_000)),
        ("a circle of names", lines(5_000, &|i| format!("a{i} = a{} + 1\n", (i + 1) % 5_000))),
        ("a chain of names", lines(5_000, &|i| format!("a{} = a{i} + 1\n", i + 1)) + "a0 = 1\n"),
        ("two thousand kinks", question("sum(i in 1..2000, abs(u*i - v))")),
        (
            "a chain of conditions",
            question(&(0..150).fold("0".to_owned(), |rest, i| format!("if(u*{} < sin({i}*v), {i}, {rest})", i + 1))),
        ),
    ]
}

/// A hostile sheet is read within a second of processor time in a release build, and answered in a few.
#[test]
fn hostile_sheets() {
    let slower = if cfg!(debug_assertions) { 4.0 } else { 1.0 };
    for (name, sheet) in hostile() {
        bounded(&|| format!("reading {name}"), slower * MOST_SECONDS, || {
            check(Source::new("hostile.sheet", sheet.clone())).is_ok()
        });
        bounded(&|| format!("answering {name}"), slower * 4.0 * MOST_SECONDS, || read_and_answer(&sheet));
    }
}
