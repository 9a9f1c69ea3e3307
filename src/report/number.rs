//! Numbers with their errors, in the unit they are shown in, with the digits the error supports.

use crate::integrals::{Answer, AnswerKind, Component, fifteen_digits};
use crate::language::{Dimension, Unit};

/// m kg s^-2, shown as N.
const FORCE: Dimension = Dimension::of([1, 1, -2, 0, 0, 0, 0]);

/// m^-1 kg s^-2, shown as Pa.
const PRESSURE: Dimension = Dimension::of([-1, 1, -2, 0, 0, 0, 0]);

/// Value and error of a component in the shown unit; the error covers the conversion.
pub fn in_shown_unit(component: &Component, unit: Option<&Unit>) -> (f64, f64) {
    let Some(unit) = unit else { return (component.value, component.error) };
    let value = unit.from_si(component.value);
    let error =
        unit.from_si(component.error).abs() * (1.0 + Unit::CONVERSION_ERROR) + Unit::CONVERSION_ERROR * value.abs();
    (value, error)
}

/// Values and errors of an answer in its unit; what is exact is shown without the noise of the conversion.
pub fn shown_components(answer: &Answer) -> Vec<(f64, f64)> {
    let shown = |component| match in_shown_unit(component, answer.shown_as.as_ref()) {
        (value, _) if answer.kind == AnswerKind::Exact => (fifteen_digits(value), 0.0),
        inexact => inexact,
    };
    answer.components.iter().map(shown).collect()
}

/// The unit of an answer as text: the one asked for, else the coherent SI unit, else nothing.
pub fn unit_text(answer: &Answer) -> String {
    match &answer.shown_as {
        Some(unit) => unit.text.clone(),
        None if answer.dimension.is_none() => String::new(),
        None if answer.dimension == FORCE => "N".to_owned(),
        None if answer.dimension == PRESSURE => "Pa".to_owned(),
        None => answer.dimension.to_string(),
    }
}

/// `3.14159265 ± 0.00000012`: the error with two digits, rounded up, the value to the same place.
pub fn value_with_error(value: f64, error: f64) -> String {
    if !value.is_finite() {
        return "undefined".to_owned();
    }
    if !error.is_finite() {
        return format!("{value:.2e}, no error bound");
    }
    if error == 0.0 {
        return format!("{} ± 0", without_sign_of_zero(format!("{value}")));
    }
    let place = error.log10().floor() as i32 - 1;
    let size = if value == 0.0 { place } else { value.abs().log10().floor() as i32 };
    let plain = (-6..15).contains(&size) && place > -20 && place <= 0;
    let exponent = if plain { 0 } else { size.max(place + 1) };
    let decimals = (exponent - place).clamp(0, 25) as usize;
    let unit = 10f64.powi(exponent);
    let last = 10f64.powi(-(decimals as i32));
    let mut shown_error = format!("{:.decimals$}", error / unit);
    // The error is never rounded down.
    if shown_error.parse::<f64>().is_ok_and(|shown| shown < error / unit) {
        shown_error = format!("{:.decimals$}", error / unit + last);
    }
    let shown_value = format!("{:.decimals$}", value / unit);
    let shown_value = without_sign_of_zero(shown_value);
    if exponent == 0 {
        format!("{shown_value} ± {shown_error}")
    } else {
        format!("({shown_value} ± {shown_error})e{exponent}")
    }
}

/// A number that is known as it prints: `60`, `0.24`, `1e-20`.
pub(super) fn exact_number(value: f64) -> String {
    let plain = value == 0.0 || (1e-6..1e15).contains(&value.abs());
    if plain { without_sign_of_zero(format!("{value}")) } else { format!("{value:e}") }
}

/// A number that rounds to zero has no sign.
pub(super) fn without_sign_of_zero(number: String) -> String {
    match number.strip_prefix('-') {
        Some(digits) if digits.bytes().all(|b| matches!(b, b'0' | b'.')) => digits.to_owned(),
        _ => number,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_numbers_are_short() {
        let shown: Vec<String> = [60.0, -0.24, -0.0, 1e-20, 3e300].into_iter().map(exact_number).collect();
        assert_eq!(shown, ["60", "-0.24", "0", "1e-20", "3e300"]);
    }

    #[test]
    fn digits_follow_the_error() {
        assert_eq!(value_with_error(std::f64::consts::PI, 1.23e-6), "3.1415927 ± 0.0000013");
        assert_eq!(value_with_error(0.0, 0.0), "0 ± 0");
        assert_eq!(value_with_error(12566.37, f64::INFINITY), "1.26e4, no error bound");
        assert_eq!(value_with_error(f64::NAN, f64::NAN), "undefined");
        assert_eq!(value_with_error(-1e-20, 1.05e-12), "(0.0 ± 1.1)e-12");
        assert_eq!(value_with_error(5.1e14, 7.8e2), "(5.1000000000000 ± 0.0000000000078)e14");
        assert_eq!(value_with_error(6.022e23, 1e15), "(6.022000000 ± 0.000000010)e23");
    }
}
