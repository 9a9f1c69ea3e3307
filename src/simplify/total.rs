//! The exact area of a patch, where two antiderivatives can be found and proved.

use super::form::Form;
use super::integral::{Antiderivative, Integrator};
use super::meter::{Exhausted, Step};
use super::parse_back::parse_back;
use super::plan::Printer;
use super::polynomial::Polynomial;
use super::read::{Arguments, Purpose, Reader};
use super::region;
use super::ring::Ring;
use super::sign::{Ranges, sign, strict_sign};
use crate::expression::{ExpressionId, Graph, SymbolId, differentiate};
use crate::language::{Bound, Interval, Model, Patch};

/// The most sums that the search for the form of a total explores.
const NODES: usize = 400;

/// Integrates over the region of a patch.
pub(super) struct Total<'a> {
    pub model: &'a Model,
    pub patch: &'a Patch,
    pub graph: Graph,
    /// Symbols by their names in forms.
    pub names: Vec<(String, SymbolId)>,
    /// What must not be zero for the area that was found.
    pub conditions: Vec<String>,
}

impl Total<'_> {
    /// The area from the proved form of the element; `None` where no antiderivative was found and proved.
    pub fn area(&mut self, element: &Form) -> Option<Form> {
        if self.patch.trim.is_some() || element.text().contains("abs(") {
            return None;
        }
        let integrand = parse_back(&mut self.graph, &element.text(), &self.names)?;
        let mut best: Option<Form> = None;
        for [inner, outer] in [[0, 1], [1, 0]] {
            if let Ok((form, conditions)) = self.in_order(integrand, inner, outer)
                && best.as_ref().is_none_or(|known| form.operations() < known.operations())
            {
                best = Some(form);
                self.conditions = conditions;
            }
        }
        best
    }

    fn in_order(&mut self, integrand: ExpressionId, inner: usize, outer: usize) -> Step<(Form, Vec<String>)> {
        let limits = |interval: &Interval| match (interval.lower, interval.upper) {
            (Bound::Finite(lower), Bound::Finite(upper)) => Ok((lower, upper)),
            _ => Err(Exhausted),
        };
        let (inner_limits, outer_limits) =
            (limits(&self.patch.intervals[inner])?, limits(&self.patch.intervals[outer])?);
        let [inner, outer] = [inner, outer].map(|place| self.patch.variables[place]);
        if self.graph.depends_on(outer_limits.0, inner) || self.graph.depends_on(outer_limits.1, inner) {
            return Err(Exhausted);
        }
        let along = self.integral(integrand, inner, inner_limits)?;
        let total = self.integral(along, outer, outer_limits)?;
        let (mut reader, ranges) = self.reader(&[total], Purpose::Printing)?;
        let graph = reader.graph;
        let value = reader.read(total, &|ring: &Ring, p: &Polynomial| sign(ring, graph, &ranges, p))?;
        let mut printer = Printer::new(reader.ring.clone(), graph, self.patch.variables, NODES);
        let mut conditions = Vec::new();
        for (factor, _) in &value.denominator {
            if strict_sign(&reader.ring, graph, &ranges, factor).is_none() {
                conditions.push(format!("{} != 0", printer.polynomial(factor)?.text()));
            }
        }
        Ok((printer.fraction(&value)?, conditions))
    }

    fn reader(&self, formulas: &[ExpressionId], purpose: Purpose) -> Step<(Reader<'_>, Ranges)> {
        let roots = [formulas, &region::formulas(self.model, self.patch)].concat();
        let mut reader = Reader::new(&self.graph, &roots, Arguments::Split, purpose)?;
        let ranges = region::read(&mut reader, self.model, self.patch);
        Ok((reader, ranges))
    }

    /// The integral of a formula along one variable, as a formula.
    fn integral(
        &mut self,
        integrand: ExpressionId,
        variable: SymbolId,
        (lower, upper): (ExpressionId, ExpressionId),
    ) -> Step<ExpressionId> {
        let texts = self.proposal(integrand, variable)?;
        let mut antiderivative = None;
        for text in texts {
            let term = parse_back(&mut self.graph, &text, &self.names).ok_or(Exhausted)?;
            antiderivative = Some(match antiderivative {
                Some(sum) => self.graph.add(sum, term),
                None => term,
            });
        }
        let antiderivative = antiderivative.ok_or(Exhausted)?;
        self.prove(antiderivative, integrand, variable)?;
        let ends = [upper, lower].map(|end| self.graph.substitute(&[antiderivative], &[(variable, end)])[0]);
        Ok(self.graph.subtract(ends[0], ends[1]))
    }

    /// The terms of an antiderivative, as text.
    fn proposal(&self, integrand: ExpressionId, variable: SymbolId) -> Step<Vec<String>> {
        let (mut reader, ranges) = self.reader(&[integrand], Purpose::Integrating)?;
        let graph = reader.graph;
        let value = reader.read(integrand, &|ring: &Ring, p: &Polynomial| sign(ring, graph, &ranges, p))?;
        let mut ring = reader.ring.clone();
        let integrator = Integrator { graph, ring: &reader.ring, ranges: &ranges, variable };
        let Antiderivative { plain, functions } = integrator.antiderivative(&mut ring, &value)?.ok_or(Exhausted)?;
        // A denominator that vanishes on the way would make the difference of the end values meaningless.
        for (factor, _) in &plain.denominator {
            let varies = factor.generators().into_iter().any(|g| ring.depends_on(g, variable, graph));
            if varies && strict_sign(&ring, graph, &ranges, factor).is_none() {
                return Err(Exhausted);
            }
        }
        let mut printer = Printer::new(ring, graph, self.patch.variables, NODES);
        let mut texts = Vec::new();
        if !plain.is_zero() || functions.is_empty() {
            texts.push(printer.fraction(&plain)?.text());
        }
        for (coefficient, function, argument) in functions {
            let varies = argument.denominator.iter().any(|(factor, _)| {
                factor.generators().into_iter().any(|g| printer.ring.depends_on(g, variable, graph))
            });
            if varies {
                return Err(Exhausted);
            }
            let coefficient = printer.fraction(&coefficient)?;
            let argument = printer.fraction(&argument)?;
            let call = Form::function(function, argument);
            texts.push(format!("({})*{}", coefficient.text(), call.text()));
        }
        Ok(texts)
    }

    /// The derivative of the antiderivative is the integrand: both are read into one ring.
    fn prove(&mut self, antiderivative: ExpressionId, integrand: ExpressionId, variable: SymbolId) -> Step<()> {
        let slope = differentiate(&mut self.graph, antiderivative, variable);
        let (mut reader, ranges) = self.reader(&[slope, integrand], Purpose::Proving)?;
        let graph = reader.graph;
        let prove = |ring: &Ring, p: &Polynomial| sign(ring, graph, &ranges, p);
        let slope = reader.read(slope, &prove)?;
        let integrand = reader.read(integrand, &prove)?;
        if reader.ring.subtract(&slope, &integrand)?.is_zero() { Ok(()) } else { Err(Exhausted) }
    }
}
