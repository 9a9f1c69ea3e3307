//! Formulas as callable code. This folder knows expressions and nothing of surfaces.
//!
//! A [`Program`] is a formula as a straight line of instructions. A [`Kernel`] runs it at many points: the interpreter for
//! few, machine code for many; both give the same bits.

mod grid;
mod interpreter;
#[expect(clippy::module_inception, reason = "the folder is named after the type that it is about")]
mod kernel;
mod machine_code;
mod narrow_code;
mod plan;
mod program;
mod vex;
mod wide_code;

pub use kernel::{Engine, Kernel};
pub use machine_code::Lanes;
pub use program::{Instruction, KernelError, Program, Stage, ValueId};
