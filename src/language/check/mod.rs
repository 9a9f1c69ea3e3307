//! Names, kinds and units: from the tree of a sheet to the checked [`Model`].
//!
//! Definitions are taken in an order in which each uses only earlier ones, so they may stand in any order in the text.
//! Each error is reported once: whatever uses a broken definition is skipped in silence.

mod calls;
mod chains;
mod expressions;
mod facts;
mod functionals;
mod names;
mod surfaces;
mod values;

use super::Span;
use super::diagnostic::{Diagnostic, Severity, SheetErrors, Source};
use super::model::{
    Assumption, Chain, Claim, Functional, FunctionalId, FunctionalKind, Interval, Model, NamedChain, NamedValue,
    Parameter, Patch, PatchId, SurfaceSymbols,
};
use super::parse::parse;
use super::suggest::is_reserved;
use super::syntax::{DefinitionSyntax, Sheet, Statement, SyntaxId};
use super::unit::{Dimension, Unit};
use crate::expression::{ExpressionId, Graph, SymbolId};
use facts::Facts;
use rustc_hash::{FxHashMap, FxHashSet};
use std::sync::Arc;
use values::{Kind, Meaning, Value};

/// An error that has been reported; whoever meets it stops in silence.
struct Reported;

/// What a check yields.
type Checked<T> = Result<T, Reported>;

/// Stack for the checker: nesting is limited, but nested calls of nested formulas add up.
const STACK_BYTES: usize = 256 << 20;

/// Largest nesting of formulas through calls.
const MAXIMUM_DEPTH: usize = 2_000;

/// Largest number of patches, moved copies included.
const MAXIMUM_PATCHES: usize = 10_000;

/// Largest number of steps of the checker; beyond, a sheet is refused as too large. A step is about 50 ns.
const MAXIMUM_STEPS: usize = 10_000_000;

/// Checks a sheet.
///
/// # Errors
/// All errors of the sheet, in the order of the text, with warnings between them.
pub fn check(source: Source) -> Result<Model, SheetErrors> {
    std::thread::scope(|scope| {
        std::thread::Builder::new()
            .stack_size(STACK_BYTES)
            .spawn_scoped(scope, || check_here(source))
            .expect("a thread can be started")
            .join()
            .expect("the checker does not panic")
    })
}

fn check_here(source: Source) -> Result<Model, SheetErrors> {
    let (sheet, diagnostics) = parse(&source);
    let mut checker = Checker::new(sheet, source, diagnostics);
    checker.statements();
    checker.finish()
}

/// A definition and what has become of it.
struct Definition {
    syntax: Arc<DefinitionSyntax>,
    state: State,
}

#[derive(Clone)]
enum State {
    Waiting,
    Broken,
    Done(Meaning),
}

/// What names mean inside an integrand or a trim.
struct SurfaceScope {
    /// Dimension of the position.
    dimension: Dimension,
    /// Variables that every patch has, with their dimensions.
    variables: FxHashMap<String, (SymbolId, Dimension)>,
    /// Variables that have no meaning on all patches, with the reason.
    partial: FxHashMap<String, String>,
    /// `x`, `nx`, `K`, ... that are also a variable with other values, with the patch it belongs to.
    clashing: FxHashMap<String, String>,
}

/// Key of a function that was lowered for arguments of given kinds and dimensions.
type InstanceKey = (usize, Vec<(Kind, Option<Dimension>)>);

/// A lowered function: symbols of its arguments, component by component, and its value over them.
#[derive(Clone)]
struct Instance {
    formals: Vec<SymbolId>,
    value: Value,
}

struct Checker {
    sheet: Arc<Sheet>,
    source: Source,
    diagnostics: Vec<Diagnostic>,
    graph: Graph,
    definitions: Vec<Definition>,
    by_name: FxHashMap<String, usize>,
    /// Names defined by statements that could not be read, or doubled.
    unread: FxHashSet<String>,
    locals: Vec<(String, Value)>,
    surface: Option<Arc<SurfaceScope>>,
    variables: FxHashMap<String, SymbolId>,
    instances: FxHashMap<InstanceKey, Option<Instance>>,
    parameter_symbols: FxHashMap<SymbolId, (String, Dimension)>,
    facts: Facts,
    surface_symbols: SurfaceSymbols,
    /// Patches by what makes them: the patch of the text they come from, their position, their orientation.
    patch_ids: FxHashMap<(PatchId, [ExpressionId; 3], i8), PatchId>,
    /// For each moved copy the patch of the text that it comes from.
    roots: FxHashMap<PatchId, PatchId>,
    functional_ids: FxHashMap<(FunctionalKind, Chain), FunctionalId>,
    model: Parts,
    depth: usize,
    steps: usize,
    comparisons: usize,
    exhausted: bool,
}

/// The lists of the model while they grow.
#[derive(Default)]
struct Parts {
    parameters: Vec<Parameter>,
    assumptions: Vec<Assumption>,
    claims: Vec<Claim>,
    patches: Vec<Patch>,
    chains: Vec<NamedChain>,
    functionals: Vec<Functional>,
    values: Vec<(usize, NamedValue)>,
}

impl Checker {
    fn new(sheet: Sheet, source: Source, diagnostics: Vec<Diagnostic>) -> Self {
        let mut graph = Graph::new();
        let mut symbol = |name: &str| graph.new_symbol(name);
        let surface_symbols = SurfaceSymbols {
            position: [symbol("x"), symbol("y"), symbol("z")],
            unit_normal: [symbol("nx"), symbol("ny"), symbol("nz")],
            gauss_curvature: symbol("K"),
            mean_curvature: symbol("H"),
        };
        let unread = sheet.unread.iter().map(|name| name.text.clone()).collect();
        Self {
            sheet: Arc::new(sheet),
            source,
            diagnostics,
            graph,
            definitions: Vec::new(),
            by_name: FxHashMap::default(),
            unread,
            locals: Vec::new(),
            surface: None,
            variables: FxHashMap::default(),
            instances: FxHashMap::default(),
            parameter_symbols: FxHashMap::default(),
            facts: Facts::default(),
            surface_symbols,
            patch_ids: FxHashMap::default(),
            roots: FxHashMap::default(),
            functional_ids: FxHashMap::default(),
            model: Parts::default(),
            depth: 0,
            steps: 0,
            comparisons: 0,
            exhausted: false,
        }
    }

    fn statements(&mut self) {
        let sheet = Arc::clone(&self.sheet);
        for statement in &sheet.statements {
            if let Statement::Definition(definition) = statement {
                self.declare(definition);
            }
        }
        for index in self.definition_order() {
            if matches!(self.definitions[index].state, State::Waiting) {
                let syntax = Arc::clone(&self.definitions[index].syntax);
                let state = match self.definition(index, &syntax) {
                    Ok(meaning) => State::Done(meaning),
                    Err(Reported) => State::Broken,
                };
                self.definitions[index].state = state;
            }
        }
        for statement in &sheet.statements {
            if let Statement::Assume { condition, span } = statement {
                let _ = self.assumption(*condition, *span);
            }
        }
        self.uncalled_functions();
    }

    /// Names in the bodies of functions that nothing calls. Their kinds and units are open until they are called.
    fn uncalled_functions(&mut self) {
        let called: FxHashSet<usize> = self.instances.keys().map(|(index, _)| *index).collect();
        for index in 0..self.definitions.len() {
            if matches!(self.definitions[index].state, State::Done(Meaning::Function(_))) && !called.contains(&index) {
                let syntax = Arc::clone(&self.definitions[index].syntax);
                self.names_are_known(&syntax);
            }
        }
    }

    /// Enters a definition; its name must be free.
    fn declare(&mut self, syntax: &DefinitionSyntax) {
        let name = &syntax.name;
        // The parser has said so.
        if is_reserved(&name.text) {
            return;
        }
        if let Some(&first) = self.by_name.get(&name.text) {
            let (line, _) = self.source.line_column(self.definitions[first].syntax.name.span.start);
            self.report(
                Diagnostic::error("doubled-name", name.span, format!("`{}` is defined twice", name.text))
                    .with_hint(format!("the first definition is in line {line}; rename one of them")),
            );
            return;
        }
        let index = self.definitions.len();
        self.by_name.insert(name.text.clone(), index);
        self.definitions.push(Definition { syntax: Arc::new(syntax.clone()), state: State::Waiting });
    }

    fn assumption(&mut self, condition: SyntaxId, span: Span) -> Checked<()> {
        let truth = self.truth(condition)?;
        self.refuse_answers(&[truth], span, "an assumption")?;
        self.model.assumptions.push(Assumption { condition: truth, span });
        Ok(())
    }

    /// Checks one definition and enters it into the model.
    fn definition(&mut self, index: usize, syntax: &DefinitionSyntax) -> Checked<Meaning> {
        let has_region = syntax.region.is_some();
        if let Some(arguments) = &syntax.arguments {
            self.distinct_arguments(arguments)?;
            for (clause, span) in [
                (syntax.range.as_ref().map(|range| range.span), "in"),
                (syntax.shown_as.as_ref().map(|unit| unit.span), "as"),
            ]
            .map(|(span, word)| (word, span))
            {
                if let Some(span) = span {
                    return Err(self.error(
                        "misplaced-clause",
                        span,
                        format!("`{clause}` goes with a number, and `{}` is a function", syntax.name.text),
                    ));
                }
            }
            return if has_region {
                let patch = self.patch_definition(index, syntax)?;
                Ok(Meaning::Patch(patch))
            } else if let Some(trim) = syntax.trim {
                let span = self.span(trim);
                Err(self.error_with_hint(
                    "misplaced-clause",
                    span,
                    "`where` goes with a region".to_owned(),
                    "add `on u in [...], v in [...]`".to_owned(),
                ))
            } else {
                Ok(Meaning::Function(index))
            };
        }
        if has_region || syntax.trim.is_some() {
            let patch = self.cut_patch(syntax)?;
            return Ok(Meaning::Patch(patch));
        }
        let meaning = self.lower(syntax.value)?;
        match meaning {
            Meaning::Value(value) => self.named_value(index, syntax, value),
            Meaning::Patch(patch) => Ok(self.named_chain(syntax, Chain { terms: vec![(1, patch)] })),
            Meaning::Chain(chain) => Ok(self.named_chain(syntax, chain)),
            Meaning::Function(_) => {
                let span = self.span(syntax.value);
                Err(self.error_with_hint(
                    "wrong-kind",
                    span,
                    "a function without its arguments is not a value".to_owned(),
                    "call it: write its arguments in parentheses".to_owned(),
                ))
            }
        }
    }

    fn named_chain(&mut self, syntax: &DefinitionSyntax, chain: Chain) -> Meaning {
        if let Some(span) = syntax.range.as_ref().map(|r| r.span).or(syntax.shown_as.as_ref().map(|u| u.span)) {
            let _ = self.error(
                "misplaced-clause",
                span,
                format!("`in` and `as` go with numbers, and `{}` is a surface", syntax.name.text),
            );
        }
        if self.step(chain.terms.len(), syntax.name.span).is_err() {
            return Meaning::Chain(Chain::default());
        }
        self.model.chains.push(NamedChain {
            name: syntax.name.text.clone(),
            chain: chain.clone(),
            span: syntax.name.span,
        });
        Meaning::Chain(chain)
    }

    /// A number, vector or tensor with a name: a parameter if it uses no other name of the sheet.
    fn named_value(&mut self, index: usize, syntax: &DefinitionSyntax, value: Value) -> Checked<Meaning> {
        if value.kind == Kind::Truth {
            let span = self.span(syntax.value);
            return Err(self.error_with_hint(
                "wrong-kind",
                span,
                "a condition where a number is due".to_owned(),
                "use it in `if(condition, a, b)`, or state it with `assume`".to_owned(),
            ));
        }
        self.check_size(&value.components, syntax.name.span, &syntax.name.text)?;
        let dimension = value.dimension.unwrap_or(Dimension::NONE);
        let shown_as = match &syntax.shown_as {
            Some(unit) => {
                let resolved = Unit::resolve(unit).map_err(|diagnostic| self.report(diagnostic))?;
                if resolved.dimension != dimension {
                    return Err(self.error_with_hint(
                        "unit-clash",
                        unit.span,
                        format!(
                            "`{}` is in {}, which [{}] does not measure",
                            syntax.name.text,
                            shown(dimension),
                            resolved.text
                        ),
                        format!("use a unit of {}", shown(dimension)),
                    ));
                }
                Some(resolved)
            }
            None => None,
        };
        let range = match &syntax.range {
            Some(range) => {
                let unit = self.unit_of_literal(syntax.value);
                let interval = self.interval(range, &value, unit.as_ref())?;
                if value.kind != Kind::Number {
                    return Err(self.error("wrong-kind", range.span, "only a number has a range".to_owned()));
                }
                Some(interval)
            }
            None => None,
        };
        let is_parameter = value.kind == Kind::Number && !self.uses_sheet_names(syntax.value);
        let written_unit = self.unit_of_literal(syntax.value);
        let value = if is_parameter {
            self.parameter(syntax, &value, dimension, range, written_unit.clone())
        } else {
            if let Some(range) = range {
                if !self.answers_in(&value.components).is_empty() {
                    return Err(self.error_with_hint(
                        "answer-not-allowed",
                        range.span,
                        format!(
                            "`{}` depends on an integral, and a range is checked before anything is integrated",
                            syntax.name.text
                        ),
                        "leave the range away and look at the answer".to_owned(),
                    ));
                }
                self.model.claims.push(Claim { name: syntax.name.text.clone(), value: value.components[0], range });
            }
            value
        };
        let depends_on = self.answers_in(&value.components);
        self.model.values.push((
            index,
            NamedValue {
                name: syntax.name.text.clone(),
                components: value.components.clone(),
                dimension,
                shown_as: shown_as.or(if is_parameter { written_unit } else { None }),
                is_answer: !depends_on.is_empty(),
                depends_on,
                span: syntax.name.span,
            },
        ));
        Ok(Meaning::Value(value))
    }

    fn parameter(
        &mut self,
        syntax: &DefinitionSyntax,
        value: &Value,
        dimension: Dimension,
        range: Option<Interval>,
        unit: Option<Unit>,
    ) -> Value {
        let name = syntax.name.text.clone();
        let symbol = self.graph.new_symbol(&name);
        self.parameter_symbols.insert(symbol, (name.clone(), dimension));
        self.model.parameters.push(Parameter {
            name,
            symbol,
            default: value.components[0],
            unit,
            dimension,
            range,
            span: syntax.name.span,
        });
        Value { components: vec![self.graph.symbol(symbol)], dimension: Some(dimension), kind: Kind::Number }
    }

    fn finish(mut self) -> Result<Model, SheetErrors> {
        self.diagnostics.sort_by_key(|diagnostic| diagnostic.span.start);
        if self.diagnostics.iter().any(|diagnostic| diagnostic.severity == Severity::Error) {
            return Err(SheetErrors { source: self.source, diagnostics: self.diagnostics });
        }
        self.drop_patterns();
        let mut values = self.model.values;
        values.sort_by_key(|(index, _)| *index);
        self.model.parameters.sort_by_key(|parameter| parameter.span.start);
        self.model.chains.sort_by_key(|chain| chain.span.start);
        Ok(Model {
            source: self.source,
            graph: self.graph,
            parameters: self.model.parameters,
            assumptions: self.model.assumptions,
            claims: self.model.claims,
            patches: self.model.patches,
            chains: self.model.chains,
            functionals: self.model.functionals,
            values: values.into_iter().map(|(_, value)| value).collect(),
            surface_symbols: self.surface_symbols,
            warnings: self.diagnostics,
        })
    }

    /// Takes functionals and patches away that wait for the arguments of a function, and puts patches in the order of the
    /// text.
    fn drop_patterns(&mut self) {
        self.learn();
        let mut kept: Vec<usize> =
            (0..self.model.patches.len()).filter(|&index| !self.is_open_patch(PatchId(index))).collect();
        kept.sort_by_key(|&index| self.model.patches[index].span.start);
        let mut new_patch = vec![None; self.model.patches.len()];
        for (new, &old) in kept.iter().enumerate() {
            new_patch[old] = Some(PatchId(new));
        }
        self.model.patches = kept.iter().map(|&index| self.model.patches[index].clone()).collect();

        let mut new_functional = vec![None; self.model.functionals.len()];
        let kept: Vec<usize> =
            (0..new_functional.len()).filter(|&index| !self.is_open_functional(FunctionalId(index))).collect();
        for (new, &old) in kept.iter().enumerate() {
            new_functional[old] = Some(FunctionalId(new));
        }
        let renumber = |ids: &mut Vec<FunctionalId>| *ids = ids.iter().filter_map(|id| new_functional[id.0]).collect();
        let renumber_chain = |chain: &mut Chain| {
            chain.terms = chain.terms.iter().filter_map(|(k, patch)| Some((*k, new_patch[patch.0]?))).collect();
        };
        self.model.functionals = kept.iter().map(|&index| self.model.functionals[index].clone()).collect();
        for functional in &mut self.model.functionals {
            renumber(&mut functional.depends_on);
            renumber_chain(&mut functional.chain);
        }
        self.model.chains.iter_mut().for_each(|chain| renumber_chain(&mut chain.chain));
        self.model.values.iter_mut().for_each(|(_, value)| renumber(&mut value.depends_on));
    }

    fn span(&self, id: SyntaxId) -> Span {
        self.sheet.get(id).span
    }

    fn text(&self, span: Span) -> &str {
        self.source.text.get(span.start..span.end).unwrap_or("")
    }

    fn report(&mut self, diagnostic: Diagnostic) -> Reported {
        if self.diagnostics.len() < 200 && !self.diagnostics.contains(&diagnostic) {
            self.diagnostics.push(diagnostic);
        }
        Reported
    }

    fn error(&mut self, code: &'static str, span: Span, message: String) -> Reported {
        self.report(Diagnostic::error(code, span, message))
    }

    fn error_with_hint(&mut self, code: &'static str, span: Span, message: String, hint: String) -> Reported {
        self.report(Diagnostic::error(code, span, message).with_hint(hint))
    }

    /// Counts work and refuses sheets that would take more than a second of it.
    fn step(&mut self, cost: usize, span: Span) -> Checked<()> {
        self.steps = self.steps.saturating_add(cost);
        if self.steps <= MAXIMUM_STEPS && !self.graph.is_full() {
            return Ok(());
        }
        if self.exhausted {
            return Err(Reported);
        }
        self.exhausted = true;
        let message = if self.graph.is_full() {
            format!("the formulas of this sheet grow beyond {} nodes while calls are written out", Graph::MAXIMUM_NODES)
        } else {
            "the formulas of this sheet take too much work to write out".to_owned()
        };
        Err(self.error_with_hint(
            "too-large",
            span,
            message,
            "give repeated parts a name, and call functions less deeply".to_owned(),
        ))
    }

    fn check_size(&mut self, components: &[ExpressionId], span: Span, name: &str) -> Checked<()> {
        self.learn();
        let bound: usize = components.iter().map(|&component| self.facts.size_bound(component)).sum();
        if bound <= Graph::MAXIMUM_FORMULA_NODES {
            return Ok(());
        }
        let count = self.graph.reachable(components).len();
        self.step(count, span)?;
        if count > Graph::MAXIMUM_FORMULA_NODES {
            return Err(self.error(
                "too-large",
                span,
                format!("`{name}` has {count} nodes, more than the {} that are allowed", Graph::MAXIMUM_FORMULA_NODES),
            ));
        }
        Ok(())
    }

    /// Brings the facts up to date with the graph.
    fn learn(&mut self) {
        let work = self.facts.extend(&self.graph);
        self.steps = self.steps.saturating_add(work);
    }

    /// Functionals whose results formulas use, in order.
    fn answers_in(&mut self, components: &[ExpressionId]) -> Vec<FunctionalId> {
        self.learn();
        let mut answers: Vec<FunctionalId> =
            components.iter().flat_map(|&component| self.facts.answers(component).iter().copied()).collect();
        answers.sort_unstable();
        answers.dedup();
        answers
    }

    /// Formulas that must be known before anything is integrated may not use answers.
    fn refuse_answers(&mut self, components: &[ExpressionId], span: Span, what: &str) -> Checked<()> {
        if self.answers_in(components).is_empty() {
            return Ok(());
        }
        Err(self.error_with_hint(
            "answer-not-allowed",
            span,
            format!("{what} cannot use the result of an integral"),
            "answers may stand in other answers and in integrands".to_owned(),
        ))
    }

    fn patch(&self, id: PatchId) -> &Patch {
        &self.model.patches[id.0]
    }
}

/// A dimension in words.
fn shown(dimension: Dimension) -> String {
    if dimension.is_none() { "plain numbers".to_owned() } else { format!("{dimension}") }
}

/// The value of a constant expression, such as the right side of `--set`: its formula, dimension, and whether a unit was
/// written.
pub(super) fn constant(
    sheet: Sheet,
    source: &Source,
    root: SyntaxId,
) -> Result<(f64, Option<Dimension>, bool), Vec<Diagnostic>> {
    let mut checker = Checker::new(sheet, source.clone(), Vec::new());
    let unit_written = checker.mentions_unit(root);
    match checker.number(root) {
        Ok(value) => {
            let number = crate::expression::evaluate_one(&checker.graph, value.components[0], |_| f64::NAN);
            Ok((number, value.dimension, unit_written))
        }
        Err(Reported) => Err(checker.diagnostics),
    }
}
