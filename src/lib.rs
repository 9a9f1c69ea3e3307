//! Surface integrals from formulas.

pub mod calculus;
pub mod cli;
pub mod expression;
pub mod geometry;
pub mod integrals;
pub mod kernel;
pub mod language;
pub mod quadrature;
pub mod report;
