//! Surface plus question to an answer with its error.

mod answer;
mod bounded;
mod error;
mod exact;
mod functionals;
mod hidden;
mod nodes;
mod outcome;
mod patch_integrand;
mod roots;
mod rounding;
mod run;
mod sharp;
mod sides;
mod speed;
mod structure;

pub use answer::{answer, answer_each};
pub use error::{IntegralError, NoProgress, Place, Progress};
pub use exact::fifteen_digits;
pub use nodes::{NodeRow, NodesError, SurfaceNodes};
pub use outcome::{Answer, AnswerFailure, AnswerKind, Component, Principal, Settings};
pub use speed::{SpeedRun, SpeedSettings, Timing};
