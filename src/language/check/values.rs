//! What names and expressions mean.

use super::super::model::{Chain, PatchId};
use super::super::unit::Dimension;
use crate::expression::ExpressionId;

/// Kind of a value.
#[derive(Clone, Copy, PartialEq, Eq, Hash, Debug)]
pub(super) enum Kind {
    Number,
    Vector,
    Tensor,
    Truth,
}

impl Kind {
    /// The kind with its article.
    pub(super) fn words(self) -> &'static str {
        match self {
            Kind::Number => "a number",
            Kind::Vector => "a vector",
            Kind::Tensor => "a tensor",
            Kind::Truth => "a condition",
        }
    }
}

/// A number, vector, tensor or condition.
#[derive(Clone, PartialEq, Debug)]
pub(super) struct Value {
    /// 1, 3, 6 or 1 formulas.
    pub(super) components: Vec<ExpressionId>,
    /// `None` for zero, which fits any dimension.
    pub(super) dimension: Option<Dimension>,
    pub(super) kind: Kind,
}

impl Value {
    pub(super) fn number(formula: ExpressionId, dimension: Option<Dimension>) -> Self {
        Self { components: vec![formula], dimension, kind: Kind::Number }
    }

    pub(super) fn truth(formula: ExpressionId) -> Self {
        Self { components: vec![formula], dimension: Some(Dimension::NONE), kind: Kind::Truth }
    }
}

/// What an expression or a name means.
#[derive(Clone, PartialEq, Debug)]
pub(super) enum Meaning {
    Value(Value),
    /// Index of the definition.
    Function(usize),
    Patch(PatchId),
    Chain(Chain),
}

impl Meaning {
    /// The kind with its article, for messages.
    pub(super) fn words(&self) -> &'static str {
        match self {
            Meaning::Value(value) => value.kind.words(),
            Meaning::Function(_) => "a function",
            Meaning::Patch(_) => "a patch",
            Meaning::Chain(_) => "a chain of patches",
        }
    }
}
