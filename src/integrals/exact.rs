//! Answers that rest on no integral and are known exactly from the text: `60 [deg]`, `0.1*D` with `D = 2.4 [m]`.
//!
//! Such a number is `p/q * pi^n` over the exact numbers of the sheet. It counts as exact only if its decimal in the shown
//! unit ends after at most 15 digits, because then a double prints it as it is.

use super::outcome::{Answer, AnswerKind};
use crate::expression::{Exact, ExpressionId, Graph, Node, SymbolId};
use crate::language::{Bindings, Model, Parameter, Unit};
use rustc_hash::FxHashMap;

/// `coefficient * pi^power`
#[derive(Clone)]
struct Multiple {
    coefficient: Exact,
    power: i64,
}

/// Marks the answers that are exact: kind [`AnswerKind::Exact`], errors of zero.
pub(super) fn mark_exact(model: &Model, bindings: &Bindings, answers: &mut [Answer]) {
    for answer in answers {
        let Some(value) = model.value_named(&answer.name).filter(|value| value.depends_on.is_empty()) else { continue };
        let is_exact = value.components.iter().all(|&component| {
            multiple(&model.graph, component, &|symbol| parameter_value(model, bindings, symbol))
                .is_some_and(|found| is_short(&found, answer.shown_as.as_ref()))
        });
        if is_exact {
            answer.kind = AnswerKind::Exact;
            answer.reason = None;
            answer.components.iter_mut().for_each(|component| component.error = 0.0);
        }
    }
}

/// The formula as an exact multiple of a power of pi, if it is one.
fn multiple(graph: &Graph, root: ExpressionId, symbol: &dyn Fn(SymbolId) -> Option<Multiple>) -> Option<Multiple> {
    let mut known: FxHashMap<ExpressionId, Multiple> = FxHashMap::default();
    for id in graph.reachable(&[root]) {
        let of = |operand: &ExpressionId| &known[operand];
        let found = match graph.node(id) {
            Node::Number(number) => Multiple { coefficient: graph.number_value(number).clone(), power: 0 },
            Node::Pi => Multiple { coefficient: Exact::one(), power: 1 },
            Node::Symbol(name) => symbol(name)?,
            Node::Negate(a) => Multiple { coefficient: of(&a).coefficient.negate(), power: of(&a).power },
            Node::Add(a, b) if of(&a).power == of(&b).power => {
                Multiple { coefficient: of(&a).coefficient.add(&of(&b).coefficient)?, power: of(&a).power }
            }
            Node::Subtract(a, b) if of(&a).power == of(&b).power => {
                Multiple { coefficient: of(&a).coefficient.subtract(&of(&b).coefficient)?, power: of(&a).power }
            }
            Node::Multiply(a, b) => Multiple {
                coefficient: of(&a).coefficient.multiply(&of(&b).coefficient)?,
                power: of(&a).power.checked_add(of(&b).power)?,
            },
            Node::Divide(a, b) => Multiple {
                coefficient: of(&a).coefficient.divide(&of(&b).coefficient)?,
                power: of(&a).power.checked_sub(of(&b).power)?,
            },
            Node::Power(a, b) if of(&b).power == 0 => {
                let exponent = of(&b).coefficient.to_i64()?;
                Multiple {
                    coefficient: of(&a).coefficient.power(exponent)?,
                    power: of(&a).power.checked_mul(exponent)?,
                }
            }
            _ => return None,
        };
        known.insert(id, found);
    }
    known.remove(&root)
}

/// A parameter as the sheet gives it, or as `--set` does where that is a short decimal in the parameter's unit.
fn parameter_value(model: &Model, bindings: &Bindings, symbol: SymbolId) -> Option<Multiple> {
    let parameter = model.parameters.iter().find(|parameter| parameter.symbol == symbol)?;
    let value = bindings.value(symbol);
    let own = crate::expression::evaluate_one(&model.graph, parameter.default, |_| f64::NAN);
    if own.to_bits() == value.to_bits() {
        return multiple(&model.graph, parameter.default, &|_| None);
    }
    set_value(parameter, value)
}

fn set_value(parameter: &Parameter, value: f64) -> Option<Multiple> {
    let shown = fifteen_digits(parameter.unit.as_ref().map_or(value, |unit| unit.from_si(value)));
    let back = parameter.unit.as_ref().map_or(shown, |unit| unit.to_si(shown));
    if back.to_bits() != value.to_bits() {
        return None;
    }
    let decimal = decimal(shown)?;
    Some(match &parameter.unit {
        Some(unit) => Multiple { coefficient: decimal.multiply(&unit.factor)?, power: unit.pi_power.into() },
        None => Multiple { coefficient: decimal, power: 0 },
    })
}

/// Whether a decimal of at most 15 digits is the number in this unit.
fn is_short(number: &Multiple, unit: Option<&Unit>) -> bool {
    let (factor, power) = unit.map_or((Exact::one(), 0), |unit| (unit.factor.clone(), unit.pi_power.into()));
    let Some(in_unit) = number.coefficient.divide(&factor) else { return false };
    if in_unit.is_zero() {
        return true;
    }
    number.power == power && decimal(fifteen_digits(in_unit.to_f64())).is_some_and(|decimal| decimal == in_unit)
}

/// The decimal that prints as this number.
fn decimal(value: f64) -> Option<Exact> {
    let number = Exact::parse_decimal(&format!("{:e}", value.abs()))?;
    Some(if value < 0.0 { number.negate() } else { number })
}

/// The number rounded to 15 significant digits, which removes the noise of a conversion of units.
pub fn fifteen_digits(value: f64) -> f64 {
    // What Rust prints it reads back.
    format!("{value:.14e}").parse().unwrap_or(value)
}
