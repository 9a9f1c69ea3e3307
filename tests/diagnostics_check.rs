//! What the checker says about sheets that read well but mean nothing: each drawn as a user sees it.

use quadrel::language::{SheetErrors, Source, check};

/// The drawn diagnostics of a sheet that is refused.
fn refused(sheet: &str) -> String {
    match check(Source::new("test.sheet", sheet)) {
        Err(errors) => drawn(&errors),
        Ok(model) => match model.bind(&[]) {
            Err(errors) => drawn(&errors),
            Ok(_) => panic!("accepted:\n{sheet}"),
        },
    }
}

fn drawn(errors: &SheetErrors) -> String {
    errors.diagnostics.iter().map(|diagnostic| errors.source.draw(diagnostic)).collect()
}

const SQUARE: &str = "s(u, v) = (u, v, 0) on u in [0, 1], v in [0, 1]";
const PLATE: &str = "b = 2 [m]\ns(u, v) = (b*u, b*v, 0) on u in [0, 1], v in [0, 1]";

fn all(cases: &[&str]) -> String {
    cases.iter().map(|case| format!("{}\n", refused(case))).collect()
}

#[test]
fn names() {
    insta::assert_snapshot!(all(&[
        "a = b + 1",
        "radius = 2\narea_1 = pi*radios^2",
        "a = ln(2)",
        "a = 1\na = 2",
        "a = b\nb = c\nc = a",
        "f(x) = f(x - 1)",
        "f(x, x) = x",
        "a = x + 1",
        "a = inf",
        "f(s) = s\na = f",
        "a = 2\nb = a(3)",
        "f(s) = s\nb = f(1, 2)",
        "a = sin(1, 2)",
        "a = max(1)",
        "a = bessel_j(2, 1)",
        "a = bessel_j(1/2, 1)",
    ]));
}

#[test]
fn kinds() {
    insta::assert_snapshot!(all(&[
        "a = (1, 2)",
        "a = (1, 2, 3) + 1",
        "a = (1, 2, 3)*(1, 2, 3)",
        "a = sin((1, 2, 3))",
        "a = abs((1, 2, 3))",
        "a = norm(3)",
        "a = 3\nb = a.x",
        "a = (1, 2, 3)\nb = a.w",
        "a = 1 < 2",
        "a = if(1, 2, 3)",
        "a = if(1 < 2, 3, (1, 2, 3))",
        "a = 1 and 2",
        "a = sum(i in 1..pi, i)",
        "a = sum(i in 1..100000, i)",
        "a = (-8)^(1/3)",
        "a = 1/0",
        "a = diff(2, 3)",
        "a = 2\nb = 3*a\nc = diff(b^2, b)",
    ]));
}

#[test]
fn units() {
    insta::assert_snapshot!(all(&[
        "a = 1 [m] + 1 [s]",
        "a = sin(1 [m])",
        "a = 2^(1 [m])",
        "k = 2\na = (3 [m])^k",
        "a = 1 [m] < 1 [s]",
        "a = max(1 [m], 2 [kg])",
        "a = (1 [m], 2 [s], 3 [m])",
        "a = 1 [m] as [s]",
        "a = 1 [m] in [0 [s], 1 [s]]",
        "s(u, v) = (u, v, 0) on u in [0, 1 [m]], v in [0, 1]",
        "a = 1 [m]\nb = if(a > 0, a, 2)",
        "s(u, v) = (u, v, 0) on u in [0 [m], 1 [s]], v in [0, 1]",
    ]));
}

#[test]
fn surfaces() {
    insta::assert_snapshot!(all(&[
        "s(u, v) = (u, v, 0) on u in [0, 1]",
        "s(u, v) = (u, v, 0) on u in [0, 1], w in [0, 1]",
        "s(u, v) = (u, v, 0) on u in [0, 1], u in [0, 1]",
        "s(u, v) = (u, v, 0) on u in [0, v], v in [0, u]",
        "s(u, v) = (u, v, 0) on u in [1, 0], v in [0, 1]",
        "a = 2\ns(u, v) = (u, v, 0) on u in [a, 1], v in [0, 1]",
        "s(u, v) = u*v on u in [0, 1], v in [0, 1]",
        "s(u) = (u, u, 0) on u in [0, 1]",
        "f(u, v) = (u, v, 0)\na = area(f)",
        "a = area(3)",
        "a = 2 on u in [0, 1], v in [0, 1]",
        &format!("{SQUARE}\nt = 2*s + 1"),
        &format!("{SQUARE}\nt = 1.5*s"),
        &format!("{SQUARE}\nt = s - s\na = area(t)"),
        &format!("{PLATE}\nt = translate(s, (1, 2, 3))"),
        &format!("{PLATE}\n{}\na = area(s + t)", SQUARE.replace('s', "t")),
    ]));
}

#[test]
fn questions() {
    insta::assert_snapshot!(all(&[
        &format!("{SQUARE}\na = integral(w, s)"),
        &format!("{SQUARE}\nx = 2\na = integral(x, s)"),
        &format!("{SQUARE}\np(q) = q\na = integral(p, s)"),
        &format!("{SQUARE}\nt(u, w) = (u, w, 1) on u in [0, 1], w in [0, 1]\na = integral(v, s + t)"),
        &format!("{SQUARE}\na = flux(1, s)"),
        &format!("{SQUARE}\na = integral((1, 2, 3), s)"),
        &format!("{SQUARE}\na = integral(area(s), s)"),
        &format!("{SQUARE}\nr = 2\na = diff(area(s), r)"),
        &format!("{SQUARE}\na = area(s)\nt(u, v) = (a*u, v, 0) on u in [0, 1], v in [0, 1]"),
        &format!("{SQUARE}\na = area(s)\nt(u, v) = (u, v, 0) on u in [0, a], v in [0, 1]"),
        &format!("{SQUARE}\nassume area(s) > 2"),
        &format!("{SQUARE}\na = area(s, s)"),
        &format!("{PLATE}\na = inertia(s, (0, 0, 1 [s]))"),
    ]));
}

#[test]
fn values() {
    insta::assert_snapshot!(all(&[
        "a = 12 [mm] in (0, 10]",
        "a = 2\nb = 3*a in [0, 5]",
        "D = 2.4 [m]\nk = 0.75*D in (0, 1 [m]]",
        "a = 2\nassume a > 3",
    ]));
    let model = check(Source::new("test.sheet", "D = 2.4 [m] in (0, 10]\nk = D/10")).unwrap();
    let set = |name: &str, text: &str| drawn(&model.bind(&[(name.to_owned(), text.to_owned())]).unwrap_err());
    insta::assert_snapshot!(
        "settings",
        [set("k", "1"), set("d", "1"), set("D", "3 [s]"), set("D", "2 +"), set("D", "11"), set("D", "q")].join("\n")
    );
}
