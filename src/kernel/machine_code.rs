//! Machine code for the inner loops of a program, and the one owner of the memory it stands in.
//!
//! A [`Code`] runs a part of a program (its *body*) over a block of points, two at a time (F64X2). Values that the body
//! takes from outside are either uniform (one number for the block) or arrays (one number for each point). Functions of
//! the table are called for whole arrays between loops: values that live across such a call go to scratch arrays.
//!
//! Pitfalls of the code generator that this file is built around, measured beforehand:
//! - code memory is not freed when a module is dropped: [`Code`] frees it, and no pointer to it leaves this file;
//! - relocations between functions may panic beyond 2 GB: there is one function for each module, and host functions are
//!   called by absolute address;
//! - unresolved symbols panic: none is left to a search, the only two are registered by name;
//! - a panic must not cross generated frames: host functions do arithmetic only, and `extern "C"` would abort;
//! - arithmetic is VEX-encoded but moves are not, so dirty upper halves of wide registers make it slow: host functions are
//!   compiled Rust, which clears them before it returns;
//! - NaN payloads differ between code shapes: tests compare whether values are NaN, not which.

#![expect(unsafe_code, reason = "owns machine code and the pointers into it")]

use super::program::{Instruction, KernelError, Program, ValueId};
use crate::expression::{BinaryFunction, Function, power};
use cranelift::codegen::ir::{BlockArg, FuncRef, MemFlagsData, UserFuncName};
use cranelift::prelude::*;
use cranelift_jit::{JITBuilder, JITModule};
use cranelift_module::{Linkage, Module};
use rustc_hash::FxHashMap;
use std::mem::ManuallyDrop;

/// Points in one block where values go through scratch arrays, which have this length.
const SCRATCH_BLOCK: usize = 256;

/// Distance of two scratch arrays: a little more than a block, so that they do not fall on the same cache lines.
const STRIDE: usize = SCRATCH_BLOCK + 8;

/// Points in one block otherwise: enough to forget the cost of a call, few enough for tables to stay in the cache.
const PLAIN_BLOCK: usize = 2048;

/// Points in one turn of the loop: two vectors of two.
pub(super) const TURN: usize = 4;

/// Largest body that is worth compiling: register allocation is superlinear.
pub(super) const MAXIMUM_BODY: usize = 4_000;

/// Above this many instructions the fast allocator is used.
const SINGLE_PASS_ABOVE: usize = 1_000;

/// At most so many uniform values are kept in registers; more are read from memory in the loop.
const UNIFORMS_IN_REGISTERS: usize = 6;

/// What the loop does with the outputs.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Sink {
    /// Stores them to arrays.
    Store,
    /// Multiplies them by weights and adds them up.
    WeightedSum,
}

/// Signature of the generated function: uniforms (each twice), arrays, scratch, weights, outputs, points.
type Entry = unsafe extern "C" fn(*const f64, *const *const f64, *mut f64, *const f64, *const *mut f64, i64);

/// Compiled code with the memory it stands in.
pub(super) struct Code {
    /// Freed on drop; `ManuallyDrop` because freeing consumes it.
    module: ManuallyDrop<JITModule>,
    entry: Entry,
    /// Functions that the code calls; it holds pointers to these.
    _functions: Box<[HostCall]>,
    uniforms: Vec<ValueId>,
    arrays: Vec<ValueId>,
    outputs: usize,
    scratch: usize,
    sink: Sink,
}

/// What a host call computes.
#[derive(Clone, Copy, Debug)]
enum HostCall {
    Unary(Function),
    Binary(BinaryFunction),
    Power,
}

// SAFETY: the code is immutable once it is finalized and keeps no state; everything it writes is passed in by the caller
// of `run`, which borrows the buffers for the call. The module is touched again only by `drop`, which has `&mut self`.
unsafe impl Send for Code {}
// SAFETY: as above.
unsafe impl Sync for Code {}

impl std::fmt::Debug for Code {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("Code").field("uniforms", &self.uniforms).field("arrays", &self.arrays).finish_non_exhaustive()
    }
}

impl Drop for Code {
    fn drop(&mut self) {
        // SAFETY: `entry` is the only pointer into the memory, it is private, and it dies with `self`.
        unsafe { ManuallyDrop::take(&mut self.module).free_memory() }
    }
}

/// Buffers for one block; padded and reused between calls.
pub(super) struct Buffers {
    scratch: Vec<f64>,
    uniforms: Vec<f64>,
}

impl Code {
    /// Compiles `body` (values in program order) with `outputs`; operands outside the body are uniform where
    /// `is_array(value)` is false.
    ///
    /// # Errors
    /// If the body is too large or the code generator refuses.
    pub(super) fn compile(
        program: &Program,
        body: &[ValueId],
        outputs: &[ValueId],
        is_array: impl Fn(ValueId) -> bool,
        sink: Sink,
    ) -> Result<Self, KernelError> {
        if body.len() > MAXIMUM_BODY {
            return Err(KernelError::TooLargeToCompile(body.len()));
        }
        let plan = Plan::new(program, body, outputs, is_array);
        let fail = |error: &dyn std::fmt::Display| KernelError::CodeGeneration(error.to_string());
        let mut flags = settings::builder();
        let allocator = if body.len() > SINGLE_PASS_ABOVE { "single_pass" } else { "backtracking" };
        let choices = [
            ("opt_level", "none"),
            ("regalloc_algorithm", allocator),
            ("enable_verifier", "false"),
            // Long bodies spill tens of kilobytes: a frame that does not fit must meet the guard page of the stack.
            ("enable_probestack", "true"),
            ("probestack_strategy", "inline"),
        ];
        for (name, value) in choices {
            flags.set(name, value).map_err(|error| fail(&error))?;
        }
        let isa = cranelift_native::builder()
            .map_err(|error| fail(&error))?
            .finish(settings::Flags::new(flags))
            .map_err(|error| fail(&error))?;
        let mut builder = JITBuilder::with_isa(isa, cranelift_module::default_libcall_names());
        builder.symbol("quadrel_host_call", host_call as *const u8);
        let mut module = JITModule::new(builder);
        let functions: Box<[HostCall]> = plan.calls.iter().map(|call| call.function).collect();
        match emit(&mut module, program, &plan, &functions, sink) {
            Ok(entry) => Ok(Self {
                module: ManuallyDrop::new(module),
                entry,
                _functions: functions,
                uniforms: plan.uniforms,
                arrays: plan.arrays,
                outputs: outputs.len(),
                scratch: plan.scratch,
                sink,
            }),
            Err(error) => {
                // SAFETY: nothing was handed out yet.
                unsafe { module.free_memory() };
                Err(error)
            }
        }
    }

    /// Largest number of points in one block.
    pub(super) fn block(&self) -> usize {
        if self.scratch == 0 { PLAIN_BLOCK } else { SCRATCH_BLOCK }
    }

    /// Values that are given as one number for the block.
    pub(super) fn uniforms(&self) -> &[ValueId] {
        &self.uniforms
    }

    /// Values that are given as arrays.
    pub(super) fn arrays(&self) -> &[ValueId] {
        &self.arrays
    }

    /// Buffers for calls of this code.
    pub(super) fn buffers(&self) -> Buffers {
        Buffers { scratch: vec![0.0; self.scratch * STRIDE], uniforms: vec![0.0; 2 * self.uniforms.len()] }
    }

    /// Sets the uniform values for the following blocks; `value(id)` gives each.
    pub(super) fn set_uniforms(&self, buffers: &mut Buffers, mut value: impl FnMut(ValueId) -> f64) {
        for (pair, &id) in buffers.uniforms.chunks_exact_mut(2).zip(&self.uniforms) {
            pair.fill(value(id));
        }
    }

    /// Runs one block: `arrays` in the order of [`Code::arrays`], each as long as the block. For [`Sink::Store`]
    /// `outputs` are arrays of the block's length; for [`Sink::WeightedSum`] each holds [`TURN`] partial sums, which are
    /// added to.
    ///
    /// # Panics
    /// If the lengths do not fit or are no multiple of [`TURN`].
    pub(super) fn run(&self, buffers: &mut Buffers, arrays: &[&[f64]], weights: &[f64], outputs: &mut [&mut [f64]]) {
        let points = arrays.first().map_or(weights.len(), |array| array.len());
        assert!(points <= self.block() && points.is_multiple_of(TURN), "a block is whole turns");
        assert_eq!(arrays.len(), self.arrays.len(), "every array is given");
        assert!(arrays.iter().all(|array| array.len() == points), "arrays are as long as the block");
        assert_eq!(outputs.len(), self.outputs, "every output is given");
        assert!(buffers.scratch.len() >= self.scratch * STRIDE && buffers.uniforms.len() >= 2 * self.uniforms.len());
        let room = if self.sink == Sink::Store { points } else { TURN };
        assert!(outputs.iter().all(|output| output.len() >= room), "outputs have room");
        assert!(self.sink == Sink::Store || weights.len() == points, "a weight for each point");
        let array_pointers: Vec<*const f64> = arrays.iter().map(|array| array.as_ptr()).collect();
        let output_pointers: Vec<*mut f64> = outputs.iter_mut().map(|output| output.as_mut_ptr()).collect();
        // SAFETY: `entry` was finalized for exactly this signature and lives as long as `self`. It reads `points` numbers
        // from each array and the weights, two from each uniform, and writes `points` (or TURN) numbers to each output and
        // as many to each scratch array, which has room for a block; the lengths were checked above. The outputs are exclusive borrows, so
        // nothing that is read is written.
        unsafe {
            (self.entry)(
                buffers.uniforms.as_ptr(),
                array_pointers.as_ptr(),
                buffers.scratch.as_mut_ptr(),
                weights.as_ptr(),
                output_pointers.as_ptr(),
                points as i64,
            );
        }
    }
}

/// Applies a function of the table to an array.
///
/// # Safety
/// `function` points to a [`HostCall`]; `a` and `b` to `count` numbers each (`b` is not read for a function of one
/// argument); `out` to room for `count`. Generated code is the only caller.
unsafe extern "C" fn host_call(function: *const HostCall, a: *const f64, b: *const f64, out: *mut f64, count: i64) {
    let count = count as usize;
    // SAFETY: promised by the caller; scratch arrays are distinct, so nothing overlaps `out`.
    let (function, a, out) =
        unsafe { (*function, std::slice::from_raw_parts(a, count), std::slice::from_raw_parts_mut(out, count)) };
    // SAFETY: as above, for functions of two arguments.
    let second = || unsafe { std::slice::from_raw_parts(b, count) };
    match function {
        HostCall::Unary(function) => out.iter_mut().zip(a).for_each(|(out, &a)| *out = function.evaluate(a)),
        HostCall::Binary(function) => {
            out.iter_mut().zip(a).zip(second()).for_each(|((out, &a), &b)| *out = function.evaluate(a, b));
        }
        HostCall::Power => out.iter_mut().zip(a).zip(second()).for_each(|((out, &a), &b)| *out = power(a, b)),
    }
}

/// A call of a function of the table between two loops.
struct Call {
    function: HostCall,
    arguments: Vec<ValueId>,
    result: ValueId,
}

/// How a body is cut into loops.
struct Plan {
    /// Arithmetic of each loop, in order.
    loops: Vec<Vec<ValueId>>,
    /// Calls after each loop, as indices into `calls`.
    calls_after: Vec<Vec<usize>>,
    calls: Vec<Call>,
    uniforms: Vec<ValueId>,
    arrays: Vec<ValueId>,
    /// Scratch array of each value that lives across loops.
    slots: FxHashMap<ValueId, usize>,
    scratch: usize,
    outputs: Vec<ValueId>,
}

impl Plan {
    fn new(program: &Program, body: &[ValueId], outputs: &[ValueId], is_array: impl Fn(ValueId) -> bool) -> Self {
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

/// Pointers that the generated function receives.
struct Pointers {
    uniforms: Value,
    arrays: Vec<Value>,
    scratch: Value,
    weights: Value,
    outputs: Vec<Value>,
    bytes: Value,
    points: Value,
}

fn flags() -> MemFlagsData {
    MemFlagsData::new().with_notrap()
}

fn emit(
    module: &mut JITModule,
    program: &Program,
    plan: &Plan,
    functions: &[HostCall],
    sink: Sink,
) -> Result<Entry, KernelError> {
    let fail = |error: &dyn std::fmt::Display| KernelError::CodeGeneration(error.to_string());
    let pointer = module.target_config().pointer_type();
    let mut context = module.make_context();
    context.func.name = UserFuncName::user(0, 0);
    context.func.signature.params.extend([pointer; 5].map(AbiParam::new));
    context.func.signature.params.push(AbiParam::new(types::I64));
    let mut host_signature = module.make_signature();
    host_signature.params.extend([pointer; 4].map(AbiParam::new));
    host_signature.params.push(AbiParam::new(types::I64));
    let host =
        module.declare_function("quadrel_host_call", Linkage::Import, &host_signature).map_err(|error| fail(&error))?;
    let function =
        module.declare_function("kernel", Linkage::Export, &context.func.signature).map_err(|error| fail(&error))?;
    let mut builder_context = FunctionBuilderContext::new();
    let mut builder = FunctionBuilder::new(&mut context.func, &mut builder_context);
    let host = module.declare_func_in_func(host, builder.func);
    let entry = builder.create_block();
    builder.append_block_params_for_function_params(entry);
    builder.switch_to_block(entry);
    builder.seal_block(entry);
    let parameters = builder.block_params(entry).to_vec();
    let load_pointers = |builder: &mut FunctionBuilder<'_>, table: Value, count: usize| -> Vec<Value> {
        (0..count).map(|i| builder.ins().load(pointer, flags(), table, (8 * i) as i32)).collect()
    };
    let arrays = load_pointers(&mut builder, parameters[1], plan.arrays.len());
    let outputs = load_pointers(&mut builder, parameters[4], plan.outputs.len());
    let bytes = builder.ins().ishl_imm_s(parameters[5], 3);
    let pointers = Pointers {
        uniforms: parameters[0],
        arrays,
        scratch: parameters[2],
        weights: parameters[3],
        outputs,
        bytes,
        points: parameters[5],
    };
    let mut emitter = Emitter { builder, program, plan, pointers, registers: FxHashMap::default() };
    if plan.uniforms.len() <= UNIFORMS_IN_REGISTERS && plan.calls.is_empty() {
        for (index, &uniform) in plan.uniforms.iter().enumerate() {
            let value = emitter.load(emitter.pointers.uniforms, (16 * index) as i32);
            emitter.registers.insert(uniform, value);
        }
    }
    let last = plan.loops.len() - 1;
    for index in 0..plan.loops.len() {
        emitter.one_loop(index, index == last, sink);
        for &call in &plan.calls_after[index] {
            emitter.host_call(host, &plan.calls[call], &functions[call]);
        }
    }
    emitter.builder.ins().return_(&[]);
    emitter.builder.seal_all_blocks();
    emitter.builder.finalize(module.target_config());
    module.define_function(function, &mut context).map_err(|error| fail(&error))?;
    module.clear_context(&mut context);
    module.finalize_definitions().map_err(|error| fail(&error))?;
    let address = module.get_finalized_function(function);
    // SAFETY: the function was defined with exactly the parameters of `Entry`, in the platform's C convention, which is
    // the default of the code generator.
    Ok(unsafe { std::mem::transmute::<*const u8, Entry>(address) })
}

struct Emitter<'a> {
    builder: FunctionBuilder<'a>,
    program: &'a Program,
    plan: &'a Plan,
    pointers: Pointers,
    /// Uniform values kept in registers for all loops.
    registers: FxHashMap<ValueId, Value>,
}

impl Emitter<'_> {
    fn load(&mut self, base: Value, offset: i32) -> Value {
        self.builder.ins().load(types::F64X2, flags(), base, offset)
    }

    fn slot_base(&mut self, slot: usize) -> Value {
        self.builder.ins().iadd_imm_s(self.pointers.scratch, (8 * STRIDE * slot) as i64)
    }

    fn splat(&mut self, number: f64) -> Value {
        let scalar = self.builder.ins().f64const(number);
        self.builder.ins().splat(types::F64X2, scalar)
    }

    /// One loop over the block; the last one delivers the outputs.
    fn one_loop(&mut self, index: usize, is_last: bool, sink: Sink) {
        let stored = self.stored_in(index);
        let plan = self.plan;
        if plan.loops[index].is_empty() && stored.is_empty() && !is_last {
            return;
        }
        let vectors = TURN / 2;
        let summed = is_last && sink == Sink::WeightedSum;
        let sums = if summed { plan.outputs.len() * vectors } else { 0 };
        let header = self.builder.create_block();
        let exit = self.builder.create_block();
        self.builder.append_block_param(header, types::I64);
        for _ in 0..sums {
            self.builder.append_block_param(header, types::F64X2);
        }
        let zero = self.builder.ins().iconst(types::I64, 0);
        let mut start: Vec<BlockArg> = vec![zero.into()];
        for k in 0..sums {
            // Partial sums go on from where the block before left them.
            let base = self.pointers.outputs[k / vectors];
            let sum = self.load(base, (16 * (k % vectors)) as i32);
            start.push(sum.into());
        }
        self.builder.ins().jump(header, &start);
        self.builder.switch_to_block(header);
        let carried = self.builder.block_params(header).to_vec();
        let offset = carried[0];
        let mut next_sums: Vec<Value> = carried[1..].to_vec();
        for vector in 0..vectors {
            let mut known = self.registers.clone();
            let displacement = (16 * vector) as i32;
            for &value in &plan.loops[index] {
                let result = self.instruction(value, &mut known, offset, displacement);
                known.insert(value, result);
            }
            for &value in &stored {
                let result = self.operand(value, &mut known, offset, displacement);
                let base = self.slot_base(plan.slots[&value]);
                let address = self.builder.ins().iadd(base, offset);
                self.builder.ins().store(flags(), result, address, displacement);
            }
            if is_last {
                self.deliver(sink, &mut known, offset, displacement, vector, &mut next_sums);
            }
        }
        let next = self.builder.ins().iadd_imm_s(offset, (8 * TURN) as i64);
        let more = self.builder.ins().icmp(IntCC::UnsignedLessThan, next, self.pointers.bytes);
        let mut again: Vec<BlockArg> = vec![next.into()];
        again.extend(next_sums.iter().map(|&sum| BlockArg::from(sum)));
        self.builder.ins().brif(more, header, &again, exit, &[]);
        self.builder.switch_to_block(exit);
        if summed {
            for (k, &sum) in next_sums.iter().enumerate() {
                let base = self.pointers.outputs[k / vectors];
                self.builder.ins().store(flags(), sum, base, (16 * (k % vectors)) as i32);
            }
        }
    }

    /// Values that this loop leaves in scratch: its own results that live on, and outside arguments of the next calls.
    fn stored_in(&self, index: usize) -> Vec<ValueId> {
        let plan = self.plan;
        let mut stored: Vec<ValueId> =
            plan.loops[index].iter().copied().filter(|value| plan.slots.contains_key(value)).collect();
        for &call in &plan.calls_after[index] {
            for argument in &plan.calls[call].arguments {
                let outside = plan.arrays.contains(argument) || plan.uniforms.contains(argument);
                if outside && !stored.contains(argument) {
                    stored.push(*argument);
                }
            }
        }
        stored
    }

    fn deliver(
        &mut self,
        sink: Sink,
        known: &mut FxHashMap<ValueId, Value>,
        offset: Value,
        displacement: i32,
        vector: usize,
        sums: &mut [Value],
    ) {
        let vectors = TURN / 2;
        let weight = (sink == Sink::WeightedSum).then(|| {
            let address = self.builder.ins().iadd(self.pointers.weights, offset);
            self.load(address, displacement)
        });
        for k in 0..self.plan.outputs.len() {
            let value = self.operand(self.plan.outputs[k], known, offset, displacement);
            match weight {
                Some(weight) => {
                    let sum = &mut sums[k * vectors + vector];
                    let product = self.builder.ins().fmul(value, weight);
                    *sum = self.builder.ins().fadd(*sum, product);
                }
                None => {
                    let address = self.builder.ins().iadd(self.pointers.outputs[k], offset);
                    self.builder.ins().store(flags(), value, address, displacement);
                }
            }
        }
    }

    /// A value in the current turn: computed here, uniform, an array, or in scratch.
    fn operand(
        &mut self,
        value: ValueId,
        known: &mut FxHashMap<ValueId, Value>,
        offset: Value,
        displacement: i32,
    ) -> Value {
        if let Some(&value) = known.get(&value) {
            return value;
        }
        let loaded = if let Some(index) = self.plan.uniforms.iter().position(|&uniform| uniform == value) {
            self.load(self.pointers.uniforms, (16 * index) as i32)
        } else if let Some(index) = self.plan.arrays.iter().position(|&array| array == value) {
            let address = self.builder.ins().iadd(self.pointers.arrays[index], offset);
            self.load(address, displacement)
        } else {
            let base = self.slot_base(self.plan.slots[&value]);
            let address = self.builder.ins().iadd(base, offset);
            self.load(address, displacement)
        };
        known.insert(value, loaded);
        loaded
    }

    fn instruction(
        &mut self,
        value: ValueId,
        known: &mut FxHashMap<ValueId, Value>,
        offset: Value,
        displacement: i32,
    ) -> Value {
        let instruction = self.program.instructions()[value.index()];
        let operands: Vec<Value> = instruction
            .operands()
            .collect::<Vec<_>>()
            .into_iter()
            .map(|operand| self.operand(operand, known, offset, displacement))
            .collect();
        let fused = super::interpreter::fused();
        match (instruction, &operands[..]) {
            (Instruction::Negate(_), &[a]) => self.builder.ins().fneg(a),
            (Instruction::Add(..), &[a, b]) => self.builder.ins().fadd(a, b),
            (Instruction::Subtract(..), &[a, b]) => self.builder.ins().fsub(a, b),
            (Instruction::Multiply(..) | Instruction::And(..), &[a, b]) => self.builder.ins().fmul(a, b),
            (Instruction::Divide(..), &[a, b]) => self.builder.ins().fdiv(a, b),
            (Instruction::MultiplyAdd(..), &[a, b, c]) if fused => self.builder.ins().fma(a, b, c),
            (Instruction::MultiplySubtract(..), &[a, b, c]) if fused => {
                let negative = self.builder.ins().fneg(c);
                self.builder.ins().fma(a, b, negative)
            }
            (Instruction::NegateMultiplyAdd(..), &[a, b, c]) if fused => {
                let negative = self.builder.ins().fneg(a);
                self.builder.ins().fma(negative, b, c)
            }
            (Instruction::MultiplyAdd(..), &[a, b, c]) => {
                let product = self.builder.ins().fmul(a, b);
                self.builder.ins().fadd(product, c)
            }
            (Instruction::MultiplySubtract(..), &[a, b, c]) => {
                let product = self.builder.ins().fmul(a, b);
                self.builder.ins().fsub(product, c)
            }
            (Instruction::NegateMultiplyAdd(..), &[a, b, c]) => {
                let product = self.builder.ins().fmul(a, b);
                self.builder.ins().fsub(c, product)
            }
            (Instruction::SquareRoot(_), &[a]) => self.builder.ins().sqrt(a),
            (Instruction::Magnitude(_), &[a]) => self.builder.ins().fabs(a),
            (Instruction::Minimum(..), &[a, b]) => self.extreme(a, b, b, a),
            (Instruction::Maximum(..), &[a, b]) => self.extreme(a, b, a, b),
            (Instruction::Less(..), &[a, b]) => self.comparison(FloatCC::LessThan, a, b),
            (Instruction::LessEqual(..), &[a, b]) => self.comparison(FloatCC::LessThanOrEqual, a, b),
            (Instruction::Or(..), &[a, b]) => {
                let sum = self.builder.ins().fadd(a, b);
                let zero = self.splat(0.0);
                self.comparison(FloatCC::GreaterThan, sum, zero)
            }
            (Instruction::Not(_), &[a]) => {
                let one = self.splat(1.0);
                self.builder.ins().fsub(one, a)
            }
            (Instruction::Select(..), &[condition, yes, no]) => {
                let zero = self.splat(0.0);
                let holds = self.builder.ins().fcmp(FloatCC::NotEqual, condition, zero);
                let chosen = self.choose(holds, yes, no);
                self.undefined_where(condition, condition, chosen)
            }
            (instruction, _) => unreachable!("{instruction:?} is not arithmetic of a loop"),
        }
    }

    /// `b` where `low < high`, else `a`; NaN where either is NaN.
    fn extreme(&mut self, a: Value, b: Value, low: Value, high: Value) -> Value {
        let smaller = self.builder.ins().fcmp(FloatCC::LessThan, low, high);
        let chosen = self.choose(smaller, b, a);
        self.undefined_where(a, b, chosen)
    }

    /// 1 where the comparison holds, 0 where it does not, NaN where a side is NaN.
    fn comparison(&mut self, condition: FloatCC, a: Value, b: Value) -> Value {
        let mask = self.builder.ins().fcmp(condition, a, b);
        let (one, zero) = (self.splat(1.0), self.splat(0.0));
        let chosen = self.choose(mask, one, zero);
        self.undefined_where(a, b, chosen)
    }

    fn undefined_where(&mut self, a: Value, b: Value, otherwise: Value) -> Value {
        let unordered = self.builder.ins().fcmp(FloatCC::Unordered, a, b);
        let nan = self.splat(f64::NAN);
        self.choose(unordered, nan, otherwise)
    }

    /// A bitwise choice by an integer mask.
    fn choose(&mut self, mask: Value, yes: Value, no: Value) -> Value {
        let cast = MemFlagsData::new().with_endianness(codegen::ir::Endianness::Little);
        let yes = self.builder.ins().bitcast(types::I64X2, cast, yes);
        let no = self.builder.ins().bitcast(types::I64X2, cast, no);
        let chosen = self.builder.ins().bitselect(mask, yes, no);
        self.builder.ins().bitcast(types::F64X2, cast, chosen)
    }

    fn host_call(&mut self, host: FuncRef, call: &Call, function: &HostCall) {
        let address = std::ptr::from_ref(function) as i64;
        let function = self.builder.ins().iconst(types::I64, address);
        let first = self.slot_base(self.plan.slots[&call.arguments[0]]);
        let second = match call.arguments.get(1) {
            Some(argument) => self.slot_base(self.plan.slots[argument]),
            None => first,
        };
        let out = self.slot_base(self.plan.slots[&call.result]);
        self.builder.ins().call(host, &[function, first, second, out, self.pointers.points]);
    }
}
