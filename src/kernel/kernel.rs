//! A program with the engine that runs it.

use super::grid::RowCode;
use super::interpreter::run;
use super::machine_code::{Code, Lanes, MAXIMUM_BODY};
use super::plan::{Sink, TURN};
use super::program::{Instruction, KernelError, Program, Stage, ValueId};
use std::sync::OnceLock;
use std::sync::atomic::{AtomicU64, Ordering};
use std::time::Instant;

/// Which engine runs a program.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Engine {
    /// Block by block, one loop for each instruction.
    Interpreter,
    /// Code of the processor.
    MachineCode,
}

/// Expected evaluations from which compiling pays: it costs as much as some 10^5 points.
const COMPILE_ABOVE: u64 = 100_000;

/// A formula, or several that share their parts, ready to be evaluated at many points.
///
/// Parameters are inputs: a change of their values needs nothing but another call. Both engines give the same bits, machine
/// code at any level of [`Lanes`].
///
/// # Examples
/// ```
/// use quadrel::expression::{Function, Graph};
/// use quadrel::kernel::{Kernel, Program};
///
/// let mut graph = Graph::new();
/// let (u, v) = (graph.new_symbol("u"), graph.new_symbol("v"));
/// let (eu, ev) = (graph.symbol(u), graph.symbol(v));
/// let product = graph.multiply(eu, ev);
/// let root = graph.call(Function::Sqrt, product);
/// let kernel = Kernel::interpreted(Program::new(&graph, &[root], [u, v], &[])?);
/// let mut out = [0.0; 2];
/// kernel.evaluate(&[], &[2.0, 3.0], &[8.0, 12.0], &mut out);
/// assert_eq!(out, [4.0, 6.0]);
/// # Ok::<(), quadrel::kernel::KernelError>(())
/// ```
#[derive(Debug)]
pub struct Kernel {
    program: Program,
    /// Lanes of the machine code; none if the program is interpreted.
    compiled: Option<Lanes>,
    points: OnceLock<Result<Code, KernelError>>,
    rows: OnceLock<Result<RowCode, KernelError>>,
    compile_nanoseconds: AtomicU64,
}

impl Kernel {
    /// A kernel that interprets its program.
    pub fn interpreted(program: Program) -> Self {
        Self {
            program,
            compiled: None,
            points: OnceLock::new(),
            rows: OnceLock::new(),
            compile_nanoseconds: AtomicU64::new(0),
        }
    }

    /// A kernel of machine code, as wide as the machine allows.
    ///
    /// # Errors
    /// If the program is too large to compile or the code generator refuses.
    pub fn compiled(program: Program) -> Result<Self, KernelError> {
        Self::compiled_for(program, Lanes::widest())
    }

    /// A kernel of machine code for a level of lanes.
    ///
    /// # Errors
    /// If the machine has no such level, the program is too large to compile, or the code generator refuses.
    pub fn compiled_for(program: Program, lanes: Lanes) -> Result<Self, KernelError> {
        let body = point_body(&program).count();
        if body > MAXIMUM_BODY {
            return Err(KernelError::TooLargeToCompile(body));
        }
        let kernel = Self { compiled: Some(lanes), ..Self::interpreted(program) };
        match kernel.rows() {
            Some(_) => Ok(kernel),
            None => match kernel.rows.into_inner() {
                Some(Err(error)) => Err(error),
                _ => Err(KernelError::CodeGeneration("nothing was compiled".to_owned())),
            },
        }
    }

    /// A kernel for about `expected_points` evaluations: machine code where compiling pays and succeeds.
    pub fn new(program: Program, expected_points: u64) -> Self {
        // Scattered points have the larger body: where it fits, rows fit too, and one engine runs all of the kernel.
        let fits = point_body(&program).count() <= MAXIMUM_BODY;
        let compiled = (fits && expected_points >= COMPILE_ABOVE).then(Lanes::widest);
        Self { compiled, ..Self::interpreted(program) }
    }

    /// The program that is evaluated.
    pub fn program(&self) -> &Program {
        &self.program
    }

    /// Which engine runs the program.
    pub fn engine(&self) -> Engine {
        if self.rows().is_some() { Engine::MachineCode } else { Engine::Interpreter }
    }

    /// Lanes of the machine code, if that runs the program.
    pub fn lanes(&self) -> Option<Lanes> {
        self.compiled.filter(|_| self.rows().is_some())
    }

    /// Seconds that the last compilation took, from program to callable code; 0 if nothing was compiled.
    pub fn compile_seconds(&self) -> f64 {
        self.compile_nanoseconds.load(Ordering::Relaxed) as f64 * 1e-9
    }

    /// Code for rows of a product grid.
    pub(super) fn rows(&self) -> Option<&RowCode> {
        let lanes = self.compiled?;
        self.rows.get_or_init(|| self.timed(|| RowCode::compile(&self.program, lanes))).as_ref().ok()
    }

    /// Code for scattered points.
    fn points(&self) -> Option<&Code> {
        let lanes = self.compiled?;
        let compile = || {
            let program = &self.program;
            let is_variable = |value: ValueId| is_variable(program, value);
            let body: Vec<ValueId> = point_body(program).collect();
            Code::compile(program, &body, program.outputs(), is_variable, Sink::Store, lanes)
        };
        self.points.get_or_init(|| self.timed(compile)).as_ref().ok()
    }

    fn timed<T>(&self, compile: impl FnOnce() -> T) -> T {
        let start = Instant::now();
        let code = compile();
        self.compile_nanoseconds.store(start.elapsed().as_nanos() as u64, Ordering::Relaxed);
        code
    }

    /// Values of all outputs at the points (`u[i]`, `v[i]`): `out[k * u.len() + i]` is output k at point i.
    ///
    /// # Panics
    /// If the lengths do not fit: `v` as long as `u`, `out` as long as `u` times the number of outputs, one parameter value
    /// for each parameter.
    pub fn evaluate(&self, parameters: &[f64], u: &[f64], v: &[f64], out: &mut [f64]) {
        assert_eq!(u.len(), v.len(), "as many values of both variables");
        assert_eq!(out.len(), u.len() * self.program.outputs().len(), "room for every output at every point");
        assert_eq!(parameters.len(), self.program.parameter_count(), "one value for each parameter");
        let count = u.len();
        if count == 0 {
            return;
        }
        match self.points() {
            Some(code) => self.evaluate_compiled(code, parameters, u, v, out),
            None => run(&self.program, parameters, u, v, &mut |output, start, values| {
                out[output * count + start..output * count + start + values.len()].copy_from_slice(values);
            }),
        }
    }

    fn evaluate_compiled(&self, code: &Code, parameters: &[f64], u: &[f64], v: &[f64], out: &mut [f64]) {
        let count = u.len();
        let mut buffers = code.buffers();
        let uniforms = uniform_values(&self.program, code.uniforms(), parameters);
        code.set_uniforms(&mut buffers, |value| {
            let position = code.uniforms().iter().position(|&uniform| uniform == value);
            position.map_or(f64::NAN, |position| uniforms[position])
        });
        let is_first = |value: &ValueId| matches!(self.program.instructions()[value.index()], Instruction::Variable(0));
        let block = code.block();
        let mut padded = [vec![0.0; block], vec![0.0; block]];
        let mut tail = vec![0.0; block * self.program.outputs().len()];
        let mut start = 0;
        while start < count {
            let length = block.min(count - start);
            let whole = length.is_multiple_of(TURN);
            let size = length.next_multiple_of(TURN);
            let mut blocks = [&u[start..start + length], &v[start..start + length]];
            if !whole {
                // The last point fills up the last turn.
                for (padded, block) in padded.iter_mut().zip(blocks) {
                    padded[..length].copy_from_slice(block);
                    padded[length..size].fill(block[length - 1]);
                }
                blocks = [&padded[0][..size], &padded[1][..size]];
            }
            let arrays: Vec<&[f64]> = code.arrays().iter().map(|value| blocks[usize::from(!is_first(value))]).collect();
            if arrays.is_empty() {
                // No output depends on a variable.
                for (output, value) in self.program.outputs().iter().enumerate() {
                    let position = code.uniforms().iter().position(|uniform| uniform == value).unwrap_or(0);
                    out[output * count..(output + 1) * count].fill(uniforms[position]);
                }
                return;
            }
            if whole {
                code.run(&mut buffers, &arrays, &[], &mut out[start..], count);
            } else {
                code.run(&mut buffers, &arrays, &[], &mut tail, block);
                for (output, values) in out.chunks_exact_mut(count).zip(tail.chunks_exact(block)) {
                    output[start..start + length].copy_from_slice(&values[..length]);
                }
            }
            start += length;
        }
    }
}

fn is_variable(program: &Program, value: ValueId) -> bool {
    matches!(program.instructions()[value.index()], Instruction::Variable(_))
}

/// What is computed at each scattered point: all that depends on a variable and is not one.
fn point_body(program: &Program) -> impl Iterator<Item = ValueId> + '_ {
    (0..program.len())
        .map(|index| ValueId(index as u32))
        .filter(|&value| program.stages()[value.index()] > Stage::Parameter && !is_variable(program, value))
}

/// Values that depend on no variable.
fn uniform_values(program: &Program, wanted: &[ValueId], parameters: &[f64]) -> Vec<f64> {
    let part = program.restricted(wanted.to_vec());
    let mut values = vec![0.0; wanted.len()];
    run(&part, parameters, &[0.0], &[0.0], &mut |output, _, found| values[output] = found[0]);
    values
}
