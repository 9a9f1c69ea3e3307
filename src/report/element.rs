//! The forms of a patch as text, JSON, notations of papers and source code.

use super::notation::{Document, Equation};
use super::source::{Language, Request, SourceError, source};
use super::stamp::Stamp;
use crate::expression::{BinaryFunction, ExpressionId, Function, Graph, Node, SymbolId};
use crate::geometry::Surface;
use crate::language::{Bindings, Model, PatchId};
use crate::simplify::{Fact, Form, Quantity, closed_forms, evaluation_form};
use serde_json::{Map, Value, json};

/// Longest formula, in operations, that is written out; a longer one is given by its count.
const LONGEST: usize = 1_000;

/// A quantity of the report.
#[derive(Clone, Debug)]
pub struct Entry {
    /// Stable name, the key of the JSON document.
    pub key: &'static str,
    /// Name on the page; tangents carry the names of the variables.
    pub name: String,
    /// One formula, or three.
    pub forms: Vec<Written>,
}

/// A formula, or its size where it is too long for a page.
#[derive(Clone, Debug)]
pub enum Written {
    /// The formula.
    Form(Form),
    /// Operations of a formula that is not written out.
    TooLong(u64),
    /// There is none, because the patch has no normal.
    Undefined,
}

impl Written {
    /// The formula as text; null where it is not written out.
    fn json(&self) -> Value {
        match self {
            Written::Form(form) => json!(form.text()),
            Written::TooLong(_) | Written::Undefined => Value::Null,
        }
    }

    fn text(&self) -> String {
        match self {
            Written::Form(form) => form.text(),
            Written::Undefined => "undefined".to_owned(),
            Written::TooLong(u64::MAX) => "more than 10^19 operations, too long to print here".to_owned(),
            Written::TooLong(count) => format!("{count} operations, too long to print here"),
        }
    }
}

/// Everything that `element` says about a patch.
#[derive(Clone, Debug)]
pub struct ElementReport {
    /// The patch.
    pub patch: String,
    /// Names of its variables, in the order of its arguments.
    pub variables: [String; 2],
    /// The quantities in the order of the report.
    pub entries: Vec<Entry>,
    /// Operations of dA on the fully written form: each operator, minus sign and call counts 1.
    pub operations: u64,
    /// The exact area, where it was found and proved.
    pub area: Option<Form>,
    /// What is proved of the patch.
    pub facts: Vec<Fact>,
    /// Remarks on how the forms are to be read.
    pub notes: Vec<String>,
    graph: Graph,
    inputs: Vec<SymbolId>,
    outputs: Vec<(String, ExpressionId)>,
}

impl ElementReport {
    /// Derives the forms of a patch.
    pub fn new(model: &Model, bindings: &Bindings, id: PatchId) -> Self {
        let mut graph = model.graph.clone();
        let patch = &model.patches[id.0];
        let surface = Surface::new(&mut graph, patch);
        let first = surface.first_form(&mut graph);
        let second = surface.second_form(&mut graph);
        let normal = surface.unit_normal(&mut graph);
        let gauss = surface.gauss_curvature(&mut graph);
        let mean = surface.mean_curvature(&mut graph);
        let closed = closed_forms(model, id);
        let evaluated = closed.element().and_then(|element| {
            evaluation_form(model, id, &mut graph, surface.element, &|symbol| bindings.value(symbol), &element)
        });

        let variables = patch.variables.map(|variable| graph.symbol_name(variable).to_owned());
        let axes = [0, 1, 2];
        let tangent = |place: usize| format!("tangent_{}", variables[place]);
        type Component = fn(usize) -> Quantity;
        let position: Option<Component> = None;
        let vectors = [
            ("position", "position".to_owned(), position, surface.position),
            ("tangent_u", tangent(0), Some(Quantity::TangentU as Component), surface.tangents[0]),
            ("tangent_v", tangent(1), Some(Quantity::TangentV as Component), surface.tangents[1]),
            ("normal", "normal".to_owned(), Some(Quantity::Normal as Component), normal),
        ];
        let scalars = [
            ("dA", Quantity::Element, surface.element),
            ("E", Quantity::E, first.e),
            ("F", Quantity::F, first.f),
            ("G", Quantity::G, first.g),
            ("L", Quantity::L, second.l),
            ("M", Quantity::M, second.m),
            ("N2", Quantity::N2, second.n),
            ("K", Quantity::Gauss, gauss),
            ("H", Quantity::Mean, mean),
        ];
        let mut plain: Vec<&'static str> = Vec::new();
        let mut written = |key: &'static str, quantity: Option<Quantity>, raw: ExpressionId| {
            if let Some(form) = quantity.and_then(|quantity| closed.forms.get(&quantity)) {
                return Written::Form(form.clone());
            }
            if closed.is_degenerate && quantity.is_some_and(Quantity::needs_normal) {
                return Written::Undefined;
            }
            if quantity.is_some() && plain.last() != Some(&key) {
                plain.push(key);
            }
            match Form::of(&graph, raw, &patch.variables, LONGEST) {
                Some(form) => Written::Form(form),
                None => Written::TooLong(operations(&graph, raw)),
            }
        };
        let mut entries = Vec::new();
        for (key, name, quantity, raw) in &vectors {
            let forms = axes.map(|axis| written(key, quantity.map(|quantity| quantity(axis)), raw[axis])).to_vec();
            entries.push(Entry { key, name: name.clone(), forms });
        }
        for (key, quantity, raw) in scalars {
            entries.push(Entry { key, name: key.to_owned(), forms: vec![written(key, Some(quantity), raw)] });
        }
        // The element comes before the normal, which divides by it.
        let element = entries.remove(4);
        let operations = match &element.forms[0] {
            Written::Form(form) => form.operations() as u64,
            Written::TooLong(count) => *count,
            Written::Undefined => 0,
        };
        entries.insert(3, element);

        let mut notes = Vec::new();
        if closed.is_degenerate {
            notes.push("the patch is degenerate: dA = 0 everywhere, so it has no normal and no curvature".to_owned());
        }
        if has_creases(&graph, &patch.position) {
            notes.push("curvatures and facts hold away from the creases of abs, sign, min, max and if".to_owned());
        }
        for condition in closed.conditions() {
            notes.push(format!("the signs hold for {condition}"));
        }
        for condition in &closed.area_conditions {
            notes.push(format!("the area as it is written needs {condition}"));
        }
        if closed.is_raw {
            notes.push("dA is shown as it is defined: no shorter form was found".to_owned());
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
        if closed.forms.contains_key(&Quantity::Element) && evaluated.is_none() {
            notes.push(
                "dA is evaluated as the norm of the cross product: the printed form needs a condition, or loses digits \
                 somewhere on the region"
                    .to_owned(),
            );
        }

        let mut outputs: Vec<(String, ExpressionId)> = Vec::new();
        let exists = |quantity: Quantity| !(closed.is_degenerate && quantity.needs_normal());
        for (_, name, _, raw) in vectors.iter().filter(|(_, _, quantity, _)| quantity.is_none_or(|q| exists(q(0)))) {
            outputs.extend(axes.iter().zip(["x", "y", "z"]).map(|(&axis, end)| (format!("{name}_{end}"), raw[axis])));
        }
        for (key, quantity, raw) in scalars.into_iter().filter(|(_, quantity, _)| exists(*quantity)) {
            let formula = if quantity == Quantity::Element { evaluated.unwrap_or(raw) } else { raw };
            outputs.push((key.to_owned(), formula));
        }
        let formulas: Vec<ExpressionId> = outputs.iter().map(|(_, formula)| *formula).collect();
        let used = graph.symbols_of(&formulas);
        let parameters =
            model.parameters.iter().map(|parameter| parameter.symbol).filter(|symbol| used.contains(symbol));
        let inputs = patch.variables.into_iter().chain(parameters).collect();
        Self {
            patch: patch.name.clone(),
            variables,
            entries,
            operations,
            area: closed.area,
            facts: closed.facts,
            notes,
            graph,
            inputs,
            outputs,
        }
    }

    /// The equations for a paper; formulas that are too long are left out, and the notes say so.
    pub fn document(&self) -> Document {
        let mut equations = Vec::new();
        for entry in &self.entries {
            let forms: Option<Vec<Form>> = entry
                .forms
                .iter()
                .map(|written| match written {
                    Written::Form(form) => Some(form.clone()),
                    Written::TooLong(_) | Written::Undefined => None,
                })
                .collect();
            let Some(right) = forms else { continue };
            let (name, differentials) = match entry.key {
                "tangent_u" => (format!("phi_{}", self.variables[0]), Vec::new()),
                "tangent_v" => (format!("phi_{}", self.variables[1]), Vec::new()),
                "position" => ("phi".to_owned(), Vec::new()),
                "normal" => ("n".to_owned(), Vec::new()),
                "N2" => ("N".to_owned(), Vec::new()),
                "dA" => ("dA".to_owned(), self.variables.to_vec()),
                other => (other.to_owned(), Vec::new()),
            };
            equations.push(Equation { name, right, differentials });
        }
        equations.extend(self.area.clone().map(|area| Equation::new("A", area)));
        Document { equations, ..Document::default() }
    }

    /// A function that evaluates everything, in a language.
    ///
    /// # Errors
    /// Functions that the language lacks, formulas that are too long.
    pub fn source(&self, language: Language, stamp: &Stamp) -> Result<String, SourceError> {
        let notes = format!(
            "{}\nForms of the patch {}: SI units (meters, square meters), angles in radians.\n\
             Geometry only: local codes and licensed practice decide what it is used for.",
            stamp.line(),
            self.patch
        );
        source(
            language,
            &Request {
                graph: &self.graph,
                function: &self.patch,
                inputs: &self.inputs,
                outputs: &self.outputs,
                notes: &notes,
            },
        )
    }
}

/// Whether a position has jumps of its own slope in it.
fn has_creases(graph: &Graph, position: &[ExpressionId]) -> bool {
    graph.reachable(position).into_iter().any(|id| {
        matches!(
            graph.node(id),
            Node::Call(Function::Abs | Function::Sign, _)
                | Node::Call2(BinaryFunction::Min | BinaryFunction::Max, ..)
                | Node::Select(..)
        )
    })
}

/// Operations of a formula written out in full; shared parts count each time they stand. Saturates.
fn operations(graph: &Graph, root: ExpressionId) -> u64 {
    let mut counts = vec![0u64; root.index() + 1];
    for id in graph.reachable(&[root]) {
        let children = graph.node(id).children();
        let own = u64::from(!children.as_slice().is_empty());
        counts[id.index()] =
            children.as_slice().iter().fold(own, |sum, child| sum.saturating_add(counts[child.index()]));
    }
    counts[root.index()]
}

/// The forms as text, one below the other.
pub fn element_text(report: &ElementReport) -> String {
    let mut text = format!("patch {}\n", report.patch);
    for entry in &report.entries {
        match &entry.forms[..] {
            [one] => text += &format!("{} = {}\n", entry.name, one.text()),
            several => {
                text += &format!("{} = (\n", entry.name);
                for form in several {
                    text += &format!("  {},\n", form.text());
                }
                text += ")\n";
            }
        }
    }
    text += &format!("operations of dA = {}\n", report.operations);
    let facts: Vec<String> = report.facts.iter().map(Fact::to_string).collect();
    text += &format!("facts = {}\n", if facts.is_empty() { "none".to_owned() } else { facts.join(", ") });
    if let Some(area) = &report.area {
        text += &format!("area = {}\n", area.text());
    }
    for note in &report.notes {
        text += &format!("note: {note}\n");
    }
    text
}

/// The forms as a JSON document.
pub fn element_json(report: &ElementReport, stamp: &Stamp) -> Value {
    let mut object = Map::new();
    object.insert("schema".into(), json!("quadrel/1"));
    object.insert("patch".into(), json!(report.patch));
    object.insert("variables".into(), json!(report.variables));
    for entry in &report.entries {
        let value = match &entry.forms[..] {
            [one] => one.json(),
            several => Value::Array(several.iter().map(Written::json).collect()),
        };
        object.insert(entry.key.to_owned(), value);
        if entry.key == "dA" {
            object.insert("operations".into(), json!(report.operations));
        }
    }
    object.insert("facts".into(), json!(report.facts.iter().map(Fact::to_string).collect::<Vec<_>>()));
    object.insert("area".into(), json!(report.area.as_ref().map(Form::text)));
    object.insert("notes".into(), json!(report.notes));
    object.insert("stamp".into(), stamp.json());
    Value::Object(object)
}
