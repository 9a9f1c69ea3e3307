//! Results as text, JSON and tables.

mod answer_text;
mod element;
mod file;
mod json;
pub mod notation;
mod number;
pub mod source;
mod stamp;
mod table;

pub use answer_text::{answers_text, notes_text, set_values_text};
pub use element::{ElementReport, element_json, element_text};
pub use file::write_whole;
pub use json::{answers_json, failure_json, sheet_errors_json};
pub use number::{in_shown_unit, shown_components, unit_text, value_with_error};
pub use stamp::Stamp;
pub use table::{COLUMNS, CsvTable, NpyTable, TableFormat};
