//! No input panics: random bytes, and sheets put together at random. `PROPTEST_CASES=100000` runs more.

use proptest::prelude::*;
use quadrel::integrals::{NoProgress, Settings, answer};
use quadrel::language::{Source, check};

/// Checks, binds and answers with a small budget; errors are fine, panics are not.
fn use_sheet(text: &str) {
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
