//! What people read when the text of a sheet or a unit is wrong: each line of a table is one sheet, the snapshots are
//! the drawn diagnostics. Read them like prose when they change (`cargo insta review`).

use quadrel::language::syntax::{Statement, SyntaxKind};
use quadrel::language::{Source, Unit, parse, parse_value};

/// All diagnostics of the syntax and of the units of `text`, drawn.
fn drawn(text: &str) -> String {
    let source = Source::new("vessel.sheet", text);
    let (sheet, mut diagnostics) = parse(&source);
    let written = sheet.expressions.iter().filter_map(|expression| match &expression.kind {
        SyntaxKind::Number { unit, .. } => unit.as_ref(),
        _ => None,
    });
    let shown = sheet.statements.iter().filter_map(|statement| match statement {
        Statement::Definition(definition) => definition.shown_as.as_ref(),
        Statement::Assume { .. } => None,
    });
    diagnostics.extend(written.chain(shown).filter_map(|unit| Unit::resolve(unit).err()));
    assert!(!diagnostics.is_empty(), "nothing is wrong with {text:?}");
    diagnostics.iter().map(|diagnostic| source.draw(diagnostic)).collect()
}

/// One snapshot for a table of sheets.
fn snapshot(name: &str, sheets: &[&str]) {
    let all: Vec<String> = sheets.iter().map(|sheet| drawn(sheet)).collect();
    insta::with_settings!({ prepend_module_to_snapshot => false, omit_expression => true }, {
        insta::assert_snapshot!(format!("syntax_{name}"), all.join("\n"));
    });
}

#[test]
fn products_and_functions() {
    snapshot(
        "products",
        &[
            "b = 2pi",
            "b = 2 pi*r",
            "b = 2(a + b)",
            "b = (a + b)(a - b)",
            "b = 3 [m] x",
            "b = a b",
            "b = 2.4 m",
            "b = pi(a + b)",
            "b = 2 sin(u)",
            "b = 1 000",
            "b = 1.2.3",
            "b = sin u",
            "b = ln 2",
            "b = sin^2(u + v)",
            "b = sin^2 u",
            "b = if a > 0, 1, 2",
            "b = sum + if",
            "b = sum(i, 1, 8, i^2)",
            "b = sum(i in [1, 8], i^2)",
            "b = sum(i^2)",
        ],
    );
}

#[test]
fn operands() {
    snapshot(
        "operands",
        &[
            "b =",
            "b = a +\nc = 1",
            "b = a * / c",
            "b = +1",
            "b = * 2",
            "b = (1, 2, )",
            "b = (, 1, 2)",
            "b = f()",
            "b = a.",
            "b = c.1",
            "b = a[1]",
            "b = [1, 2, 3]",
            "b = 2,5",
            "b = 1, 2, 3",
            "b = 1..8",
            "b = 1e999999",
            "b = a not c",
            "a = 1\n  + 2",
        ],
    );
}

#[test]
fn brackets() {
    snapshot(
        "brackets",
        &[
            "b = (a + c*(d - 1)\nc = 2",
            "b = a + c) * 2",
            "b = (a, c, d]",
            "p(u, v) = (u, v, 0 on u in [0, 1], v in [0, 1]",
            "p(u, v) = (u, v, 0) on u in [0, 1, v in [0, 1]",
            "b = ()",
        ],
    );
}

#[test]
fn clauses() {
    snapshot(
        "clauses",
        &[
            "p(u, v) = (u, v, 0) on u in 0..1, v in [0, 1]",
            "p(u, v) = (u, v, 0) on u in 3",
            "p(u, v) = (u, v, 0) on u in [0], v in [0, 1]",
            "p(u, v) = (u, v, 0) on u in [0, 1, 2], v in [0, 1]",
            "p(u, v) = (u, v, 0) on u in [0, 1] v in [0, 1]",
            "p(u, v) = (u, v, 0) on u = [0, 1], v in [0, 1]",
            "p(u, v) = (u, v, 0) on u [0, 1], v in [0, 1]",
            "p(u, v) = (u, v, 0) on [0, 1], [0, 1]",
            "p(u, v) = (u, v, 0) on u in [0, 1],",
            "p(u, v) = (u, v, 0) where u > 0 where v > 0",
            "p(u, v) = (u, v, 0) where",
            "p(u, v) = (u, v, 0) where u = 0",
            "b = a as mm",
            "b = a as",
            "b = 3 in [0, 10] in [0, 20]",
            "assume D in [0, 10]",
            "assume",
            "assume D = 3",
            "b = f(x = 3)",
            "b = a assume c > 0",
            "where x > 0",
            "b = area(s where z > 0.3 [m])",
            "b = integral(z, s on u in [0, 1], v in [0, 1])",
            "p(u, v) = (u, v, 0) for u in [0, 1], v in [0, 1]",
            "p(u, v) = (u, v, 0)\n  for u in [0, 1], v in [0, 1]",
        ],
    );
}

#[test]
fn names_and_lines() {
    snapshot(
        "names",
        &[
            "area(head)",
            "R > r",
            "2 = b",
            "a + b = c",
            "= 3",
            "f(2) = 3",
            "f() = 3",
            "let b = 3",
            "a = b = 3",
            "in = 3",
            "pi = 3",
            "sin(x) = x",
            "area = area(head)",
            "f(inf) = 3",
            "f(on) = 3",
            "p(u, v) = (u, v, 0) on pi in [0, 1], v in [0, 1]",
            "b = sum(in in 1..8, 1)",
        ],
    );
}

#[test]
fn spellings() {
    snapshot(
        "spellings",
        &[
            "b = a**2",
            "b = a×c − d÷2",
            "b = u² + v⁻¹",
            "b := 3",
            "b == 3",
            "assume b == 3",
            "b = if(a != 3, 1, 2)",
            "assume a > 0 && b > 0",
            "b = |a|",
            "b = 5!",
            "a = 1; b = 2;",
            "b = (1; 2; 3)",
            "b = {a + c}*2",
            "b = √2 + ∞",
            "b = f'(x)",
            "b = \"text\"",
            "b = 3 // three",
            "b = r₁",
            "b = ½",
            "a: 3",
            "b = 3\u{200b} + 1",
            "b = 3\u{7} + 1",
            "a = 1\rb = 2\n",
            "b = 5%",
            "b = 45°",
        ],
    );
}

#[test]
fn units() {
    snapshot(
        "units",
        &[
            "b = 3 []",
            "b = 3 [N m]",
            "b = 3 [0, 10]",
            "b = 3 [m",
            "b = 3 [m^0.5]",
            "b = 3 [m²]",
            "b = 3 [m**2]",
            "b = 3 [5]",
            "b = a [m]",
            "b = (a + c) [kN]",
            "b = 3 [meter]",
            "b = 3 [Mpa]",
            "b = 3 [Nm]",
            "b = 3 [m2]",
            "b = 3 [lbs]",
            "b = 3 [furlong]",
            "b = 20 [degC]",
            "b = 3 [m^(1/5)]",
            "b = 3 [m^100]",
            "b = 3 [mm^(1/2)]",
            "b = a as [sqm]",
        ],
    );
}

#[test]
fn values_for_the_command_line() {
    let cases = ["", "3 mm", "D = 3", "3 in [0, 1]", "*3", "3 +"];
    let all: Vec<String> = cases
        .iter()
        .map(|text| {
            let source = Source::new("--set D", *text);
            let (_, value, diagnostics) = parse_value(&source);
            assert!(value.is_none());
            diagnostics.iter().map(|diagnostic| source.draw(diagnostic)).collect()
        })
        .collect();
    insta::with_settings!({ prepend_module_to_snapshot => false, omit_expression => true }, {
        insta::assert_snapshot!("syntax_values", all.join("\n"));
    });
}

#[test]
fn drawing() {
    let long = format!("b = {}2 pi{}", "a + ".repeat(100), " + a".repeat(100));
    let deep = format!("b = {}", "(".repeat(4000));
    snapshot(
        "drawing",
        &[
            "\tb =\t2pi # tabs",
            "größe = 2 длина # wide: 東京 = 2",
            "東 = 東京 2",
            "e\u{301}tude = 2 pi",
            &long,
            &deep,
            "b = 2pi \u{1b}[31m",
            "b = sum(i,\n  1, 8)",
            "\u{feff}b = 2pi\r\nc = 3pi\r\n",
        ],
    );
}
