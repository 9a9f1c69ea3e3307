//! Chains: sums, multiples and moved copies of patches.

use super::super::model::{Chain, Patch, PatchId};
use super::super::syntax::{Name, Operator, SyntaxId};
use super::super::{Diagnostic, Span};
use super::expressions::cut;
use super::values::{Kind, Meaning};
use super::{Checked, Checker, MAXIMUM_PATCHES, Reported};
use crate::calculus;
use crate::expression::{Exact, ExpressionId, Function, SymbolId};
use rustc_hash::FxHashMap;

/// Coefficients of a chain are smaller.
const MAXIMUM_MULTIPLICITY: u64 = 1 << 40;

impl Checker {
    pub(super) fn scaled(&mut self, chain: &Chain, factor: i64, span: Span) -> Checked<Chain> {
        let mut terms = Vec::with_capacity(chain.terms.len());
        for &(coefficient, patch) in &chain.terms {
            match coefficient.checked_mul(factor) {
                Some(0) => {}
                Some(product) => terms.push((self.multiplicity(product, span)?, patch)),
                None => return Err(self.multiplicity_error(span)),
            }
        }
        Ok(Chain { terms })
    }

    fn multiplicity(&mut self, coefficient: i64, span: Span) -> Checked<i64> {
        if coefficient.unsigned_abs() < MAXIMUM_MULTIPLICITY {
            return Ok(coefficient);
        }
        Err(self.multiplicity_error(span))
    }

    fn multiplicity_error(&mut self, span: Span) -> Reported {
        self.error("out-of-range", span, "this multiplicity is too large".to_owned())
    }

    /// The sum of a chain and more terms, each patch once.
    fn collected(&mut self, chain: Chain, more: Vec<(i64, PatchId)>, span: Span) -> Checked<Chain> {
        let mut terms = chain.terms;
        self.step((terms.len() + more.len()) / 64, span)?;
        // Sums of many names add one patch at a time; for those a search is quicker than an index.
        let index: Option<FxHashMap<PatchId, usize>> =
            (more.len() > 16).then(|| terms.iter().enumerate().map(|(place, (_, patch))| (*patch, place)).collect());
        for (coefficient, patch) in more {
            let place = match &index {
                Some(index) => index.get(&patch).copied(),
                None => terms.iter().position(|(_, known)| *known == patch),
            };
            match place {
                Some(place) => terms[place].0 = self.multiplicity(terms[place].0 + coefficient, span)?,
                None => terms.push((coefficient, patch)),
            }
        }
        terms.retain(|(coefficient, _)| *coefficient != 0);
        Ok(Chain { terms })
    }

    pub(super) fn binary_chains(
        &mut self,
        operator: Operator,
        span: Span,
        left: Meaning,
        right: Meaning,
    ) -> Checked<Chain> {
        let words = (left.words(), right.words());
        match (operator, left, right) {
            (Operator::Add | Operator::Subtract, left, right) => {
                let (Some(a), Some(b)) = (as_chain(left), as_chain(right)) else {
                    return Err(self.error(
                        "wrong-kind",
                        span,
                        format!("{} and {} cannot be added or subtracted", words.0, words.1),
                    ));
                };
                let b = if operator == Operator::Subtract { self.scaled(&b, -1, span)? } else { b };
                self.collected(a, b.terms, span)
            }
            (Operator::Multiply, Meaning::Value(number), chain)
            | (Operator::Multiply, chain, Meaning::Value(number)) => {
                let factor = match (number.kind, &number.components[..]) {
                    (Kind::Number, &[formula]) => self.graph.as_number(formula).and_then(Exact::to_i64),
                    _ => None,
                };
                let (Some(factor), Some(chain)) = (factor, as_chain(chain)) else {
                    return Err(self.error_with_hint(
                        "wrong-kind",
                        span,
                        "a chain is multiplied by a whole number only".to_owned(),
                        "multiply the answer instead, or scale the formulas of the patch".to_owned(),
                    ));
                };
                self.scaled(&chain, factor, span)
            }
            _ => Err(self.error(
                "wrong-kind",
                span,
                format!("this operator does not go between {} and {}", words.0, words.1),
            )),
        }
    }

    pub(super) fn chain(&mut self, id: SyntaxId) -> Checked<Chain> {
        let span = self.span(id);
        let meaning = self.lower(id)?;
        let words = meaning.words();
        let is_function = matches!(meaning, Meaning::Function(_));
        match as_chain(meaning) {
            Some(chain) => Ok(chain),
            None => {
                let error = Diagnostic::error(
                    "wrong-kind",
                    span,
                    format!("{words} where a patch or a chain of patches is due"),
                );
                Err(self.report(if is_function {
                    error.with_hint("give the function a region with `on` to make it a patch")
                } else {
                    error
                }))
            }
        }
    }

    /// `translate(chain, vector)`, `rotate(chain, axis, angle)`, `mirror(chain, normal)`
    pub(super) fn moved(&mut self, callee: &Name, arguments: &[SyntaxId], span: Span) -> Checked<Chain> {
        self.arity(callee, arguments, &[if callee.text == "rotate" { 3 } else { 2 }])?;
        let chain = self.chain(arguments[0])?;
        let vector = self.of_kind(arguments[1], Kind::Vector)?;
        let angle = match arguments.get(2) {
            Some(&angle) => Some(self.plain_number(angle, "an angle")?.components[0]),
            None => None,
        };
        self.refuse_answers(&vector.components, span, "a moved copy")?;
        if let Some(angle) = angle {
            self.refuse_answers(&[angle], span, "a moved copy")?;
        }
        let is_zero = vector.components.iter().all(|&c| self.graph.as_number(c).is_some_and(Exact::is_zero));
        if is_zero && callee.text != "translate" {
            let span = self.span(arguments[1]);
            return Err(self.error_with_hint(
                "out-of-range",
                span,
                "the zero vector has no direction".to_owned(),
                format!("give `{}` a vector such as (0, 0, 1)", callee.text),
            ));
        }
        let direction = [vector.components[0], vector.components[1], vector.components[2]];
        let mut terms = Vec::with_capacity(chain.terms.len());
        for (coefficient, id) in chain.terms {
            let patch = self.patch(id).clone();
            if callee.text == "translate" {
                let span = self.span(arguments[1]);
                self.same_dimension(Some(patch.dimension), vector.dimension, span, "this vector")?;
            }
            let position = match (callee.text.as_str(), angle) {
                ("translate", _) => calculus::add(&mut self.graph, &patch.position, &direction),
                ("rotate", Some(angle)) => self.rotated(&patch.position, &direction, angle),
                _ => self.mirrored(&patch.position, &direction),
            };
            if let Some(trim) = patch.trim {
                self.step(self.graph.reachable(&[trim]).len(), span)?;
            }
            self.step(1, span)?;
            if patch.trim.is_some_and(|trim| self.mentions_position(trim)) {
                return Err(self.error_with_hint(
                    "not-movable",
                    span,
                    format!("`{}` is trimmed by its position, which a copy would not have", patch.name),
                    "trim by the variables of the patch".to_owned(),
                ));
            }
            let name = format!("{}({})", callee.text, patch.name);
            let orientation = if callee.text == "mirror" { -patch.orientation } else { patch.orientation };
            let copy = self.copy_of(id, Patch { name, named: false, position, orientation, span, ..patch })?;
            terms.push((coefficient, copy));
        }
        // Two copies may be one patch: a mirror image of a mirror image.
        self.collected(Chain::default(), terms, span)
    }

    /// Enters a patch.
    pub(super) fn add(&mut self, patch: Patch, span: Span) -> Checked<()> {
        if self.model.patches.len() >= MAXIMUM_PATCHES {
            return Err(self.error(
                "too-large",
                span,
                format!("a sheet has at most {MAXIMUM_PATCHES} patches, moved copies included"),
            ));
        }
        self.model.patches.push(patch);
        Ok(())
    }

    /// A copy of `original` with another position; equal copies are one patch, so that their integrals are one too.
    fn copy_of(&mut self, original: PatchId, copy: Patch) -> Checked<PatchId> {
        let root = self.roots.get(&original).copied().unwrap_or(original);
        if (self.patch(root).position, self.patch(root).orientation) == (copy.position, copy.orientation) {
            return Ok(root);
        }
        let key = (root, copy.position, copy.orientation);
        if let Some(&known) = self.patch_ids.get(&key) {
            return Ok(known);
        }
        let span = copy.span;
        self.check_size(&copy.position, span, &cut(&copy.name))?;
        let id = PatchId(self.model.patches.len());
        self.add(copy, span)?;
        self.patch_ids.insert(key, id);
        self.roots.insert(id, root);
        Ok(id)
    }

    /// A patch that was moved by arguments of a function, for one call of it.
    pub(super) fn filled_in(
        &mut self,
        pattern: PatchId,
        replacements: &[(SymbolId, ExpressionId)],
        span: Span,
    ) -> Checked<PatchId> {
        let patch = self.patch(pattern).clone();
        self.step(self.graph.reachable(&patch.position).len(), span)?;
        let position = self.graph.substitute(&patch.position, replacements);
        self.copy_of(pattern, Patch { position: [position[0], position[1], position[2]], ..patch })
    }

    fn mentions_position(&self, formula: ExpressionId) -> bool {
        let used = self.graph.symbols_of(&[formula]);
        let symbols = &self.surface_symbols;
        symbols.position.iter().chain(&symbols.unit_normal).any(|symbol| used.contains(symbol))
    }

    /// Rodrigues' formula about the line through the origin: p cos t + (k x p) sin t + k (k.p)(1 - cos t), k = a/|a|.
    fn rotated(&mut self, p: &[ExpressionId; 3], axis: &[ExpressionId; 3], angle: ExpressionId) -> [ExpressionId; 3] {
        let g = &mut self.graph;
        let length = calculus::norm(g, axis);
        let k = calculus::divide(g, axis, length);
        let cosine = g.call(Function::Cos, angle);
        let sine = g.call(Function::Sin, angle);
        let one = g.integer(1);
        let rest = g.subtract(one, cosine);
        let along = calculus::dot(g, &k, p);
        let along = g.multiply(along, rest);
        let side = calculus::cross(g, &k, p);
        let first = calculus::scale(g, cosine, p);
        let second = calculus::scale(g, sine, &side);
        let third = calculus::scale(g, along, &k);
        let sum = calculus::add(g, &first, &second);
        calculus::add(g, &sum, &third)
    }

    /// The mirror image in the plane through the origin with normal a: p - 2 a (a.p)/(a.a).
    fn mirrored(&mut self, p: &[ExpressionId; 3], normal: &[ExpressionId; 3]) -> [ExpressionId; 3] {
        let g = &mut self.graph;
        let product = calculus::dot(g, normal, p);
        let square = calculus::squared_norm(g, normal);
        let two = g.integer(2);
        let doubled = g.multiply(two, product);
        let factor = g.divide(doubled, square);
        let shift = calculus::scale(g, factor, normal);
        calculus::subtract(g, p, &shift)
    }
}

fn as_chain(meaning: Meaning) -> Option<Chain> {
    match meaning {
        Meaning::Patch(patch) => Some(Chain { terms: vec![(1, patch)] }),
        Meaning::Chain(chain) => Some(chain),
        Meaning::Value(_) | Meaning::Function(_) => None,
    }
}
