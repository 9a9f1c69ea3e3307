//! Patches with their regions, and what names mean at a point of a surface.

use super::super::Span;
use super::super::model::{Bound, Chain, Interval, Patch, PatchId};
use super::super::syntax::{DefinitionSyntax, IntervalSyntax, Name, RangeSyntax, SyntaxId, SyntaxKind};
use super::super::unit::{Dimension, Unit};
use super::names::POINT_NAMES;
use super::values::{Kind, Meaning, Value};
use super::{Checked, Checker, Reported, SurfaceScope, shown};
use crate::expression::{ExpressionId, SymbolId};
use rustc_hash::FxHashMap;
use std::sync::Arc;

/// The variables of a patch with their intervals.
struct Region {
    variables: [SymbolId; 2],
    dimensions: [Dimension; 2],
    intervals: [Interval; 2],
}

impl Checker {
    /// `name(u, v) = (...) on u in [...], v in [...] where ...`
    pub(super) fn patch_definition(&mut self, index: usize, syntax: &DefinitionSyntax) -> Checked<PatchId> {
        let arguments = syntax.arguments.as_deref().unwrap_or_default();
        if arguments.len() != 2 {
            return Err(self.error(
                "wrong-arity",
                syntax.name.span,
                format!("a patch has 2 variables, `{}` has {}", syntax.name.text, arguments.len()),
            ));
        }
        let region = self.region(arguments, syntax.region.as_deref().unwrap_or_default(), syntax.name.span)?;
        let values = [0, 1].map(|i| {
            let symbol = self.graph.symbol(region.variables[i]);
            Value::number(symbol, Some(region.dimensions[i]))
        });
        let position = self.apply(index, &values, self.span(syntax.value))?;
        self.add_patch(syntax, region, &position, None)
    }

    /// `cap = crown on v in [0, 0.1], u in [0, 2*pi]`
    pub(super) fn cut_patch(&mut self, syntax: &DefinitionSyntax) -> Checked<PatchId> {
        let span = self.span(syntax.value);
        let Meaning::Patch(original) = self.lower(syntax.value)? else {
            return Err(self.error_with_hint(
                "wrong-kind",
                span,
                "a region goes with a patch".to_owned(),
                format!("write the variables: `{}(u, v) = ...`, or name a patch before `on`", syntax.name.text),
            ));
        };
        let patch = self.patch(original).clone();
        let Some(region) = &syntax.region else {
            // Only a trim: the region stays.
            let region = Region {
                variables: patch.variables,
                dimensions: patch.variable_dimensions,
                intervals: patch.intervals.clone(),
            };
            let position =
                Value { components: patch.position.to_vec(), dimension: Some(patch.dimension), kind: Kind::Vector };
            return self.add_patch(syntax, region, &position, patch.trim);
        };
        let names: Vec<Name> = patch
            .variables
            .iter()
            .map(|&variable| Name { text: self.graph.symbol_name(variable).to_owned(), span })
            .collect();
        let region = self.region(&names, region, syntax.name.span)?;
        for (i, name) in names.iter().enumerate() {
            if region.dimensions[i] != patch.variable_dimensions[i] {
                let message = format!(
                    "`{}` is in {}, in `{}` it is in {}",
                    name.text,
                    shown(region.dimensions[i]),
                    patch.name,
                    shown(patch.variable_dimensions[i])
                );
                return Err(self.error("unit-clash", region.intervals[i].span, message));
            }
        }
        let position =
            Value { components: patch.position.to_vec(), dimension: Some(patch.dimension), kind: Kind::Vector };
        self.add_patch(syntax, region, &position, patch.trim)
    }

    fn add_patch(
        &mut self,
        syntax: &DefinitionSyntax,
        region: Region,
        position: &Value,
        inherited_trim: Option<ExpressionId>,
    ) -> Checked<PatchId> {
        let span = self.span(syntax.value);
        if position.kind != Kind::Vector {
            return Err(self.error_with_hint(
                "wrong-kind",
                span,
                format!("a patch gives a position (x, y, z), this is {}", position.kind.words()),
                "write three components in parentheses; without `on` it is a plain function".to_owned(),
            ));
        }
        self.refuse_answers(&position.components, span, "a patch")?;
        self.check_size(&position.components, syntax.name.span, &syntax.name.text)?;
        let dimension = position.dimension.unwrap_or(Dimension::NONE);
        let mut patch = Patch {
            name: syntax.name.text.clone(),
            named: true,
            position: [position.components[0], position.components[1], position.components[2]],
            variables: region.variables,
            variable_dimensions: region.dimensions,
            intervals: region.intervals,
            trim: inherited_trim,
            orientation: 1,
            dimension,
            span: syntax.name.span,
        };
        if let Some(condition) = syntax.trim {
            let scope = self.scope_of(&[&patch], dimension);
            let before = self.surface.replace(Arc::new(scope));
            let truth = self.truth(condition);
            self.surface = before;
            let truth = truth?;
            let span = self.span(condition);
            self.refuse_answers(&[truth], span, "a trim")?;
            self.check_size(&[truth], span, "this condition")?;
            patch.trim = Some(match patch.trim {
                Some(inherited) => self.graph.and(inherited, truth),
                None => truth,
            });
        }
        let id = PatchId(self.model.patches.len());
        self.add(patch, syntax.name.span)?;
        Ok(id)
    }

    /// The region of the two variables, in the order of the arguments; the text may give them in any order.
    fn region(&mut self, arguments: &[Name], written: &[IntervalSyntax], span: Span) -> Checked<Region> {
        let mut found: [Option<&IntervalSyntax>; 2] = [None, None];
        for interval in written {
            let name = &interval.variable;
            match arguments.iter().position(|argument| argument.text == name.text) {
                Some(index) if found[index].is_none() => found[index] = Some(interval),
                Some(_) => {
                    return Err(self.error(
                        "doubled-name",
                        name.span,
                        format!("the interval of `{}` stands twice", name.text),
                    ));
                }
                None => {
                    let hint = format!("the variables are `{}` and `{}`", arguments[0].text, arguments[1].text);
                    let message = format!("`{}` is not a variable of this patch", name.text);
                    return Err(self.error_with_hint("unknown-name", name.span, message, hint));
                }
            }
        }
        let [Some(first), Some(second)] = found else {
            let missing = usize::from(found[0].is_some());
            return Err(self.error_with_hint(
                "missing-interval",
                span,
                format!("the interval of `{}` is missing", arguments[missing].text),
                format!("add `{} in [a, b]` after `on`", arguments[missing].text),
            ));
        };
        let written = [first, second];
        let uses_other = |checker: &Self, index: usize| {
            let other = &arguments[1 - index].text;
            let mut uses = false;
            for end in [written[index].range.lower, written[index].range.upper] {
                let mut todo = vec![end];
                while let Some(id) = todo.pop() {
                    uses |= matches!(&checker.sheet.get(id).kind, SyntaxKind::Name(name) if name == other);
                    todo.extend(checker.operands(id));
                }
            }
            uses
        };
        let depends = [uses_other(self, 0), uses_other(self, 1)];
        if depends == [true, true] {
            return Err(self.error_with_hint(
                "circle",
                written[1].range.span,
                "the limits of both variables depend on each other".to_owned(),
                "one of the two intervals must be free of the other variable".to_owned(),
            ));
        }
        let order = if depends[0] { [1, 0] } else { [0, 1] };
        let variables = [0, 1].map(|i| self.variable(&arguments[i].text));
        let mut dimensions = [Dimension::NONE; 2];
        let mut intervals: [Option<Interval>; 2] = [None, None];
        let base = self.locals.len();
        for index in order {
            let result = self.variable_interval(&written[index].range);
            let Ok((interval, dimension)) = result else {
                self.locals.truncate(base);
                return Err(Reported);
            };
            dimensions[index] = dimension;
            intervals[index] = Some(interval);
            let symbol = self.graph.symbol(variables[index]);
            self.locals.push((arguments[index].text.clone(), Value::number(symbol, Some(dimension))));
        }
        self.locals.truncate(base);
        let [Some(a), Some(b)] = intervals else { return Err(Reported) };
        Ok(Region { variables, dimensions, intervals: [a, b] })
    }

    fn variable_interval(&mut self, range: &RangeSyntax) -> Checked<(Interval, Dimension)> {
        let (lower, lower_dimension) = self.bound(range.lower)?;
        let (upper, upper_dimension) = self.bound(range.upper)?;
        let span = self.span(range.upper);
        let dimension = self.same_dimension(lower_dimension, upper_dimension, span, "this end")?;
        for (bound, end) in [(lower, range.lower), (upper, range.upper)] {
            if let Bound::Finite(formula) = bound {
                let span = self.span(end);
                self.refuse_answers(&[formula], span, "a region")?;
            }
        }
        Ok((self.ordered(lower, upper, range)?, dimension.unwrap_or(Dimension::NONE)))
    }

    fn ordered(&mut self, lower: Bound, upper: Bound, range: &RangeSyntax) -> Checked<Interval> {
        self.ends_in_order(lower, upper, range)?;
        let RangeSyntax { lower_closed, upper_closed, span, .. } = *range;
        Ok(Interval { lower, upper, lower_closed, upper_closed, span })
    }

    /// Ends that are plain numbers must not cross.
    fn ends_in_order(&mut self, lower: Bound, upper: Bound, range: &RangeSyntax) -> Checked<()> {
        let crossed = match (lower, upper) {
            (Bound::PlusInfinity, _) | (_, Bound::MinusInfinity) => true,
            (Bound::Finite(a), Bound::Finite(b)) => match (self.graph.as_number(a), self.graph.as_number(b)) {
                (Some(a), Some(b)) => a > b,
                _ => false,
            },
            _ => false,
        };
        if crossed {
            return Err(self.error_with_hint(
                "limits-cross",
                range.span,
                "the lower end of this interval is above the upper end".to_owned(),
                "write the smaller end first".to_owned(),
            ));
        }
        Ok(())
    }

    /// An end of an interval; `inf` may stand here, with a sign or without.
    fn bound(&mut self, id: SyntaxId) -> Checked<(Bound, Option<Dimension>)> {
        let sheet = Arc::clone(&self.sheet);
        let is_infinity = |id: SyntaxId| matches!(&sheet.get(id).kind, SyntaxKind::Name(name) if name == "inf");
        if is_infinity(id) {
            return Ok((Bound::PlusInfinity, None));
        }
        if let SyntaxKind::Negate(inner) = &sheet.get(id).kind
            && is_infinity(*inner)
        {
            return Ok((Bound::MinusInfinity, None));
        }
        let value = self.number(id)?;
        Ok((Bound::Finite(value.components[0]), value.dimension))
    }

    /// The range after `in` of a number. Plain ends take the unit that the number was written with.
    pub(super) fn interval(&mut self, range: &RangeSyntax, value: &Value, unit: Option<&Unit>) -> Checked<Interval> {
        let lower = self.range_end(range.lower, value, unit)?;
        let upper = self.range_end(range.upper, value, unit)?;
        self.ordered(lower, upper, range)
    }

    fn range_end(&mut self, end: SyntaxId, value: &Value, unit: Option<&Unit>) -> Checked<Bound> {
        let (bound, dimension) = self.bound(end)?;
        let Bound::Finite(formula) = bound else { return Ok(bound) };
        let span = self.span(end);
        self.refuse_answers(&[formula], span, "a range")?;
        let has_dimension = value.dimension.is_some_and(|dimension| !dimension.is_none());
        let is_plain = dimension.is_none_or(Dimension::is_none) && !self.mentions_unit(end);
        // Degrees are plain numbers, and so is whatever has a name: only what is written here is in degrees.
        match unit {
            Some(unit) if is_plain && (has_dimension || !self.uses_sheet_names(end)) => {
                Ok(Bound::Finite(self.in_unit(formula, unit)))
            }
            _ => {
                self.same_dimension(value.dimension, dimension, span, "this end")?;
                Ok(bound)
            }
        }
    }

    /// A number of this unit in coherent units.
    fn in_unit(&mut self, formula: ExpressionId, unit: &Unit) -> ExpressionId {
        let factor = self.graph.number(unit.factor.clone());
        let scaled = self.graph.multiply(formula, factor);
        if unit.pi_power == 0 {
            return scaled;
        }
        let pi = self.graph.pi();
        let power = self.graph.integer_power(pi, i64::from(unit.pi_power));
        self.graph.multiply(scaled, power)
    }

    /// What names mean on all patches of a chain.
    pub(super) fn surface_scope(&mut self, chain: &Chain, span: Span) -> Checked<SurfaceScope> {
        let dimension = self.common_dimension(chain, span)?;
        let patches: Vec<&Patch> = chain.terms.iter().map(|(_, id)| self.patch(*id)).collect();
        Ok(self.scope_of(&patches, dimension))
    }

    fn scope_of(&self, patches: &[&Patch], dimension: Dimension) -> SurfaceScope {
        // Each variable: how many patches have it, and its dimension in the first.
        let mut found: FxHashMap<SymbolId, (usize, Dimension, &str)> = FxHashMap::default();
        let mut scope = SurfaceScope {
            dimension,
            variables: FxHashMap::default(),
            partial: FxHashMap::default(),
            clashing: FxHashMap::default(),
        };
        for patch in patches {
            for i in 0..2 {
                let symbol = patch.variables[i];
                let name = self.graph.symbol_name(symbol);
                let entry = found.entry(symbol).or_insert((0, patch.variable_dimensions[i], &patch.name));
                entry.0 += 1;
                if entry.1 != patch.variable_dimensions[i] {
                    let (here, there) = (shown(patch.variable_dimensions[i]), shown(entry.1));
                    let reason =
                        format!("the variable `{name}` is in {there} in `{}`, in {here} in `{}`", entry.2, patch.name);
                    scope.partial.insert(name.to_owned(), reason);
                }
                if let Some(place) = POINT_NAMES.iter().position(|point| *point == name)
                    && patch.position.get(place).is_none_or(|&formula| self.graph.as_symbol(formula) != Some(symbol))
                {
                    scope.clashing.insert(name.to_owned(), patch.name.clone());
                }
            }
        }
        for (symbol, (count, dimension, _)) in found {
            let name = self.graph.symbol_name(symbol).to_owned();
            if count < patches.len() {
                let without = patches.iter().find(|patch| !patch.variables.contains(&symbol));
                let without = without.map_or("", |patch| patch.name.as_str());
                let reason = format!("the variable `{name}` does not exist in the patch `{without}` of this chain");
                scope.partial.insert(name, reason);
            } else if !scope.partial.contains_key(&name) {
                scope.variables.insert(name, (symbol, dimension));
            }
        }
        scope
    }

    pub(super) fn common_dimension(&mut self, chain: &Chain, span: Span) -> Checked<Dimension> {
        let mut common: Option<(Dimension, String)> = None;
        for (_, id) in &chain.terms {
            let (dimension, name) = (self.patch(*id).dimension, self.patch(*id).name.clone());
            match &common {
                Some((first, first_name)) if *first != dimension => {
                    let message = format!(
                        "the patches of a chain have one unit: `{first_name}` is in {}, `{name}` in {}",
                        shown(*first),
                        shown(dimension)
                    );
                    return Err(self.error("unit-clash", span, message));
                }
                Some(_) => {}
                None => common = Some((dimension, name)),
            }
        }
        Ok(common.map_or(Dimension::NONE, |(dimension, _)| dimension))
    }
}
