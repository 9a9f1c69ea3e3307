//! Trees of small texts, and the time and stack that large ones take.

use super::*;
use crate::language::syntax::{Comparison, DefinitionSyntax, Operator, RangeSyntax, Statement, SyntaxKind, UnitSyntax};
use std::time::{Duration, Instant};

fn parsed(text: &str) -> (Sheet, Vec<Diagnostic>) {
    parse(&Source::new("test.sheet", text))
}

/// The sheet of a text without errors.
fn sheet(text: &str) -> Sheet {
    let (sheet, diagnostics) = parsed(text);
    assert!(diagnostics.is_empty(), "{text}: {diagnostics:?}");
    sheet
}

/// The tree with every group in parentheses.
fn show(sheet: &Sheet, id: SyntaxId) -> String {
    let of = |id: &SyntaxId| show(sheet, *id);
    let list = |ids: &[SyntaxId]| ids.iter().map(of).collect::<Vec<_>>().join(", ");
    match &sheet.get(id).kind {
        SyntaxKind::Number { value, unit } => match unit {
            Some(unit) => format!("{value} [{}]", show_unit(unit)),
            None => value.to_string(),
        },
        SyntaxKind::Name(name) => name.clone(),
        SyntaxKind::Call { callee, arguments } => format!("{}({})", callee.text, list(arguments)),
        SyntaxKind::Vector(components) => format!("<{}>", list(components)),
        SyntaxKind::Component { base, field } => format!("{}.{}", of(base), field.text),
        SyntaxKind::Negate(a) => format!("(-{})", of(a)),
        SyntaxKind::Not(a) => format!("(not {})", of(a)),
        SyntaxKind::Binary { operator, left, right, .. } => {
            let sign = match operator {
                Operator::Add => "+",
                Operator::Subtract => "-",
                Operator::Multiply => "*",
                Operator::Divide => "/",
                Operator::Power => "^",
                Operator::And => " and ",
                Operator::Or => " or ",
            };
            format!("({}{sign}{})", of(left), of(right))
        }
        SyntaxKind::Compare { first, rest } => {
            let mut text = format!("({}", of(first));
            for (comparison, operand) in rest {
                text += match comparison {
                    Comparison::Less => " < ",
                    Comparison::LessEqual => " <= ",
                    Comparison::Greater => " > ",
                    Comparison::GreaterEqual => " >= ",
                };
                text += &of(operand);
            }
            text + ")"
        }
        SyntaxKind::Sum { index, from, to, term } => {
            format!("sum({} in {}..{}, {})", index.text, of(from), of(to), of(term))
        }
    }
}

fn show_unit(unit: &UnitSyntax) -> String {
    let factors = unit.factors.iter().map(|(name, (p, q))| format!("{}^{p}/{q}", name.text));
    factors.collect::<Vec<_>>().join(" ")
}

fn definition(sheet: &Sheet, at: usize) -> &DefinitionSyntax {
    match &sheet.statements[at] {
        Statement::Definition(definition) => definition,
        other => panic!("{other:?} is not a definition"),
    }
}

fn show_range(sheet: &Sheet, range: &RangeSyntax) -> String {
    let open = if range.lower_closed { '[' } else { '(' };
    let close = if range.upper_closed { ']' } else { ')' };
    format!("{open}{}, {}{close}", show(sheet, range.lower), show(sheet, range.upper))
}

/// Checks that the right side of `a = TEXT` is grouped as `expected`.
fn groups(text: &str, expected: &str) {
    let sheet = sheet(&format!("a = {text}"));
    assert_eq!(show(&sheet, definition(&sheet, 0).value), expected, "{text}");
}

#[test]
fn operators_group_as_the_language_says() {
    groups("1 + 2*3 - 4/5/6", "((1+(2*3))-((4/5)/6))");
    groups("a^b^c", "(a^(b^c))");
    groups("-a^2", "(-(a^2))");
    groups("2^-3*4", "((2^(-3))*4)");
    groups("2^-3^2", "(2^(-(3^2)))");
    groups("-a*b", "((-a)*b)");
    groups("a*-b", "(a*(-b))");
    groups("a - -b", "(a-(-b))");
    groups("a < b+1 <= c and not d > e or f < 1", "(((a < (b+1) <= c) and (not (d > e))) or (f < 1))");
    groups("(a + b)*c", "((a+b)*c)");
    groups("not a < b < c", "(not (a < b < c))");
}

#[test]
fn operands_of_every_kind() {
    groups("(1, -2, x)", "<1, (-2), x>");
    groups("f(u, v).x^2", "(f(u, v).x^2)");
    groups("(a + b).xy", "(a+b).xy");
    groups("sum(i in 1..8, i^2)", "sum(i in 1..8, (i^2))");
    groups("sum(i in a..-b, x)", "sum(i in a..(-b), x)");
    groups("if(a > 0, 1, 2)", "if((a > 0), 1, 2)");
    groups("2*π", "(2*pi)");
    groups("ρ_1 + é", "(ρ_1+é)");
    groups("1e-3 + .5 + 3. + 2e5", "(((0.001+1/2)+3)+200000)");
    groups("9810 [N/m^3]*(1 [m] - z)", "(9810 [N^1/1 m^-3/1]*(1 [m^1/1]-z))");
    groups("1 [J/(kg*K)] + 2 [m^(1/2)] + 3 [1/s] + 4 [1]", "(((1 [J^1/1 kg^-1/1 K^-1/1]+2 [m^1/2])+3 [s^-1/1])+4 [])");
}

#[test]
fn clauses_in_any_order() {
    let text = "crown(v, u) = (a, b, c)\n  on v in [0, a), u in (-inf, 2*pi]\n  where x > 0 and\n y > 0\nD = 2.4 [m] in (0, 10]\n\
                l = area(head) as [mm^2]\nassume D > 2*k # true";
    for text in [text.to_owned(), text.replace('\n', "\r\n")] {
        let sheet = sheet(&text);
        assert_eq!(sheet.statements.len(), 4);
        let crown = definition(&sheet, 0);
        assert_eq!(crown.arguments.as_ref().map(Vec::len), Some(2));
        let region = crown.region.as_ref().unwrap();
        assert_eq!(region[0].variable.text, "v");
        assert_eq!(show_range(&sheet, &region[0].range), "[0, a)");
        assert_eq!(show_range(&sheet, &region[1].range), "((-inf), (2*pi)]");
        assert_eq!(show(&sheet, crown.trim.unwrap()), "((x > 0) and (y > 0))");
        assert_eq!(show_range(&sheet, definition(&sheet, 1).range.as_ref().unwrap()), "(0, 10]");
        assert_eq!(show_unit(definition(&sheet, 2).shown_as.as_ref().unwrap()), "mm^2/1");
        assert!(matches!(sheet.statements[3], Statement::Assume { .. }));
        let Statement::Assume { span, .. } = sheet.statements[3] else { panic!() };
        assert_eq!(&text[span.start..span.end], "assume D > 2*k");
    }
}

#[test]
fn spans_are_the_text_itself() {
    let text = "a = (1 # one\n + x)*f(2)\n";
    let sheet = sheet(text);
    let written: Vec<&str> = sheet.expressions.iter().map(|e| &text[e.span.start..e.span.end]).collect();
    assert_eq!(written, ["1", "x", "1 # one\n + x", "2", "f(2)", "(1 # one\n + x)*f(2)"]);
}

#[test]
fn a_newline_ends_a_statement_unless_something_is_open() {
    for (text, count) in [
        ("a = 1\nb = 2", 2),
        ("a = 1 +\n\n 2\nb = 2", 2),
        ("a =\n 1\nb = 2", 2),
        ("a = f(1,\n 2)\nb = 2", 2),
        ("a = (1\n + 2)\nb = 2", 2),
        ("p(u, v) = (u, v, 0) # plane\n # more\non u in [0, 1]\n, v in [0, 1]\nb = 2", 2),
        ("a = b\n  as [m]\nc = 3\n  in [0, 5]", 2),
        ("", 0),
        ("# only a comment", 0),
    ] {
        assert_eq!(sheet(text).statements.len(), count, "{text}");
    }
}

#[test]
fn reading_resumes_at_the_next_statement() {
    let (sheet, diagnostics) = parsed("a = (1 + \nb = 2*\nf(x) = x +* 2\nc = 3\nassume\nd = 2 pi\n");
    assert_eq!(diagnostics.len(), 5, "{diagnostics:?}");
    assert_eq!(sheet.statements.len(), 1);
    let unread: Vec<&str> = sheet.unread.iter().map(|name| name.text.as_str()).collect();
    assert_eq!(unread, ["a", "b", "f", "d"]);
}

#[test]
fn wrong_spellings_are_reported_and_read_on() {
    let (sheet, diagnostics) = parsed("a := 2×π**2; b = u² − 1 # ×\nc == a ≤ b\nq = {1; 2; 3}");
    assert_eq!(diagnostics.len(), 12, "{diagnostics:#?}");
    let shown: Vec<String> = (0..4).map(|at| show(&sheet, definition(&sheet, at).value)).collect();
    assert_eq!(shown, ["(2*(pi^2))", "((u^2)-1)", "(a <= b)", "<1, 2, 3>"]);
}

#[test]
fn a_value_is_one_expression() {
    let (sheet, value, diagnostics) = parse_value(&Source::new("--set", "300 [mm]"));
    assert!(diagnostics.is_empty());
    assert_eq!(show(&sheet, value.unwrap()), "300 [mm^1/1]");
    for text in ["", "a = 3", "3 3", "2 ×", "# 3"] {
        let (_, value, diagnostics) = parse_value(&Source::new("--set", text));
        assert!(value.is_none() && !diagnostics.is_empty(), "{text}");
    }
}

/// Parses on a stack of 2 MiB and checks the arena. The time limit is far above what is needed on a slow machine and
/// far below what anything but linear time would take.
fn reads_quickly(text: String, errors: usize) -> Sheet {
    let parse_here = move || {
        let start = Instant::now();
        let (sheet, diagnostics) = parsed(&text);
        assert!(start.elapsed() < Duration::from_secs(5), "{:?}", start.elapsed());
        assert_eq!(diagnostics.len(), errors, "{:?}", diagnostics.first());
        sheet
    };
    let sheet = std::thread::Builder::new().stack_size(2 << 20).spawn(parse_here).unwrap().join().unwrap();
    operands_come_first(&sheet);
    sheet
}

fn operands_come_first(sheet: &Sheet) {
    for (at, syntax) in sheet.expressions.iter().enumerate() {
        let before = |id: &SyntaxId| assert!((id.0 as usize) < at);
        match &syntax.kind {
            SyntaxKind::Number { .. } | SyntaxKind::Name(_) => {}
            SyntaxKind::Call { arguments: all, .. } | SyntaxKind::Vector(all) => all.iter().for_each(before),
            SyntaxKind::Component { base: a, .. } | SyntaxKind::Negate(a) | SyntaxKind::Not(a) => before(a),
            SyntaxKind::Binary { left, right, .. } => [left, right].into_iter().for_each(before),
            SyntaxKind::Compare { first, rest } => {
                before(first);
                rest.iter().for_each(|(_, id)| before(id));
            }
            SyntaxKind::Sum { from, to, term, .. } => [from, to, term].into_iter().for_each(before),
        }
    }
}

#[test]
fn large_texts_take_linear_time_and_little_stack() {
    let times = |piece: &str, count: usize| piece.repeat(count);
    reads_quickly(format!("a = {}", times("(", 4000)), 1);
    reads_quickly(times("(", 1 << 20), 1);
    reads_quickly(format!("a = 0{}", times(" + x", 100_000)), 0);
    reads_quickly(format!("a = f(0{})", times(", x", 100_000)), 0);
    reads_quickly(format!("a = 0{}", times(" < x", 100_000)), 0);
    reads_quickly(format!("a = x{}", times(".x", 100_000)), 0);
    reads_quickly(times("a = x\n", 60_000), 0);
    reads_quickly(times("f(x) = (\n", 60_000), MAXIMUM_ERRORS + 1);
    reads_quickly(times("f(a,\n", 90_000), 1);
    reads_quickly(times("== ", 300_000), MAXIMUM_ERRORS + 1);
    reads_quickly(times("²", 500_000), 1);
    reads_quickly(format!("a = 1 [m{}]", times("*m", 500_000)), 0);
    reads_quickly(format!("a = 0{}", times("+1 [m/s]", 100_000)), 0);
    reads_quickly(times("1+", 500_000), 1);
    reads_quickly(format!("a = 0{}", times("-if", 100_000)), MAXIMUM_ERRORS);
    reads_quickly("x".repeat((1 << 20) + 1), 1);
    reads_quickly("#".repeat(1 << 20), 0);
    reads_quickly(times("#\r", 1 << 19), MAXIMUM_ERRORS);
}

#[test]
fn nesting_up_to_the_limit_is_read_and_beyond_is_refused() {
    let times = |piece: &str, count: usize| piece.repeat(count);
    let deep = MAXIMUM_NESTING;
    for (open, close) in [("(", ")"), ("f(", ")"), ("f(x, ", ")"), ("(x)*(", ")"), ("sum(i in 1..2, ", ")")] {
        for (count, errors) in [(deep, 0), (deep + 1, 1), (4 * deep, 1)] {
            reads_quickly(format!("a = {}1{}", times(open, count), times(close, count)), errors);
        }
    }
    for piece in ["-", "not ", "x^"] {
        for (count, errors) in [(deep, 0), (deep + 1, 1), (100_000, 1)] {
            reads_quickly(format!("a = {}1", times(piece, count)), errors);
        }
    }
    // Signs and powers wait for their operand only up to the next looser operator.
    reads_quickly(format!("a = 0{}", times(" + -x^2", 10_000)), 0);
    reads_quickly(format!("a = {}1", times("-(2^", 86)), 1);
}
