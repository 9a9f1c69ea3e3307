//! `quadrel answer`

use super::arguments::{AnswerOptions, KindOption};
use super::progress::Watch;
use super::{Exit, Failure, load, output, set_echo, set_text};
use crate::integrals::{Answer, AnswerKind, Settings, answer_each};
use crate::report::{Stamp, answers_json, answers_text, notes_text};
use serde_json::json;
use std::io::IsTerminal;

pub(super) fn run(options: &AnswerOptions) -> Result<Exit, Failure> {
    if options.rel == 0.0 && options.abs == 0.0 {
        return Err(Failure::Usage(
            "--rel 0 together with --abs 0 asks for no error at all, which no integral reaches\n\
             hint: give one of them, such as --rel 1e-12 or --abs 1e-6"
                .to_owned(),
        ));
    }
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
    if answers.is_empty() {
        output::note("nothing to answer: the sheet has no patch and asks nothing; name a value to see it");
    }
    let stamp = Stamp::new(
        &model.source.text,
        vec![
            ("rel", json!(options.rel)),
            ("abs", json!(options.abs)),
            ("evaluations", json!(options.evaluations)),
            ("set", json!(set_text(&model, &bindings, &options.set))),
        ],
    );
    if options.json {
        output::print_json(&answers_json(&answers, &model.source, &model.warnings, &stamp));
    } else {
        output::print(&set_echo(&model, &bindings, &options.set));
        output::print(&answers_text(&answers));
        // What is kept or passed on says what it was made from; on a terminal it would be in the way.
        if !std::io::stdout().is_terminal() && !answers.is_empty() {
            output::print(&format!("# {}\n", stamp.line()));
        }
        output::notes(&notes_text(&answers));
    }
    for failure in answers.iter().filter_map(|answer| answer.failure.as_deref()) {
        output::diagnostic(&model.source, &failure.diagnostic());
        output::place(&failure.error);
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
        (None, AnswerKind::Exact | AnswerKind::Proved | AnswerKind::Estimate) => Exit::Reached,
    }
}

/// A proof that was asked for and cannot be given; the value and its estimate stay.
fn without_proof(answer: &mut Answer) {
    if answer.kind == AnswerKind::Estimate {
        answer.kind = AnswerKind::Unreached;
        answer.reason = Some("no proof is available in this version; the error is an estimate".to_owned());
    }
}
