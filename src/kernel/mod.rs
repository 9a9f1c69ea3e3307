//! Formulas as callable code. This folder knows expressions and nothing of surfaces.

mod program;

pub use program::{Instruction, KernelError, Program, Stage, ValueId};
