//! Which names an expression uses, in which order definitions are taken, and what a name means.

use super::super::model::SurfaceSymbols;
use super::super::suggest::{is_reserved, nearest, other_name};
use super::super::syntax::{DefinitionSyntax, Name, SyntaxId, SyntaxKind};
use super::super::unit::{Dimension, Unit};
use super::super::{Diagnostic, Span};
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, Reported, State};
use crate::expression::SymbolId;
use rustc_hash::FxHashSet;

/// Names with a meaning at a point of a surface: position, unit normal, curvatures.
pub(super) const POINT_NAMES: [&str; 8] = ["x", "y", "z", "nx", "ny", "nz", "K", "H"];

/// Functions that integrate over a chain.
pub(super) const FUNCTIONALS: [&str; 6] = ["area", "integral", "flux", "volume", "centroid", "inertia"];

/// Names compared with unknown ones in search of a hint, in total; a sheet with very many names gets few such hints.
const MAXIMUM_COMPARISONS: usize = 200_000;

impl Checker {
    /// Calls `visit` for every expression below `root`, `root` included.
    fn walk(&self, root: SyntaxId, mut visit: impl FnMut(&SyntaxKind, Span)) {
        let mut todo = vec![root];
        while let Some(id) = todo.pop() {
            let syntax = self.sheet.get(id);
            visit(&syntax.kind, syntax.span);
            todo.extend(self.operands(id));
        }
    }

    /// Expressions directly below `id`.
    pub(super) fn operands(&self, id: SyntaxId) -> Vec<SyntaxId> {
        match &self.sheet.get(id).kind {
            SyntaxKind::Number { .. } | SyntaxKind::Name(_) => Vec::new(),
            SyntaxKind::Call { arguments, .. } => arguments.clone(),
            SyntaxKind::Vector(components) => components.clone(),
            SyntaxKind::Component { base, .. } => vec![*base],
            SyntaxKind::Negate(a) | SyntaxKind::Not(a) => vec![*a],
            SyntaxKind::Binary { left, right, .. } => vec![*left, *right],
            SyntaxKind::Compare { first, rest } => {
                std::iter::once(*first).chain(rest.iter().map(|(_, operand)| *operand)).collect()
            }
            SyntaxKind::Sum { from, to, term, .. } => vec![*from, *to, *term],
        }
    }

    /// Calls `visit` for every name below `root` that no index of a sum hides, with its place.
    pub(super) fn free_names(&self, root: SyntaxId, mut visit: impl FnMut(&str, Span)) {
        // An expression and the innermost sum around it; each sum refers to the next one out.
        let mut sums: Vec<(&str, Option<usize>)> = Vec::new();
        let mut todo = vec![(root, None)];
        while let Some((id, around)) = todo.pop() {
            let syntax = self.sheet.get(id);
            let named = match &syntax.kind {
                SyntaxKind::Name(name) => Some((name.as_str(), syntax.span)),
                SyntaxKind::Call { callee, .. } => Some((callee.text.as_str(), callee.span)),
                _ => None,
            };
            if let Some((name, span)) = named {
                let mut sum: Option<usize> = around;
                while let Some(index) = sum.filter(|&index| sums[index].0 != name) {
                    sum = sums[index].1;
                }
                if sum.is_none() {
                    visit(name, span);
                }
            }
            if let SyntaxKind::Sum { index, from, to, term } = &syntax.kind {
                todo.extend([(*from, around), (*to, around), (*term, Some(sums.len()))]);
                sums.push((&index.text, around));
            } else {
                todo.extend(self.operands(id).into_iter().map(|operand| (operand, around)));
            }
        }
    }

    /// Indices of definitions that `root` mentions.
    fn mentioned(&self, root: SyntaxId, found: &mut Vec<usize>) {
        self.free_names(root, |name, _| found.extend(self.by_name.get(name)));
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
        // Where each definition stands on the path.
        let mut place = vec![0; uses.len()];
        for start in 0..uses.len() {
            if progress[start] != 0 {
                continue;
            }
            // Path of (definition, next use to look at), and places on it that belong to a reported circle.
            let mut path = vec![(start, 0)];
            let mut broken: Vec<usize> = Vec::new();
            while let Some((index, next)) = path.last_mut() {
                let index = *index;
                if progress[index] == 0 {
                    progress[index] = 1;
                    place[index] = path.len() - 1;
                } else if let Some(&used) = uses[index].get(*next) {
                    *next += 1;
                    match progress[used] {
                        0 => path.push((used, 0)),
                        // A circle that shares a definition with a reported one is the same mistake.
                        1 if broken.last().is_none_or(|&last| last < place[used]) => {
                            let circle: Vec<usize> = path[place[used]..].iter().map(|(index, _)| *index).collect();
                            broken.extend(place[used]..path.len());
                            self.report_circle(&circle);
                        }
                        _ => {}
                    }
                } else {
                    progress[index] = 2;
                    order.push(index);
                    path.pop();
                    broken.pop_if(|last| *last >= path.len());
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
            let arguments: FxHashSet<&str> = arguments.iter().map(|argument| argument.text.as_str()).collect();
            found.retain(|&used| !arguments.contains(self.definitions[used].syntax.name.text.as_str()));
        }
        found.sort_unstable();
        found.dedup();
        found
    }

    /// Reports names in the body of a function that mean nothing there.
    pub(super) fn names_are_known(&mut self, syntax: &DefinitionSyntax) {
        let mut known: FxHashSet<&str> = FxHashSet::default();
        known.extend(syntax.arguments.iter().flatten().map(|argument| argument.text.as_str()));
        let mut unknown = Vec::new();
        let mut integrates = false;
        self.free_names(syntax.value, |name, _| integrates |= FUNCTIONALS.contains(&name));
        self.free_names(syntax.value, |name, span| {
            let has_meaning = known.contains(name) || self.by_name.contains_key(name) || self.unread.contains(name);
            // What is integrated in the body may use names that only mean something on the surface.
            let on_surface = integrates && (POINT_NAMES.contains(&name) || self.variables.contains_key(name));
            if !has_meaning && !on_surface && !is_reserved(name) {
                unknown.push((name.to_owned(), span));
            }
        });
        for (name, span) in unknown {
            self.unknown(&name, span);
        }
    }

    fn report_circle(&mut self, circle: &[usize]) {
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
        let hint = if circle.len() == 1 {
            "give it a value without its own name"
        } else {
            "write one of them without the others"
        };
        self.error_with_hint("circle", span, message, hint.to_owned());
    }

    pub(super) fn distinct_arguments(&mut self, arguments: &[Name]) -> Checked<()> {
        let mut seen = FxHashSet::default();
        for argument in arguments {
            if !seen.insert(argument.text.as_str()) {
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
        if let Some(value) = self.point_meaning(name, span)? {
            if self.by_name.contains_key(name) {
                return Err(self.clash_with_sheet(name, span));
            }
            return Ok(Meaning::Value(value));
        }
        if let Some(reason) = self.surface.as_ref().and_then(|scope| scope.partial.get(name)).cloned() {
            if self.by_name.contains_key(name) {
                return Err(self.clash_with_sheet(name, span));
            }
            return Err(self.error("unknown-name", span, reason));
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
        Err(self.unknown(name, span))
    }

    fn clash_with_sheet(&mut self, name: &str, span: Span) -> Reported {
        self.error_with_hint(
            "clashing-name",
            span,
            format!("`{name}` is defined in the sheet and also has a meaning at a point of a surface"),
            "rename the one in the sheet to use it in an integrand".to_owned(),
        )
    }

    /// Meaning of a name at a point of a surface: position, unit normal, curvatures, variables of the patch.
    pub(super) fn point_meaning(&mut self, name: &str, span: Span) -> Checked<Option<Value>> {
        let Some(scope) = self.surface.clone() else { return Ok(None) };
        if let Some(patch) = scope.clashing.get(name) {
            return Err(self.error_with_hint(
                "clashing-name",
                span,
                format!("`{name}` is a variable of `{patch}`, and another value at a point of this surface"),
                "give the variable another name".to_owned(),
            ));
        }
        if let Some(&(symbol, dimension)) = scope.variables.get(name) {
            return Ok(Some(Value::number(self.graph.symbol(symbol), Some(dimension))));
        }
        let Some(place) = POINT_NAMES.iter().position(|point| *point == name) else { return Ok(None) };
        let dimension = match name {
            "x" | "y" | "z" => Some(scope.dimension),
            "H" => scope.dimension.power(-1, 1),
            "K" => scope.dimension.power(-2, 1),
            _ => Some(Dimension::NONE),
        };
        let Some(dimension) = dimension else { return Err(self.unit_overflow(span)) };
        let symbol = self.point_symbols()[place];
        Ok(Some(Value::number(self.graph.symbol(symbol), Some(dimension))))
    }

    /// The symbols of [`POINT_NAMES`].
    pub(super) fn point_symbols(&self) -> [SymbolId; 8] {
        let SurfaceSymbols { position: [x, y, z], unit_normal: [nx, ny, nz], gauss_curvature, mean_curvature } =
            self.surface_symbols;
        [x, y, z, nx, ny, nz, gauss_curvature, mean_curvature]
    }

    /// Whether a symbol has another value at each point of a surface.
    pub(super) fn varies_on_surfaces(&self, symbol: SymbolId) -> bool {
        self.point_symbols().contains(&symbol) || self.variables.get(self.graph.symbol_name(symbol)) == Some(&symbol)
    }

    pub(super) fn unknown(&mut self, name: &str, span: Span) -> Reported {
        let error = Diagnostic::error("unknown-name", span, format!("`{name}` is not defined"));
        let hint = if let Some(other) = other_name(name) {
            Some(format!("it is called `{other}` here"))
        } else if POINT_NAMES.contains(&name) {
            Some(format!("`{name}` has a meaning only inside an integrand or after `where`"))
        } else if name.chars().count() == 1 || self.comparisons > MAXIMUM_COMPARISONS {
            None
        } else {
            self.comparisons += self.by_name.len();
            let locals = self.locals.iter().map(|(name, _)| name.as_str());
            let known = self.by_name.keys().map(String::as_str).chain(locals);
            let mut candidates: Vec<&str> = known.collect();
            candidates
                .extend(["pi", "sin", "cos", "tan", "sqrt", "exp", "log", "area", "integral", "flux", "centroid"]);
            candidates.sort_unstable();
            nearest(name, candidates).map(|near| format!("did you mean `{near}`?"))
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
