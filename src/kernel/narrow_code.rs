//! Cranelift code for two points at a time (F64X2): for processors without 256-bit vectors, and to compare with.
//!
//! One function holds all loops of a plan and the host calls between them.
//!
//! Pitfalls of the code generator that this file is built around, measured beforehand:
//! - relocations between functions may panic beyond 2 GB: there is one function for each module, and host functions are
//!   called by absolute address;
//! - arithmetic is VEX-encoded but moves are not, so dirty upper halves of wide registers make it slow: host functions are
//!   compiled Rust, which clears them before it returns, and so does the code for four lanes;
//! - NaN payloads differ between code shapes: tests compare whether values are NaN, not which.

use super::plan::{Call, HostCall, Plan, STRIDE, Sink, TURN};
use super::program::{Instruction, KernelError, Program, ValueId};
use cranelift::codegen::ir::{BlockArg, FuncRef, MemFlagsData, UserFuncName};
use cranelift::prelude::*;
use cranelift_jit::{JITBuilder, JITModule};
use cranelift_module::{Linkage, Module};
use rustc_hash::FxHashMap;

/// Above this many instructions the fast allocator is used.
const SINGLE_PASS_ABOVE: usize = 1_000;

/// At most so many uniform values are kept in registers; more are read from memory in the loop.
const UNIFORMS_IN_REGISTERS: usize = 6;

/// Name under which generated code finds the one function that it calls.
const HOST_CALL: &str = "quadrel_host_call";

/// An empty module for a body of so many instructions; `host_call` has the parameters of the signature in [`emit`].
///
/// # Errors
/// If the code generator does not know this machine.
pub(super) fn module(body: usize, host_call: *const u8) -> Result<JITModule, KernelError> {
    let fail = |error: &dyn std::fmt::Display| KernelError::CodeGeneration(error.to_string());
    let mut flags = settings::builder();
    let allocator = if body > SINGLE_PASS_ABOVE { "single_pass" } else { "backtracking" };
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
    builder.symbol(HOST_CALL, host_call);
    Ok(JITModule::new(builder))
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

/// Writes the function for a plan into the module; gives its address, callable as `machine_code::NarrowEntry`.
///
/// # Errors
/// If the code generator refuses.
pub(super) fn emit(
    module: &mut JITModule,
    program: &Program,
    plan: &Plan,
    functions: &[HostCall],
    sink: Sink,
) -> Result<*const u8, KernelError> {
    let fail = |error: &dyn std::fmt::Display| KernelError::CodeGeneration(error.to_string());
    let pointer = module.target_config().pointer_type();
    let mut context = module.make_context();
    context.func.name = UserFuncName::user(0, 0);
    context.func.signature.params.extend([pointer; 5].map(AbiParam::new));
    context.func.signature.params.push(AbiParam::new(types::I64));
    let mut host_signature = module.make_signature();
    host_signature.params.extend([pointer; 4].map(AbiParam::new));
    host_signature.params.push(AbiParam::new(types::I64));
    let host = module.declare_function(HOST_CALL, Linkage::Import, &host_signature).map_err(|error| fail(&error))?;
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
    Ok(module.get_finalized_function(function))
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
