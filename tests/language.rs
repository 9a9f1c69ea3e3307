//! What a sheet means, against values computed by hand.

use approx::assert_relative_eq;
use quadrel::expression::evaluate_one;
use quadrel::integrals::{NoProgress, Settings, answer};
use quadrel::language::{Model, Source, check};
use std::f64::consts::PI;

fn model(sheet: &str) -> Model {
    check(Source::new("test.sheet", sheet)).unwrap_or_else(|errors| {
        panic!("{}", errors.diagnostics.iter().map(|d| errors.source.draw(d)).collect::<String>())
    })
}

/// Components of the value `name`, with the sheet's own parameters.
fn values(sheet: &str, name: &str) -> Vec<f64> {
    let model = model(sheet);
    let bindings = model.bind(&[]).unwrap_or_else(|errors| panic!("{errors}"));
    let value = model.value_named(name).unwrap_or_else(|| panic!("no {name}"));
    value.components.iter().map(|&c| evaluate_one(&model.graph, c, |symbol| bindings.value(symbol))).collect()
}

#[test]
fn numbers_and_operators() {
    for (formula, expected) in [
        ("1/3 + 1/6", 0.5),
        ("-2^2", -4.0),
        ("2^3^2", 512.0),
        ("2^-1", 0.5),
        ("8/4/2", 1.0),
        ("1 - 2 - 3", -4.0),
        ("3e-2*100", 3.0),
        ("if(1 < 2 and not 3 < 2, 5, 6)", 5.0),
        ("if(1 < 2 < 3, 1, 0)", 1.0),
        ("if(1 < 3 < 2, 1, 0)", 0.0),
        ("max(1, 5, 3) - min(4, 2)", 3.0),
        ("sum(i in 1..100, i)", 5050.0),
        ("sum(i in 0..3, sum(j in 1..2, i*j))", 18.0),
        ("hypot(3, 4) + abs(-2) + sign(-7)", 6.0),
        ("cbrt(-8) + sqrt(9)", 1.0),
        ("0^0", 1.0),
        ("dot((1, 2, 3), (4, 5, 6))", 32.0),
        ("norm((2, 3, 6))", 7.0),
        ("cross((1, 0, 0), (0, 1, 0)).z", 1.0),
        ("((1, 2, 3)*2 - (1, 1, 1)).y", 3.0),
        ("unit((0, 3, 4)).z", 0.8),
    ] {
        assert_relative_eq!(values(&format!("a = {formula}"), "a")[0], expected, max_relative = 1e-15);
    }
}

#[test]
fn definitions_stand_in_any_order() {
    assert_eq!(values("c = a + b\nb = 2*a\na = 3", "c"), [9.0]);
    assert_eq!(values("v = (a, 2*a, a^2)\na = 3", "v"), [3.0, 6.0, 9.0]);
}

#[test]
fn functions_of_any_arity_and_kind() {
    assert_eq!(values("f(x, y, z) = x + 10*y + 100*z\na = f(1, 2, 3)", "a"), [321.0]);
    assert_eq!(values("g(p) = dot(p, p)\na = g((1, 2, 3)) + h(2)\nh(s) = s^2", "a"), [18.0]);
    // A function works for any units that fit.
    assert_eq!(values("sq(s) = s*s\na = sq(3 [m])/sq(1 [m]) + sq(2)", "a"), [13.0]);
    // The argument hides a definition of the same name.
    assert_eq!(values("s = 5\nf(s) = s + 1\na = f(2)", "a"), [3.0]);
}

#[test]
fn derivatives_are_exact() {
    // By a formal argument: a partial derivative, before the argument is put in.
    assert_eq!(values("f(s) = diff(s^3, s)\na = f(2)", "a"), [12.0]);
    assert_eq!(values("f(s) = diff(s^3, s)\nt = 3\na = f(2*t)", "a"), [108.0]);
    // By a parameter: through derived numbers.
    assert_eq!(values("D = 3\nk = D^2\na = diff(k + D, D)", "a"), [7.0]);
    assert_eq!(values("t = 2\nv = diff((t, t^2, t^3), t)", "v"), [1.0, 4.0, 12.0]);
    // No capture: the inner s is another s.
    assert_eq!(values("f(s) = s^2\ng(s) = diff(f(3*s), s)\na = g(1)", "a"), [18.0]);
}

#[test]
fn units_become_coherent() {
    assert_relative_eq!(values("a = 2500 [mm]", "a")[0], 2.5);
    assert_relative_eq!(values("a = 90 [deg]", "a")[0], PI / 2.0);
    assert_relative_eq!(values("a = 2 [bar] + 3 [kPa]", "a")[0], 203_000.0);
    assert_relative_eq!(values("a = sqrt(16 [m^2])", "a")[0], 4.0);
    assert_relative_eq!(values("a = (8 [m^3])^(1/3)", "a")[0], 2.0);
    let model = model("D = 2.4 [m]\nk = D*D as [mm^2]");
    assert_eq!(model.value_named("k").unwrap().dimension.to_string(), "m^2");
    assert_eq!(model.value_named("k").unwrap().shown_as.as_ref().unwrap().text, "mm^2");
}

#[test]
fn parameters_and_derived_numbers() {
    let model = model("D = 2.4 [m] in (0, 10]\nthird = 1/3\nk = 0.1*D\nt = pi/6");
    let names: Vec<&str> = model.parameters.iter().map(|parameter| parameter.name.as_str()).collect();
    assert_eq!(names, ["D", "third", "t"]);
    let set = |text: &str| {
        let bindings = model.bind(&[("D".to_owned(), text.to_owned())]).unwrap();
        bindings.value(model.parameters[0].symbol)
    };
    assert_relative_eq!(set("3"), 3.0);
    assert_relative_eq!(set("350 [mm]"), 0.35);
    assert!(model.bind(&[("D".to_owned(), "10.001".to_owned())]).is_err());
    assert!(model.bind(&[("k".to_owned(), "1".to_owned())]).is_err());
}

#[test]
fn ranges_take_the_unit_of_their_number() {
    assert!(model("b = 300 [mm] in (0, 1000]").bind(&[]).is_ok());
    assert!(model("b = 3 [m] in (0, 1000 [mm]]").bind(&[]).is_err());
}

/// The sheet that documents the language.
#[test]
fn a_dished_head() {
    let sheet = "
D = 2.4 [m] in (0, 10]
k = 0.1*D
assume D > 2*k
a = asin((D/2 - k)/(D - k))
crown(v, u)   = (D*sin(v)*cos(u), D*sin(v)*sin(u), D*cos(v))
                on v in [0, a], u in [0, 2*pi]
rho(s)        = D/2 - k + k*sin(s)
knuckle(s, u) = (rho(s)*cos(u), rho(s)*sin(u), (D - k)*cos(a) + k*cos(s))
                on s in [a, pi/2], u in [0, 2*pi]
head          = crown + knuckle
lining  = area(head)
p(z)    = 2 [bar] + 9810 [N/m^3]*(1 [m] - z)
push    = flux((0, 0, p(z)), head)
c       = centroid(head)
share   = area(knuckle)/lining
";
    let model = model(sheet);
    assert_relative_eq!(values(sheet, "a")[0], (0.96_f64 / 2.16).asin(), max_relative = 1e-15);
    assert_eq!(model.patches.len(), 2);
    assert_eq!(model.functionals.len(), 4, "the area of the head is asked once");
    assert_eq!(model.value_named("push").unwrap().dimension.to_string(), "kg*m/s^2");
    assert_eq!(model.value_named("share").unwrap().depends_on.len(), 2);
    assert!(model.value_named("lining").unwrap().is_answer);
}

#[test]
fn chains_collect() {
    let square = "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\nt(u, v) = (u, v, 1) on u in [0, 1], v in [0, 1]\n";
    let terms = |definition: &str| {
        let model = model(&format!("{square}{definition}"));
        model.chains.last().unwrap().chain.terms.iter().map(|(c, p)| (*c, p.0)).collect::<Vec<_>>()
    };
    assert_eq!(terms("a = s + t - s"), [(1, 1)]);
    assert_eq!(terms("a = 2*(s - t) + s"), [(3, 0), (-2, 1)]);
    assert_eq!(terms("a = -s"), [(-1, 0)]);
    assert_eq!(terms("a = s\nb = a + a"), [(2, 0)]);
}

#[test]
fn long_chains_of_definitions_are_fine() {
    let mut sheet = String::from("a0 = 1\n");
    for i in 1..5_000 {
        sheet += &format!("a{i} = a{} + 1\n", i - 1);
    }
    assert_eq!(values(&sheet, "a4999"), [5_000.0]);
    let mut sheet = String::from("f0(x) = x + 1\n");
    for i in 1..1_000 {
        sheet += &format!("f{i}(x) = f{}(x) + 1\n", i - 1);
    }
    assert_eq!(values(&format!("{sheet}a = f999(0)"), "a"), [1_000.0]);
}

#[test]
fn exponential_calls_are_refused() {
    let mut sheet = String::from("f0(x) = sin(x) + x\n");
    for i in 1..60 {
        sheet += &format!("f{i}(x) = f{0}(x) + f{0}(x + {i})\n", i - 1);
    }
    let errors = check(Source::new("test.sheet", format!("{sheet}a = f59(1/7)"))).unwrap_err();
    assert!(errors.diagnostics.iter().any(|d| d.code == "too-large" || d.code == "too-deep"), "{errors}");
}

/// A function that nothing calls is checked all the same.
#[test]
fn names_in_functions_that_nothing_calls_are_known() {
    let plate = "s(u, v) = (u, v, 0*u) on u in [0, 1], v in [0, 1]";
    let errors = check(Source::new("test.sheet", format!("f(x) = g(x) + 1\n{plate}"))).expect_err("g is unknown");
    assert_eq!(errors.diagnostics[0].code, "unknown-name");
    assert!(check(Source::new("test.sheet", format!("f(x) = x + 1\n{plate}"))).is_ok());
}

/// Functionals may stand in functions; a value that rests on one has no range.
#[test]
fn functionals_in_functions() {
    let plate = "s(u, v) = (u, v, 0*u) on u in [0, 1], v in [0, 2]";
    let found = model(&format!("{plate}\nm(k) = k*area(s)\na = m(3)"));
    assert_eq!(found.value_named("a").expect("a").depends_on.len(), 1);
    let errors = check(Source::new("test.sheet", format!("{plate}\nA = area(s) in (0, 3)"))).expect_err("a range");
    assert!(errors.diagnostics[0].message.contains("depends on an integral"), "{}", errors.diagnostics[0].message);
}

/// Thousands of patches in one chain: plates of slope i, each of area sqrt(1 + i^2).
#[test]
fn thousands_of_patches() {
    let count = 3_000;
    let names: Vec<String> = (0..count).map(|i| format!("p{i}")).collect();
    let patches: String =
        (0..count).map(|i| format!("p{i}(u, v) = (u, v, {i}*u) on u in [0, 1], v in [0, 1]\n")).collect();
    let model = model(&format!("{patches}a = area({})", names.join(" + ")));
    let bindings = model.bind(&[]).expect("no parameters");
    let found = answer(&model, &bindings, &[], &Settings::default(), &NoProgress).expect("an area");
    let expected: f64 = (0..count).map(|i| f64::from(i).hypot(1.0)).sum();
    let component = &found[0].components[0];
    assert!((component.value - expected).abs() <= component.error, "{} {expected}", component.value);
}
