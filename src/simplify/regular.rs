//! Proof that a patch is regular: dA > 0 at every point of its region, sides and corners that belong to it included.

use super::certificate::names;
use super::form::Form;
use super::meter::{Exhausted, Step};
use super::parse_back::parse_back;
use super::polynomial::Polynomial;
use super::read::{Arguments, Purpose, Reader};
use super::region;
use super::ring::Ring;
use super::sign::{sign, strict_sign};
use crate::expression::{ExpressionId, Graph, SymbolId};
use crate::language::{Bound, Model, Patch};

/// Whether the area element, in its proved form, vanishes nowhere; `false` where that was not proved.
pub(super) fn is_regular(model: &Model, patch: &Patch, graph: &Graph, element: &Form) -> bool {
    let mut graph = graph.clone();
    let Some(element) = parse_back(&mut graph, &element.text(), &names(model, patch)) else { return false };
    let [first, second] = [0, 1].map(|place| ends(patch, place));
    first.iter().all(|&u| {
        second.iter().all(|&v| {
            let fixed: Vec<(SymbolId, ExpressionId)> = [u, v].into_iter().flatten().collect();
            let there = graph.substitute(&[element], &fixed)[0];
            vanishes_nowhere(model, patch, &graph, there).unwrap_or(false)
        })
    })
}

/// The inside of an interval, and the ends that belong to it.
fn ends(patch: &Patch, place: usize) -> Vec<Option<(SymbolId, ExpressionId)>> {
    let interval = &patch.intervals[place];
    let mut all = vec![None];
    for (bound, closed) in [(interval.lower, interval.lower_closed), (interval.upper, interval.upper_closed)] {
        if let (Bound::Finite(formula), true) = (bound, closed) {
            all.push(Some((patch.variables[place], formula)));
        }
    }
    all
}

fn vanishes_nowhere(model: &Model, patch: &Patch, graph: &Graph, formula: ExpressionId) -> Step<bool> {
    let roots = [&[formula][..], &region::formulas(model, patch)].concat();
    let mut reader = Reader::new(graph, &roots, Arguments::Split, Purpose::Proving)?;
    let ranges = region::read(&mut reader, model, patch);
    let value = reader.read(formula, &|ring: &Ring, p: &Polynomial| sign(ring, graph, &ranges, p))?;
    if value.is_zero() {
        return Err(Exhausted);
    }
    let factors = reader.ring.factored(&value.numerator)?.factors;
    Ok(factors.iter().all(|(factor, _)| strict_sign(&reader.ring, graph, &ranges, factor).is_some()))
}
