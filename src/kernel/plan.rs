//! How a part of a program (its *body*) is cut into loops over a block of points, for either code generator.
//!
//! Arithmetic stands in loops. Functions of the table are called for whole arrays between two loops; values that live
//! across such a call go to scratch arrays.

use super::program::{Instruction, Program, ValueId};
use crate::expression::{BinaryFunction, Function, power};
use rustc_hash::FxHashMap;

/// Points in one block where values go through scratch arrays, which have this length.
pub(super) const SCRATCH_BLOCK: usize = 256;

/// Distance of two scratch arrays: a little more than a block, so that they do not fall on the same cache lines.
pub(super) const STRIDE: usize = SCRATCH_BLOCK + 8;

/// Points in one turn of a loop: as many as a sum has partial sums. Two vectors of two, or one of four.
pub(super) const TURN: usize = 4;

/// What the last loop does with the outputs.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Sink {
    /// Stores them to arrays.
    Store,
    /// Multiplies them by weights and adds them up.
    WeightedSum,
}

/// What a host call computes.
#[derive(Clone, Copy, Debug)]
pub(super) enum HostCall {
    Unary(Function),
    Binary(BinaryFunction),
    Power,
}

impl HostCall {
    /// Applies the function to arrays; `b` is not read for a function of one argument.
    pub(super) fn apply(self, a: &[f64], b: &[f64], out: &mut [f64]) {
        match self {
            HostCall::Unary(function) => out.iter_mut().zip(a).for_each(|(out, &a)| *out = function.evaluate(a)),
            HostCall::Binary(function) => {
                out.iter_mut().zip(a).zip(b).for_each(|((out, &a), &b)| *out = function.evaluate(a, b));
            }
            HostCall::Power => out.iter_mut().zip(a).zip(b).for_each(|((out, &a), &b)| *out = power(a, b)),
        }
    }
}

/// A call of a function of the table between two loops.
pub(super) struct Call {
    pub(super) function: HostCall,
    pub(super) arguments: Vec<ValueId>,
    pub(super) result: ValueId,
}

/// The loops of a body, and the calls between them.
pub(super) struct Plan {
    /// Arithmetic of each loop, in order.
    pub(super) loops: Vec<Vec<ValueId>>,
    /// Calls after each loop, as indices into `calls`.
    pub(super) calls_after: Vec<Vec<usize>>,
    pub(super) calls: Vec<Call>,
    /// Values from outside that are one number for the block.
    pub(super) uniforms: Vec<ValueId>,
    /// Values from outside that are one number for each point.
    pub(super) arrays: Vec<ValueId>,
    /// Scratch array of each value that lives across loops.
    pub(super) slots: FxHashMap<ValueId, usize>,
    /// Number of scratch arrays.
    pub(super) scratch: usize,
    pub(super) outputs: Vec<ValueId>,
}

impl Plan {
    pub(super) fn new(
        program: &Program,
        body: &[ValueId],
        outputs: &[ValueId],
        is_array: impl Fn(ValueId) -> bool,
    ) -> Self {
        let mut level: FxHashMap<ValueId, usize> = FxHashMap::default();
        let mut plan = Self {
            loops: vec![Vec::new()],
            calls_after: vec![Vec::new()],
            calls: Vec::new(),
            uniforms: Vec::new(),
            arrays: Vec::new(),
            slots: FxHashMap::default(),
            scratch: 0,
            outputs: outputs.to_vec(),
        };
        let in_body: rustc_hash::FxHashSet<ValueId> = body.iter().copied().collect();
        let outside = |value: ValueId, plan: &mut Plan| {
            if !in_body.contains(&value) {
                let list = if is_array(value) { &mut plan.arrays } else { &mut plan.uniforms };
                if !list.contains(&value) {
                    list.push(value);
                }
            }
        };
        for &value in body {
            let instruction = &program.instructions()[value.index()];
            for operand in instruction.operands() {
                outside(operand, &mut plan);
            }
            let own = instruction.operands().filter_map(|operand| level.get(&operand)).copied().max().unwrap_or(0);
            let call = match *instruction {
                Instruction::Call(function, a) => Some((HostCall::Unary(function), vec![a])),
                Instruction::Call2(function, a, b) => Some((HostCall::Binary(function), vec![a, b])),
                Instruction::Power(a, b) => Some((HostCall::Power, vec![a, b])),
                _ => None,
            };
            while plan.loops.len() <= own + 1 {
                plan.loops.push(Vec::new());
                plan.calls_after.push(Vec::new());
            }
            match call {
                Some((function, arguments)) => {
                    plan.calls_after[own].push(plan.calls.len());
                    plan.calls.push(Call { function, arguments, result: value });
                    level.insert(value, own + 1);
                }
                None => {
                    plan.loops[own].push(value);
                    level.insert(value, own);
                }
            }
        }
        for &output in outputs {
            outside(output, &mut plan);
        }
        while plan.loops.len() > 1 && plan.loops.last().is_some_and(Vec::is_empty) && {
            let last = plan.loops.len() - 1;
            plan.calls_after[last].is_empty() && plan.calls_after[last - 1].is_empty()
        } {
            plan.loops.pop();
            plan.calls_after.pop();
        }
        plan.assign_slots(program, &level);
        plan
    }

    /// Values need a scratch array if they are arguments or results of a call, or are used in a later loop.
    fn assign_slots(&mut self, program: &Program, level: &FxHashMap<ValueId, usize>) {
        let mut wanted: Vec<ValueId> = Vec::new();
        for call in &self.calls {
            wanted.push(call.result);
            // Arguments from outside are copied to scratch, so that the host function always reads arrays.
            wanted.extend(&call.arguments);
        }
        let last = self.loops.len() - 1;
        for (index, values) in self.loops.iter().enumerate() {
            for value in values {
                for operand in program.instructions()[value.index()].operands() {
                    if level.get(&operand).is_some_and(|&own| own < index) {
                        wanted.push(operand);
                    }
                }
            }
        }
        wanted.extend(self.outputs.iter().filter(|output| level.get(output).is_some_and(|&own| own < last)));
        for value in wanted {
            if !self.slots.contains_key(&value) {
                self.slots.insert(value, self.scratch);
                self.scratch += 1;
            }
        }
    }
}
