//! The forms of a patch as text and JSON.

use crate::expression::{ExpressionId, Graph, Node, print_limited};
use crate::geometry::Surface;
use crate::language::{Model, PatchId};
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
        let formulas: Vec<(&'static str, Vec<ExpressionId>)> = vec![
            ("position", surface.position.to_vec()),
            ("tangent_u", surface.tangents[0].to_vec()),
            ("tangent_v", surface.tangents[1].to_vec()),
            ("N", surface.normal.to_vec()),
            ("dA", vec![surface.element]),
            ("normal", normal.to_vec()),
            ("E", vec![first.e]),
            ("F", vec![first.f]),
            ("G", vec![first.g]),
            ("L", vec![second.l]),
            ("M", vec![second.m]),
            ("N2", vec![second.n]),
            ("K", vec![gauss]),
            ("H", vec![mean]),
        ];
        let closed = crate::simplify::closed_forms(model, id);
        let operations = operations(&graph, surface.element);
        let shown = |id: &ExpressionId| {
            let text = print_limited(&graph, *id, LONGEST);
            if text.ends_with("...") {
                format!("{} operations, too long to print here", operations_text(&graph, *id))
            } else {
                text
            }
        };
        let mut forms: Vec<(&'static str, Vec<String>)> =
            formulas.into_iter().map(|(name, ids)| (name, ids.iter().map(shown).collect())).collect();
        if let Some(form) = closed.element {
            for (name, texts) in &mut forms {
                if *name == "dA" {
                    *texts = vec![form.text()];
                }
            }
        }
        Self { patch: patch.name.clone(), forms, operations }
    }
}

fn operations_text(graph: &Graph, id: ExpressionId) -> String {
    let count = operations(graph, id);
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
    text + &format!("operations of dA = {}\n", report.operations)
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
    Value::Object(object)
}
