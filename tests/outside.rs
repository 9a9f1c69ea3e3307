//! Checks against facts from outside the project; each names its source.

use approx::assert_relative_eq;
use quadrel::integrals::{Answer, AnswerKind, NoProgress, Settings, answer, answer_each};
use quadrel::language::{Source, check};
use quadrel::report::{Stamp, answers_json, answers_text};
use std::f64::consts::PI;

fn answers(sheet: &str) -> Vec<Answer> {
    let model = check(Source::new("test.sheet", sheet)).unwrap_or_else(|errors| {
        panic!("{}", errors.diagnostics.iter().map(|d| errors.source.draw(d)).collect::<String>())
    });
    let bindings = model.bind(&[]).unwrap_or_else(|errors| panic!("{errors}"));
    answer(&model, &bindings, &[], &Settings::default(), &NoProgress).unwrap()
}

/// All answers of a sheet, those without a value too.
fn each(sheet: &str, settings: &Settings) -> Vec<Answer> {
    let model = check(Source::new("test.sheet", sheet)).expect("a valid sheet");
    answer_each(&model, &model.bind(&[]).expect("its own parameters"), &[], settings, &NoProgress).expect("known names")
}

/// Asserts that the value of an answer is within its error of the expected one.
fn close(answer: &Answer, expected: f64) {
    let component = &answer.components[0];
    assert!(
        (component.value - expected).abs() <= component.error + 4.0 * f64::EPSILON * expected.abs(),
        "{}: {} ± {:e}, expected {expected}",
        answer.name,
        component.value,
        component.error
    );
}

/// The one answer of a sheet, component by component; each must hold the expected value within its error.
fn holds(sheet: &str, expected: &[f64]) {
    let found = answers(sheet);
    let last = found.last().unwrap();
    assert_eq!(last.kind, AnswerKind::Estimate, "{sheet}\n{:?}", last.reason);
    assert_eq!(last.components.len(), expected.len(), "{sheet}");
    for (component, &expected) in last.components.iter().zip(expected) {
        let rounding = 4.0 * f64::EPSILON * expected.abs();
        assert!(
            (component.value - expected).abs() <= component.error + rounding,
            "{sheet}\n{}: {} ± {:e}, expected {expected}",
            component.label,
            component.value,
            component.error
        );
    }
}

const SPHERE: &str = "s(u, v) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on v in [0, pi], u in [0, 2*pi]\n";
// phi_u x phi_v points inward in the order (u, v); this one points outward.
const OUTWARD: &str = "s(v, u) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on v in [0, pi], u in [0, 2*pi]\n";
const TORUS: &str = "R = 3\nr = 1\ns(u, v) = ((R + r*cos(v))*cos(u), (R + r*cos(v))*sin(u), r*sin(v)) on u in [0, 2*pi], v in [0, 2*pi]\n";

/// Handbook formulas for thin shells (from memory: any handbook of mechanics), unit mass per area.
#[test]
fn handbook_shells() {
    let r = 0.7_f64;
    let area = 4.0 * PI * r * r;
    let moment = 2.0 / 3.0 * area * r * r;
    holds(&format!("r = 0.7\n{SPHERE}a = inertia(s)"), &[moment, moment, moment, 0.0, 0.0, 0.0]);
    // Cylinder of radius r and height h, open ends: I_axis = m r^2, I_across = m (r^2/2 + h^2/12).
    let (r, h) = (0.4_f64, 1.5_f64);
    let m = 2.0 * PI * r * h;
    holds(
        "r = 0.4\nh = 1.5\ns(u, z0) = (r*cos(u), r*sin(u), z0) on u in [0, 2*pi], z0 in [0, h]\na = inertia(s)",
        &[m * (r * r / 2.0 + h * h / 12.0), m * (r * r / 2.0 + h * h / 12.0), m * r * r, 0.0, 0.0, 0.0],
    );
    // Cone without base: area pi r l, centroid a third of the height above the base, I_axis = m r^2/2.
    let (r, h) = (3.0_f64, 4.0_f64);
    let m = PI * r * 5.0;
    let cone = "r = 3\nh = 4\ns(u, t) = (r*t*cos(u), r*t*sin(u), h*(1 - t)) on u in [0, 2*pi], t in [0, 1]\n";
    holds(&format!("{cone}a = area(s)"), &[m]);
    holds(&format!("{cone}a = centroid(s)"), &[0.0, 0.0, h / 3.0]);
    holds(&format!("{cone}a = inertia(s, (0, 0, 0)).zz"), &[m * r * r / 2.0]);
    // Hemispherical shell: centroid at r/2.
    holds(
        "r = 2\ns(v, u) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on v in [0, pi/2], u in [0, 2*pi]\na = centroid(s)",
        &[0.0, 0.0, 1.0],
    );
    // Spherical cap of height h: 2 pi r h (Archimedes).
    holds(
        "r = 2\ns(v, u) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on v in [0, acos(3/4)], u in [0, 2*pi]\na = area(s)",
        &[2.0 * PI * 2.0 * 0.5],
    );
}

/// Pappus-Guldinus: a torus has area 4 pi^2 R r and volume 2 pi^2 R r^2.
#[test]
fn pappus_guldinus() {
    holds(&format!("{TORUS}a = area(s)"), &[12.0 * PI * PI]);
    holds(&format!("{TORUS}a = volume(s)"), &[6.0 * PI * PI]);
}

/// Gauss-Bonnet: the integral of K over a closed surface is 2 pi times its Euler characteristic.
#[test]
fn gauss_bonnet() {
    holds(&format!("r = 5/3\n{SPHERE}a = integral(K, s)"), &[4.0 * PI]);
    holds(&format!("{TORUS}a = integral(K, s)"), &[0.0]);
    holds(
        "s(u, v) = (cos(v)*cos(u), 3/2*cos(v)*sin(u), 9/4*sin(v)) on u in [0, 2*pi], v in [-pi/2, pi/2]\na = integral(K, s)",
        &[4.0 * PI],
    );
}

/// The sign of H follows the normal: with the outward normal a sphere of radius r has H = -1/r.
#[test]
fn mean_curvature_follows_the_normal() {
    holds(&format!("r = 2\n{OUTWARD}a = integral(H, s)"), &[-0.5 * 16.0 * PI]);
    holds(&format!("r = 2\n{OUTWARD}a = integral(H, -s)"), &[0.5 * 16.0 * PI]);
    holds(&format!("r = 2\n{SPHERE}a = integral(H^2, s)"), &[4.0 * PI]);
}

/// Divergence theorem: the flux of any field with divergence 1 is the volume.
#[test]
fn divergence_theorem() {
    let volume = 4.0 / 3.0 * PI * 2.0 * 2.5 / 3.0;
    let ellipsoid = "s(u, v) = (2*cos(v)*cos(u), 5/2*cos(v)*sin(u), sin(v)/3) on u in [0, 2*pi], v in [-pi/2, pi/2]\n";
    for field in ["(x, y, z)/3", "(x, 0, 0)", "(0, y, 0)", "(y^2, x*z, z)", "(x + sin(y), z^3, x*y)"] {
        let scale = if field == "(x, y, z)/3" { "" } else { "1*" };
        holds(&format!("{ellipsoid}a = {scale}flux({field}, s)"), &[volume]);
    }
    holds(&format!("{ellipsoid}a = volume(s)"), &[volume]);
    holds(&format!("{ellipsoid}a = volume(-s)"), &[-volume]);
    // A constant field has no flux through a closed surface.
    holds(&format!("{ellipsoid}a = flux((1, 2, 3), s)"), &[0.0]);
}

/// Ellipsoid 3, 2, 1: Legendre's formula with incomplete elliptic integrals, evaluated with mpmath at 30 digits
/// (48.8821463025820596957195457288).
#[test]
fn ellipsoid_by_elliptic_integrals() {
    holds(
        "s(u, v) = (3*sin(v)*cos(u), 2*sin(v)*sin(u), cos(v)) on v in [0, pi], u in [0, 2*pi]\na = area(s)",
        &[48.882_146_302_582_06],
    );
}

/// Geodetic Reference System 1980 (Moritz 1980, published tables): mean radii of the ellipsoid. R3, the radius of the sphere
/// of equal volume, is printed as 6371000.7900 m; R2, of equal surface, as 6371007.1810 m (its last digit is 1 too high).
#[test]
fn geodetic_constants() {
    let sheet = "a = 6378137\nf = 1/298.257222101\n\
        s(v, u) = (a*cos(v)*cos(u), a*cos(v)*sin(u), a*(1 - f)*sin(v)) on v in [-pi/2, pi/2], u in [0, 2*pi]\n";
    let radius = |question: &str| answers(&format!("{sheet}{question}"))[0].components[0].value;
    assert_relative_eq!(radius("R2 = sqrt(area(s)/(4*pi))"), 6_371_007.181_0, max_relative = 2e-11);
    assert_relative_eq!(radius("R3 = cbrt(3*abs(volume(s))/(4*pi))"), 6_371_000.790_0, max_relative = 1e-11);
}

/// Viviani's window: the part of a sphere of diameter 2a inside a cylinder through its center has the area
/// (2 pi - 4) a^2 on the upper half (Viviani 1692); Steinmetz: two crossed cylinders of radius r share 16 r^2 of surface.
#[test]
fn classical_windows() {
    holds(
        "a = 2\ns(t, rho) = (rho*cos(t), rho*sin(t), sqrt(a^2 - rho^2)) on t in [-pi/2, pi/2], rho in [0, a*cos(t)]\nw = integral(z, s)",
        // The integral of z over a piece of a sphere is its radius times the area of the projection, a disc of radius a/2.
        &[2.0 * PI],
    );
    holds(
        "r = 5/3\ns(u, y0) = (r*cos(u), y0, r*sin(u)) on u in [-pi/2, pi/2], y0 in [-r*cos(u), r*cos(u)]\na = 4*area(s)",
        &[16.0 * 25.0 / 9.0],
    );
}

/// Rigid motions, mirror images and multiplicities change nothing but what they say.
#[test]
fn moved_copies() {
    let sheet =
        format!("{TORUS}t = translate(s, (10, 0, 0))\nm = mirror(s, (1, 2, 2))\nq = rotate(s, (1, 1, 0), pi/3)\n");
    let volume = 6.0 * PI * PI;
    for chain in ["t", "m", "q"] {
        holds(&format!("{sheet}a = volume({chain})"), &[volume]);
        holds(&format!("{sheet}a = area({chain})"), &[12.0 * PI * PI]);
    }
    holds(&format!("{sheet}a = volume(2*s - t)"), &[volume]);
    holds(&format!("{sheet}a = area(2*s)"), &[24.0 * PI * PI]);
    holds(&format!("{sheet}a = centroid(t)"), &[10.0, 0.0, 0.0]);
}

/// Units: the same surface in mm and m; answers combine with correlated errors.
#[test]
fn units_and_combinations() {
    let square = |unit: &str, side: &str| {
        format!("b = {side} [{unit}]\ns(u, v) = (b*u, b*v, 0 [m]) on u in [0, 1], v in [0, 1]\na = area(s)")
    };
    holds(&square("mm", "2500"), &[6.25]);
    holds(&square("m", "2.5"), &[6.25]);
    let found = answers(&format!("{TORUS}one = area(s)/area(s)"));
    assert!((found[0].components[0].value - 1.0).abs() <= found[0].components[0].error);
    assert!(found[0].components[0].error < 1e-14, "equal integrals cancel: {:e}", found[0].components[0].error);
}

/// A surface is a surface whatever its parametrization: five charts of one sphere.
#[test]
fn rival_parametrizations() {
    let area = 4.0 * PI * 25.0 / 16.0;
    for map in [
        "s(u, v) = (r*sin(v)*cos(u), r*sin(v)*sin(u), r*cos(v)) on u in [0, 2*pi], v in [0, pi]",
        "s(u, v) = (r*sqrt(1 - v^2)*cos(u), r*sqrt(1 - v^2)*sin(u), r*v) on u in [0, 2*pi], v in [-1, 1]",
        "s(u, v) = (r*cos(u)/cosh(v), r*sin(u)/cosh(v), r*tanh(v)) on u in [0, 2*pi], v in (-inf, inf)",
        "s(u, v) = (2*r*u/(1 + u^2 + v^2), 2*r*v/(1 + u^2 + v^2), r*(u^2 + v^2 - 1)/(1 + u^2 + v^2)) on u in (-inf, inf), v in (-inf, inf)",
    ] {
        holds(&format!("r = 5/4\n{map}\na = area(s)"), &[area]);
    }
}

/// An open or one-sided surface under a flux is warned about; a closed one is not.
#[test]
fn open_and_one_sided_surfaces_are_noticed() {
    let warnings = |sheet: &str| answers(sheet)[0].warnings.join("\n");
    assert!(warnings("s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = flux((0, 0, 1), s)").contains("open"));
    let band = "s(u, v) = ((1 + v*cos(u/2))*cos(u), (1 + v*cos(u/2))*sin(u), v*sin(u/2)) on u in [0, 2*pi], v in [-1/4, 1/4]\n";
    assert!(warnings(&format!("{band}a = flux((0, 0, 1), s)")).contains("one-sided"));
    assert_eq!(warnings(&format!("{TORUS}a = volume(s)")), "");
    assert_eq!(warnings(&format!("r = 1\n{OUTWARD}a = volume(s)")), "");
}

/// What is undefined or does not exist is refused with its place.
#[test]
fn undefined_and_divergent_integrals_are_refused() {
    let failure = |sheet: &str| {
        let model = check(Source::new("test.sheet", sheet)).unwrap();
        answer(&model, &model.bind(&[]).unwrap(), &[], &Settings::default(), &NoProgress).unwrap_err()
    };
    let error = failure("s(u, v) = (u, v, sqrt(1 - u^2 - v^2)) on u in [-1, 1], v in [-1, 1]\na = area(s)");
    assert_eq!(error.code, "undefined");
    assert!(error.place.is_some(), "{error}");
    let square = "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\n";
    for (integrand, end) in [("1/u^2", "u = 0"), ("1/v^2", "v = 0"), ("(1 - v)^-1.05", "v = 1")] {
        let error = failure(&format!("{square}a = integral({integrand}, s)"));
        assert_eq!(error.code, "divergent");
        assert!(error.message.contains(end) && error.message.contains("`a`"), "{error}");
    }
    let error = failure("s(u, v) = (u, v, 0) on u in [1, inf), v in (-inf, 0]\na = integral(exp(v)/sqrt(u), s)");
    assert_eq!(error.code, "divergent");
    assert!(error.message.contains("u^-0.500 towards u = inf"), "{error}");
}

/// An integrand that is infinite at an end of its range, but integrable: the integrals of t^-1/2 and t^-1/3 over [0, 1] are 2
/// and 3/2, whichever end is singular.
#[test]
fn integrable_ends() {
    for (integrand, expected) in [("(1 - v)^-0.5", 2.0), ("(1 - u)^(-1/3)", 1.5), ("1/sqrt(v)", 2.0)] {
        let sheet = format!("s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral({integrand}, s)");
        close(&each(&sheet, &Settings::default())[0], expected);
    }
    // The tail within rounding of the end holds a fortieth of the integral, 10: no digits, but no failure either.
    let steep =
        each("s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral((1 - v)^-0.9, s)", &Settings::default());
    close(&steep[0], 10.0);
}

/// Whether an integral exists is not asserted where samples cannot tell: the integral of |z/R|^-0.999 over a sphere is
/// 2 pi R^2 times that of |t|^-0.999 over [-1, 1], 4 pi R^2/0.001, while that of 1/u does not exist.
#[test]
fn doubtful_integrals_are_unreached() {
    for (sheet, end) in [
        (
            format!("r = 1\n{OUTWARD}area0 = area(s)\na = integral(abs(z/r)^-0.999, s)"),
            "distance^-0.999 towards v = 1.57",
        ),
        (
            "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral(1/u, s)".to_owned(),
            "distance^-1.000 towards u = 0",
        ),
    ] {
        let found = each(&sheet, &Settings::default());
        let last = found.last().expect("an answer");
        assert_eq!((last.kind, &last.failure), (AnswerKind::Unreached, &None));
        let reason = last.reason.as_ref().expect("a reason");
        assert!(reason.contains(end) && reason.contains("`integral("), "{reason}");
        assert!(last.components[0].error.is_infinite());
        unbounded(std::slice::from_ref(last));
        if found.len() == 2 {
            close(&found[0], 4.0 * PI);
        }
    }
}

/// The budget is the largest number of evaluations of one patch; below one round of rules only the first look is made,
/// 9 x 9 points for each part of the region.
#[test]
fn the_budget_is_kept() {
    let sheets = [
        "s(u, v) = (u, v, exp(sin(20*u)*cos(30*v))) on u in [0, 1], v in [0, 1]\na = area(s)",
        "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]\na = integral(abs(sin(40*u*v)), s)",
        "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, u]\na = integral(sqrt(abs(u - v^2)), s)",
        "s(u, v) = (cos(u), sin(u), v) on u in [0, 2*pi], v in [0, 1]\na = integral(exp(cos(40*u))*sqrt(v), s)",
    ];
    for sheet in sheets {
        for budget in [10, 100, 1_000, 2_000, 5_000, 20_000, 300_000] {
            let found = each(sheet, &Settings { evaluations: Some(budget), relative: 1e-14, ..Settings::default() });
            let answer = &found[0];
            assert!(answer.evaluations <= budget.max(81), "{sheet}: {} for {budget}", answer.evaluations);
            if answer.kind == AnswerKind::Unreached {
                assert!(answer.reason.as_ref().is_some_and(|reason| !reason.is_empty()));
            }
            if budget < 100 {
                assert_eq!(answer.kind, AnswerKind::Unreached, "{sheet}");
                assert!(answer.reason.as_ref().is_some_and(|reason| reason.contains("budget")), "{:?}", answer.reason);
                unbounded(&found);
            }
        }
    }
}

/// A can of radius 1 and height 2: closed whatever the parametrizations of its rims, open with a lid that is not in its place.
#[test]
fn small_gaps_are_noticed() {
    let warnings = |sheet: &str| each(sheet, &Settings::default())[0].warnings.join("\n");
    let can = |lift: &str, turn: &str| {
        format!(
            "wall(u, h) = (cos(u), sin(u), h) on u in [0, 2*pi], h in [0, 2]\n\
             floor(u, t) = (t*cos(u), t*sin(u), 0) on u in [0, 2*pi], t in [0, 1]\n\
             lid(t, u) = (t*cos(u), t*sin(u), 2 + {lift}) on t in [0, 1], u in [{turn}, {turn} + 2*pi]\n\
             a = volume(wall + lid + floor)"
        )
    };
    for turn in ["0", "1", "sqrt(2)"] {
        let sound = each(&can("0", turn), &Settings::default());
        // pi r^2 h
        close(&sound[0], 2.0 * PI);
        assert_eq!(sound[0].warnings, Vec::<String>::new());
        for (lift, gap) in [("0.001", "1.000e-3"), ("1e-6", "1.000e-6"), ("1e-8", "1.0")] {
            let text = warnings(&can(lift, turn));
            assert!(text.contains("open") && text.contains(&format!("gap of {gap}")), "{turn}, {lift}: {text}");
            assert!(text.contains("`lid` at the upper end of t"), "{text}");
        }
    }
    // A half sphere in Mercator's map, with an end at infinity, and a disc below.
    let half = |lift: &str| {
        format!(
            "cap(u, w) = (cos(u)/cosh(w), sin(u)/cosh(w), tanh(w)) on u in [0, 2*pi], w in [0, inf)\n\
             disc(u, t) = (t*cos(u), t*sin(u), -{lift}) on u in [0, 2*pi], t in [0, 1]\n\
             a = volume(cap + disc)"
        )
    };
    let sound = each(&half("0"), &Settings::default());
    close(&sound[0], 2.0 / 3.0 * PI);
    assert_eq!(sound[0].warnings, Vec::<String>::new());
    assert!(warnings(&half("0.001")).contains("gap of 1.000e-3"));
    let bowl =
        "s(u, t) = (t*cos(u), t*sin(u), t^2) on u in [0, 2*pi], t in [0, inf)\na = flux((0, 0, exp(-x^2 - y^2)), s)";
    assert!(warnings(bowl).contains("runs to infinity at the upper end of t"), "{}", warnings(bowl));
}

/// An answer without a value takes no other down: area 4 pi and volume 4 pi/3 of the unit sphere (Archimedes) stand beside
/// an integrand that is undefined on one half, although they share a pass over the patch.
#[test]
fn a_failing_answer_leaves_the_others() {
    let sheet = format!(
        "r = 1\n{OUTWARD}A = area(s)\n  B = integral(sqrt(z), s)\nC = volume(s)\nD = 2*B + A\nE = integral(B*z, s)\nF = C/A\n"
    );
    let found = each(&sheet, &Settings::default());
    assert_eq!(found.iter().map(|a| a.name.as_str()).collect::<Vec<_>>(), ["A", "B", "C", "D", "E", "F"]);
    for (index, expected) in [(0, 4.0 * PI), (2, 4.0 / 3.0 * PI), (5, 1.0 / 3.0)] {
        assert_eq!(found[index].kind, AnswerKind::Estimate);
        close(&found[index], expected);
    }
    for index in [1, 3, 4] {
        let answer = &found[index];
        let failure = answer.failure.as_ref().expect("no value");
        assert_eq!((answer.kind, failure.error.code), (AnswerKind::Unreached, "undefined"));
        assert_eq!(failure.line, index + 3);
        assert!(failure.error.message.contains(&format!("`{}`", answer.name)), "{}", failure.error.message);
        let place = failure.error.place.as_ref().expect("a place");
        assert!(place.expression.starts_with("sqrt(") && place.value.is_nan(), "{place:?}");
        assert!(place.position[2] < 0.0, "{place:?}");
    }
    assert_eq!(found[1].failure.as_ref().expect("no value").column, 3);
    let source = Source::new("sheet", &sheet);
    let document = answers_json(&found, &source, &[], &Stamp::new(&sheet, Vec::new()));
    let failed = &document["answers"][1];
    assert!(failed["value"].is_null() && failed["error"].is_null() && failed["kind"] == "unreached", "{failed}");
    assert!(failed["reason"].as_str().expect("a reason").contains("sqrt("));
    let errors = document["errors"].as_array().expect("errors");
    assert_eq!(errors.iter().map(|e| e["line"].as_u64().expect("a line")).collect::<Vec<_>>(), [4, 6, 7]);
    assert!(answers_json(&found[..1], &source, &[], &Stamp::new(&sheet, Vec::new()))["errors"].is_null());
    let text = answers_text(&found);
    assert!(text.contains("\nB has no value") && text.contains("A = 12.566370"), "{text}");
}

/// sqrt(r^2 - x^2 - y^2) is |z| on the sphere, but rounding makes its argument negative beside the equator. The integral of
/// |z| is the radius times twice the disc below: 2 pi r^3.
#[test]
fn rounding_that_leaves_the_domain_gets_a_hint() {
    let found = each(&format!("r = 1\n{OUTWARD}a = integral(sqrt(r^2 - x^2 - y^2), s)"), &Settings::default());
    if let Some(failure) = &found[0].failure {
        let hint = failure.error.hint.as_ref().expect("a hint");
        assert!(hint.contains("sqrt(max(0, "), "{hint}");
        assert!(failure.error.message.contains("`sqrt("), "{}", failure.error.message);
    } else {
        close(&found[0], 2.0 * PI);
    }
    let found = each(&format!("r = 1\n{OUTWARD}a = integral(sqrt(max(0, r^2 - x^2 - y^2)), s)"), &Settings::default());
    close(&found[0], 2.0 * PI);
}

/// A surface without area has no centroid; a quotient by an integral that is zero within its error has no error bound.
#[test]
fn what_has_no_bound_is_not_shown_with_one() {
    let found = each("s(u, v) = (u, u, u) on u in [0, 1], v in [0, 1]\na = centroid(s)", &Settings::default());
    assert_eq!(found[0].failure.as_ref().expect("no centroid").error.code, "undefined");
    unbounded(&found);
    let found = each(&format!("r = 1\n{OUTWARD}a = area(s)/flux((1, 2, 3), s)"), &Settings::default());
    assert_eq!(found[0].kind, AnswerKind::Unreached);
    unbounded(&found);
}

/// Asserts that no error is shown or stated.
fn unbounded(found: &[Answer]) {
    for answer in found {
        let text = answers_text(std::slice::from_ref(answer));
        assert!(!text.contains("inf") && !text.contains("NaN"), "{text}");
        assert!(
            answers_json(found, &Source::new("", ""), &[], &Stamp::new("", Vec::new()))["answers"][0]["error"]
                .is_null()
        );
    }
}

/// Ribs whose number is a multiple of two node counts of the trapezoid rule (253 = 11*23, 1081 = 23*47) must not look
/// constant. The mean of exp(cos x) over a period is the modified Bessel function I0(1), Abramowitz & Stegun 9.6.16; its
/// value from mpmath 1.3, besseli(0, 1).
#[test]
fn ribs_that_fall_between_the_nodes() {
    for ribs in [23, 253, 506, 759, 1081] {
        let plate =
            format!("s(u, v) = (u, v, 0*u) on u in [0, 1], v in [0, 1]\na = integral(exp(cos(2*pi*{ribs}*x)), s)");
        holds(&plate, &[1.266_065_877_752_008_4]);
        let checks =
            format!("s(u, v) = (u, v, 0*u) on u in [0, 1], v in [0, 1]\na = integral(cos(2*pi*{ribs}*x)^2, s)");
        holds(&checks, &[0.5]);
    }
}

/// An integral that does not exist leaves the sound ones beside it: over the plane, that of exp(-r^2) is pi, that of
/// 1/(1 + r^2)^2 is pi; the area is infinite.
#[test]
fn an_infinite_area_leaves_the_others() {
    let sheet = "gau(x, y) = (x, y, 0) on x in [-inf, inf], y in [-inf, inf]\nG = integral(exp(-(x^2 + y^2)), gau)\n\
        H1 = integral(1/(1 + x^2 + y^2)^2, gau)\nwhole = area(gau)";
    let found = each(sheet, &Settings::default());
    close(&found[0], PI);
    assert!(found[1].failure.is_none());
    assert!((found[1].components[0].value - PI).abs() <= found[1].components[0].error);
    assert!(found[2].failure.is_some());
}
