//! Tangents to curvatures against the closed forms of the literature (`data/surfaces.json`, with its sources), and the
//! densities of surface integrals against f |N| computed in numbers.

mod support;

use quadrel::expression::{ExpressionId, Function, Graph, SymbolId, evaluate, evaluate_one};
use quadrel::geometry::{Surface, at_point, density, flux_density, volume_density};
use quadrel::language::{Bound, Dimension, Interval, Patch, Span, SurfaceSymbols};
use serde_json::Value;
use support::{Formulas, Random};

/// Relative to the larger of 1 and the value. Everything here is well conditioned at points inside the regions; the
/// second derivatives of the most involved map (a helical pipe in trigonometric functions) lose about three digits.
const TOLERANCE: f64 = 2e-12;

struct Case {
    formulas: Formulas,
    surface: Surface,
    entry: Value,
}

impl Case {
    fn new(entry: &Value) -> Self {
        let mut formulas = Formulas::new();
        let position = ["x", "y", "z"].map(|axis| formulas.parse(text(entry, axis)));
        let variables = ["u", "v"].map(|name| formulas.symbol(name));
        let surface = Surface::from_map(&mut formulas.graph, position, variables, false);
        Self { formulas, surface, entry: entry.clone() }
    }

    /// Admissible parameters and a point inside the region, by rejection; the closed forms may be singular at the edge.
    fn point(&mut self, random: &mut Random) -> Vec<(SymbolId, f64)> {
        loop {
            let names = strings(&self.entry["params"]);
            let mut values: Vec<(SymbolId, f64)> =
                names.iter().map(|name| (self.formulas.symbol(name), random.between(0.4, 2.0))).collect();
            let holds = strings(&self.entry["assume"]).iter().all(|assumption| {
                let at = assumption.find(['<', '>']).expect("a strict inequality");
                let left = self.formulas.value(&assumption[..at], &values);
                let right = self.formulas.value(&assumption[at + 1..], &values);
                if assumption[at..].starts_with('<') { left < right } else { left > right }
            });
            if !holds {
                continue;
            }
            for name in ["u", "v"] {
                let ends = strings(&self.entry[name]);
                let [low, high] = [0, 1].map(|end| self.formulas.value(&ends[end], &values));
                let inside = random.between(0.04, 0.96);
                values.push((self.formulas.symbol(name), low + inside * (high - low)));
            }
            return values;
        }
    }

    fn check(&mut self, name: &str, computed: ExpressionId, random: &mut Random) {
        let Some(expected) = self.entry[name].as_str().map(str::to_owned) else { return };
        let expected = self.formulas.parse(&expected);
        for _ in 0..20 {
            let point = self.point(random);
            let values = evaluate(&self.formulas.graph, &[computed, expected], |symbol| lookup(&point, symbol));
            let error = (values[0] - values[1]).abs() / values[1].abs().max(1.0);
            let id = text(&self.entry, "id");
            assert!(error <= TOLERANCE, "{name} of {id}: {} instead of {} ({error:.1e})", values[0], values[1]);
        }
    }
}

fn text<'a>(entry: &'a Value, key: &str) -> &'a str {
    entry[key].as_str().expect("a text")
}

fn strings(list: &Value) -> Vec<String> {
    list.as_array().expect("a list").iter().map(|item| item.as_str().expect("a text").to_owned()).collect()
}

fn lookup(point: &[(SymbolId, f64)], symbol: SymbolId) -> f64 {
    point.iter().find(|(known, _)| *known == symbol).map_or(f64::NAN, |(_, value)| *value)
}

fn surfaces() -> Vec<Value> {
    let data: Value = serde_json::from_str(include_str!("data/surfaces.json")).expect("valid JSON");
    data["surfaces"].as_array().expect("a list").clone()
}

fn case(id: &str) -> Case {
    Case::new(surfaces().iter().find(|entry| entry["id"] == id).expect("a known surface"))
}

#[test]
fn fundamental_forms_and_curvatures_are_those_of_the_literature() {
    let mut random = Random::new(7);
    let mut second_forms = 0;
    for entry in surfaces() {
        let mut case = Case::new(&entry);
        let graph = &mut case.formulas.graph;
        let first = case.surface.first_form(graph);
        let second = case.surface.second_form(graph);
        let gauss = case.surface.gauss_curvature(graph);
        let mean = case.surface.mean_curvature(graph);
        case.check("E", first.e, &mut random);
        case.check("F", first.f, &mut random);
        case.check("G", first.g, &mut random);
        case.check("dA", case.surface.element, &mut random);
        case.check("L", second.l, &mut random);
        case.check("M", second.m, &mut random);
        case.check("N", second.n, &mut random);
        case.check("K", gauss, &mut random);
        case.check("H", mean, &mut random);
        second_forms += usize::from(entry["L"].is_string());
    }
    assert_eq!((surfaces().len(), second_forms), (36, 10));
}

#[test]
fn the_unit_normal_is_perpendicular_and_right_handed() {
    let mut random = Random::new(11);
    for entry in surfaces() {
        let mut case = Case::new(&entry);
        let normal = case.surface.unit_normal(&mut case.formulas.graph);
        let [tu, tv] = case.surface.tangents;
        let roots: Vec<ExpressionId> = normal.into_iter().chain(tu).chain(tv).collect();
        for _ in 0..5 {
            let point = case.point(&mut random);
            let values = evaluate(&case.formulas.graph, &roots, |symbol| lookup(&point, symbol));
            let [n, a, b] = [0, 3, 6].map(|start| [values[start], values[start + 1], values[start + 2]]);
            let dot = |p: [f64; 3], q: [f64; 3]| p[0] * q[0] + p[1] * q[1] + p[2] * q[2];
            let cross = [a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]];
            assert!((dot(n, n) - 1.0).abs() < 1e-14);
            assert!(dot(n, a).abs() < 1e-13 * dot(a, a).sqrt() && dot(n, b).abs() < 1e-13 * dot(b, b).sqrt());
            assert!(dot(n, cross) > 0.0);
        }
    }
}

/// A mirror image that keeps its side: N and H change their sign, K and dA do not.
#[test]
fn orientation_turns_the_normal_around() {
    let mut formulas = Formulas::new();
    let position = ["sin(u)*cos(v)", "sin(u)*sin(v)", "cos(u)"].map(|part| formulas.parse(part));
    let variables = ["u", "v"].map(|name| formulas.symbol(name));
    let zero = formulas.parse("0");
    let interval = Interval {
        lower: Bound::Finite(zero),
        upper: Bound::Finite(zero),
        lower_closed: true,
        upper_closed: true,
        span: Span::default(),
    };
    let patch = Patch {
        name: "sphere".to_owned(),
        named: true,
        position,
        variables,
        variable_dimensions: [Dimension::NONE; 2],
        intervals: [interval.clone(), interval],
        trim: None,
        orientation: 1,
        dimension: Dimension::NONE,
        span: Span::default(),
    };
    let mirrored = Patch { orientation: -1, ..patch.clone() };
    let graph = &mut formulas.graph;
    let at = |graph: &Graph, root| evaluate_one(graph, root, |symbol| if symbol == variables[0] { 0.7 } else { 0.3 });
    let [outward, inward] = [patch, mirrored].map(|patch| Surface::new(graph, &patch));
    // The unit sphere: H = -1 for the outward normal, K = 1.
    for (surface, sign) in [(&outward, 1.0), (&inward, -1.0)] {
        let (mean, gauss) = (surface.mean_curvature(graph), surface.gauss_curvature(graph));
        assert!((at(graph, mean) + sign).abs() < 1e-14);
        assert!((at(graph, gauss) - 1.0).abs() < 1e-14);
        // n is the position
        assert!((at(graph, surface.normal[2]) - sign * 0.7_f64.cos() * 0.7_f64.sin()).abs() < 1e-15);
        let volume = volume_density(graph, surface);
        assert!((at(graph, volume) - sign * 0.7_f64.sin() / 3.0).abs() < 1e-15);
    }
    assert_eq!(outward.element, inward.element);
}

fn surface_symbols(formulas: &mut Formulas) -> SurfaceSymbols {
    SurfaceSymbols {
        position: ["x", "y", "z"].map(|name| formulas.symbol(name)),
        unit_normal: ["nx", "ny", "nz"].map(|name| formulas.symbol(name)),
        gauss_curvature: formulas.symbol("K"),
        mean_curvature: formulas.symbol("H"),
    }
}

/// The density of an integrand is the integrand with all symbols replaced, times |N|, however it is built.
#[test]
fn densities_are_the_integrand_times_the_element() {
    let integrands = [
        "1",
        "x*y + z^2",
        "nz",
        "x*nx + 2*y*ny - z*nz + 3",
        "(1 + nz)*x/(2 + y^2)",
        "-(nx - u*ny)",
        "nz^2",
        "nx*ny + 1",
        "abs(nz)",
        "sign(nx) + 2",
        "max(nz, 0)",
        "nz/(2 + nx)",
        "K",
        "H",
        "H^2",
        "H*H - K",
        "x*K + 2*H - 3*nz + 1",
        "(H - 1/2)^2",
        "(1 - 2*H)*(3 + H)",
        "H*nx",
        "K*H",
        "sqrt(H^2 + 1)",
        "H^3",
    ];
    let mut random = Random::new(5);
    for id in ["torus", "ellipsoid-triaxial", "hypar", "helical-pipe"] {
        let mut case = case(id);
        let symbols = surface_symbols(&mut case.formulas);
        for integrand in integrands {
            let formula = case.formulas.parse(integrand);
            let graph = &mut case.formulas.graph;
            let built = density(graph, &case.surface, &symbols, formula);
            let plain = at_point(graph, &case.surface, &symbols, &[formula])[0];
            for _ in 0..10 {
                let point = case.point(&mut random);
                let roots = [built, plain, case.surface.element];
                let values = evaluate(&case.formulas.graph, &roots, |symbol| lookup(&point, symbol));
                let expected = values[1] * values[2];
                let error = (values[0] - expected).abs() / expected.abs().max(1.0);
                assert!(error <= 1e-12, "{integrand} over {id}: {} instead of {expected}", values[0]);
            }
        }
    }
}

/// A condition on the normal makes an integrand piecewise, not affine: its branches must not be mixed up.
#[test]
fn conditions_on_the_normal_are_kept() {
    let mut case = case("sphere-colatitude");
    let symbols = surface_symbols(&mut case.formulas);
    let nz = case.formulas.parse("nz");
    let graph = &mut case.formulas.graph;
    let zero = graph.integer(0);
    let (one, five) = (graph.integer(1), graph.integer(5));
    let below = graph.less(nz, zero);
    let piecewise = graph.select(below, one, five);
    let built = density(graph, &case.surface, &symbols, piecewise);
    for (u, expected) in [(0.5, 5.0), (2.5, 1.0)] {
        let [su, sv, sr] = ["u", "v", "R"].map(|name| case.formulas.symbol(name));
        let point = [(su, u), (sv, 1.0), (sr, 2.0)];
        let value = evaluate_one(&case.formulas.graph, built, |symbol| lookup(&point, symbol));
        // dA = R^2 sin(u)
        assert!((value - expected * 4.0 * f64::sin(u)).abs() < 1e-13);
    }
}

/// At the pole of a sphere N = 0: what is linear in the normal is 0 there, where n alone is undefined.
#[test]
fn linear_densities_are_defined_where_the_map_is_not_regular() {
    let mut case = case("sphere-colatitude");
    let symbols = surface_symbols(&mut case.formulas);
    let field = ["1", "x", "z + 1"].map(|part| case.formulas.parse(part));
    let graph = &mut case.formulas.graph;
    let flux = flux_density(graph, &case.surface, &symbols, &field);
    let volume = volume_density(graph, &case.surface);
    let normal = case.surface.unit_normal(graph)[2];
    let [su, sv, sr] = ["u", "v", "R"].map(|name| case.formulas.symbol(name));
    let point = [(su, 0.0), (sv, 1.0), (sr, 2.0)];
    let values = evaluate(&case.formulas.graph, &[flux, volume, normal], |symbol| lookup(&point, symbol));
    assert_eq!(values[..2], [0.0, 0.0]);
    assert!(values[2].is_nan());
}

/// n dA is N du dv itself, not a quotient that is multiplied out again.
#[test]
fn the_normal_density_is_the_normal() {
    let mut case = case("torus");
    let symbols = surface_symbols(&mut case.formulas);
    for (axis, name) in ["nx", "ny", "nz"].into_iter().enumerate() {
        let component = case.formulas.parse(name);
        let built = density(&mut case.formulas.graph, &case.surface, &symbols, component);
        assert_eq!(built, case.surface.normal[axis]);
    }
}

/// The element is a norm, not sqrt(EG - F^2): for a sheared plane the latter loses every digit.
#[test]
fn the_element_does_not_cancel() {
    let mut formulas = Formulas::new();
    // (u + v, 1e-9 v, 0): E = 1, F = 1, G = 1 + 1e-18, dA = 1e-9 exactly
    let position = ["u + v", "v/10^9", "0"].map(|part| formulas.parse(part));
    let variables = ["u", "v"].map(|name| formulas.symbol(name));
    let surface = Surface::from_map(&mut formulas.graph, position, variables, false);
    assert_eq!(evaluate_one(&formulas.graph, surface.element, |_| 0.5), 1e-9);
}

/// Where N has a single component, |N| is its absolute value: no square root, and no squares that could overflow.
#[test]
fn flat_maps_keep_short_elements() {
    let mut formulas = Formulas::new();
    let position = ["u*cos(v)", "u*sin(v)", "0"].map(|part| formulas.parse(part));
    let variables = ["u", "v"].map(|name| formulas.symbol(name));
    let surface = Surface::from_map(&mut formulas.graph, position, variables, false);
    let expected = formulas.graph.call(Function::Abs, surface.normal[2]);
    assert_eq!(surface.element, expected);
}

/// Shared factors of the tangents stand outside the root, so that the zero at a pole is a plain factor.
#[test]
fn shared_factors_stand_before_the_root() {
    let case = case("sphere-colatitude");
    let shown = quadrel::expression::print(&case.formulas.graph, case.surface.element);
    assert!(shown.starts_with("R^2*abs(sin(u))*sqrt("), "{shown}");
    let inside = &shown[shown.find("sqrt(").expect("a root")..];
    assert!(!inside.contains('R'), "{shown}");
}

/// H keeps its sign where the shared factor g of N = g a is negative: a sphere with colatitude from -pi to 0 has its
/// normal inward, so H = 1/R.
#[test]
fn a_negative_shared_factor_turns_the_mean_curvature() {
    let mut case = case("sphere-colatitude");
    let symbols = surface_symbols(&mut case.formulas);
    let [h, k] = ["H", "K"].map(|name| case.formulas.parse(name));
    let graph = &mut case.formulas.graph;
    let mean = case.surface.mean_curvature(graph);
    let [mean_density, gauss_density] = [h, k].map(|symbol| density(graph, &case.surface, &symbols, symbol));
    let [su, sv, sr] = ["u", "v", "R"].map(|name| case.formulas.symbol(name));
    let point = [(su, -0.8), (sv, 1.0), (sr, 4.0)];
    let values = evaluate(&case.formulas.graph, &[mean, mean_density, gauss_density], |s| lookup(&point, s));
    // dA = R^2 |sin(u)|
    for (value, expected) in values.iter().zip([0.25, 4.0 * 0.8_f64.sin(), 0.8_f64.sin()]) {
        assert!((value - expected).abs() < 1e-14, "{value} instead of {expected}");
    }
}
