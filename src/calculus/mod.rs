//! Vector calculus on formulas: components in, components out.
//!
//! The rules of differentiation themselves are in `expression/derivative.rs`, because the sheet's `diff` needs them too.

mod jacobian;
mod vector;

pub use jacobian::jacobian;
pub use vector::{
    Vector, add, cross, differentiate_vector, divide, dot, negate, norm, scale, squared_norm, subtract, zero,
};
