//! Many kinks: found and split, or not split and then with an error that covers them. Exact values by hand.

use quadrel::integrals::{Answer, AnswerKind, NoProgress, Settings, answer};
use quadrel::language::{Source, check};
use std::f64::consts::PI;

fn run(sheet: &str, relative: f64) -> Answer {
    let model = check(Source::new("kinks.sheet", sheet)).expect("a valid sheet");
    let bindings = model.bind(&[]).expect("no parameters");
    let settings = Settings { relative, ..Settings::default() };
    answer(&model, &bindings, &["q".to_owned()], &settings, &NoProgress).expect("an answer").remove(0)
}

/// Asserts that the error covers the truth, at coarse and fine tolerances, and returns the finest kind.
fn honest(sheet: &str, truth: f64) -> AnswerKind {
    honest_at(&[1e-2, 1e-3, 1e-4, 1e-6, 1e-9], sheet, truth)
}

fn honest_at(tolerances: &[f64], sheet: &str, truth: f64) -> AnswerKind {
    let mut kind = AnswerKind::Unreached;
    for &relative in tolerances {
        let found = run(sheet, relative);
        let component = &found.components[0];
        // The exact value is rounded to a double as well.
        let apart = (component.value - truth).abs() - 4.0 * f64::EPSILON * truth.abs();
        assert!(apart <= component.error, "at {relative}: {} ± {} is not {truth}", component.value, component.error);
        kind = found.kind;
    }
    kind
}

/// On a cylinder of radius 1 and height 1, dA = du dv with u in [0, 2 pi]. The integral of |u - c| over [0, L] is
/// (c^2 + (L - c)^2)/2.
#[test]
fn sixty_kinks_along_a_cylinder() {
    let length = std::f64::consts::TAU;
    let truth: f64 = (1..=60).map(|i| f64::from(i) / 61.0).map(|c| 0.5 * (c * c + (length - c).powi(2))).sum();
    let sheet = "p(u, v) = (cos(u), sin(u), v) on u in [0, 2*pi], v in [0, 1]
q = integral(sum(i in 1..60, abs(u - i/61)), p)";
    assert_eq!(honest(sheet, truth), AnswerKind::Estimate);
}

/// Over the unit square, with s = u + v of density 1 - |1 - s| on [0, 2]: the integral of |s - c| for c <= 1 is
/// (1 - c) + c^3/3, because E(s) = 1 and E|s - c| = E(s) - c + 2 E(max(c - s, 0)) with E(max(c - s, 0)) = c^3/6; for
/// c > 1 by symmetry with 2 - c.
#[test]
fn sixty_kinks_across_the_region() {
    let one = |c: f64| if c <= 1.0 { 1.0 - c + c.powi(3) / 3.0 } else { c - 1.0 + (2.0 - c).powi(3) / 3.0 };
    let truth: f64 = (1..=60).map(|i| one(f64::from(i) / 31.0)).sum();
    let sheet = "p(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]
q = integral(sum(i in 1..60, abs(u + v - i/31)), p)";
    honest(sheet, truth);
}

/// Circles within the quarter of the unit disc, in the square: with r^2 = u^2 + v^2, the integral of r^2 - a^2 over the
/// square is 2/3 - a^2, and the part inside the circle of radius a counts twice with the other sign: a quarter disc
/// holds pi a^4/8 of r^2 and pi a^4/4 of a^2.
#[test]
fn kinks_on_circles() {
    let one = |a: f64| 2.0 / 3.0 - a * a + std::f64::consts::PI * a.powi(4) / 4.0;
    let truth: f64 = (1..=30).map(|i| one(f64::from(i) / 31.0)).sum();
    let sheet = "p(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]
q = integral(sum(i in 1..30, abs(u^2 + v^2 - (i/31)^2)), p)";
    honest(sheet, truth);
}

/// |sin(200 u)| has 199 kinks inside from one formula: each half wave holds 2/200, and u in [0, pi] holds 200 of them.
#[test]
fn many_kinks_of_one_formula() {
    let sheet = "p(u, v) = (u, v, 0) on u in [0, pi], v in [0, 1]
q = integral(abs(sin(200*u)), p)";
    honest(sheet, 2.0);
}

/// More conditions than can be followed on every line: the part of the unit square above all lines v = u i/40, i up to 40,
/// is the triangle above v = u.
#[test]
fn a_trim_of_many_conditions() {
    let conditions: Vec<String> = (1..=40).map(|i| format!("v > u*{i}/40")).collect();
    let sheet = format!(
        "p(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1] where {}
q = area(p)",
        conditions.join(" and ")
    );
    honest(&sheet, 0.5);
}

/// Two thousand kinks end by the budget or with the tolerance reached, never with an error that is too small.
#[test]
fn two_thousand_kinks() {
    let truth: f64 = (1..=2000).map(|i| f64::from(i) / 2001.0).map(|c| 0.5 * (c * c + (1.0 - c) * (1.0 - c))).sum();
    let sheet = "p(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]
q = integral(sum(i in 1..2000, abs(u - i/2001)), p)";
    let found = run(sheet, 1e-6);
    let component = &found.components[0];
    assert!((component.value - truth).abs() <= component.error, "{} ± {}", component.value, component.error);
}

/// Hard patches share a stock of work, so that many of them end too: the later ones get fewer evaluations, and every error
/// still covers the truth. With s = u v of density -log(s), the integral is that of -log(s) sin(1000 s) |sin(500 s)| over
/// [0, 1]; its value by mpmath 1.3 at 25 digits, split at the zeros of both sines.
#[test]
fn hard_patches_share_a_stock() {
    let truth = 0.004_147_440_926_811_073;
    let sheet: String = (0..6)
        .map(|i| {
            format!(
                "p{i}(u, v) = (u, v, {i}) on u in [0, 1], v in [0, 1]
q{i} = integral(sin(1000*u*v)*abs(sin(500*u*v)), p{i})
"
            )
        })
        .collect();
    let model = check(Source::new("kinks.sheet", sheet)).expect("a valid sheet");
    let bindings = model.bind(&[]).expect("no parameters");
    let found = answer(&model, &bindings, &[], &Settings::default(), &NoProgress).expect("answers");
    assert_eq!(found.len(), 6);
    for answer in &found {
        let component = &answer.components[0];
        assert!((component.value - truth).abs() <= component.error, "{} ± {}", component.value, component.error);
    }
    assert!(found[5].evaluations < found[0].evaluations, "the stock is shared");
}

/// Small holes in a flange of radii 0.3 and 0.5, on a circle of radius 0.42: the area is pi (0.5^2 - 0.3^2) less pi r^2 for each.
#[test]
fn small_holes() {
    let flange = "ring(s, u) = (s*cos(u), s*sin(u), 0) on s in [0.3, 0.5], u in [0, 2*pi]";
    for (radius, angles) in [(0.0005, &[0.3, 1.3][..]), (0.004, &[0.3, 1.3]), (0.004, &[0.3, 1.3, 2.3, 3.3, 4.3])] {
        let squares =
            angles.iter().map(|angle| format!("(x - 0.42*cos({angle}))^2 + (y - 0.42*sin({angle}))^2 > {radius}^2"));
        let distances =
            angles.iter().map(|angle| format!("hypot(x - 0.42*cos({angle}), y - 0.42*sin({angle})) > {radius}"));
        let truth = PI * (0.16 - angles.len() as f64 * radius * radius);
        for holes in [squares.collect::<Vec<_>>(), distances.collect()] {
            let sheet = format!("{flange}\nbored = ring where {}\nq = area(bored)", holes.join(" and "));
            honest_at(&[1e-3, 1e-9], &sheet, truth);
        }
    }
}

/// Jumps and bumps on small places of the unit square, alone and in one pass with each other: areas and volumes of discs,
/// cones and strips by hand.
#[test]
fn small_places() {
    let square = "sq(x, y) = (x, y, 0) on x in [0, 1], y in [0, 1]";
    let (jump, cone) =
        ("if(hypot(x - 0.7123, y - 0.2212) < 0.003, 1000, 0)", "max(0, 0.003 - hypot(x - 0.7123, y - 0.2212))");
    let strip = "if(abs(x - 0.4567) < 1e-4, 1, 0)";
    let jump_truth = 1000.0 * PI * 9e-6;
    let at = |question: &str, truth| honest_at(&[1e-3, 1e-9], &format!("{square}\nq = {question}"), truth);
    assert_eq!(at(&format!("integral({jump}, sq)"), jump_truth), AnswerKind::Estimate);
    at(&format!("integral({cone}, sq)"), PI * 2.7e-8 / 3.0);
    at(&format!("integral({strip}, sq)"), 2e-4);
    let waves = "integral(sum(i in 1..20, abs(sin(i*x*50 + y))), sq)";
    at(&format!("integral({strip}, sq) + 0*{waves}"), 2e-4);
    at(&format!("integral({jump}, sq) + 0*{waves}"), jump_truth);
}
