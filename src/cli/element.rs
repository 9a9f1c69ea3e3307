//! `quadrel element`

use super::arguments::ElementOptions;
use super::{Exit, Failure, choose_patch, load, output};
use crate::report::{ElementReport, element_json, element_text};

pub(super) fn run(options: &ElementOptions) -> Result<Exit, Failure> {
    let (model, _) = load(&options.sheet, &[])?;
    let patch = choose_patch(&model, options.patch.as_deref())?;
    let report = ElementReport::new(&model, patch);
    if options.json {
        output::print_json(&element_json(&report));
    } else {
        output::print(&element_text(&report));
    }
    Ok(Exit::Reached)
}
