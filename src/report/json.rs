//! One JSON document for each run, failures included; keys are stable and in a fixed order.

use super::answer_text::reason_in_unit;
use super::number::{shown_components, unit_text};
use super::stamp::Stamp;
use crate::integrals::{Answer, IntegralError};
use crate::language::{Diagnostic, Severity, SheetErrors, Source};
use serde_json::{Map, Value, json};

/// Version of the documents.
const SCHEMA: &str = "quadrel/1";

/// A finite number, or null; zero without a sign.
fn number(value: f64) -> Value {
    serde_json::Number::from_f64(value + 0.0).map_or(Value::Null, Value::Number)
}

/// One number as itself, several as an array.
fn one_or_many(values: Vec<f64>) -> Value {
    match values[..] {
        [one] => number(one),
        _ => Value::Array(values.into_iter().map(number).collect()),
    }
}

/// The document of `answer`.
pub fn answers_json(answers: &[Answer], source: &Source, warnings: &[Diagnostic], stamp: &Stamp) -> Value {
    let warnings: Vec<Value> = warnings.iter().map(|warning| diagnostic_json(source, warning)).collect();
    let errors: Vec<Value> = answers
        .iter()
        .filter_map(|answer| answer.failure.as_deref())
        .map(|failure| error_json(&failure.error, Some((failure.line, failure.column))))
        .collect();
    let answers: Vec<Value> = answers.iter().map(answer_json).collect();
    let mut document = Map::new();
    document.insert("schema".into(), json!(SCHEMA));
    document.insert("answers".into(), json!(answers));
    document.insert("warnings".into(), json!(warnings));
    if !errors.is_empty() {
        document.insert("errors".into(), json!(errors));
    }
    document.insert("stamp".into(), stamp.json());
    Value::Object(document)
}

fn answer_json(answer: &Answer) -> Value {
    let shown = shown_components(answer);
    let unit_name = unit_text(answer);
    let mut object = Map::new();
    object.insert("name".into(), json!(answer.name));
    let [value, error] = match answer.failure {
        Some(_) => [Value::Null, Value::Null],
        None => [
            one_or_many(shown.iter().map(|(value, _)| *value).collect()),
            one_or_many(shown.iter().map(|(_, error)| *error).collect()),
        ],
    };
    object.insert("value".into(), value);
    object.insert("error".into(), error);
    object.insert("kind".into(), json!(answer.kind.word()));
    object.insert("unit".into(), if unit_name.is_empty() { Value::Null } else { json!(unit_name) });
    if answer.components.len() > 1 {
        object.insert("components".into(), json!(answer.components.iter().map(|c| c.label).collect::<Vec<_>>()));
    }
    object.insert("evaluations".into(), json!(answer.evaluations));
    object.insert("seconds".into(), number(answer.seconds));
    object.insert("closed_form".into(), json!(answer.closed_form));
    object.insert("reason".into(), json!(reason_in_unit(answer)));
    object.insert("warnings".into(), json!(answer.warnings));
    if let Some(principal) = &answer.principal {
        let scale = answer.shown_as.as_ref().map_or(1.0, |unit| unit.from_si(1.0));
        object.insert("principal_moments".into(), one_or_many(principal.moments.map(|m| m * scale).to_vec()));
        object.insert("principal_error".into(), number(principal.error * scale));
        object.insert(
            "principal_axes".into(),
            Value::Array(
                (0..3)
                    .map(|index| match principal.axis_error(index) {
                        Some(_) => one_or_many(principal.axes[index].to_vec()),
                        None => Value::Null,
                    })
                    .collect(),
            ),
        );
    }
    Value::Object(object)
}

/// The document of a run on a sheet that is wrong.
pub fn sheet_errors_json(errors: &SheetErrors) -> Value {
    let list: Vec<Value> =
        errors.diagnostics.iter().map(|diagnostic| diagnostic_json(&errors.source, diagnostic)).collect();
    json!({"schema": SCHEMA, "errors": list})
}

fn diagnostic_json(source: &Source, diagnostic: &Diagnostic) -> Value {
    let (line, column) = source.line_column(diagnostic.span.start);
    json!({
        "code": diagnostic.code,
        "severity": match diagnostic.severity { Severity::Error => "error", Severity::Warning => "warning" },
        "message": diagnostic.message,
        "line": line,
        "column": column,
        "hint": diagnostic.hint,
    })
}

/// The document of a run that failed for another reason.
pub fn failure_json(error: &IntegralError) -> Value {
    json!({"schema": SCHEMA, "errors": [error_json(error, None)]})
}

/// One numerical failure, with line and column of what failed where they are known.
fn error_json(error: &IntegralError, definition: Option<(usize, usize)>) -> Value {
    let place = error.place.as_ref().map(|place| {
        json!({
            "patch": place.patch,
            "variables": place.variables.iter().map(|(name, value)| json!({"name": name, "value": number(*value)})).collect::<Vec<_>>(),
            "position": place.position.map(number),
            "expression": place.expression,
        })
    });
    json!({
        "code": error.code,
        "severity": "error",
        "message": error.message,
        "line": definition.map(|(line, _)| line),
        "column": definition.map(|(_, column)| column),
        "hint": error.hint,
        "place": place,
    })
}
