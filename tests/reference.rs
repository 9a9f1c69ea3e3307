//! 77 surface integrals with reference values from outside (tests/data/cases.json): at most 11 may be out of reach, and
//! no stated error may be smaller than the true one.

#[path = "support/cases.rs"]
mod cases;

use cases::{Case, cases};
use quadrel::integrals::{AnswerKind, NoProgress, Settings, answer};
use quadrel::language::{Source, check};

struct Row {
    id: String,
    kind: AnswerKind,
    value: f64,
    stated: f64,
    truth: f64,
    allowed: f64,
    evaluations: u64,
    seconds: f64,
    note: String,
}

/// |value - reference|, with the reference split in two doubles so that its own rounding does not count.
fn true_error(value: f64, reference: &str) -> f64 {
    let high: f64 = reference.parse().unwrap();
    let exact = |text: &str| quadrel::expression::Exact::parse_decimal(text.trim_start_matches('-')).unwrap();
    let magnitude = exact(reference);
    let signed = if reference.starts_with('-') { magnitude.negate() } else { magnitude };
    let low = signed.subtract(&quadrel::expression::Exact::from_f64(high).unwrap()).map_or(0.0, |rest| rest.to_f64());
    ((value - high) - low).abs()
}

fn run(case: &Case, relative: f64) -> Row {
    let model = check(Source::new(format!("{}.sheet", case.id), case.sheet.clone())).unwrap_or_else(|errors| {
        let drawn: String = errors.diagnostics.iter().map(|d| errors.source.draw(d)).collect();
        panic!("{}:\n{drawn}\n{}", case.id, case.sheet)
    });
    let bindings = model.bind(&[]).unwrap();
    let settings = Settings { relative, ..Settings::default() };
    let start = std::time::Instant::now();
    let outcome = answer(&model, &bindings, &["answer".to_owned()], &settings, &NoProgress);
    let seconds = start.elapsed().as_secs_f64();
    let reference: f64 = case.value.parse().unwrap();
    let size = if reference == 0.0 { case.magnitude.unwrap_or(1.0) } else { reference.abs() };
    let row = |kind, value: f64, stated, evaluations, note| Row {
        id: case.id.clone(),
        kind,
        value,
        stated,
        truth: true_error(value, &case.value),
        allowed: relative * size,
        evaluations,
        seconds,
        note,
    };
    match outcome {
        Ok(answers) => {
            let found = &answers[0];
            let component = &found.components[0];
            row(
                found.kind,
                component.value,
                component.error,
                found.evaluations,
                found.reason.clone().unwrap_or_default(),
            )
        }
        Err(error) => row(AnswerKind::Unreached, f64::NAN, f64::INFINITY, 0, error.message),
    }
}

fn table(rows: &[Row]) {
    println!("{:<28} {:<9} {:>9} {:>9} {:>9} {:>9}", "case", "kind", "stated", "true", "points", "seconds");
    for row in rows {
        println!(
            "{:<28} {:<9} {:>9.1e} {:>9.1e} {:>9} {:>9.4} {}{}",
            row.id,
            row.kind.word(),
            row.stated,
            row.truth,
            row.evaluations,
            row.seconds,
            if row.truth > row.allowed { "MISSED " } else { "" },
            row.note,
        );
    }
}

fn check_rows(rows: &[Row], least: usize) {
    table(rows);
    let within = rows.iter().filter(|row| row.truth <= row.allowed && row.kind != AnswerKind::Unreached).count();
    println!("{within} of {} within the tolerance", rows.len());
    for row in rows {
        assert!(
            row.truth <= row.stated || row.truth.is_nan(),
            "{}: the stated error {:e} is smaller than the true one {:e} (value {})",
            row.id,
            row.stated,
            row.truth,
            row.value
        );
        if row.kind == AnswerKind::Unreached {
            assert!(!row.note.is_empty(), "{}: unreached without a reason", row.id);
        } else {
            assert!(row.truth <= row.allowed, "{}: claims a tolerance that it misses", row.id);
        }
    }
    assert!(within >= least, "only {within} cases are within the tolerance");
}

#[test]
fn reached_and_honest_at_1e_9() {
    let rows: Vec<Row> = cases().iter().map(|case| run(case, 1e-9)).collect();
    check_rows(&rows, 66);
}

#[test]
fn honest_at_1e_6() {
    let rows: Vec<Row> = cases().iter().map(|case| run(case, 1e-6)).collect();
    check_rows(&rows, 66);
}

#[test]
fn honest_at_1e_12() {
    let rows: Vec<Row> = cases().iter().map(|case| run(case, 1e-12)).collect();
    check_rows(&rows, 40);
}
