//! Surface integrals from formulas.

pub mod expression;
pub mod language;
