//! Any text is read or refused: no panic, no endless work, places inside the text, a tree in order.
//!
//! 10,000 cases for each property; `PROPTEST_CASES=1000000 cargo test --test syntax_properties` runs more.

#[path = "support/measure.rs"]
mod measure;

use measure::{Counting, MOST_SECONDS, bounded};
use proptest::prelude::*;
use proptest::sample::{Index, select};
use quadrel::language::syntax::{Sheet, Statement, Syntax, SyntaxId, SyntaxKind};
use quadrel::language::{Source, Span, Unit, parse, parse_value};

fn cases() -> ProptestConfig {
    let cases = std::env::var("PROPTEST_CASES").ok().and_then(|cases| cases.parse().ok()).unwrap_or(10_000);
    ProptestConfig { cases, failure_persistence: None, ..ProptestConfig::default() }
}

/// A sheet that uses the whole language.
const VALID: &str = "\
# A dished vessel head: crown and knuckle, as two patches.
D = 2.4 [m] in (0, 10]
k = 0.1*D
assume D > 2*k and not (k <= 0 or D < 1e-3 [m])
a = asin((D/2 - k)/(D - k))
crown(v, u) = (D*sin(v)*cos(u), D*sin(v)*sin(u), D*cos(v))
  on v in [0, a], u in [0, 2*pi)
  where x^2 + y^2 > 0 [m^2]
rho(s) = D/2 - k + k*sin(s)
wave(t) = sum(i in 1..8, (-1)^i*cos(i*t)/i) +
  if(t < 0 <= 1, abs(t), bessel_j(0, -t^2))
q(z) = 2 [bar] + 9810 [N/m^3]*(1 [m] - z)
head = crown + 2*mirror(crown, (0, 0, 1))
push = flux((0, 0, q(z)), head).x as [kN]
größe = π^-2 in (-inf, inf)
";

/// Pieces of the language and of what people type instead.
const PIECES: &[&str] = &[
    "a",
    "b",
    "f",
    "u",
    "pi",
    "π",
    "sum",
    "if",
    "sin",
    "1",
    "2.5",
    "1e-3",
    ".5",
    "3.",
    "(",
    ")",
    "[",
    "]",
    ",",
    "=",
    "+",
    "-",
    "*",
    "/",
    "^",
    "<",
    "<=",
    ">",
    ">=",
    "..",
    ".",
    ".x",
    " on ",
    " where ",
    " in ",
    " as ",
    "assume ",
    " and ",
    " or ",
    "not ",
    "[m]",
    "[m/s^2]",
    "[",
    "\n",
    "\r\n",
    "\n\n",
    " ",
    "\t",
    "# c\n",
    "**",
    "×",
    "²",
    "⁻¹",
    ";",
    ":=",
    "==",
    "{",
    "}",
    "∞",
    "½",
    "\r",
    "%",
    "°",
    "a = ",
    "f(u) = ",
    "u in [0, 1]",
    "sum(i in 1..8, ",
    "\u{feff}",
    "\u{301}",
    "東",
    "|",
    "//",
    "e",
    "1..8",
];

fn is_inside(text: &str, span: Span) -> bool {
    span.start <= span.end && text.get(span.start..span.end).is_some()
}

fn operands(syntax: &Syntax) -> Vec<SyntaxId> {
    match &syntax.kind {
        SyntaxKind::Number { .. } | SyntaxKind::Name(_) => vec![],
        SyntaxKind::Call { arguments: all, .. } | SyntaxKind::Vector(all) => all.clone(),
        SyntaxKind::Component { base: a, .. } | SyntaxKind::Negate(a) | SyntaxKind::Not(a) => vec![*a],
        SyntaxKind::Binary { left, right, .. } => vec![*left, *right],
        SyntaxKind::Compare { first, rest } => std::iter::once(*first).chain(rest.iter().map(|(_, id)| *id)).collect(),
        SyntaxKind::Sum { from, to, term, .. } => vec![*from, *to, *term],
    }
}

fn is_in_order(text: &str, sheet: &Sheet) -> bool {
    sheet.expressions.iter().enumerate().all(|(at, syntax)| {
        is_inside(text, syntax.span) && operands(syntax).iter().all(|operand| (operand.0 as usize) < at)
    })
}

#[global_allocator]
static ALLOCATOR: Counting = Counting;

/// Reads `text` as a sheet and as a value and checks everything that must hold of the result, and what it took.
fn check(text: &str) -> Result<(), TestCaseError> {
    bounded(&|| text.to_owned(), MOST_SECONDS, || check_reading(text))
}

fn check_reading(text: &str) -> Result<(), TestCaseError> {
    let source = Source::new("any.sheet", text);
    let (sheet, diagnostics) = parse(&source);
    prop_assert!(is_in_order(text, &sheet));
    for statement in &sheet.statements {
        let (Statement::Assume { span, .. }
        | Statement::Definition(quadrel::language::syntax::DefinitionSyntax { span, .. })) = statement;
        prop_assert!(is_inside(text, *span));
    }
    prop_assert!(diagnostics.is_sorted_by_key(|diagnostic| diagnostic.span.start));
    prop_assert!(sheet.unread.is_empty() || !diagnostics.is_empty());
    for diagnostic in &diagnostics {
        prop_assert!(is_inside(text, diagnostic.span), "{diagnostic:?}");
        let drawn = source.draw(diagnostic);
        prop_assert!(drawn.lines().count() <= 4 && !drawn.contains(|c: char| c.is_control() && c != '\n'), "{drawn:?}");
    }
    for expression in &sheet.expressions {
        if let SyntaxKind::Number { unit: Some(unit), .. } = &expression.kind
            && let Err(diagnostic) = Unit::resolve(unit)
        {
            prop_assert!(is_inside(text, diagnostic.span));
        }
    }
    let (sheet, value, diagnostics) = parse_value(&source);
    prop_assert!(is_in_order(text, &sheet));
    prop_assert_eq!(value.is_some(), diagnostics.is_empty());
    Ok(())
}

/// Pieces that once panicked: a hint looked for text between two brackets that enclose nothing.
#[test]
fn empty_brackets_after_an_operand() {
    for text in ["東[\n}", "a = b[]", "a = 2*b[ ]", "a = f()[]", "a = (1)[", "a[]", "s = sum()[]", "a = 1 on u in []"]
    {
        let (_, diagnostics) = parse(&Source::new("any.sheet", text));
        assert!(!diagnostics.is_empty(), "{text:?}");
    }
}

#[test]
fn the_valid_sheet_is_valid() {
    for text in [VALID.to_owned(), VALID.replace('\n', "\r\n")] {
        let (sheet, diagnostics) = parse(&Source::new("valid.sheet", text));
        assert!(diagnostics.is_empty(), "{diagnostics:?}");
        assert_eq!(sheet.statements.len(), 11);
    }
}

proptest! {
    #![proptest_config(cases())]

    #[test]
    fn arbitrary_bytes(bytes in prop::collection::vec(any::<u8>(), 0..200)) {
        check(&String::from_utf8_lossy(&bytes))?;
    }

    #[test]
    fn arbitrary_characters(text in "\\PC{0,60}") {
        check(&text)?;
    }

    #[test]
    fn arbitrary_pieces(pieces in prop::collection::vec(select(PIECES), 0..60)) {
        check(&pieces.concat())?;
    }

    /// A valid sheet with pieces put in, left out, or in place of others.
    #[test]
    fn mutated_sheets(changes in prop::collection::vec((any::<Index>(), 0..6usize, select(PIECES)), 1..8)) {
        let mut text = VALID.to_owned();
        for (place, length, piece) in changes {
            let start = text.floor_char_boundary(place.index(text.len() + 1));
            let end = text.ceil_char_boundary((start + length).min(text.len()));
            text.replace_range(start..end, piece);
        }
        check(&text)?;
    }

    /// An error costs its own statement only: all others are still read.
    #[test]
    fn errors_stay_in_their_statement(line in "[a-z0-9()+*/^,. -]{1,30}", first in any::<bool>()) {
        // It ends in an operand: after an operator the next statement would be read as its continuation.
        let broken = format!("broken = {line} 1");
        let text = if first { format!("{broken}\n{VALID}") } else { format!("{VALID}{broken}\n") };
        let (sheet, diagnostics) = parse(&Source::new("any.sheet", text));
        prop_assert_eq!(sheet.statements.len() + sheet.unread.len(), 12);
        prop_assert_eq!(sheet.unread.is_empty(), diagnostics.is_empty() || sheet.statements.len() == 12);
    }
}
