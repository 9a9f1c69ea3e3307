//! Why a statement could not be read: from the place where the grammar gave up, and the symbols around it, to a
//! message and a hint.
//!
//! The rules are asked in order, from the most special to the most general; the first one that knows an answer gives it.

use super::context::{Context, Role, open_brackets};
use super::explain_operands::{bracket_as_value, missing_operand, side_by_side};
use super::statements::{Token, TokenKind};
use crate::language::diagnostic::Diagnostic;
use TokenKind::*;

/// The diagnostic for the statement (or value) `tokens`, which could not be read beyond byte `place`.
pub(super) fn explain(text: &str, tokens: &[Token], place: usize, is_value: bool) -> Diagnostic {
    let at = tokens.partition_point(|token| token.span.end <= place);
    let context = Context { text, tokens, at, place, is_value, open: open_brackets(&tokens[..at]) };
    RULES.iter().find_map(|rule| rule(&context)).unwrap_or_else(|| context.unexpected())
}

type Rule = fn(&Context<'_>) -> Option<Diagnostic>;

const RULES: &[Rule] = &[
    inside_unit,
    other_word_for_on,
    before_equals,
    after_as,
    after_in,
    variable_of_region,
    second_equals,
    form_of_sum,
    missing_operand,
    closing_bracket,
    region_in_call,
    unclosed_bracket,
    misplaced_word,
    misplaced_comma,
    misplaced_dots,
    side_by_side,
    bracket_as_value,
    unit_without_brackets,
];

/// `[]`, `[N m]`, `[0, 10]`, `[m^0.5]`, `[m`
fn inside_unit(c: &Context<'_>) -> Option<Diagnostic> {
    let written = match (c.here(), c.before()) {
        ((Some(Unit), written), _) => written,
        ((None, _), (Some(Unit), written)) if !written.ends_with(']') => written,
        _ => return None,
    };
    let inner = written.trim_start_matches('[').trim_end_matches(']').trim();
    let words: Vec<&str> = inner.split_whitespace().collect();
    let (message, hint) = if inner.contains(',') {
        let hint = format!("a range follows `in`: `{} in [{inner}]`", c.before().1);
        ("an interval stands where a unit is due", hint)
    } else if !written.ends_with(']') {
        ("the bracket of the unit is not closed", "add `]`".to_owned())
    } else if inner.is_empty() {
        ("there is no unit between the brackets", "a plain number has no brackets, a length is `2 [m]`".to_owned())
    } else if inner.contains('.') {
        ("an exponent of a unit is a whole number or a fraction", "a root is written `[m^(1/2)]`".to_owned())
    } else if words.len() > 1 && words.iter().all(|word| word.ends_with(char::is_alphanumeric)) {
        ("two units stand side by side without `*`", format!("write `[{}]`", words.join("*")))
    } else {
        (
            "this is not how a unit is written",
            "a unit is a product of powers, such as `[kg*m/s^2]` or `[1/s]`".to_owned(),
        )
    };
    Some(c.error("unit-syntax", message).with_hint(hint))
}

/// `for u in [0, 1]`, after the map or on a line of its own
fn other_word_for_on(c: &Context<'_>) -> Option<Diagnostic> {
    let is_region =
        |at: usize| matches!(c.word(at), "for" | "over") && c.kind(at + 1) == Some(Name) && c.word(at + 2) == "in";
    let at = [0, c.at].into_iter().find(|&at| is_region(at))?;
    let (word, variable) = (c.word(at), c.word(at + 1));
    let error = Diagnostic::error("misplaced-word", c.span(at, at), format!("`{word}` does not begin a region"));
    Some(error.with_hint(format!("write `on {variable} in ...`")))
}

/// What stands before `=`, or a statement without one.
fn before_equals(c: &Context<'_>) -> Option<Diagnostic> {
    let equals = c.tokens.iter().position(|token| token.kind == Equals);
    if c.is_value || c.word(0) == "assume" || equals.is_some_and(|equals| equals < c.at) {
        return None;
    }
    let here = c.here();
    if c.at == 0 {
        match here {
            (Some(Keyword), word) if equals == Some(1) => return Some(reserved(c, word)),
            (Some(Operator), word) | (Some(Keyword), word @ ("and" | "or")) => {
                let error = c.error("no-name", format!("a statement cannot begin with `{word}`"));
                return Some(error.with_hint("to continue a line, let it end in the operator"));
            }
            (Some(Keyword), word @ ("on" | "where" | "in" | "as")) => {
                let error = c.error("no-name", format!("there is no definition that `{word}` could belong to"));
                return Some(error.with_hint("a definition is `name = ...`"));
            }
            (Some(Equals), _) => {
                return Some(
                    c.error("no-name", "there is no name before `=`").with_hint("a definition is `name = ...`"),
                );
            }
            _ => {}
        }
    }
    let Some(equals) = equals else { return Some(no_equals(c)) };
    if let (Some(Keyword), word) = here {
        return Some(reserved(c, word));
    }
    let head = c.span(0, equals.saturating_sub(1));
    let error = |message: &str| Diagnostic::error("head", head, message);
    Some(match (c.kind(0), c.kind(1)) {
        (Some(Name), Some(Open)) if here.0 == Some(Close) && c.at == 2 => error("a function has at least one argument")
            .with_hint(format!("a number is defined by `{} = ...`", c.word(0))),
        (Some(Name), Some(Open)) if !c.open.is_empty() => error("the arguments of a definition are names")
            .with_hint(format!("for instance `{}(u, v) = ...`", c.word(0))),
        (Some(Name), Some(Name)) => error("a name is one word").with_hint(format!(
            "write `{}_{} = ...` or leave one of the words out",
            c.word(0),
            c.word(1)
        )),
        _ => error("only a name, or a name with its arguments, can stand before `=`")
            .with_hint("an equation is not solved; write what is wanted as `name = ...`"),
    })
}

fn reserved(c: &Context<'_>, word: &str) -> Diagnostic {
    c.error("reserved-name", format!("`{word}` is a word of the language and cannot be a name"))
        .with_hint(format!("choose another name, such as `{word}_1`"))
}

fn no_equals(c: &Context<'_>) -> Diagnostic {
    let last = c.tokens.len() - 1;
    let compares = c.tokens.iter().any(|token| token.text(c.text).starts_with(['<', '>']));
    let hint = match (compares, c.short(0, last)) {
        (true, Some(condition)) => format!("what is taken as true is written `assume {condition}`"),
        (false, Some(value)) => format!("give the value a name: `answer = {value}`"),
        (_, None) => "a statement is `name = ...` or `assume ...`".to_owned(),
    };
    Diagnostic::error("no-name", c.span(0, last), "this statement has no `=`").with_hint(hint)
}

/// `as mm`
fn after_as(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Keyword), "as") = c.before() else { return None };
    let hint = match c.here() {
        (Some(Name), unit) => format!("write `as [{unit}]`"),
        _ => "for instance `as [mm^2]`".to_owned(),
    };
    Some(c.error("unit-syntax", "a unit in brackets is due after `as`").with_hint(hint))
}

/// `on u in 0..1`, `in 3`
fn after_in(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Keyword), "in") = c.before() else { return None };
    if c.role() == Some(Role::Sum) {
        return None;
    }
    let rest = &c.tokens[c.at..];
    let until = |kinds: &[TokenKind]| rest.iter().position(|token| kinds.contains(&token.kind));
    let dots = until(&[Dots]).filter(|&dots| until(&[Comma, Keyword, Equals]).is_none_or(|other| dots < other));
    let ends = dots.and_then(|dots| {
        let end = until(&[Comma, Keyword, Equals]).unwrap_or(rest.len());
        let lower = c.short(c.at, c.at + dots.checked_sub(1)?)?;
        Some((lower, c.short(c.at + dots + 1, c.at + end - 1)?))
    });
    let hint = match ends {
        Some((lower, upper)) => format!("write `[{lower}, {upper}]`, or `({lower}, {upper})` without the ends"),
        None => "an interval is written `[0, 1]`, or `(0, 1)` without its ends".to_owned(),
    };
    Some(c.error("interval-syntax", "an interval is due after `in`").with_hint(hint))
}

/// `on [0, 1]`, `on u [0, 1]`, `on u = [0, 1]`
fn variable_of_region(c: &Context<'_>) -> Option<Diagnostic> {
    if !c.open.is_empty() || !c.in_region() {
        return None;
    }
    let opens = |at: usize| c.kind(at) == Some(Comma) || c.word(at) == "on";
    match (c.before(), c.here()) {
        ((_, "on"), (Some(Keyword), word)) => Some(reserved(c, word)),
        ((_, "on"), _) => Some(
            c.error("interval-syntax", "a variable is due after `on`")
                .with_hint("for instance `on u in [0, 1], v in [0, 1]`"),
        ),
        ((Some(Name), variable), _) if c.at >= 2 && opens(c.at - 2) => {
            let message = format!("`in` is missing after the variable `{variable}`");
            Some(c.error("interval-syntax", message).with_hint(format!("write `{variable} in [0, 1]`")))
        }
        ((Some(Close), _), (Some(Name), variable)) if c.word(c.at + 1) == "in" => Some(
            c.error("interval-syntax", "a comma is missing between two intervals")
                .with_hint(format!("write `, {variable} in ...`")),
        ),
        ((Some(Comma), _), here) if here.0 != Some(Name) => {
            Some(c.error("interval-syntax", "another variable with its interval is due after the comma"))
        }
        _ => None,
    }
}

fn second_equals(c: &Context<'_>) -> Option<Diagnostic> {
    if c.here().0 != Some(Equals) || !c.after_operand() {
        return None;
    }
    let (message, hint) = match c.role() {
        Some(Role::Arguments) => ("`=` stands between brackets", "arguments are given in their order, without names"),
        Some(_) => ("`=` stands between brackets", "conditions use `<`, `<=`, `>` and `>=`"),
        None if c.is_condition() => ("a condition has no `=`", "compare by `<`, `<=`, `>` or `>=`"),
        None if c.is_value => ("a value has no `=`", "give the value alone"),
        None => ("a second `=` in one statement", "write each definition on a line of its own"),
    };
    Some(c.error("second-equals", message).with_hint(hint))
}

/// `sum(i, 1, 8, x)`, `sum(i in [1, 8], x)`, `sum(x)`
fn form_of_sum(c: &Context<'_>) -> Option<Diagnostic> {
    if c.role() != Some(Role::Sum) {
        return None;
    }
    let open = *c.open.last()?;
    let complete_part = c.after_operand() && matches!(c.here().0, Some(Comma | Close | Dots));
    let no_index = c.at <= open + 2 && c.here().0.is_some();
    let interval = c.before().1 == "in" && c.here().1 == "[";
    if (complete_part && c.here().1 != "]") || no_index || interval {
        let end = c.closing(open).filter(|&close| c.short(open, close).is_some()).unwrap_or(open);
        let error = Diagnostic::error("sum-syntax", c.span(open - 1, end), "this is not how a sum is written");
        return Some(error.with_hint("the form is `sum(i in 1..8, term)`"));
    }
    None
}

fn closing_bracket(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Close), written) = c.here() else { return None };
    let Some(&open) = c.open.last() else {
        let error = c.error("stray-bracket", format!("`{written}` closes a bracket that was not opened"));
        return Some(error.with_hint("delete it, or open its bracket before"));
    };
    if c.role() == Some(Role::Interval) {
        return Some(two_ends(c, open));
    }
    let error = c.error("stray-bracket", format!("`{}` is closed by `{written}`", c.word(open)));
    Some(error.with_hint("only intervals, which follow `in`, mix the two kinds of brackets"))
}

fn two_ends(c: &Context<'_>, open: usize) -> Diagnostic {
    if c.here().0 == Some(Comma) && c.word(c.at + 2) == "in" {
        return Diagnostic::error("unclosed-bracket", c.tokens[open].span, format!("`{}` is not closed", c.word(open)))
            .with_hint(format!("add `]` or `)` after `{}`", c.before().1));
    }
    let end = c.closing(open).unwrap_or(c.at);
    Diagnostic::error("interval-syntax", c.span(open, end), "an interval has two ends")
        .with_hint("an interval is written `[0, 1]`, or `(0, 1)` without its ends")
}

/// `area(s where z > 0)`, `area(s on u in [0, 1], v in [0, 1])`
fn region_in_call(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Keyword), word @ ("on" | "where")) = c.here() else { return None };
    let open = *c.open.last()?;
    if c.role() != Some(Role::Arguments) || c.closing(open).is_none() {
        return None;
    }
    let callee = c.word(open - 1);
    let error = c.error("misplaced-word", format!("`{word}` cannot stand between the brackets of `{callee}`"));
    let whole = if c.before().0 == Some(Name) { c.before().1 } else { "name" };
    Some(error.with_hint(format!("name the part first: `part = {whole} {word} ...`, then use `part`")))
}

/// The end of the statement, or one of its clauses, while a bracket is open.
fn unclosed_bracket(c: &Context<'_>) -> Option<Diagnostic> {
    let open = *c.open.last()?;
    let written = c.word(open);
    let close = if written == "[" { "]" } else { ")" };
    let message = match c.here() {
        (None, _) => format!("`{written}` is not closed"),
        (Some(Keyword), word @ ("on" | "where" | "as" | "in")) => format!("`{written}` is not closed before `{word}`"),
        _ => return None,
    };
    Some(Diagnostic::error("unclosed-bracket", c.tokens[open].span, message).with_hint(format!("add `{close}`")))
}

fn misplaced_word(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Keyword), word) = c.here() else { return None };
    let error = |message: String, hint: &str| Some(c.error("misplaced-word", message).with_hint(hint));
    match word {
        "not" => error("`not` stands between two conditions".to_owned(), "write `a and not b`"),
        "assume" => error("`assume` begins a statement".to_owned(), "write it on a line of its own"),
        _ if c.is_value => error(format!("`{word}` cannot follow a value"), "give the value alone"),
        _ if c.word(0) == "assume" => {
            error(format!("`{word}` cannot follow a condition"), "a range is written `assume 0 < D and D <= 3`")
        }
        _ => None,
    }
}

fn misplaced_comma(c: &Context<'_>) -> Option<Diagnostic> {
    if c.here().0 != Some(Comma) {
        return None;
    }
    match (c.role(), c.open.last()) {
        (Some(Role::Interval), Some(&open)) => Some(two_ends(c, open)),
        (None, _) => {
            let error = c.error("stray-comma", "a comma stands outside of brackets");
            let number = c.short(c.at - 1, c.at + 1);
            Some(match number.filter(|number| number.bytes().all(|b| b == b',' || b.is_ascii_digit())) {
                Some(number) => error.with_hint(format!("decimals follow a point: `{}`", number.replace(',', "."))),
                None => error.with_hint("a vector is written `(a, b, c)`"),
            })
        }
        _ => None,
    }
}

fn misplaced_dots(c: &Context<'_>) -> Option<Diagnostic> {
    match c.here().0 {
        Some(Dots) => Some(
            c.error("interval-syntax", "`..` stands only in a sum")
                .with_hint("a sum is `sum(i in 1..8, term)`, an interval `[1, 8]`"),
        ),
        Some(Dot) => Some(
            c.error("component", "a component is due after the dot")
                .with_hint("components of a vector are `.x`, `.y`, `.z`"),
        ),
        _ => None,
    }
}

fn unit_without_brackets(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Other), sign) = c.here() else { return None };
    let error = c.error("unit-syntax", format!("`{sign}` is a unit and stands in brackets"));
    let number = if c.before().0 == Some(Number) { c.before().1 } else { "5" };
    Some(error.with_hint(format!("write `{number} [{}]`", if sign == "°" { "deg" } else { sign })))
}
