//! What is known of every node of the graph without walking it again: a bound on its size, the answers behind it, and
//! whether it waits for the arguments of a function.
//!
//! A sheet may hold tens of thousands of definitions, each built on the one before; walking each formula to its leaves
//! would take quadratic time. A child has a smaller index than its parent, so one pass over new nodes suffices.

use super::super::model::FunctionalId;
use crate::expression::{ExpressionId, Graph, Node, SymbolId};
use rustc_hash::{FxHashMap, FxHashSet};
use std::sync::Arc;

/// Facts of the nodes that have been looked at.
#[derive(Default)]
pub(super) struct Facts {
    /// At least the number of nodes: shared ones are counted each time they occur.
    size_bounds: Vec<u32>,
    /// Functionals whose results occur, in order; nodes with the same ones share the list.
    answers: Vec<Option<Arc<[FunctionalId]>>>,
    open: Vec<bool>,
    functional_of: FxHashMap<SymbolId, FunctionalId>,
    open_symbols: FxHashSet<SymbolId>,
}

impl Facts {
    /// Says that `symbol` stands for a result of `functional`. Must come before the symbol is used.
    pub(super) fn is_result(&mut self, symbol: SymbolId, functional: FunctionalId) {
        self.functional_of.insert(symbol, functional);
    }

    /// Says that `symbol` stands for an argument of a function, or for a result that depends on one. Must come before the
    /// symbol is used.
    pub(super) fn is_open(&mut self, symbol: SymbolId) {
        self.open_symbols.insert(symbol);
    }

    /// Whether [`Facts::is_open`] was said of `symbol`.
    pub(super) fn is_open_symbol(&self, symbol: SymbolId) -> bool {
        self.open_symbols.contains(&symbol)
    }

    /// The functional that `symbol` is a result of.
    pub(super) fn functional_of(&self, symbol: SymbolId) -> Option<FunctionalId> {
        self.functional_of.get(&symbol).copied()
    }

    /// At least the number of nodes of a formula.
    pub(super) fn size_bound(&self, formula: ExpressionId) -> usize {
        self.size_bounds[formula.index()] as usize
    }

    /// Functionals whose results occur in a formula.
    pub(super) fn answers(&self, formula: ExpressionId) -> &[FunctionalId] {
        self.answers[formula.index()].as_deref().unwrap_or_default()
    }

    /// Whether a formula uses the argument of a function that is being read.
    pub(super) fn is_open_formula(&self, formula: ExpressionId) -> bool {
        self.open[formula.index()]
    }

    /// Looks at the nodes that are new in `graph`; gives the work done beyond a step for each node.
    pub(super) fn extend(&mut self, graph: &Graph) -> usize {
        let mut work = 0;
        for id in graph.ids_from(self.size_bounds.len()) {
            let node = graph.node(id);
            let mut size = 1u32;
            let mut open = false;
            let mut answers: Option<Arc<[FunctionalId]>> = None;
            if let Node::Symbol(symbol) = node {
                open = self.open_symbols.contains(&symbol);
                answers = self.functional_of(symbol).map(|functional| Arc::from([functional]));
            }
            for child in node.children().as_slice() {
                size = size.saturating_add(self.size_bounds[child.index()]);
                open |= self.open[child.index()];
                let more = &self.answers[child.index()];
                answers = match (answers, more) {
                    (Some(known), Some(more)) if !Arc::ptr_eq(&known, more) && known != *more => {
                        work += known.len() + more.len();
                        Some(union(&known, more))
                    }
                    (known, more) => known.or_else(|| more.clone()),
                };
            }
            // A formula has no more nodes than there are up to its root.
            self.size_bounds.push(size.min(id.index() as u32 + 1));
            self.open.push(open);
            self.answers.push(answers);
        }
        work
    }
}

/// Both lists in order, each element once.
fn union(a: &[FunctionalId], b: &[FunctionalId]) -> Arc<[FunctionalId]> {
    let mut both = [a, b].concat();
    both.sort_unstable();
    both.dedup();
    both.into()
}
