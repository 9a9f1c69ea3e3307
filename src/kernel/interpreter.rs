//! Evaluates a program over blocks of points: one loop per instruction and block, in scratch slots that are used again as
//! soon as a value is dead.
//!
//! Fused instructions round once where the processor has fused multiply-add, as the machine code does, and twice where it
//! has not; the loops are compiled for both.

#![expect(unsafe_code, reason = "calls the loops that are compiled for processors with fused multiply-add")]

use super::program::{Instruction, Program, Stage};
use crate::expression::power;

/// Points in one block. Slots of a short program stay in the first-level cache.
const BLOCK: usize = 256;

/// Distance of two slots: a little more than a block, so that slots do not fall on the same cache lines.
const STRIDE: usize = BLOCK + 8;

/// Whether fused instructions round once on this machine.
pub(super) fn fused() -> bool {
    #[cfg(target_arch = "x86_64")]
    {
        std::is_x86_feature_detected!("avx2") && std::is_x86_feature_detected!("fma")
    }
    #[cfg(not(target_arch = "x86_64"))]
    {
        cfg!(target_arch = "aarch64")
    }
}

/// Receives the block of one output that starts at a point: (output, first point, values).
type Sink<'a> = &'a mut dyn FnMut(usize, usize, &[f64]);

/// Runs `program` at the points (`u[i]`, `v[i]`); values that depend on no variable are computed once.
pub(super) fn run(program: &Program, parameters: &[f64], u: &[f64], v: &[f64], sink: Sink<'_>) {
    Interpreter::new(program).run(parameters, &[u, v], u.len(), sink);
}

/// A program with its slots laid out.
pub(super) struct Interpreter<'a> {
    program: &'a Program,
    plan: Plan,
}

impl<'a> Interpreter<'a> {
    pub(super) fn new(program: &'a Program) -> Self {
        Self { program, plan: Plan::new(program) }
    }

    /// Runs the program at `count` points; variable k has the values `variables[k]`, as many.
    pub(super) fn run(&self, parameters: &[f64], variables: &[&[f64]], count: usize, sink: Sink<'_>) {
        #[cfg(target_arch = "x86_64")]
        if fused() {
            // SAFETY: `fused` has just asked the processor for both features.
            return unsafe { self.run_on_fused_processor(parameters, variables, count, sink) };
        }
        if fused() {
            self.run_blocks::<true>(parameters, variables, count, sink);
        } else {
            self.run_blocks::<false>(parameters, variables, count, sink);
        }
    }

    #[cfg(target_arch = "x86_64")]
    #[target_feature(enable = "avx2,fma")]
    fn run_on_fused_processor(&self, parameters: &[f64], variables: &[&[f64]], count: usize, sink: Sink<'_>) {
        self.run_blocks::<true>(parameters, variables, count, sink);
    }

    #[inline(always)]
    fn run_blocks<const FUSED: bool>(&self, parameters: &[f64], variables: &[&[f64]], count: usize, sink: Sink<'_>) {
        let (program, plan) = (self.program, &self.plan);
        let mut scratch = vec![0.0; plan.slots * STRIDE];
        let uniform = uniform_values::<FUSED>(program, parameters);
        let mut start = 0;
        while start < count {
            let size = BLOCK.min(count - start);
            for (index, instruction) in program.instructions().iter().enumerate() {
                let slot = plan.slot[index];
                let target = slot * STRIDE;
                if program.stages()[index] <= Stage::Parameter {
                    scratch[target..target + size].fill(uniform[index]);
                } else if let Instruction::Variable(position) = *instruction {
                    let values = &variables[position as usize][start..start + size];
                    scratch[target..target + size].copy_from_slice(values);
                } else {
                    step::<FUSED>(instruction, &plan.slot, &mut scratch, slot, size);
                }
            }
            for (output, value) in program.outputs().iter().enumerate() {
                let slot = plan.slot[value.index()];
                sink(output, start, &scratch[slot * STRIDE..slot * STRIDE + size]);
            }
            start += size;
        }
    }
}

/// Which slot each value lives in.
struct Plan {
    slot: Vec<usize>,
    slots: usize,
}

impl Plan {
    fn new(program: &Program) -> Self {
        let count = program.len();
        let mut last_use = vec![0usize; count];
        for (index, instruction) in program.instructions().iter().enumerate() {
            for operand in instruction.operands() {
                last_use[operand.index()] = index;
            }
        }
        for output in program.outputs() {
            last_use[output.index()] = usize::MAX;
        }
        let mut free: Vec<usize> = Vec::new();
        let mut slot = vec![0; count];
        let mut slots = 0;
        for (index, instruction) in program.instructions().iter().enumerate() {
            // The result gets its slot before operands give theirs back: a loop never reads what it writes.
            let own = free.pop().unwrap_or_else(|| {
                slots += 1;
                slots - 1
            });
            slot[index] = own;
            let mut operands: Vec<usize> = instruction.operands().map(|operand| operand.index()).collect();
            operands.sort_unstable();
            operands.dedup();
            for operand in operands {
                if last_use[operand] == index {
                    free.push(slot[operand]);
                }
            }
        }
        Self { slot, slots }
    }
}

/// Values of the constant and parameter stages.
fn uniform_values<const FUSED: bool>(program: &Program, parameters: &[f64]) -> Vec<f64> {
    let mut values = vec![f64::NAN; program.len()];
    for (index, instruction) in program.instructions().iter().enumerate() {
        if program.stages()[index] <= Stage::Parameter {
            values[index] = scalar::<FUSED>(instruction, parameters, |operand| values[operand]);
        }
    }
    values
}

/// One instruction on numbers; `at` gives the values of operands. Variables are not uniform and do not occur.
fn scalar<const FUSED: bool>(instruction: &Instruction, parameters: &[f64], at: impl Fn(usize) -> f64) -> f64 {
    use Instruction::*;
    match *instruction {
        Constant(value) => value,
        Parameter(position) => parameters[position as usize],
        Variable(_) => f64::NAN,
        Negate(a) => -at(a.index()),
        Add(a, b) => at(a.index()) + at(b.index()),
        Subtract(a, b) => at(a.index()) - at(b.index()),
        Multiply(a, b) => at(a.index()) * at(b.index()),
        Divide(a, b) => at(a.index()) / at(b.index()),
        MultiplyAdd(a, b, c) => multiply_add::<FUSED>(at(a.index()), at(b.index()), at(c.index())),
        MultiplySubtract(a, b, c) => multiply_add::<FUSED>(at(a.index()), at(b.index()), -at(c.index())),
        NegateMultiplyAdd(a, b, c) => multiply_add::<FUSED>(-at(a.index()), at(b.index()), at(c.index())),
        SquareRoot(a) => at(a.index()).sqrt(),
        Magnitude(a) => at(a.index()).abs(),
        Minimum(a, b) => minimum(at(a.index()), at(b.index())),
        Maximum(a, b) => maximum(at(a.index()), at(b.index())),
        Call(function, a) => function.evaluate(at(a.index())),
        Call2(function, a, b) => function.evaluate(at(a.index()), at(b.index())),
        Power(a, b) => power(at(a.index()), at(b.index())),
        Less(a, b) => less(at(a.index()), at(b.index())),
        LessEqual(a, b) => less_equal(at(a.index()), at(b.index())),
        And(a, b) => both(at(a.index()), at(b.index())),
        Or(a, b) => either(at(a.index()), at(b.index())),
        Not(a) => 1.0 - at(a.index()),
        Select(c, a, b) => select(at(c.index()), at(a.index()), at(b.index())),
    }
}

/// One instruction on a block.
#[inline(always)]
fn step<const FUSED: bool>(instruction: &Instruction, slots: &[usize], scratch: &mut [f64], slot: usize, count: usize) {
    use Instruction::*;
    let place = |value: super::program::ValueId| slots[value.index()] * STRIDE;
    let target = slot * STRIDE;
    let mut one = |a: usize, f: &dyn Fn(f64) -> f64| {
        for i in 0..count {
            scratch[target + i] = f(scratch[a + i]);
        }
    };
    match *instruction {
        Constant(_) | Parameter(_) | Variable(_) => unreachable!("given values are filled in by the caller"),
        Negate(a) => each(scratch, target, [place(a)], count, |[x]| -x),
        Add(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| x + y),
        Subtract(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| x - y),
        Multiply(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| x * y),
        Divide(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| x / y),
        MultiplyAdd(a, b, c) => {
            each(scratch, target, [place(a), place(b), place(c)], count, |[x, y, z]| multiply_add::<FUSED>(x, y, z))
        }
        MultiplySubtract(a, b, c) => {
            each(scratch, target, [place(a), place(b), place(c)], count, |[x, y, z]| multiply_add::<FUSED>(x, y, -z))
        }
        NegateMultiplyAdd(a, b, c) => {
            each(scratch, target, [place(a), place(b), place(c)], count, |[x, y, z]| multiply_add::<FUSED>(-x, y, z))
        }
        SquareRoot(a) => each(scratch, target, [place(a)], count, |[x]| x.sqrt()),
        Magnitude(a) => each(scratch, target, [place(a)], count, |[x]| x.abs()),
        Minimum(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| minimum(x, y)),
        Maximum(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| maximum(x, y)),
        Call(function, a) => one(place(a), &|x| function.evaluate(x)),
        Call2(function, a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| function.evaluate(x, y)),
        Power(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| power(x, y)),
        Less(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| less(x, y)),
        LessEqual(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| less_equal(x, y)),
        And(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| both(x, y)),
        Or(a, b) => each(scratch, target, [place(a), place(b)], count, |[x, y]| either(x, y)),
        Not(a) => each(scratch, target, [place(a)], count, |[x]| 1.0 - x),
        Select(c, a, b) => each(scratch, target, [place(c), place(a), place(b)], count, |[c, x, y]| select(c, x, y)),
    }
}

#[inline(always)]
fn each<const N: usize>(
    scratch: &mut [f64],
    target: usize,
    operands: [usize; N],
    count: usize,
    f: impl Fn([f64; N]) -> f64,
) {
    for i in 0..count {
        scratch[target + i] = f(operands.map(|operand| scratch[operand + i]));
    }
}

/// `x*y + z`, rounded once or twice.
#[inline(always)]
fn multiply_add<const FUSED: bool>(x: f64, y: f64, z: f64) -> f64 {
    if FUSED { x.mul_add(y, z) } else { x * y + z }
}

#[inline(always)]
fn truth(holds: bool) -> f64 {
    if holds { 1.0 } else { 0.0 }
}

#[inline(always)]
fn minimum(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() {
        f64::NAN
    } else if b < a {
        b
    } else {
        a
    }
}

#[inline(always)]
fn maximum(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() {
        f64::NAN
    } else if b > a {
        b
    } else {
        a
    }
}

#[inline(always)]
fn less(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() { f64::NAN } else { truth(a < b) }
}

#[inline(always)]
fn less_equal(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() { f64::NAN } else { truth(a <= b) }
}

#[inline(always)]
fn both(a: f64, b: f64) -> f64 {
    a * b
}

#[inline(always)]
fn either(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() { f64::NAN } else { truth(a + b > 0.0) }
}

#[inline(always)]
fn select(condition: f64, yes: f64, no: f64) -> f64 {
    if condition.is_nan() {
        f64::NAN
    } else if condition != 0.0 {
        yes
    } else {
        no
    }
}
