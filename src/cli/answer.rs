//! `quadrel answer`

use super::arguments::{AnswerOptions, KindOption};
use super::progress::Watch;
use super::{Exit, Failure, load, output};
use crate::integrals::{Answer, AnswerKind, Settings, answer_each};
use crate::report::{Stamp, answers_json, answers_text};

pub(super) fn run(options: &AnswerOptions) -> Result<Exit, Failure> {
    let (model, bindings) = load(&options.sheet, &options.set)?;
    let settings = Settings { relative: options.rel, absolute: options.abs, evaluations: options.evaluations };
    let watch = Watch::new();
    let compute = || answer_each(&model, &bindings, &options.names, &settings, &watch);
    let mut answers = match options.threads {
        Some(threads) => rayon::ThreadPoolBuilder::new()
            .num_threads(threads)
            .build()
            .map_err(|error| Failure::Usage(format!("--threads {threads}: {error}")))?
            .install(compute),
        None => compute(),
    }?;
    drop(watch);
    if options.kind == KindOption::Proved {
        answers.iter_mut().for_each(without_proof);
    }
    if options.json {
        let warnings: Vec<String> = model.warnings.iter().map(|warning| warning.message.clone()).collect();
        let settings = format!(
            "rel={:e} abs={:e} evaluations={} set={}",
            options.rel,
            options.abs,
            options.evaluations.map_or("default".to_owned(), |count| count.to_string()),
            options.set.join(";")
        );
        output::print_json(&answers_json(&answers, &warnings, &Stamp::new(&model.source.text, settings)));
    } else {
        output::print(&answers_text(&answers));
    }
    for failure in answers.iter().filter_map(|answer| answer.failure.as_deref()) {
        output::diagnostic(&model.source, &failure.diagnostic());
    }
    if Watch::interrupted() {
        return Ok(Exit::Interrupted);
    }
    Ok(answers.iter().map(exit_of).max().unwrap_or(Exit::Reached))
}

/// What one answer means for the run, which ends with the gravest.
fn exit_of(answer: &Answer) -> Exit {
    match (&answer.failure, answer.kind) {
        (Some(failure), _) => Exit::of(&failure.error),
        (None, AnswerKind::Unreached) => Exit::No,
        (None, AnswerKind::Proved | AnswerKind::Estimate) => Exit::Reached,
    }
}

/// A proof that was asked for and cannot be given; the value and its estimate stay.
fn without_proof(answer: &mut Answer) {
    if answer.kind == AnswerKind::Estimate {
        answer.kind = AnswerKind::Unreached;
        answer.reason = Some("no proof is available in this version; the error is an estimate".to_owned());
    }
}
