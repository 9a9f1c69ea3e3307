//! Explanations around operands: missing ones, and two that stand side by side.

use super::context::{Context, Role};
use super::statements::TokenKind::*;
use crate::language::diagnostic::Diagnostic;
use crate::language::suggest::{is_reserved, other_name};
use crate::language::unit_table;

/// `a + * b`, `(1, )`, `a =`, `f()`: an operator, a bracket or the end where an operand is due.
pub(super) fn missing_operand(c: &Context<'_>) -> Option<Diagnostic> {
    if c.after_operand() {
        return None;
    }
    let (before, last) = c.before();
    let missing = |message: String| Some(c.error("missing-operand", message));
    let after_last = |message: String| {
        let place = c.tokens[c.at - 1].span;
        Some(Diagnostic::error("missing-operand", place, message))
    };
    match (before, c.here()) {
        (Some(Open), (None, _)) => None,
        (Some(Equals), (None, _)) => after_last("nothing stands after `=`".to_owned())
            .map(|error| error.with_hint("a definition is `name = ...`")),
        (Some(Keyword), (None, _)) if matches!(last, "assume" | "where") => {
            after_last(format!("a condition is due after `{last}`"))
                .map(|error| error.with_hint(format!("`{last} a < b`")))
        }
        (Some(Comma), (None, _)) => after_last("nothing stands after the comma".to_owned()),
        (Some(_), (None, _)) => after_last(format!("nothing stands after `{last}`")),
        (Some(Open), (Some(Close), _)) => {
            let error = c.error("missing-operand", "nothing stands between the brackets");
            Some(match c.role() {
                Some(Role::Arguments) => {
                    error.with_hint("a function has at least one argument; a number is written by its name alone")
                }
                _ => error,
            })
        }
        (Some(Open), (Some(Operator | Comma), word)) if word != "+" => {
            missing(format!("nothing stands before `{word}`"))
        }
        (_, (Some(Operator), "+")) => {
            missing("`+` has nothing before it".to_owned()).map(|error| error.with_hint("a positive sign is left out"))
        }
        (None, (Some(Operator | Comma | Close | Equals | Keyword | Dots | Dot), word)) => {
            missing(format!("`{word}` has nothing before it"))
        }
        (Some(_), (Some(Operator | Comma | Close | Equals | Keyword | Dots | Dot), word)) => {
            missing(format!("nothing stands between `{last}` and `{word}`"))
        }
        _ => None,
    }
}

/// `2pi`, `2 (a + b)`, `sin u`, `sin^2(u)`, `a [m]`: two operands without an operator between them.
pub(super) fn side_by_side(c: &Context<'_>) -> Option<Diagnostic> {
    if !c.after_operand() || !matches!(c.here().0, Some(Number | Name | Open)) {
        return None;
    }
    if c.here().1 == "[" {
        return Some(bracket_after_operand(c));
    }
    function_without_brackets(c)
        .or_else(|| power_of_function(c))
        .or_else(|| two_numbers(c))
        .or_else(|| Some(product(c)))
}

/// `a [m]`, `a[1]`
fn bracket_after_operand(c: &Context<'_>) -> Diagnostic {
    let close = c.closing(c.at);
    let inner = close.and_then(|close| c.short(c.at + 1, close.checked_sub(1)?));
    let is_unit = inner.is_some_and(|inner| !inner.contains(',') && !inner.starts_with(|c: char| c.is_ascii_digit()));
    match inner.filter(|_| is_unit) {
        Some(unit) if follows_range(c) => {
            c.error("unit-syntax", "a unit stands only after a number, not after a range").with_hint(format!(
                "the ends of a range have the unit of the parameter; another one: `(0 [{unit}], 1 [{unit}])`"
            ))
        }
        Some(unit) => {
            let operand = if c.before().0 == Some(Name) { c.before().1 } else { "(...)" };
            c.error("unit-syntax", "a unit stands only after a number")
                .with_hint(format!("a plain number gets a unit by `{operand}*1 [{unit}]`"))
        }
        None => c
            .error("unexpected", "`[` cannot stand here")
            .with_hint("components are `.x`, `.y`, `.z`; an interval follows `in`"),
    }
}

/// `in (0, 10)` stands before.
fn follows_range(c: &Context<'_>) -> bool {
    let mut depth = 0;
    for at in (0..c.at).rev() {
        match c.word(at) {
            ")" | "]" => depth += 1,
            "(" | "[" => depth -= 1,
            _ => {}
        }
        if depth == 0 {
            return at > 0 && c.word(at - 1) == "in";
        }
    }
    false
}

/// `sin u`, `if a > b ...`
fn function_without_brackets(c: &Context<'_>) -> Option<Diagnostic> {
    let (Some(Name), function) = c.before() else { return None };
    if function == "if" {
        let error =
            Diagnostic::error("missing-arguments", c.span(c.at - 1, c.at - 1), "`if` stands without its arguments");
        return Some(error.with_hint("write `if(condition, a, b)`"));
    }
    let ours = other_name(function).unwrap_or(function);
    if !is_reserved(ours) || matches!(ours, "pi" | "inf") {
        return None;
    }
    let message = format!("the argument of `{function}` stands without parentheses");
    let error = Diagnostic::error("missing-parentheses", c.span(c.at - 1, c.at), message);
    Some(error.with_hint(format!("write `{ours}({})`", c.here().1)))
}

/// `sin^2(u)`, `sin^2 u`
fn power_of_function(c: &Context<'_>) -> Option<Diagnostic> {
    let start = c.at.checked_sub(3)?;
    let function = c.word(start);
    let ours = other_name(function).unwrap_or(function);
    let is_power = c.kind(start) == Some(Name) && c.word(start + 1) == "^" && is_reserved(ours);
    if !is_power || matches!(ours, "pi" | "inf") || !matches!(c.before().0, Some(Number | Name)) {
        return None;
    }
    let end = if c.here().0 == Some(Open) { c.closing(c.at).unwrap_or(c.at) } else { c.at };
    let argument = match c.here().0 {
        Some(Open) => c.short(c.at, end).unwrap_or("(...)").to_owned(),
        _ => format!("({})", c.here().1),
    };
    let end = if c.short(start, end).is_some() { end } else { c.at };
    let message = format!("a power of `{function}` stands before its argument");
    let error = Diagnostic::error("power-of-function", c.span(start, end), message);
    Some(error.with_hint(format!("write `{ours}{argument}^{}`", c.before().1)))
}

/// `1 000`, `1.2.3`
fn two_numbers(c: &Context<'_>) -> Option<Diagnostic> {
    if c.here().0 != Some(Number) {
        return None;
    }
    let touching = c.tokens[c.at - 1].span.end == c.tokens[c.at].span.start;
    match c.before() {
        (Some(Number), _) => {
            let hint = if touching { "a number has one decimal point" } else { "digits are not grouped by spaces" };
            let error = Diagnostic::error("implicit-product", c.span(c.at - 1, c.at), "two numbers stand side by side");
            Some(error.with_hint(hint))
        }
        (_, operand) if c.here().1.starts_with('.') => {
            let error = c.error("component", "a component is due after the dot");
            let operand = if operand == ")" { "(...)" } else { operand };
            Some(error.with_hint(format!("components of a vector are `{operand}.x`, `{operand}.y`, `{operand}.z`")))
        }
        _ => None,
    }
}

fn product(c: &Context<'_>) -> Diagnostic {
    let left_from = match c.before().0 {
        Some(Unit) => c.at.saturating_sub(2),
        _ => c.at - 1,
    };
    let left = match c.before().0 {
        Some(Close) => "(...)",
        _ => c.short(left_from, c.at - 1).unwrap_or("..."),
    };
    let call = c.here().0 == Some(Name) && c.word(c.at + 1) == "(";
    let right_to = match c.here().0 {
        Some(Open) => c.closing(c.at),
        _ if call => c.closing(c.at + 1),
        _ => Some(c.at),
    };
    let right = match right_to.and_then(|to| c.short(c.at, to)) {
        Some(right) => right.to_owned(),
        None if call => format!("{}(...)", c.here().1),
        None => "(...)".to_owned(),
    };
    let span = c.span(left_from, c.at);
    let error = Diagnostic::error("implicit-product", span, "two factors stand side by side without `*`");
    let is_unit = c.before().0 == Some(Number) && unit_table::find(&right).is_some();
    error.with_hint(match (is_unit, c.is_value) {
        (true, true) => format!("a unit stands in brackets: `{left} [{right}]`"),
        (true, false) => format!("write `{left}*{right}`, or `{left} [{right}]` for the unit"),
        (false, _) => format!("write `{left}*{right}`"),
    })
}

/// `[1, 2, 3]` where an operand is due.
pub(super) fn bracket_as_value(c: &Context<'_>) -> Option<Diagnostic> {
    if c.here().1 != "[" || c.after_operand() {
        return None;
    }
    let error = c.error("unexpected", "`[` cannot begin a value");
    Some(error.with_hint("a vector is `(a, b, c)`; a unit follows its number, `2 [m]`; an interval follows `in`"))
}
