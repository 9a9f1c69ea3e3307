//! Which lines an equation takes, and where the definitions of its auxiliary parts go.

use super::style::{Line, Mark, Notation};
use super::walk::{Place, WIDEST_LINE, Walk};
use super::{Document, Equation};
use crate::simplify::{Form, NameKind};
use rustc_hash::FxHashSet;

/// Room for a sign at the beginning of a line, and for its indentation.
const CONTINUATION: u32 = 50;

/// Lays out equations one after the other.
pub(super) struct Layout<'a> {
    walk: Walk<'a>,
    equations: Vec<Vec<Line>>,
    /// How many auxiliaries are printed already.
    printed: usize,
}

impl<'a> Layout<'a> {
    /// The document is needed for its names: auxiliary names must differ from them.
    pub(super) fn new(notation: &'a dyn Notation, document: &Document) -> Self {
        let mut names = FxHashSet::default();
        for equation in document.definitions.iter().chain(&document.equations) {
            names.insert(equation.name.clone());
            names.extend(equation.differentials.iter().cloned());
            equation.right.iter().for_each(|form| collect_names(form, &mut names));
        }
        document.conditions.iter().for_each(|form| collect_names(form, &mut names));
        Self { walk: Walk::new(notation, &names), equations: Vec::new(), printed: 0 }
    }

    /// Adds an equation, after the definitions of the auxiliaries that it needs.
    pub(super) fn equation(&mut self, equation: &Equation) {
        let left = self.left(&equation.name);
        match &equation.right[..] {
            [one] if equation.differentials.is_empty() => {
                let lines = self.lines(Some(left), one);
                self.add(vec![lines]);
            }
            [one] => {
                let right = self.with_differentials(one, &equation.differentials);
                self.add(vec![vec![Line { left: Some(left), right, indent: 0 }]]);
            }
            components => self.vector(&equation.name, left, components),
        }
    }

    /// Adds a formula without a name.
    pub(super) fn formula(&mut self, form: &Form) {
        let lines = self.lines(None, form);
        self.add(vec![lines]);
    }

    /// Adds the conditions under which everything holds.
    pub(super) fn conditions(&mut self, conditions: &[Form]) {
        for condition in conditions {
            let piece = self.walk.piece(condition);
            let right = self.walk.notation.condition(&piece.text);
            self.add(vec![vec![Line { left: None, right, indent: 0 }]]);
        }
    }

    /// All equations with their lines.
    pub(super) fn finish(self) -> Vec<Vec<Line>> {
        self.equations
    }

    fn left(&mut self, name: &str) -> String {
        if name == "dA" {
            let area = self.walk.name("A").text;
            return self.walk.notation.row(&[self.walk.notation.differential(), area]);
        }
        self.walk.name(name).text
    }

    fn with_differentials(&mut self, form: &Form, variables: &[String]) -> String {
        let piece = self.walk.with_differentials(form, variables);
        if piece.width <= WIDEST_LINE {
            return piece.text;
        }
        let stand_in = Form::Name(self.walk.auxiliary(form), NameKind::Parameter);
        self.walk.with_differentials(&stand_in, variables).text
    }

    /// A column, or one equation for each component where a component does not fit a column.
    fn vector(&mut self, name: &str, left: String, components: &[Form]) {
        let pieces: Vec<_> = components.iter().map(|component| self.walk.piece(component)).collect();
        if pieces.iter().all(|piece| piece.width <= WIDEST_LINE - CONTINUATION) {
            let texts: Vec<String> = pieces.into_iter().map(|piece| piece.text).collect();
            let right = self.walk.notation.column(&texts);
            return self.add(vec![vec![Line { left: Some(left), right, indent: 0 }]]);
        }
        let mut equations = Vec::new();
        for (component, axis) in components.iter().zip(["x", "y", "z"]) {
            let left = self.left(&format!("{name}_{axis}"));
            equations.push(self.lines(Some(left), component));
        }
        self.add(equations);
    }

    /// The lines of one formula: broken before the signs of a sum, and before factors where a term alone is too wide.
    fn lines(&mut self, left: Option<String>, form: &Form) -> Vec<Line> {
        let whole = self.walk.piece(form);
        let texts = match form {
            Form::Sum(terms) if whole.width > WIDEST_LINE => self.broken_sum(terms),
            Form::Product(above, below) if whole.width > WIDEST_LINE && below.is_empty() => {
                let pieces = self.walk.broken_product(above, WIDEST_LINE - CONTINUATION);
                pieces.into_iter().enumerate().map(|(place, text)| (text, usize::from(place > 0))).collect()
            }
            _ => vec![(whole.text, 0)],
        };
        let mut left = left;
        texts.into_iter().map(|(right, indent)| Line { left: left.take(), right, indent }).collect()
    }

    /// Lines of a sum with their indentation.
    fn broken_sum(&mut self, terms: &[(bool, Form)]) -> Vec<(String, usize)> {
        let notation = self.walk.notation;
        let mut lines: Vec<(Vec<String>, usize)> = Vec::new();
        let mut room = 0;
        for (place, (negative, term)) in terms.iter().enumerate() {
            let sign = match (place, negative) {
                (0, false) => None,
                (_, true) => Some(notation.mark(Mark::Minus)),
                (_, false) => Some(notation.mark(Mark::Plus)),
            };
            let piece = self.walk.term(term, place == 0 && !negative, 0, Place::Line);
            let width = piece.width + CONTINUATION / 2;
            if place == 0 || width > room {
                lines.push((Vec::new(), usize::from(place > 0)));
                room = WIDEST_LINE - CONTINUATION / 2;
            }
            let (line, _) = lines.last_mut().expect("a line was begun");
            line.extend(sign);
            match term {
                Form::Product(above, below) if below.is_empty() && width > room => {
                    let mut pieces = self.walk.broken_product(above, WIDEST_LINE - 2 * CONTINUATION).into_iter();
                    line.extend(pieces.next());
                    lines.extend(pieces.map(|piece| (vec![piece], 2)));
                    // The next term begins a line, so that the factors stay together.
                    room = 0;
                }
                _ => {
                    line.push(piece.text);
                    room = room.saturating_sub(width);
                }
            }
        }
        lines.into_iter().map(|(parts, indent)| (notation.row(&parts), indent)).collect()
    }

    /// Appends equations, before them the auxiliaries that they use, each after those that it uses itself.
    fn add(&mut self, equations: Vec<Vec<Line>>) {
        let first = self.printed;
        let mut laid = Vec::new();
        let mut uses = Vec::new();
        while first + laid.len() < self.walk.auxiliaries.len() {
            let auxiliary = self.walk.auxiliaries[first + laid.len()].clone();
            self.walk.used.clear();
            let left = self.left(&auxiliary.name);
            laid.push(self.lines(Some(left), &auxiliary.form));
            uses.push(std::mem::take(&mut self.walk.used));
        }
        self.printed = first + laid.len();
        let mut todo: Vec<(usize, bool)> = (0..laid.len()).rev().map(|place| (place, false)).collect();
        while let Some((place, ready)) = todo.pop() {
            if laid[place].is_empty() {
                continue;
            }
            if ready {
                self.equations.push(std::mem::take(&mut laid[place]));
            } else {
                todo.push((place, true));
                // An auxiliary of an earlier equation is printed already.
                todo.extend(uses[place].iter().filter(|used| **used >= first).map(|used| (used - first, false)));
            }
        }
        self.equations.extend(equations);
    }
}

fn collect_names(form: &Form, names: &mut FxHashSet<String>) {
    match form {
        Form::Number(_) | Form::Pi => {}
        Form::Name(name, _) => {
            names.insert(name.clone());
        }
        Form::Call(_, arguments) => arguments.iter().for_each(|argument| collect_names(argument, names)),
        Form::Sum(terms) => terms.iter().for_each(|(_, term)| collect_names(term, names)),
        Form::Product(above, below) => above.iter().chain(below).for_each(|factor| collect_names(factor, names)),
        Form::Power(left, right) | Form::Relation(_, left, right) => {
            collect_names(left, names);
            collect_names(right, names);
        }
        Form::Negate(inner) | Form::Not(inner) => collect_names(inner, names),
    }
}
