//! Closed forms against the literature (`data/surfaces.json`, with its sources): equal, and not longer. What is equal is
//! decided at random points by an evaluator that shares nothing with the simplifier but the table of functions.

// Another test uses the rest of it.
#[allow(dead_code)]
#[path = "support/double_double.rs"]
mod double_double;
mod support;

use approx::assert_relative_eq;
use double_double::Double;
use quadrel::enclosure::{Interval, enclose_one};
use quadrel::expression::{ExpressionId, Function, Graph, Node, SymbolId, evaluate, evaluate_one};
use quadrel::geometry::Surface;
use quadrel::language::{Model, PatchId, Source, check};
use quadrel::simplify::{ClosedForms, ElementForm, Fact, Form, Quantity, closed_forms, element_form, evaluation_form};
use serde_json::Value;
use support::{Formulas, Random};

/// Relative agreement at a random point: some sixty operations, and cancellation in curvatures.
const TOLERANCE: f64 = 1e-9;

fn surfaces() -> Vec<Value> {
    let data: Value = serde_json::from_str(include_str!("data/surfaces.json")).expect("valid JSON");
    data["surfaces"].as_array().expect("a list").clone()
}

fn text<'a>(entry: &'a Value, key: &str) -> &'a str {
    entry[key].as_str().expect("a text")
}

fn strings(list: &Value) -> Vec<String> {
    list.as_array().expect("a list").iter().map(|item| item.as_str().expect("a text").to_owned()).collect()
}

/// Random parameters that fulfil the assumptions, and a random point inside the region.
fn point(entry: &Value, random: &mut Random) -> Vec<(String, f64)> {
    let holds = |values: &[(String, f64)], assumption: &str| {
        let (left, right) = assumption.split_once(['<', '>']).expect("an inequality");
        let (left, right) = (value(left, values), value(right, values));
        if assumption.contains('<') { left < right } else { left > right }
    };
    let values = loop {
        let values: Vec<(String, f64)> =
            strings(&entry["params"]).into_iter().map(|name| (name, random.between(0.2, 3.2))).collect();
        if strings(&entry["assume"]).iter().all(|assumption| holds(&values, assumption)) {
            break values;
        }
    };
    let mut all = values.clone();
    for variable in ["u", "v"] {
        let ends: Vec<f64> = strings(&entry[variable]).iter().map(|end| value(end, &values)).collect();
        all.push((variable.to_owned(), ends[0] + (ends[1] - ends[0]) * random.between(0.03, 0.97)));
    }
    all
}

fn value(formula: &str, values: &[(String, f64)]) -> f64 {
    let mut formulas = Formulas::new();
    let known: Vec<_> = values.iter().map(|(name, value)| (formulas.symbol(name), *value)).collect();
    formulas.value(formula, &known)
}

/// A sheet with one patch; parameters are positive numbers that fulfil the assumptions.
fn model(entry: &Value) -> Model {
    let mut random = Random::new(3);
    let values = point(entry, &mut random);
    let mut sheet = String::new();
    for name in strings(&entry["params"]) {
        let value = values.iter().find(|(own, _)| *own == name).expect("a value").1;
        sheet += &format!("{name} = {value:.4} in (0, inf)\n");
    }
    for assumption in strings(&entry["assume"]).iter().filter(|assumption| !assumption.ends_with(">0")) {
        sheet += &format!("assume {assumption}\n");
    }
    let interval = |key: &str| strings(&entry[key]).join(", ");
    sheet += &format!(
        "surface(u, v) = ({}, {}, {}) on u in ({}), v in ({})\n",
        text(entry, "x"),
        text(entry, "y"),
        text(entry, "z"),
        interval("u"),
        interval("v")
    );
    checked(&sheet)
}

fn checked(sheet: &str) -> Model {
    check(Source::new("test.sheet", sheet)).unwrap_or_else(|errors| {
        panic!("{}", errors.diagnostics.iter().map(|d| errors.source.draw(d)).collect::<String>())
    })
}

fn closed(entry: &Value) -> ClosedForms {
    closed_forms(&model(entry), PatchId(0))
}

/// Operations of a text by the counting rule, independently of `Form`: operators, minus signs and calls.
fn operations(text: &str) -> usize {
    let call = |at: usize| text[..at].ends_with(|c: char| c.is_alphanumeric());
    text.char_indices().filter(|&(at, c)| matches!(c, '+' | '-' | '*' | '/' | '^') || (c == '(' && call(at))).count()
}

fn assert_equal(id: &str, what: &str, found: &str, expected: &str, entry: &Value) {
    let mut random = Random::new(17);
    for _ in 0..12 {
        let values = point(entry, &mut random);
        let (found_value, expected_value) = (value(found, &values), value(expected, &values));
        let error = (found_value - expected_value).abs() / expected_value.abs().max(1e-3);
        assert!(error < TOLERANCE, "{what} of {id}: {found} is {found_value}, {expected} is {expected_value}");
    }
}

#[test]
fn forms_of_the_literature_are_reached() {
    let (mut total, mut short, mut counted, mut curvatures, mut short_curvatures) = (0, 0, 0, 0, 0);
    for entry in surfaces() {
        let id = text(&entry, "id");
        let found = closed(&entry);
        assert!(
            found.failed.is_empty() && found.cut_short.is_empty(),
            "{id}: {:?} {:?}",
            found.failed,
            found.cut_short
        );
        assert!(found.conditions().is_empty() && found.unproved_signs.is_empty(), "{id}");
        let form = |quantity| found.forms[&quantity].text();

        let element = form(Quantity::Element);
        assert_eq!(operations(&element), found.forms[&Quantity::Element].operations(), "{element}");
        assert!(operations(&element) <= entry["ops"].as_u64().unwrap() as usize, "{id}: {element}");
        assert!(!element.contains("abs"), "{id}: {element}");
        assert_equal(id, "dA", &element, text(&entry, "dA"), &entry);
        total += operations(&element);

        let bars = entry["ops_EFG"].as_array().unwrap();
        for ((quantity, key), bar) in [(Quantity::E, "E"), (Quantity::F, "F"), (Quantity::G, "G")].into_iter().zip(bars)
        {
            assert_equal(id, key, &form(quantity), text(&entry, key), &entry);
            counted += 1;
            short += usize::from(operations(&form(quantity)) <= bar.as_u64().unwrap() as usize);
        }
        for (quantity, key) in [(Quantity::Gauss, "K"), (Quantity::Mean, "H")] {
            if let Some(expected) = entry[key].as_str() {
                assert_equal(id, key, &form(quantity), expected, &entry);
                if quantity == Quantity::Gauss {
                    curvatures += 1;
                    short_curvatures += usize::from(operations(&form(quantity)) <= operations(expected));
                }
            }
        }
        // The lists do not say which charts are regular; whether that is so is looked at in numbers.
        let (regular, facts): (Vec<Fact>, Vec<Fact>) = found.facts.iter().partition(|fact| **fact == Fact::Regular);
        if !regular.is_empty() {
            let mut random = Random::new(31);
            assert!(
                (0..40).all(|_| value(text(&entry, "dA"), &point(&entry, &mut random)) > 0.0),
                "{id} is not regular"
            );
        }
        let facts: Vec<String> = facts.iter().map(Fact::to_string).collect();
        let mut expected = strings(&entry["facts"]);
        expected.sort();
        let mut sorted = facts.clone();
        sorted.sort();
        assert_eq!(sorted, expected, "facts of {id}");
    }
    assert!(total <= 290, "{total} operations in all");
    assert!(100 * short >= 95 * counted, "{short} of {counted} first forms are short");
    assert!(100 * short_curvatures >= 95 * curvatures, "{short_curvatures} of {curvatures} curvatures are short");
}

#[test]
fn exact_areas_are_those_of_the_literature() {
    let (mut known, mut found) = (0, 0);
    for entry in surfaces() {
        let area = closed(&entry).area;
        let Some(expected) = entry["area"].as_str() else { continue };
        known += 1;
        if let Some(area) = area {
            found += 1;
            assert_equal(text(&entry, "id"), "the area", &area.text(), expected, &entry);
        }
    }
    assert_eq!(known, 24);
    assert!(found >= 20, "{found} of {known}");
}

fn element(sheet: &str) -> ElementForm {
    element_form(&checked(sheet), PatchId(0)).expect("a form")
}

/// Where the sign can change, or nothing says that it cannot, the absolute value stays.
#[test]
fn absolute_values_stay_where_the_sign_can_change() {
    let torus = "on u in [0, 2*pi], v in [0, 2*pi]";
    for (sheet, stays) in [
        // The sphere walked over twice.
        ("R = 2 in (0, inf)\ns(u, v) = (R*sin(u)*cos(v), R*sin(u)*sin(v), R*cos(u)) on u in [-pi, pi], v in [0, 2*pi]".to_owned(), true),
        // A spindle torus.
        (format!("R = 1 in (0, inf)\nr = 2 in (0, inf)\ns(u, v) = ((R + r*cos(u))*cos(v), (R + r*cos(u))*sin(v), r*sin(u)) {torus}"), true),
        // A double cone.
        ("s(u, v) = (u*cos(v), u*sin(v), u) on u in [-1, 1], v in [0, 2*pi]".to_owned(), true),
        // A lemon: R - r + r*cos(u) has both signs.
        ("R = 1 in (0, inf)\nr = 2 in (0, inf)\nassume r > R\ns(u, v) = ((R - r + r*cos(u))*cos(v), (R - r + r*cos(u))*sin(v), r*sin(u)) on u in [-3/2, 3/2], v in [0, 2*pi]".to_owned(), true),
        // The outer half of a torus needs no assumption.
        ("R = 1 in (0, inf)\nr = 2 in (0, inf)\ns(u, v) = ((R + r*cos(u))*cos(v), (R + r*cos(u))*sin(v), r*sin(u)) on u in [-pi/2, pi/2], v in [0, 2*pi]".to_owned(), false),
        ("R = 2 in (0, inf)\na = 1 in (0, inf)\nassume R > a\ns(u, v) = ((R + a*cos(u)*cos(3*u))*cos(v), (R + a*cos(u)*cos(3*u))*sin(v), u - u) on u in [0, 1], v in [0, 2*pi]".to_owned(), false),
        // 2 + u^2 - u > 0
        ("s(u, v) = ((2 + u^3 - u)*cos(v), (2 + u^3 - u)*sin(v), u) on u in [-1, 1], v in [0, 2*pi]".to_owned(), false),
    ] {
        let ElementForm { form, .. } = element(&sheet);
        if stays {
            assert!(form.text().contains("abs("), "{sheet}\n{}", form.text());
        } else {
            let outside = form.text().replace("abs(cos", "").replace("abs(sin", "");
            assert!(!outside.contains("abs((2") && !outside.contains("abs(R"), "{sheet}\n{}", form.text());
        }
    }
}

/// A sign that only the values of the sheet have is said to be conditional.
#[test]
fn conditions_are_named() {
    let sheet = "R = 3\nr = 1\ns(u, v) = ((R + r*cos(u))*cos(v), (R + r*cos(u))*sin(v), r*sin(u)) on u in [0, 2*pi], v in [0, 2*pi]";
    let ElementForm { form, conditions } = element(sheet);
    assert_eq!(form.text(), "r*(R + r*cos(u))");
    assert!(conditions.iter().any(|condition| condition.contains("R > r")), "{conditions:?}");
}

/// Conditions stay with every form that rests on them, whichever form of dA wins; none belongs to E, F, G and K.
#[test]
fn conditions_stay_with_their_forms() {
    let sheet = "a = 1 in (0, inf)\nf(u) = cos(a*u)*cosh(u)*(2 + cos(u))\n\
        s(u, v) = (f(u)*cos(v), f(u)*sin(v), u) on u in [0, a], v in [0, 2*pi]";
    let found = closed_forms(&checked(sheet), PatchId(0));
    for quantity in [Quantity::Normal(0), Quantity::N2, Quantity::Mean] {
        assert!(!found.forms.contains_key(&quantity) || !found.conditions_of[&quantity].is_empty(), "{quantity:?}");
    }
    assert!(!found.conditions_of.contains_key(&Quantity::Gauss) && !found.conditions_of.contains_key(&Quantity::E));
}

/// A conditional form is evaluated as its absolute value: on a spindle torus, where R + r cos u changes its sign, the
/// generated code and the kernel still give the norm of the cross product.
#[test]
fn conditional_forms_are_evaluated_without_conditions() {
    let sheet = "R = 3\nr = 1\ns(u, v) = ((R + r*cos(u))*cos(v), (R + r*cos(u))*sin(v), r*sin(u)) on u in [0, 2*pi], v in [0, 2*pi]";
    let model = checked(sheet);
    let mut graph = model.graph.clone();
    let norm = Surface::new(&mut graph, &model.patches[0]).element;
    let value = |symbol| if graph.symbol_name(symbol) == "R" { 1.0 } else { 2.0 };
    let mut own = graph.clone();
    let formula = evaluation_form(&model, PatchId(0), &mut own, norm, &value, &element(sheet)).expect("a formula");
    let [u, v] = model.patches[0].variables;
    let at = |symbol| {
        if symbol == u {
            3.0
        } else if symbol == v {
            0.7
        } else {
            value(symbol)
        }
    };
    // r |R + r cos u|
    assert_relative_eq!(evaluate_one(&own, formula, at), 2.0 * (1.0 + 2.0 * 3f64.cos()).abs(), max_relative = 1e-14);
}

/// Where the normal turns around, H = 1/R changes its sign and is not called constant.
#[test]
fn the_mean_curvature_of_a_sphere_walked_over_twice_is_not_constant() {
    let sheet = "s(t, p) = (sin(t)*cos(p), sin(t)*sin(p), cos(t)) on t in [0, 2*pi], p in [0, pi]";
    let found = closed_forms(&checked(sheet), PatchId(0));
    assert!(!found.facts.contains(&Fact::ConstantMean) && found.facts.contains(&Fact::ConstantGauss));
}

/// Poles and tips that belong to the region make a chart singular; without them, or open there, it is regular.
#[test]
fn regular_charts() {
    for (v, is_regular) in [("[0.1, 3]", true), ("(0, pi)", true), ("[0, pi)", false), ("[0.1, pi]", false)] {
        let sheet = format!("s(v, u) = (sin(v)*cos(u), sin(v)*sin(u), cos(v)) on v in {v}, u in [0, 2*pi]");
        let found = closed_forms(&checked(&sheet), PatchId(0));
        // What is not proved is not said; what is false never.
        assert!(is_regular || !found.facts.contains(&Fact::Regular), "{v}");
        assert!(v != "[0.1, 3]" || found.facts.contains(&Fact::Regular), "{v}");
    }
}

/// A curve has no area, no normal and no curvature, and nothing is claimed of it.
#[test]
fn a_degenerate_patch_is_said_to_be_one() {
    for sheet in [
        "s(u, v) = (cos(u + v), sin(u + v), u + v) on u in [0, 1], v in [0, 1]",
        "s(u, v) = (1, 2, 3 + 0*u) on u in [0, 1], v in [0, 1]",
    ] {
        let found = closed_forms(&checked(sheet), PatchId(0));
        assert!(found.is_degenerate && found.facts.is_empty(), "{sheet}");
        assert!(!found.forms.keys().any(|quantity| quantity.needs_normal()), "{sheet}");
    }
}

/// Area pi ((1 + 4 a^2 h^2)^(3/2) - 1)/(6 a^2) of a paraboloid of revolution (common handbook formula, from memory) divides by
/// a, which the range allows to be 0.
#[test]
fn an_area_says_what_must_not_be_zero() {
    let sheet =
        "a = 1 in (-5, 5)\nh = 1 in (0, inf)\ns(r, p) = (r*cos(p), r*sin(p), a*r^2) on r in [0, h], p in [0, 2*pi]";
    let found = closed_forms(&checked(sheet), PatchId(0));
    assert!(found.area.is_some());
    assert_eq!(found.area_conditions, ["a != 0"]);
}

/// More generators than the ring has room for end in a note, not in a panic.
#[test]
fn a_full_ring_is_no_panic() {
    let sheet = "a = 1 in (0, inf)\nR = 1 in (0, inf)\nf(u) = R*cos(a*u)*tanh(u)*(2 + sin(u))\n\
        s(u, v) = (f(u)*cos(v), f(u)*sin(v), u) on u in [0, a], v in [0, 2*pi]";
    assert!(closed_forms(&checked(sheet), PatchId(0)).forms.contains_key(&Quantity::E));
}

/// Long decimals act as symbols and are printed as typed.
#[test]
fn decimals_are_printed_as_typed() {
    let sheet = "s(u, v) = (6378137*cos(u)*cos(v), 6378137*cos(u)*sin(v), 6378137*sin(u)) on u in [-pi/2, pi/2], v in [0, 2*pi]";
    assert_eq!(element(sheet).form.text(), "6378137^2*cos(u)");
    let sheet = "s(u, v) = (u*cos(v), u*sin(v), 0.00669437999014*u^2) on u in [0, 1], v in [0, 2*pi]";
    assert_eq!(element(sheet).form.text(), "u*sqrt(1 + (2*0.00669437999014*u)^2)");
}

/// The tube about a curve, written with `diff`: the root over the Frenet frame goes.
#[test]
fn a_tube_by_diff_has_no_root_of_both_variables() {
    let sheet = "R = 3 in (0, inf)\nr = 1 in (0, inf)\nh = 1/2 in (0, inf)\nassume R > r\n\
        c(t) = (R*cos(t), R*sin(t), h*t)\nd1(t) = diff(c(t), t)\nb(t) = unit(cross(d1(t), diff(d1(t), t)))\n\
        n(t) = cross(b(t), unit(d1(t)))\n\
        s(v, u) = c(u) + r*(cos(v)*n(u) + sin(v)*b(u)) on v in [0, 2*pi], u in [0, 2*pi]";
    let ElementForm { form, .. } = element(sheet);
    assert!(form.operations() <= 13, "{}", form.text());
    assert!(!form.text().contains("sqrt(") || !form.text().contains("sqrt((R"), "{}", form.text());
}

/// A tube about a trefoil knot, written with `diff`: dA = r |c'| (1 - r kappa cos v) with kappa = |c' x c''|/|c'|^3 (Gray,
/// Abbena and Salamon, Modern Differential Geometry of Curves and Surfaces, 3rd ed., chapter 7, from memory).
#[test]
fn a_tube_about_a_knot_has_a_root_of_its_curve_only() {
    let model = checked(include_str!("../examples/knotted-tube.sheet"));
    let ElementForm { form, conditions } = element_form(&model, PatchId(0)).expect("a form");
    assert!(conditions.is_empty() && form.operations() < 60, "{}", form.text());
    let text = form.text();
    let roots = text.match_indices("sqrt(").map(|(at, _)| {
        let inside = &text[at + 5..];
        let end = inside.char_indices().scan(1, |depth, (place, c)| {
            *depth += i32::from(c == '(') - i32::from(c == ')');
            Some((place, *depth))
        });
        let (end, _) = end.into_iter().find(|(_, depth)| *depth == 0).expect("a closing bracket");
        inside[..end].to_owned()
    });
    assert!(roots.into_iter().all(|root| !root.contains("(v)")), "{text}");
    compare(&model, &form, "the knotted tube");
}

/// Near the edges of the region, where charts degenerate, what is evaluated in place of the norm of the cross product loses no
/// more than four times as much as that does. The truth is the norm in arithmetic of 28 digits.
#[test]
fn evaluated_forms_hold_near_the_edges() {
    let mut compared = 0;
    for entry in surfaces() {
        let model = model(&entry);
        let patch = &model.patches[0];
        let bindings = model.bind(&[]).expect("values of the sheet");
        let mut graph = model.graph.clone();
        let norm = Surface::new(&mut graph, patch).element;
        let of_parameter = |symbol| bindings.value(symbol);
        let Some(element) = element_form(&model, PatchId(0)) else { continue };
        let Some(form) = evaluation_form(&model, PatchId(0), &mut graph, norm, &of_parameter, &element) else {
            continue;
        };
        let ends = ["u", "v"].map(|variable| {
            let known: Vec<(String, f64)> =
                model.parameters.iter().map(|own| (own.name.clone(), of_parameter(own.symbol))).collect();
            let ends: Vec<f64> = strings(&entry[variable]).iter().map(|end| value(end, &known)).collect();
            [ends[0], ends[1]]
        });
        for (edge, side) in [(0, 0), (0, 1), (1, 0), (1, 1)] {
            let (mut own, mut other) = (0.0_f64, 0.0_f64);
            for share in [1e-7, 1e-6, 1e-5, 1e-4, 1e-3, 1e-2, 1e-1] {
                for across in [0.13, 0.37, 0.5, 0.71, 0.94] {
                    let mut shares = [across; 2];
                    shares[edge] = if side == 0 { share } else { 1.0 - share };
                    let point = [0, 1].map(|i| ends[i][0] + (ends[i][1] - ends[i][0]) * shares[i]);
                    let at = |symbol| match patch.variables.iter().position(|&own| own == symbol) {
                        Some(place) => point[place],
                        None => of_parameter(symbol),
                    };
                    let truth = exactly(&graph, norm, &at);
                    if !(truth.high.is_finite() && truth.high > 1e-200) {
                        continue;
                    }
                    let error =
                        |formula| ((Double::from(evaluate_one(&graph, formula, at)) - truth) / truth).high.abs();
                    own = own.max(error(form));
                    other = other.max(error(norm));
                    compared += 1;
                }
            }
            // A few roundings are no loss.
            assert!(
                own <= 4.0 * other.max(2.0 * f64::EPSILON),
                "{} edge {edge} {side}: {own:e}, {other:e}",
                entry["id"]
            );
        }
    }
    assert!(compared > 2_000, "{compared}");
}

/// Ranges of the closed form and of the norm of the cross product over small boxes overlap: both contain the truth.
#[test]
fn ranges_of_both_forms_overlap() {
    let mut bounded = 0;
    for entry in surfaces() {
        let model = model(&entry);
        let bindings = model.bind(&[]).expect("values of the sheet");
        let mut graph = model.graph.clone();
        let norm = Surface::new(&mut graph, &model.patches[0]).element;
        let Some(element) = element_form(&model, PatchId(0)) else { continue };
        let mut formulas = Formulas::new();
        let form = formulas.parse(&element.form.text());
        let known: Vec<(String, f64)> =
            model.parameters.iter().map(|own| (own.name.clone(), bindings.value(own.symbol))).collect();
        let mut random = Random::new(41);
        for _ in 0..10 {
            let box_of = ["u", "v"].map(|variable| {
                let ends: Vec<f64> = strings(&entry[variable]).iter().map(|end| value(end, &known)).collect();
                let at = ends[0] + (ends[1] - ends[0]) * random.between(0.02, 0.97);
                Interval::new(at, at + 1e-3 * (ends[1] - ends[0]))
            });
            let range_of = |name: &str| match ["u", "v"].iter().position(|own| *own == name) {
                Some(place) => box_of[place],
                None => Interval::point(known.iter().find(|(own, _)| own == name).expect("a parameter").1),
            };
            let left = enclose_one(&formulas.graph, form, |symbol| range_of(formulas.graph.symbol_name(symbol))).range;
            let right = enclose_one(&graph, norm, |symbol| range_of(graph.symbol_name(symbol))).range;
            assert!(!left.intersection(right).is_empty(), "{}: {left} {right}", entry["id"]);
            bounded += usize::from(left.is_bounded() && right.is_bounded());
        }
    }
    assert!(bounded > 300, "{bounded}");
}

/// A formula in double-double arithmetic.
fn exactly(graph: &Graph, root: ExpressionId, value_of: &dyn Fn(SymbolId) -> f64) -> Double {
    let mut values: Vec<Double> = vec![double_double::NAN; root.index() + 1];
    for id in graph.reachable(&[root]) {
        let of = |id: ExpressionId| values[id.index()];
        values[id.index()] = match graph.node(id) {
            Node::Number(number) => {
                let (top, bottom) = graph.number_value(number).to_fraction().expect("a small fraction");
                Double::from(top as f64) / Double::from(bottom as f64)
            }
            Node::Pi => Double::from(1.0).atan() * Double::from(4.0),
            Node::Symbol(symbol) => value_of(symbol).into(),
            Node::Negate(a) => -of(a),
            Node::Add(a, b) => of(a) + of(b),
            Node::Subtract(a, b) => of(a) - of(b),
            Node::Multiply(a, b) => of(a) * of(b),
            Node::Divide(a, b) => of(a) / of(b),
            Node::Power(a, b) if of(b).high.fract() == 0.0 && of(b).high.abs() < 64.0 => {
                let product = (0..of(b).high.abs() as u32).fold(Double::from(1.0), |product, _| product * of(a));
                if of(b).high < 0.0 { Double::from(1.0) / product } else { product }
            }
            Node::Power(a, b) => of(a).power(of(b)),
            Node::Call(Function::Sqrt, a) => of(a).sqrt(),
            Node::Call(Function::Abs, a) => of(a).abs(),
            Node::Call(Function::Exp, a) => of(a).exp(),
            Node::Call(Function::Log, a) => of(a).log(),
            Node::Call(Function::Sin, a) => of(a).sin(),
            Node::Call(Function::Cos, a) => of(a).cos(),
            Node::Call(Function::Tan, a) => of(a).tan(),
            Node::Call(Function::Sinh, a) => of(a).sinh(),
            Node::Call(Function::Cosh, a) => of(a).cosh(),
            Node::Call(Function::Tanh, a) => of(a).tanh(),
            Node::Call(Function::Atan, a) => of(a).atan(),
            other => panic!("{other:?} is in no surface of the list"),
        };
    }
    values[root.index()]
}

/// Patches of the kinds that people write: none wrong, none longer than the norm of the cross product. 1,000 of them with
/// QUADREL_GENERATED=1000.
#[test]
fn generated_patches() {
    let count = std::env::var("QUADREL_GENERATED").ok().and_then(|count| count.parse().ok()).unwrap_or(120);
    let mut random = Random::new(29);
    let mut shortening = Vec::new();
    for _ in 0..count {
        let sheet = generated(&mut random);
        let model = checked(&sheet);
        let raw = raw_operations(&model);
        let Some(ElementForm { form, .. }) = element_form(&model, PatchId(0)) else { continue };
        assert!(form.operations() <= raw, "{sheet}\n{}", form.text());
        compare(&model, &form, &sheet);
        shortening.push(form.operations() as f64 / raw as f64);
    }
    shortening.sort_by(f64::total_cmp);
    assert!(shortening.len() * 100 >= count * 90, "{} of {count} have a form", shortening.len());
    println!(
        "{} of {count} patches, median length {:.2} of the raw one",
        shortening.len(),
        shortening[shortening.len() / 2]
    );
}

/// One of: graphs, surfaces of revolution, sweeps, rational charts.
fn generated(random: &mut Random) -> String {
    let mut pick = |choices: &[&str]| choices[random.between(0.0, choices.len() as f64) as usize].to_owned();
    let head = "a = 2 in (0, inf)\nb = 1 in (0, inf)\nk = 1/2 in (0, inf)\nassume a > b\n";
    let f = [
        "a*u",
        "b*u^2",
        "a*sin(u)",
        "b*cos(k*u)",
        "exp(-k*u)",
        "a*cosh(u)",
        "sqrt(a^2 + u^2)",
        "b*log(1 + u)",
        "u^3/3",
    ];
    let g = ["v", "a*v^2", "b*sin(v)", "cos(2*v)", "v*a/b", "sinh(v)"];
    let body = match pick(&["graph", "revolution", "sweep", "rational", "ruled"]).as_str() {
        "graph" => format!("(u, v, {} {} {})", pick(&f), pick(&["+", "-", "*"]), pick(&g)),
        "revolution" => {
            let radius = pick(&["a + b*cos(u)", "a*cosh(u/a)", "a + u^2", "exp(u)", "a*sin(u)", "sqrt(a^2 + u^2)"]);
            format!("(({radius})*cos(v), ({radius})*sin(v), {})", pick(&f))
        }
        "sweep" => format!(
            "(a*cos(v) + u*{}, a*sin(v) + u*{}, b*v + u*{})",
            pick(&["cos(v)", "1", "sin(v)"]),
            pick(&["sin(v)", "0", "cos(v)"]),
            pick(&["k", "0", "1"])
        ),
        "rational" => format!(
            "(a*2*u/(1 + u^2 + v^2), b*2*v/(1 + u^2 + v^2), {}*(1 - u^2 - v^2)/(1 + u^2 + v^2))",
            pick(&["a", "b", "k"])
        ),
        _ => format!("(a*cos(u) - v*a*sin(u), b*sin(u) + v*b*cos(u), {}*v)", pick(&["a", "k", "1"])),
    };
    format!("{head}s(u, v) = {body} on u in (1/10, 1), v in (1/10, 1)")
}

fn raw_operations(model: &Model) -> usize {
    let mut graph = model.graph.clone();
    let patch = &model.patches[0];
    let [u, v] = patch.variables.map(|by| quadrel::calculus::differentiate_vector(&mut graph, &patch.position, by));
    let normal = quadrel::calculus::cross(&mut graph, &u, &v);
    let norm = quadrel::calculus::norm(&mut graph, &normal);
    Form::of(&graph, norm, &patch.variables, 100_000).map_or(usize::MAX, |form| form.operations())
}

/// The form against the norm from the definition at random points of the sheet's own values.
fn compare(model: &Model, form: &Form, sheet: &str) {
    let mut graph = model.graph.clone();
    let patch = &model.patches[0];
    let [tu, tv] = patch.variables.map(|by| quadrel::calculus::differentiate_vector(&mut graph, &patch.position, by));
    let roots: Vec<_> = tu.into_iter().chain(tv).collect();
    let bindings = model.bind(&[]).expect("values of the sheet");
    let mut random = Random::new(5);
    for _ in 0..6 {
        let at = [random.between(0.1, 1.0), random.between(0.1, 1.0)];
        let t = evaluate(&graph, &roots, |symbol| match patch.variables.iter().position(|&own| own == symbol) {
            Some(place) => at[place],
            None => bindings.value(symbol),
        });
        let normal = [t[1] * t[5] - t[2] * t[4], t[2] * t[3] - t[0] * t[5], t[0] * t[4] - t[1] * t[3]];
        let expected = normal.iter().map(|n| n * n).sum::<f64>().sqrt();
        let mut values: Vec<(String, f64)> = model
            .parameters
            .iter()
            .map(|parameter| (parameter.name.clone(), bindings.value(parameter.symbol)))
            .collect();
        values.extend(patch.variables.iter().zip(at).map(|(&own, x)| (graph.symbol_name(own).to_owned(), x)));
        let found = value(&form.text(), &values);
        assert!(
            (found - expected).abs() <= 1e-10 * expected.max(1e-6),
            "{sheet}\n{}: {found}, {expected}",
            form.text()
        );
    }
}

/// Read like prose: would these stand in a paper as they are?
#[test]
fn forms_on_the_page() {
    let shown = [
        "torus",
        "catenoid",
        "enneper",
        "spheroid-geodetic",
        "ellipsoid-triaxial",
        "moebius",
        "dini",
        "helical-pipe",
        "scherk",
        "paraboloid-dish",
        "dupin-cyclide",
        "kuen",
    ];
    let mut page = String::new();
    for entry in surfaces().iter().filter(|entry| shown.contains(&text(entry, "id"))) {
        let found = closed(entry);
        page += &format!("{}\n", text(entry, "id"));
        for (quantity, form) in &found.forms {
            page += &format!("  {quantity:?} = {}\n", form.text());
        }
        page +=
            &format!("  facts {:?}\n  area {}\n", found.facts, found.area.map_or("-".to_owned(), |area| area.text()));
    }
    insta::assert_snapshot!(page);
}
