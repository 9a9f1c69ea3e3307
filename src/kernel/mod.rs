//! Formulas as callable code. This folder knows expressions and nothing of surfaces.

mod interpreter;
#[expect(clippy::module_inception, reason = "the folder is named after the type that it is about")]
mod kernel;
mod program;

pub use kernel::{Engine, Kernel};
pub use program::{Instruction, KernelError, Program, Stage, ValueId};
