//! The forms of a patch as text and JSON.

use crate::expression::{ExpressionId, Graph, Node, print_limited};
use crate::geometry::Surface;
use crate::language::{Model, PatchId};
use crate::simplify::{Fact, Quantity, closed_forms};
use serde_json::{Map, Value, json};

/// Longest formula that is written out in full; a longer one is given by its count of operations.
const LONGEST: usize = 2_000;

/// Everything that `element` says about a patch.
#[derive(Clone, Debug)]
pub struct ElementReport {
    /// The patch.
    pub patch: String,
    /// Names and formulas in the order of the report; vectors have three.
    pub forms: Vec<(&'static str, Vec<String>)>,
    /// Operations of dA on the fully written form: each operator, minus sign and call counts 1.
    pub operations: u64,
    /// The exact area, where it was found and proved.
    pub area: Option<String>,
    /// What is proved of the patch.
    pub facts: Vec<Fact>,
    /// Remarks on how the forms are to be read.
    pub notes: Vec<String>,
}

impl ElementReport {
    /// Derives the forms of a patch.
    pub fn new(model: &Model, id: PatchId) -> Self {
        let mut graph = model.graph.clone();
        let patch = &model.patches[id.0];
        let surface = Surface::new(&mut graph, patch);
        let first = surface.first_form(&mut graph);
        let second = surface.second_form(&mut graph);
        let normal = surface.unit_normal(&mut graph);
        let gauss = surface.gauss_curvature(&mut graph);
        let mean = surface.mean_curvature(&mut graph);
        let closed = closed_forms(model, id);

        let mut plain = Vec::new();
        let mut shown = |name: &'static str, quantity: Option<Quantity>, raw: ExpressionId| {
            if let Some(form) = quantity.and_then(|quantity| closed.forms.get(&quantity)) {
                return (form.text(), form.operations() as u64);
            }
            if quantity.is_some() && plain.last() != Some(&name) {
                plain.push(name);
            }
            let count = operations(&graph, raw);
            let text = print_limited(&graph, raw, LONGEST);
            if text.ends_with("...") {
                (format!("{} operations, too long to print here", operations_text(count)), count)
            } else {
                (text, count)
            }
        };
        let mut forms: Vec<(&'static str, Vec<String>)> = Vec::new();
        let axes = [0, 1, 2];
        forms.push(("position", axes.map(|axis| shown("position", None, surface.position[axis]).0).to_vec()));
        for (name, quantity, raw) in [
            ("tangent_u", Quantity::TangentU as fn(usize) -> Quantity, &surface.tangents[0]),
            ("tangent_v", Quantity::TangentV, &surface.tangents[1]),
        ] {
            forms.push((name, axes.map(|axis| shown(name, Some(quantity(axis)), raw[axis]).0).to_vec()));
        }
        let (element, operations) = shown("dA", Some(Quantity::Element), surface.element);
        forms.push(("dA", vec![element]));
        let raw = axes.map(|axis| shown("normal", Some(Quantity::Normal(axis)), normal[axis]).0);
        forms.push(("normal", raw.to_vec()));
        for (name, quantity, raw) in [
            ("E", Quantity::E, first.e),
            ("F", Quantity::F, first.f),
            ("G", Quantity::G, first.g),
            ("L", Quantity::L, second.l),
            ("M", Quantity::M, second.m),
            ("N2", Quantity::N2, second.n),
            ("K", Quantity::Gauss, gauss),
            ("H", Quantity::Mean, mean),
        ] {
            forms.push((name, vec![shown(name, Some(quantity), raw).0]));
        }

        let area = closed.area.as_ref().map(|form| form.text());
        let mut notes = Vec::new();
        for condition in &closed.conditions {
            notes.push(format!("the signs hold for {condition}"));
        }
        for factor in &closed.unproved_signs {
            let text = factor.text();
            notes.push(if factor.has_variables() {
                format!("abs({text}) stays: its sign changes on the region, or could not be proved constant")
            } else {
                format!("abs({text}) stays: if it is positive, add `assume {text} > 0`")
            });
        }
        if !plain.is_empty() {
            let names = plain.join(", ");
            notes.push(if closed.failed.is_empty() {
                format!("no closed form within the allowance of steps for {names}: shown as derived")
            } else {
                format!("no form that could be proved equal for {names}: shown as derived")
            });
        }
        Self { patch: patch.name.clone(), forms, operations, area, facts: closed.facts, notes }
    }
}

fn operations_text(count: u64) -> String {
    if count == u64::MAX { "more than 10^19".to_owned() } else { count.to_string() }
}

/// Operations of a formula written out in full; shared parts count each time they stand. Saturates.
fn operations(graph: &Graph, root: ExpressionId) -> u64 {
    let mut counts = vec![0u64; root.index() + 1];
    for id in graph.reachable(&[root]) {
        let node = graph.node(id);
        let own = match node {
            Node::Symbol(_) | Node::Pi | Node::Truth(_) => 0,
            Node::Number(number) => {
                let value = graph.number_value(number);
                u64::from(value.is_negative()) + u64::from(value.to_string().contains('/'))
            }
            _ => 1,
        };
        counts[id.index()] =
            node.children().as_slice().iter().fold(own, |sum, child| sum.saturating_add(counts[child.index()]));
    }
    counts[root.index()]
}

/// The forms as text, one below the other.
pub fn element_text(report: &ElementReport) -> String {
    let mut text = format!("patch {}\n", report.patch);
    for (name, formulas) in &report.forms {
        match &formulas[..] {
            [one] => text += &format!("{name} = {one}\n"),
            several => {
                text += &format!("{name} = (\n");
                for formula in several {
                    text += &format!("  {formula},\n");
                }
                text += ")\n";
            }
        }
    }
    text += &format!("operations of dA = {}\n", report.operations);
    let facts: Vec<String> = report.facts.iter().map(Fact::to_string).collect();
    text += &format!("facts = {}\n", if facts.is_empty() { "none".to_owned() } else { facts.join(", ") });
    if let Some(area) = &report.area {
        text += &format!("area = {area}\n");
    }
    for note in &report.notes {
        text += &format!("note: {note}\n");
    }
    text
}

/// The forms as a JSON document.
pub fn element_json(report: &ElementReport) -> Value {
    let mut object = Map::new();
    object.insert("schema".into(), json!("quadrel/1"));
    object.insert("patch".into(), json!(report.patch));
    for (name, formulas) in &report.forms {
        let value = match &formulas[..] {
            [one] => json!(one),
            several => json!(several),
        };
        object.insert((*name).to_owned(), value);
        if *name == "dA" {
            object.insert("operations".into(), json!(report.operations));
        }
    }
    object.insert("facts".into(), json!(report.facts.iter().map(Fact::to_string).collect::<Vec<_>>()));
    object.insert("area".into(), json!(report.area));
    object.insert("notes".into(), json!(report.notes));
    Value::Object(object)
}
