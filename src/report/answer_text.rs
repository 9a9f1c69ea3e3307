//! Answers as lines of text.

use super::number::{exact_number, in_shown_unit, shown_components, unit_text, value_with_error, without_sign_of_zero};
use crate::integrals::{Answer, AnswerKind, Component, Principal, fifteen_digits};
use crate::language::{Bindings, Model};
use std::fmt::Write;

/// The answers, one below the other: value, error, unit, how it was got, and the reason where that is not enough.
pub fn answers_text(answers: &[Answer]) -> String {
    let mut text = String::new();
    for answer in answers {
        if answer.failure.is_some() {
            // Writing to a string cannot fail.
            let _ = writeln!(text, "{} has no value  [{}]", answer.name, answer.kind.word());
            continue;
        }
        let unit = unit_after(answer);
        let how = match answer.kind {
            AnswerKind::Exact => "exact".to_owned(),
            kind if answer.evaluations == 0 => format!("{}, computed from the parameters", kind.word()),
            kind => format!("{}, {} evaluations", kind.word(), answer.evaluations),
        };
        let shown = shown_components(answer);
        let number = |(value, error)| match answer.kind {
            AnswerKind::Exact => exact_number(value),
            _ => value_with_error(value, error),
        };
        // Writing to a string cannot fail.
        let _ = if let [one] = shown[..] {
            writeln!(text, "{} = {}{unit}  [{how}]", answer.name, number(one))
        } else {
            let _ = writeln!(text, "{}  [{how}]", answer.name);
            answer.components.iter().zip(shown).try_for_each(|(component, shown)| {
                writeln!(text, "  .{:<2} = {}{unit}", component.label, number(shown))
            })
        };
        if let Some(exact) = &answer.closed_form {
            let _ = writeln!(text, "  exactly {exact}");
        }
        if let Some(principal) = &answer.principal {
            text += &principal_text(principal, answer);
        }
        if let Some(reason) = reason_in_unit(answer) {
            let _ = writeln!(text, "  tolerance not reached: {reason}");
        }
    }
    text
}

/// What the reader should know besides: open chain, one-sided patch, what the tolerance is relative to.
pub fn notes_text(answers: &[Answer]) -> String {
    let notes = answers.iter().flat_map(|answer| answer.warnings.iter().map(|note| (&answer.name, note)));
    notes.map(|(name, note)| format!("note: {name}: {note}\n")).collect()
}

/// The values given by `--set` in the units of the sheet, such as `d = 0.2 mm, n = 3`.
pub fn set_values_text(model: &Model, bindings: &Bindings, is_set: &dyn Fn(&str) -> bool) -> String {
    let set = model.parameters.iter().filter(|parameter| is_set(&parameter.name));
    let shown = set.map(|parameter| {
        let value = bindings.value(parameter.symbol);
        let in_unit = exact_number(fifteen_digits(parameter.unit.as_ref().map_or(value, |unit| unit.from_si(value))));
        match (&parameter.unit, parameter.dimension.is_none()) {
            (Some(unit), _) => format!("{} = {in_unit} {}", parameter.name, unit.text),
            (None, true) => format!("{} = {in_unit}", parameter.name),
            (None, false) => format!("{} = {in_unit} {}", parameter.name, parameter.dimension),
        }
    });
    shown.collect::<Vec<_>>().join(", ")
}

/// The reason why a tolerance was not reached, with the error and what was allowed in the unit of the answer.
pub(super) fn reason_in_unit(answer: &Answer) -> Option<String> {
    let reason = answer.reason.as_ref()?;
    let Some(allowed) = answer.allowed else { return Some(reason.clone()) };
    let in_unit = |value: f64| {
        let component = Component { label: "", value, error: 0.0 };
        in_shown_unit(&component, answer.shown_as.as_ref()).0
    };
    let worst = shown_components(answer).iter().map(|(_, error)| *error).fold(0.0, f64::max);
    let unit = unit_after(answer);
    Some(format!("{reason}; error {worst:.2e}{unit}, allowed {:.2e}{unit}", in_unit(allowed)))
}

fn unit_after(answer: &Answer) -> String {
    let unit = unit_text(answer);
    if unit.is_empty() { unit } else { format!(" {unit}") }
}

fn principal_text(principal: &Principal, answer: &Answer) -> String {
    let unit = unit_after(answer);
    let scale = answer.shown_as.as_ref().map_or(1.0, |shown| shown.from_si(1.0));
    let mut text = String::new();
    let axes = [0, 1, 2].map(|index| principal.axis_error(index));
    for (index, moment) in principal.moments.iter().enumerate() {
        let shown = value_with_error(moment * scale, principal.error * scale);
        let _ = write!(text, "  principal moment {shown}{unit}");
        if let Some(error) = axes[index] {
            // Only digits that the error of the axis supports.
            let decimals = (-error.log10()).floor().clamp(1.0, 6.0) as usize;
            let [x, y, z] =
                principal.axes[index].map(|coordinate| without_sign_of_zero(format!("{coordinate:.decimals$}")));
            let _ = write!(text, ", axis ({x}, {y}, {z})");
        } else if axes.iter().any(Option::is_some) {
            text += ", axis: any across the other (two equal moments)";
        }
        text += "\n";
    }
    if axes.iter().all(Option::is_none) {
        text += "  axes: any (equal moments)\n";
    }
    text
}
