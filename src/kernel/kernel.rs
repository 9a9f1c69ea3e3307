//! A program with the engine that runs it.

use super::interpreter::run;
use super::program::Program;

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
    pub fn new(program: Program, _expected_points: u64) -> Self {
        Self::interpreted(program)
    }

    /// Which engine runs the program.
    pub fn engine(&self) -> Engine {
        Engine::Interpreter
    }

    /// Seconds from program to callable code.
    pub fn compile_seconds(&self) -> f64 {
        0.0
    }

    /// Sums over a product grid: sum over i, j of `wu[i] * wv[j] * f_k(u[i], v[j])` for each output k.
    pub fn sum_grid(&self, parameters: &[f64], u: &[f64], wu: &[f64], v: &[f64], wv: &[f64]) -> Vec<f64> {
        let outputs = self.program.outputs().len();
        let mut totals = vec![0.0; outputs];
        let mut out = vec![0.0; outputs * v.len()];
        for (&u, &wu) in u.iter().zip(wu) {
            self.evaluate(parameters, &vec![u; v.len()], v, &mut out);
            for (k, total) in totals.iter_mut().enumerate() {
                let row: f64 = out[k * v.len()..(k + 1) * v.len()].iter().zip(wv).map(|(f, w)| f * w).sum();
                *total += wu * row;
            }
        }
        totals
    }
}

/// Which engine runs a program.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Engine {
    /// Block by block, one loop for each instruction.
    Interpreter,
    /// Code of the processor.
    MachineCode,
}
