//! Surface plus question to an answer with its error.

mod error;
mod outcome;

pub use error::{IntegralError, NoProgress, Place, Progress};
pub use outcome::{Answer, AnswerKind, Component, Principal, Settings};
