//! Nodes of a patch: positions, unit normals, area elements and weights on a product of two rules.

use super::error::{IntegralError, Place};
use crate::expression::{ExpressionId, Graph, SymbolId, evaluate, first_undefined, print_limited};
use crate::geometry::{Surface, at_point};
use crate::kernel::{Kernel, Program};
use crate::language::{Bindings, Bound, Model, Patch, PatchId};
use std::io;

/// One row: u, v, x, y, z, nx, ny, nz, dA, weight. The weight includes dA: the sum of f times the weights is the
/// integral of f over the patch.
pub type NodeRow = [f64; 10];

/// Why a table of nodes stopped.
#[derive(Debug, thiserror::Error)]
pub enum NodesError {
    /// A node is undefined.
    #[error(transparent)]
    Surface(#[from] IntegralError),
    /// A row could not be delivered.
    #[error(transparent)]
    Output(#[from] io::Error),
}

/// A patch ready to deliver nodes.
pub struct SurfaceNodes<'a> {
    patch: &'a Patch,
    graph: Graph,
    bindings: &'a Bindings,
    kernel: Kernel,
    parameters: Vec<f64>,
    outputs: Vec<ExpressionId>,
    /// 1 where the limits of the first variable depend on the second.
    outer: usize,
}

impl<'a> SurfaceNodes<'a> {
    /// Compiles position, unit normal, area element and trim of a patch.
    ///
    /// # Errors
    /// For infinite limits and formulas that are too large.
    pub fn new(model: &'a Model, bindings: &'a Bindings, patch: PatchId) -> Result<Self, IntegralError> {
        let patch = &model.patches[patch.0];
        let mut graph = model.graph.clone();
        let surface = Surface::new(&mut graph, patch);
        let mut outputs = surface.position.to_vec();
        outputs.extend(surface.unit_normal(&mut graph));
        outputs.push(surface.element);
        if let Some(trim) = patch.trim {
            outputs.extend(at_point(&mut graph, &surface, &model.surface_symbols, &[trim]));
        }
        let infinite = |interval: &crate::language::Interval| {
            !matches!((interval.lower, interval.upper), (Bound::Finite(_), Bound::Finite(_)))
        };
        if patch.intervals.iter().any(infinite) {
            return Err(IntegralError::new("limits", format!("{}: nodes need finite limits", patch.name))
                .with_hint("give the patch a finite region: `name2 = name on ...`"));
        }
        let parameters: Vec<SymbolId> =
            graph.symbols_of(&outputs).into_iter().filter(|symbol| !patch.variables.contains(symbol)).collect();
        let program = Program::new(&graph, &outputs, patch.variables, &parameters)
            .map_err(|error| IntegralError::new("formula", format!("{}: {error}", patch.name)))?;
        let depends = |index: usize| {
            [patch.intervals[index].lower, patch.intervals[index].upper].iter().any(|bound| match bound {
                Bound::Finite(formula) => graph.depends_on(*formula, patch.variables[1 - index]),
                _ => false,
            })
        };
        let outer = usize::from(depends(0));
        Ok(Self {
            patch,
            bindings,
            kernel: Kernel::interpreted(program),
            parameters: parameters.iter().map(|&symbol| bindings.value(symbol)).collect(),
            outputs,
            outer,
            graph,
        })
    }

    fn limits(&self, index: usize, other: f64) -> (f64, f64) {
        let interval = &self.patch.intervals[index];
        let value_of = |symbol: SymbolId| {
            if symbol == self.patch.variables[1 - index] { other } else { self.bindings.value(symbol) }
        };
        let end = |bound: Bound| match bound {
            Bound::Finite(formula) => evaluate(&self.graph, &[formula], value_of)[0],
            _ => f64::NAN,
        };
        (end(interval.lower), end(interval.upper))
    }

    /// Delivers the nodes row by row; `first` and `second` are nodes and weights on (-1, 1) along the two variables.
    /// Nodes that a `where` cuts away have weight 0. At a node where the map is not regular the normal is NaN.
    ///
    /// # Errors
    /// If a position or an area element is undefined, or `deliver` fails.
    pub fn for_each(
        &self,
        first: &(Vec<f64>, Vec<f64>),
        second: &(Vec<f64>, Vec<f64>),
        deliver: &mut dyn FnMut(&NodeRow) -> io::Result<()>,
    ) -> Result<(), NodesError> {
        let rules = [first, second];
        let (outer_rule, inner_rule) = (rules[self.outer], rules[1 - self.outer]);
        let (outer_low, outer_high) = self.limits(self.outer, f64::NAN);
        let count = inner_rule.0.len();
        let mut out = vec![0.0; self.outputs.len() * count];
        for (outer_node, outer_weight) in outer_rule.0.iter().zip(&outer_rule.1) {
            let half = 0.5 * (outer_high - outer_low);
            let at_outer = outer_low + half * (1.0 + outer_node);
            let (low, high) = self.limits(1 - self.outer, at_outer);
            let inner_half = 0.5 * (high - low);
            let inner: Vec<f64> = inner_rule.0.iter().map(|node| low + inner_half * (1.0 + node)).collect();
            let outers = vec![at_outer; count];
            let (u, v) = if self.outer == 0 { (&outers, &inner) } else { (&inner, &outers) };
            self.kernel.evaluate(&self.parameters, u, v, &mut out);
            for i in 0..count {
                let value = |k: usize| out[k * count + i];
                let kept = self.patch.trim.is_none() || value(7) == 1.0;
                if kept && let Some(bad) = [0, 1, 2, 6].into_iter().find(|&k| !value(k).is_finite()) {
                    return Err(self.undefined(bad, u[i], v[i]).into());
                }
                let cell = outer_weight * half * inner_rule.1[i] * inner_half;
                let weight = if kept { value(6) * cell } else { 0.0 };
                deliver(&[u[i], v[i], value(0), value(1), value(2), value(3), value(4), value(5), value(6), weight])?;
            }
        }
        Ok(())
    }

    fn undefined(&self, output: usize, u: f64, v: f64) -> IntegralError {
        let value_of = |symbol: SymbolId| match self.patch.variables.iter().position(|&known| known == symbol) {
            Some(0) => u,
            Some(_) => v,
            None => self.bindings.value(symbol),
        };
        let cause = first_undefined(&self.graph, self.outputs[output], value_of);
        let expression = cause.map_or_else(String::new, |cause| print_limited(&self.graph, cause.expression, 120));
        let name = |i: usize| self.graph.symbol_name(self.patch.variables[i]).to_owned();
        let position = evaluate(&self.graph, &self.patch.position, value_of);
        let mut error = IntegralError::new(
            "undefined",
            format!("{} is undefined at {} = {u:?}, {} = {v:?}: `{expression}`", self.patch.name, name(0), name(1)),
        )
        .with_hint("cut the region so that it stays inside the domain, or trim it with `where`");
        error.place = Some(Box::new(Place {
            patch: self.patch.name.clone(),
            variables: [(name(0), u), (name(1), v)],
            position: [position[0], position[1], position[2]],
            expression,
            value: cause.map_or(f64::NAN, |cause| cause.value),
        }));
        error
    }
}
