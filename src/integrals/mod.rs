//! Surface plus question to an answer with its error.

mod outcome;

pub use outcome::{Answer, AnswerKind, Component, Principal, Settings};
