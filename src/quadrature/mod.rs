//! Numerical integration over intervals and plane regions, of vector-valued functions, with an error figure.
//!
//! This folder knows numbers only: no formulas, no surfaces.

mod line;
mod map;
mod nested;
mod rules;

pub use map::Segment;
pub use nested::{Axis, Failure, Growth, Integral, Limit, PlaneIntegrand, Sides, integrate};
pub use rules::gauss_legendre;
