//! Surface integrals from formulas.

pub mod expression;
pub mod integrals;
pub mod language;
