//! Closed forms: the area element, the fundamental forms and the curvatures of a patch as a paper would print them.
//!
//! Formulas become elements of a ring of polynomials with known relations (`ring`, `read`); factors, squares and signs are
//! found there by exact arithmetic (`gcd`, `factor`, `sign`); a bounded search writes the result in its shortest form
//! (`plan`, `identities`, `powers`, `product`).

mod boxes;
mod certificate;
mod closed;
mod factor;
mod facts;
mod form;
mod forms;
mod fraction;
mod gcd;
mod identities;
mod integral;
mod laurent;
mod meter;
mod parse_back;
mod plan;
mod polynomial;
mod powers;
mod product;
mod radical;
mod read;
mod region;
mod regular;
mod ring;
mod sign;
mod stability;
mod total;

pub use facts::Fact;
pub use form::{Form, NameKind};
pub use forms::{ClosedForms, ElementForm, Quantity, closed_forms, element_form, evaluation_form, exact_area};
