//! Answers as lines of text.

use super::number::{in_shown_unit, unit_text, value_with_error};
use crate::integrals::Answer;
use std::fmt::Write;

/// The answers, one below the other: value, error, unit, how it was got.
pub fn answers_text(answers: &[Answer]) -> String {
    let mut text = String::new();
    for answer in answers {
        if let Some(failure) = &answer.failure {
            // Writing to a string cannot fail.
            let _ = writeln!(text, "{} has no value  [{}]", answer.name, answer.kind.word());
            let _ = writeln!(text, "  {}: {}", failure.error.code, failure.error.message);
            continue;
        }
        let unit = unit_text(answer);
        let unit = if unit.is_empty() { unit } else { format!(" {unit}") };
        let how = if answer.evaluations == 0 {
            "computed from the parameters".to_owned()
        } else {
            format!("{}, {} evaluations", answer.kind.word(), answer.evaluations)
        };
        let number = |index: usize| {
            let (value, error) = in_shown_unit(&answer.components[index], answer.shown_as.as_ref());
            value_with_error(value, error)
        };
        // Writing to a string cannot fail.
        let _ = if answer.components.len() == 1 {
            writeln!(text, "{} = {}{unit}  [{how}]", answer.name, number(0))
        } else {
            let _ = writeln!(text, "{}  [{how}]", answer.name);
            answer.components.iter().enumerate().try_for_each(|(index, component)| {
                writeln!(text, "  .{:<2} = {}{unit}", component.label, number(index))
            })
        };
        if let Some(exact) = &answer.exact {
            let _ = writeln!(text, "  exactly {exact}");
        }
        if let Some(principal) = &answer.principal {
            let scale = answer.shown_as.as_ref().map_or(1.0, |shown| shown.from_si(1.0));
            for (moment, axis) in principal.moments.iter().zip(&principal.axes) {
                let shown = value_with_error(moment * scale, principal.error * scale);
                // Axes of equal moments are any two perpendicular ones in their plane.
                let near = |other: &&f64| (**other - moment).abs() <= 4.0 * principal.error + 1e-12 * moment.abs();
                let axis = if principal.moments.iter().filter(near).count() > 1 {
                    "axis not determined: equal moments".to_owned()
                } else {
                    // Adding 0 turns -0 into 0.
                    let [x, y, z] = axis.map(|part| (part * 1e6).round() / 1e6 + 0.0);
                    format!("axis ({x:.6}, {y:.6}, {z:.6})")
                };
                let _ = writeln!(text, "  principal moment {shown}{unit}, {axis}");
            }
        }
        if let Some(reason) = &answer.reason {
            let _ = writeln!(text, "  tolerance not reached: {reason}");
        }
        for warning in &answer.warnings {
            let _ = writeln!(text, "  note: {warning}");
        }
    }
    text
}
