//! All closed forms of a patch.

use super::closed::{Elements, Formulas, node_allowance};
use super::form::Form;
use super::meter::{Step, with_allowance};
use super::plan::Printer;
use super::read::Arguments;
use crate::language::{Model, PatchId};

/// Steps for one manner of reading a patch.
const ALLOWANCE: u64 = 20_000_000;

/// The closed forms of a patch.
#[derive(Clone, Debug)]
pub struct ClosedForms {
    /// |phi_u x phi_v|
    pub element: Option<Form>,
    /// Conditions on the parameters, beyond those of the sheet, that the forms need.
    pub conditions: Vec<String>,
}

/// Derives the closed forms of a patch.
pub fn closed_forms(model: &Model, patch: PatchId) -> ClosedForms {
    let mut graph = model.graph.clone();
    let patch = &model.patches[patch.0];
    let formulas = Formulas::new(&mut graph, patch);
    let manners: &[Arguments] =
        if formulas.has_sums(&graph) { &[Arguments::Split, Arguments::Whole] } else { &[Arguments::Split] };
    let mut best: Option<(Form, Vec<String>)> = None;
    for &manner in manners {
        let found = with_allowance(ALLOWANCE, || -> Step<(Form, Vec<String>)> {
            let mut elements = Elements::new(&graph, model, patch, &formulas, manner)?;
            let candidates = elements.element()?;
            let mut best: Option<Form> = None;
            let mut printer = Printer::new(elements.reader.ring.clone(), &graph, patch.variables, node_allowance());
            for candidate in &candidates {
                let form = printer.rooted(candidate)?;
                if best.as_ref().is_none_or(|known| form.operations() < known.operations()) {
                    best = Some(form);
                }
            }
            Ok((best.ok_or(super::meter::Exhausted)?, elements.conditions))
        });
        if let Ok((form, conditions)) = found
            && best.as_ref().is_none_or(|(known, _)| form.operations() < known.operations())
        {
            best = Some((form, conditions));
        }
    }
    match best {
        Some((form, conditions)) => ClosedForms { element: Some(form), conditions },
        None => ClosedForms { element: None, conditions: Vec::new() },
    }
}
