//! Text of a sheet to a checked model, or to diagnostics with a place, a marker and a hint.

mod bind;
mod check;
mod diagnostic;
mod model;
mod parse;
mod suggest;
pub mod syntax;
mod unit;
mod unit_table;

pub use bind::Bindings;
pub use check::check;
pub use diagnostic::{Diagnostic, Part, Severity, SheetErrors, Source};
pub use model::*;
pub use parse::{MAXIMUM_BYTES, parse, parse_value};
pub use suggest::{is_reserved, nearest, other_name};
pub use syntax::Span;
pub use unit::{Dimension, Unit};
