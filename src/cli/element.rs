//! `quadrel element`

use super::arguments::{ElementFormat, ElementOptions};
use super::{Exit, Failure, choose_patch, load, output};
use crate::report::source::Language;
use crate::report::{ElementReport, Stamp, element_json, element_text};

pub(super) fn run(options: &ElementOptions) -> Result<Exit, Failure> {
    let (model, bindings) = load(&options.sheet, &[])?;
    let patch = choose_patch(&model, options.patch.as_deref())?;
    let report = ElementReport::new(&model, &bindings, patch);
    let format = if options.json { ElementFormat::Json } else { options.format };
    let stamp = Stamp::new(&model.source.text, Vec::new());
    let source = |language: Language| {
        report.source(language, &stamp).map_err(|error| Failure::Usage(format!("--as {}: {error}", language.name())))
    };
    let text = match format {
        ElementFormat::Json => {
            output::print_json(&element_json(&report, &stamp));
            return Ok(Exit::Reached);
        }
        ElementFormat::Text => element_text(&report),
        ElementFormat::Latex => report.document().latex(),
        ElementFormat::Typst => report.document().typst(),
        ElementFormat::Mathml => report.document().mathml(),
        ElementFormat::C => source(Language::C)?,
        ElementFormat::Rust => source(Language::Rust)?,
        ElementFormat::Python => source(Language::Python)?,
        ElementFormat::Fortran => source(Language::Fortran)?,
        ElementFormat::Julia => source(Language::Julia)?,
    };
    // What the formulas rest on goes where they go.
    let comment: Option<fn(&str) -> String> = match format {
        ElementFormat::Latex => Some(|note| format!("% {note}\n")),
        ElementFormat::Typst => Some(|note| format!("// {note}\n")),
        ElementFormat::Mathml => Some(|note| format!("<!-- {} -->\n", note.replace("--", "- -"))),
        _ => None,
    };
    let comments: String =
        comment.map_or_else(String::new, |comment| report.notes.iter().map(|n| comment(n)).collect());
    output::print(&(comments + &text));
    if format != ElementFormat::Text {
        report.notes.iter().for_each(|note| output::note(note));
    }
    Ok(Exit::Reached)
}
