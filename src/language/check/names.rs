//! Which names an expression uses, in which order definitions are taken, and what a name means.

use super::super::suggest::{nearest, other_name};
use super::super::syntax::{Name, SyntaxId, SyntaxKind};
use super::super::unit::{Dimension, Unit};
use super::super::{Diagnostic, Span};
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, Reported, State};
use crate::expression::SymbolId;

/// Errors from which on a name that is not known gets no suggestion: a search through all names for each is slow.
const MOST_SUGGESTIONS: usize = 50;

impl Checker {
    /// Calls `visit` for every expression below `root`, `root` included.
    fn walk(&self, root: SyntaxId, mut visit: impl FnMut(&SyntaxKind, Span)) {
        let mut todo = vec![root];
        while let Some(id) = todo.pop() {
            let syntax = self.sheet.get(id);
            visit(&syntax.kind, syntax.span);
            match &syntax.kind {
                SyntaxKind::Number { .. } | SyntaxKind::Name(_) => {}
                SyntaxKind::Call { arguments, .. } => todo.extend(arguments),
                SyntaxKind::Vector(components) => todo.extend(components),
                SyntaxKind::Component { base, .. } => todo.push(*base),
                SyntaxKind::Negate(a) | SyntaxKind::Not(a) => todo.push(*a),
                SyntaxKind::Binary { left, right, .. } => todo.extend([*left, *right]),
                SyntaxKind::Compare { first, rest } => {
                    todo.push(*first);
                    todo.extend(rest.iter().map(|(_, operand)| *operand));
                }
                SyntaxKind::Sum { from, to, term, .. } => todo.extend([*from, *to, *term]),
            }
        }
    }

    /// Indices of definitions that `root` mentions.
    fn mentioned(&self, root: SyntaxId, found: &mut Vec<usize>) {
        self.walk(root, |kind, _| {
            let name = match kind {
                SyntaxKind::Name(name) => name,
                SyntaxKind::Call { callee, .. } => &callee.text,
                _ => return,
            };
            if let Some(&index) = self.by_name.get(name) {
                found.push(index);
            }
        });
    }

    /// Whether `root` uses a name of the sheet.
    pub(super) fn uses_sheet_names(&self, root: SyntaxId) -> bool {
        let mut found = Vec::new();
        self.mentioned(root, &mut found);
        !found.is_empty()
    }

    /// Whether a unit is written in `root`.
    pub(super) fn mentions_unit(&self, root: SyntaxId) -> bool {
        let mut unit = false;
        self.walk(root, |kind, _| unit |= matches!(kind, SyntaxKind::Number { unit: Some(_), .. }));
        unit
    }

    /// The unit of a right side that is one literal, with a sign or not.
    pub(super) fn unit_of_literal(&self, root: SyntaxId) -> Option<Unit> {
        match &self.sheet.get(root).kind {
            SyntaxKind::Number { unit: Some(unit), .. } => Unit::resolve(unit).ok(),
            SyntaxKind::Negate(inner) => match &self.sheet.get(*inner).kind {
                SyntaxKind::Number { unit: Some(unit), .. } => Unit::resolve(unit).ok(),
                _ => None,
            },
            _ => None,
        }
    }

    /// All definitions, each after those it uses. Definitions in a circle are reported and broken.
    pub(super) fn definition_order(&mut self) -> Vec<usize> {
        let uses: Vec<Vec<usize>> = (0..self.definitions.len()).map(|index| self.uses(index)).collect();
        let mut order = Vec::with_capacity(uses.len());
        let mut progress = vec![0u8; uses.len()];
        for start in 0..uses.len() {
            // Path of (definition, next use to look at).
            let mut path = vec![(start, 0)];
            while let Some((index, next)) = path.last_mut() {
                let index = *index;
                if progress[index] == 2 {
                    path.pop();
                    continue;
                }
                progress[index] = 1;
                match uses[index].get(*next) {
                    Some(&used) => {
                        *next += 1;
                        match progress[used] {
                            0 => path.push((used, 0)),
                            1 => {
                                let from = path.iter().position(|(on_path, _)| *on_path == used).unwrap_or(0);
                                let circle: Vec<usize> = path[from..].iter().map(|(index, _)| *index).collect();
                                self.report_circle(&circle);
                            }
                            _ => {}
                        }
                    }
                    None => {
                        progress[index] = 2;
                        order.push(index);
                        path.pop();
                    }
                }
            }
        }
        order
    }

    fn uses(&self, index: usize) -> Vec<usize> {
        let syntax = &self.definitions[index].syntax;
        let mut found = Vec::new();
        self.mentioned(syntax.value, &mut found);
        if let Some(region) = &syntax.region {
            for interval in region {
                self.mentioned(interval.range.lower, &mut found);
                self.mentioned(interval.range.upper, &mut found);
            }
        }
        if let Some(range) = &syntax.range {
            self.mentioned(range.lower, &mut found);
            self.mentioned(range.upper, &mut found);
        }
        if let Some(trim) = syntax.trim {
            self.mentioned(trim, &mut found);
        }
        // Arguments hide definitions of the same name.
        if let Some(arguments) = &syntax.arguments {
            found.retain(|&used| {
                let name = &self.definitions[used].syntax.name.text;
                !arguments.iter().any(|argument| argument.text == *name)
            });
        }
        found.sort_unstable();
        found.dedup();
        found
    }

    fn report_circle(&mut self, circle: &[usize]) {
        if circle.iter().any(|&index| matches!(self.definitions[index].state, State::Broken)) {
            return;
        }
        let names: Vec<String> =
            circle.iter().take(8).map(|&index| format!("`{}`", self.definitions[index].syntax.name.text)).collect();
        let first = &self.definitions[circle[0]].syntax.name;
        let span = first.span;
        let message = if circle.len() == 1 {
            format!("{} is defined by itself", names[0])
        } else {
            format!("{} are defined by each other in a circle", names.join(", "))
        };
        for &index in circle {
            self.definitions[index].state = State::Broken;
        }
        self.error_with_hint("circle", span, message, "write one of them without the others".to_owned());
    }

    pub(super) fn distinct_arguments(&mut self, arguments: &[Name]) -> Checked<()> {
        for (position, argument) in arguments.iter().enumerate() {
            if arguments[..position].iter().any(|earlier| earlier.text == argument.text) {
                return Err(self.error(
                    "doubled-name",
                    argument.span,
                    format!("the argument `{}` stands twice", argument.text),
                ));
            }
        }
        Ok(())
    }

    /// The symbol of a patch variable; patches share it by name.
    pub(super) fn variable(&mut self, name: &str) -> SymbolId {
        if let Some(&symbol) = self.variables.get(name) {
            return symbol;
        }
        let symbol = self.graph.new_symbol(name);
        self.variables.insert(name.to_owned(), symbol);
        symbol
    }

    /// What a name means where it stands.
    pub(super) fn resolve(&mut self, name: &str, span: Span) -> Checked<Meaning> {
        if let Some((_, value)) = self.locals.iter().rev().find(|(local, _)| local == name) {
            return Ok(Meaning::Value(value.clone()));
        }
        if name == "pi" {
            let pi = self.graph.pi();
            return Ok(Meaning::Value(Value::number(pi, Some(Dimension::NONE))));
        }
        if name == "inf" {
            return Err(self.error_with_hint(
                "misplaced-infinity",
                span,
                "`inf` is not a number".to_owned(),
                "it may only stand alone as an end of an interval".to_owned(),
            ));
        }
        if let Some(value) = self.surface_name(name) {
            if self.by_name.contains_key(name) {
                return Err(self.error_with_hint(
                    "clashing-name",
                    span,
                    format!("`{name}` is defined in the sheet and also has a meaning at a point of a surface"),
                    "rename the one in the sheet to use it in an integrand".to_owned(),
                ));
            }
            return Ok(Meaning::Value(value));
        }
        if let Some(&index) = self.by_name.get(name) {
            return match self.definitions[index].state.clone() {
                State::Done(meaning) => Ok(meaning),
                State::Broken => Err(Reported),
                // Only inside a circle, which has been reported.
                State::Waiting => Err(Reported),
            };
        }
        if self.unread.contains(name) {
            return Err(Reported);
        }
        if let Some(scope) = &self.surface
            && let Some((_, patch)) = scope.partial.iter().find(|(partial, _)| partial == name)
        {
            let message = format!("the variable `{name}` does not exist in the patch `{patch}` of this chain");
            return Err(self.error("unknown-name", span, message));
        }
        Err(self.unknown(name, span))
    }

    /// Meaning of a name at a point of a surface: position, unit normal, curvatures, variables of the patch.
    fn surface_name(&mut self, name: &str) -> Option<Value> {
        let scope = self.surface.clone()?;
        if let Some((_, symbol, dimension)) = scope.variables.iter().find(|(variable, _, _)| variable == name) {
            return Some(Value::number(self.graph.symbol(*symbol), Some(*dimension)));
        }
        let symbols = self.surface_symbols;
        let inverse = Dimension::NONE.divide(scope.dimension)?;
        let (symbol, dimension) = match name {
            "x" => (symbols.position[0], scope.dimension),
            "y" => (symbols.position[1], scope.dimension),
            "z" => (symbols.position[2], scope.dimension),
            "nx" => (symbols.unit_normal[0], Dimension::NONE),
            "ny" => (symbols.unit_normal[1], Dimension::NONE),
            "nz" => (symbols.unit_normal[2], Dimension::NONE),
            "H" => (symbols.mean_curvature, inverse),
            "K" => (symbols.gauss_curvature, inverse.multiply(inverse)?),
            _ => return None,
        };
        Some(Value::number(self.graph.symbol(symbol), Some(dimension)))
    }

    pub(super) fn unknown(&mut self, name: &str, span: Span) -> Reported {
        let error = Diagnostic::error("unknown-name", span, format!("`{name}` is not defined"));
        let hint = if let Some(other) = other_name(name) {
            Some(format!("it is called `{other}` here"))
        } else if self.diagnostics.len() >= MOST_SUGGESTIONS {
            None
        } else {
            let locals = self.locals.iter().map(|(name, _)| name.as_str());
            let known = self.by_name.keys().map(String::as_str).chain(locals);
            let mut candidates: Vec<&str> = known.collect();
            candidates
                .extend(["pi", "sin", "cos", "tan", "sqrt", "exp", "log", "area", "integral", "flux", "centroid"]);
            candidates.sort_unstable();
            if matches!(name, "x" | "y" | "z" | "nx" | "ny" | "nz" | "K" | "H") {
                Some(format!("`{name}` has a meaning only inside an integrand or after `where`"))
            } else {
                nearest(name, candidates)
                    .filter(|_| name.chars().count() > 1)
                    .map(|near| format!("did you mean `{near}`?"))
            }
        };
        self.report(match hint {
            Some(hint) => error.with_hint(hint),
            None => error,
        })
    }

    /// An error for a meaning of the wrong kind.
    pub(super) fn wrong_kind(&mut self, span: Span, found: &str, due: Kind) -> Reported {
        self.error("wrong-kind", span, format!("{found} where {} is due", due.words()))
    }
}
