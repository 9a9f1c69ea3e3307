//! A program with the engine that runs it.

use super::interpreter::run;
use super::program::{KernelError, Program};

/// A formula, or several that share their parts, ready to be evaluated at many points.
///
/// Parameters are inputs: a change of their values needs nothing but another call.
#[derive(Debug)]
pub struct Kernel {
    program: Program,
}

impl Kernel {
    /// A kernel that interprets its program.
    pub fn interpreted(program: Program) -> Self {
        Self { program }
    }

    /// The program that is evaluated.
    pub fn program(&self) -> &Program {
        &self.program
    }

    /// Values of all outputs at the points (u[i], v[i]): `out[k * u.len() + i]` is output k at point i.
    ///
    /// # Panics
    /// If the lengths do not fit: `v` as long as `u`, `out` as long as `u` times the number of outputs, one parameter value
    /// for each parameter.
    pub fn evaluate(&self, parameters: &[f64], u: &[f64], v: &[f64], out: &mut [f64]) {
        assert_eq!(u.len(), v.len(), "as many values of both variables");
        assert_eq!(out.len(), u.len() * self.program.outputs().len(), "room for every output at every point");
        assert_eq!(parameters.len(), self.program.parameter_count(), "one value for each parameter");
        let count = u.len();
        run(&self.program, parameters, u, v, &mut |output, start, values| {
            out[output * count + start..output * count + start + values.len()].copy_from_slice(values);
        });
    }
}

impl Kernel {
    /// A kernel for about `expected_points` evaluations.
    ///
    /// # Errors
    /// See [`Program::new`].
    pub fn new(program: Program, _expected_points: u64) -> Result<Self, KernelError> {
        Ok(Self::interpreted(program))
    }
}
