//! All closed forms of a patch: derived, written, proved.

use super::certificate::{Certificate, Proof, names};
use super::closed::{Elements, Formulas, Rooted};
use super::facts::{Fact, facts};
use super::form::Form;
use super::meter::{Exhausted, Step, with_allowance};
use super::parse_back::parse_back;
use super::plan::Printer;
use super::read::Arguments;
use super::regular::is_regular;
use super::stability::is_stable;
use super::total::Total;
use crate::calculus::{cross, norm};
use crate::expression::{ExpressionId, Function, Graph, SymbolId, evaluate_one};
use crate::language::{Bound, Model, Patch, PatchId};
use std::collections::BTreeMap;

/// Steps for the elements of one manner of reading a patch.
const READING: u64 = 30_000_000;

/// Steps for writing one formula.
const WRITING: u64 = 6_000_000;

/// Steps for proving all formulas.
const PROVING: u64 = 60_000_000;

/// Operations of the longest norm of a cross product that is compared with the closed form.
const LONGEST_RAW: usize = 2_000;

/// Steps for the element alone, where it is only evaluated.
const EVALUATING: u64 = 4_000_000;

/// Steps for an exact area beside a number.
const AT_ONCE: u64 = 100_000;

/// Steps for the exact area.
const INTEGRATING: u64 = 10_000_000;

/// The most sums that the search for the shortest form of one formula explores.
const NODES: usize = 400;

/// A quantity that has a closed form; components of vectors are counted from 0.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash, Debug)]
pub enum Quantity {
    /// Component of phi_u.
    TangentU(usize),
    /// Component of phi_v.
    TangentV(usize),
    /// phi_u.phi_u
    E,
    /// phi_u.phi_v
    F,
    /// phi_v.phi_v
    G,
    /// dA = |phi_u x phi_v|
    Element,
    /// Component of n = N/|N|.
    Normal(usize),
    /// phi_uu.n
    L,
    /// phi_uv.n
    M,
    /// phi_vv.n
    N2,
    /// K
    Gauss,
    /// H
    Mean,
}

impl Quantity {
    /// Whether it is undefined where dA is 0.
    pub fn needs_normal(self) -> bool {
        use Quantity::{Gauss, L, M, Mean, N2, Normal};
        matches!(self, Normal(_) | L | M | N2 | Gauss | Mean)
    }

    /// Whether it turns around with the normal, or is a root: its form may rest on signs.
    fn has_sign(self) -> bool {
        !matches!(self, Quantity::E | Quantity::F | Quantity::G | Quantity::Gauss)
    }
}

/// The closed forms of a patch; a quantity that is missing has none that could be found and proved.
#[derive(Clone, Debug, Default)]
pub struct ClosedForms {
    /// The forms. Each was read back from its text and proved equal to what it stands for.
    pub forms: BTreeMap<Quantity, Form>,
    /// The exact area over the region.
    pub area: Option<Form>,
    /// What is proved of the patch.
    pub facts: Vec<Fact>,
    /// Conditions on the parameters, beyond those of the sheet, under which the signs in a form were proved.
    pub conditions_of: BTreeMap<Quantity, Vec<String>>,
    /// Conditions under which the exact area is defined.
    pub area_conditions: Vec<String>,
    /// Whether the area element is shown as it is defined, because nothing shorter was found.
    pub is_raw: bool,
    /// Whether the patch has no area: dA = 0 everywhere.
    pub is_degenerate: bool,
    /// Factors of the area element whose sign could not be proved: they stand between bars.
    pub unproved_signs: Vec<Form>,
    /// Quantities for which the allowance of steps ran out: no form, or not the shortest one.
    pub cut_short: Vec<Quantity>,
    /// Quantities whose form was found and failed its proof: a defect of this program.
    pub failed: Vec<Quantity>,
}

/// Derives the closed forms of a patch.
pub fn closed_forms(model: &Model, patch: PatchId) -> ClosedForms {
    let mut graph = model.graph.clone();
    let patch = &model.patches[patch.0];
    let formulas = Formulas::new(&mut graph, patch);
    let raw = raw_element(&mut graph, patch, &formulas);
    let mut best = ClosedForms::default();
    for manner in formulas.manners(&graph) {
        let mut found = ClosedForms::default();
        let read = with_allowance(READING, || Elements::new(&graph, model, patch, &formulas, manner));
        let Ok(mut elements) = read else {
            best.cut_short.push(Quantity::Element);
            continue;
        };
        if let Err(Exhausted) = write_all(&mut elements, &mut found) {
            best.cut_short.push(Quantity::Element);
        }
        let certificate = Certificate::new(model, patch, &formulas, &graph);
        let proofs = with_allowance(PROVING, || certificate.check(&found.forms, &elements.conditions));
        found.forms.retain(|quantity, _| proofs[quantity] == Proof::Equal);
        for (quantity, proof) in proofs {
            match proof {
                Proof::Equal => {}
                Proof::Failed => found.failed.push(quantity),
                Proof::Open => found.cut_short.push(quantity),
            }
        }
        found.facts = with_allowance(READING, || facts(&mut elements));
        for quantity in found.forms.keys().filter(|quantity| quantity.has_sign()) {
            found.conditions_of.insert(*quantity, elements.conditions.clone());
        }
        merge(&mut best, found);
    }
    if let (Some(raw), Some(element)) = (raw, best.forms.get_mut(&Quantity::Element))
        && raw.operations() < element.operations()
    {
        *element = raw;
        best.is_raw = true;
        best.conditions_of.remove(&Quantity::Element);
        best.unproved_signs.clear();
    }
    if let Some(element) = best.forms.get(&Quantity::Element) {
        let mut total =
            Total { model, patch, graph: graph.clone(), names: names(model, patch), conditions: Vec::new() };
        best.area = with_allowance(INTEGRATING, || total.area(element));
        best.area_conditions = total.conditions;
        best.is_degenerate = *element == Form::integer(0);
        if with_allowance(READING, || is_regular(model, patch, &graph, element)) {
            best.facts.push(Fact::Regular);
        }
    }
    if best.is_degenerate {
        best.forms.retain(|quantity, _| !quantity.needs_normal());
        best.facts.clear();
    }
    for list in [&mut best.cut_short, &mut best.failed] {
        list.retain(|quantity| !best.forms.contains_key(quantity));
        list.sort();
        list.dedup();
    }
    best
}

/// The shorter form of each quantity, with its conditions.
fn merge(best: &mut ClosedForms, found: ClosedForms) {
    for (quantity, form) in found.forms {
        if best.forms.get(&quantity).is_none_or(|known| form.is_better_than(known)) {
            best.forms.insert(quantity, form);
            best.failed.retain(|failed| *failed != quantity);
            match found.conditions_of.get(&quantity) {
                Some(conditions) => best.conditions_of.insert(quantity, conditions.clone()),
                None => best.conditions_of.remove(&quantity),
            };
            if quantity == Quantity::Element {
                best.unproved_signs = found.unproved_signs.clone();
            }
        }
    }
    best.failed.extend(found.failed);
    best.cut_short.extend(found.cut_short);
    for fact in found.facts {
        if !best.facts.contains(&fact) {
            best.facts.push(fact);
        }
    }
    best.facts.sort();
}

/// The closed form of an area element.
#[derive(Clone, Debug)]
pub struct ElementForm {
    /// The form; it is proved equal to |phi_u x phi_v|.
    pub form: Form,
    /// See [`ClosedForms::conditions_of`].
    pub conditions: Vec<String>,
}

impl ClosedForms {
    /// The form of the area element.
    pub fn element(&self) -> Option<ElementForm> {
        let form = self.forms.get(&Quantity::Element)?.clone();
        Some(ElementForm { form, conditions: self.conditions_of.get(&Quantity::Element).cloned().unwrap_or_default() })
    }

    /// The conditions of all forms.
    pub fn conditions(&self) -> Vec<String> {
        let mut all: Vec<String> = self.conditions_of.values().flatten().cloned().collect();
        all.sort();
        all.dedup();
        all
    }
}

/// The closed form of the area element alone, in fewer steps than [`closed_forms`] takes; `None` where none was found and
/// proved.
pub fn element_form(model: &Model, patch: PatchId) -> Option<ElementForm> {
    let mut graph = model.graph.clone();
    let patch = &model.patches[patch.0];
    let formulas = Formulas::new(&mut graph, patch);
    let raw = raw_element(&mut graph, patch, &formulas);
    let mut best: Option<ElementForm> = None;
    for manner in formulas.manners(&graph) {
        let found = with_allowance(EVALUATING, || -> Step<ElementForm> {
            let mut elements = Elements::new(&graph, model, patch, &formulas, manner)?;
            let (form, _) = shortest_element(&mut elements)?;
            Ok(ElementForm { form, conditions: elements.conditions })
        });
        if let Ok(found) = found
            && best.as_ref().is_none_or(|known| found.form.operations() < known.form.operations())
        {
            best = Some(found);
        }
    }
    let best = best?;
    let certificate = Certificate::new(model, patch, &formulas, &graph);
    let forms = BTreeMap::from([(Quantity::Element, best.form.clone())]);
    let proofs = with_allowance(EVALUATING, || certificate.check(&forms, &best.conditions));
    if proofs[&Quantity::Element] != Proof::Equal {
        return None;
    }
    match raw {
        Some(raw) if raw.operations() < best.form.operations() => {
            Some(ElementForm { form: raw, conditions: Vec::new() })
        }
        _ => Some(best),
    }
}

/// |phi_u x phi_v| as it is defined; `None` if it is longer than any form that is worth printing.
fn raw_element(graph: &mut Graph, patch: &Patch, formulas: &Formulas) -> Option<Form> {
    let normal = cross(graph, &formulas.tangents[0], &formulas.tangents[1]);
    let element = norm(graph, &normal);
    Form::of(graph, element, &patch.variables, LONGEST_RAW)
}

/// The area element as it is best evaluated: the proved closed form where it is about as accurate as the norm of the cross
/// product; `None` where it is not. A form whose sign holds under conditions is evaluated as its absolute value, which needs
/// none; if more than its sign rests on them, it is not evaluated.
///
/// `norm` is the norm in `graph`, `values` the parameters, `element` the closed form of the patch.
pub fn evaluation_form(
    model: &Model,
    patch: PatchId,
    graph: &mut Graph,
    norm: ExpressionId,
    values: &dyn Fn(SymbolId) -> f64,
    element: &ElementForm,
) -> Option<ExpressionId> {
    let patch = &model.patches[patch.0];
    let mut formula = parse_back(graph, &element.form.text(), &names(model, patch))?;
    if !element.conditions.is_empty() {
        let mut own = model.graph.clone();
        let formulas = Formulas::new(&mut own, patch);
        let forms = BTreeMap::from([(Quantity::Element, element.form.clone())]);
        let certificate = Certificate::new(model, patch, &formulas, &own);
        if with_allowance(EVALUATING, || certificate.check(&forms, &[]))[&Quantity::Element] != Proof::Equal {
            return None;
        }
        formula = graph.call(Function::Abs, formula);
    }
    let limits = limits(graph, patch, values);
    is_stable(graph, formula, norm, patch.variables, limits, values).then_some(formula)
}

/// The exact area of a patch with its value for given parameters, if it is found within few steps: it stands beside a
/// number that is wanted at once.
pub fn exact_area(model: &Model, patch: PatchId, values: &dyn Fn(SymbolId) -> f64) -> Option<(Form, f64)> {
    let mut graph = model.graph.clone();
    let patch = &model.patches[patch.0];
    let formulas = Formulas::new(&mut graph, patch);
    with_allowance(AT_ONCE, || {
        let mut elements = Elements::new(&graph, model, patch, &formulas, Arguments::Split).ok()?;
        // A root of both variables has no elementary integral by the rules here; writing it would be in vain.
        let candidates = elements.element().ok()?;
        let mixed = |candidate: &Rooted| patch.variables.iter().all(|&v| elements.root_depends_on(candidate, v));
        if candidates.iter().all(mixed) {
            return None;
        }
        let (form, element) = shortest(&elements, candidates).ok()?;
        if !elements.conditions.is_empty() || !element.bars.is_empty() {
            return None;
        }
        let certificate = Certificate::new(model, patch, &formulas, &graph);
        let proofs = certificate.check(&BTreeMap::from([(Quantity::Element, form.clone())]), &[]);
        if proofs[&Quantity::Element] != Proof::Equal {
            return None;
        }
        let mut total =
            Total { model, patch, graph: graph.clone(), names: names(model, patch), conditions: Vec::new() };
        let area = total.area(&form)?;
        let formula = parse_back(&mut total.graph, &area.text(), &total.names)?;
        Some((area, evaluate_one(&total.graph, formula, values)))
    })
}

/// The limits of the region; NaN or infinite where they depend on a variable or do not end.
fn limits(graph: &Graph, patch: &Patch, values: &dyn Fn(SymbolId) -> f64) -> [(f64, f64); 2] {
    let end = |bound: Bound| match bound {
        Bound::Finite(formula) => {
            evaluate_one(
                graph,
                formula,
                |symbol| {
                    if patch.variables.contains(&symbol) { f64::NAN } else { values(symbol) }
                },
            )
        }
        Bound::MinusInfinity => f64::NEG_INFINITY,
        Bound::PlusInfinity => f64::INFINITY,
    };
    [0, 1].map(|place| (end(patch.intervals[place].lower), end(patch.intervals[place].upper)))
}

/// The shortest form of the element and the value it was written from.
fn shortest_element(elements: &mut Elements<'_>) -> Step<(Form, Rooted)> {
    let candidates = with_allowance(READING, || elements.element())?;
    shortest(elements, candidates)
}

fn shortest(elements: &Elements<'_>, candidates: Vec<Rooted>) -> Step<(Form, Rooted)> {
    let mut printer = Printer::new(elements.reader.ring.clone(), elements.reader.graph, elements.variables, NODES);
    let mut shortest: Option<(Form, Rooted)> = None;
    for candidate in candidates {
        let form = with_allowance(WRITING, || printer.rooted(&candidate))?;
        if shortest.as_ref().is_none_or(|(known, _)| form.operations() < known.operations()) {
            shortest = Some((form, candidate));
        }
    }
    shortest.ok_or(Exhausted)
}

fn write_all(elements: &mut Elements<'_>, found: &mut ClosedForms) -> Step<()> {
    let (form, element) = shortest_element(elements)?;
    let mut printer = Printer::new(elements.reader.ring.clone(), elements.reader.graph, elements.variables, NODES);
    for (factor, _) in &element.bars {
        found.unproved_signs.push(printer.polynomial(factor)?);
    }
    found.forms.insert(Quantity::Element, form);

    let values = with_allowance(READING, || elements.quantities(&element))?;
    // Reading the second derivatives may have added generators; the printer adds its own.
    let mut printer = Printer::new(elements.reader.ring.clone(), elements.reader.graph, elements.variables, NODES);
    for (quantity, value) in values {
        printer.refill(NODES);
        match with_allowance(WRITING, || printer.shortest(&value)) {
            Ok(form) => {
                found.forms.insert(quantity, form);
            }
            Err(Exhausted) => found.cut_short.push(quantity),
        }
    }
    Ok(())
}
