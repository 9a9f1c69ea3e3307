//! Lowering of a plan to 256-bit code: four points in a turn.
//!
//! Each loop is a function of its own; the caller runs the host calls between them. A loop is straight-line code, so its
//! registers are allotted in one pass: every value has a home in memory (where it comes from, or where it was spilled)
//! or a register or both, and when a register is needed the value whose next use is farthest gives way (L. A. Belady, A
//! study of replacement algorithms for a virtual-storage computer, IBM Systems Journal 5, 1966). An operand that is used
//! once is read by the instruction itself.
//!
//! The operations are those of the narrow code in the same order, each rounded the same way, and partial sum k of a row
//! takes points k, k + 4, k + 8, ... in both: so values and sums have the same bits.
//!
//! Functions take their parameters in the System V convention on every system; it keeps no vector register over a call.

use super::plan::{Plan, STRIDE, Sink};
use super::program::{Instruction, Program, ValueId};
use super::vex::{Assembler, Comparison, Fused, FusedForm, General, Memory, Operand, Packed, VECTOR, Vector};
use rustc_hash::FxHashMap;

/// Code of all loops, to be called with uniforms (each four times), arrays, scratch, weights, outputs and bytes of a block.
pub(super) struct WideCode {
    pub(super) bytes: Vec<u8>,
    /// Where each loop of the plan begins; none if it has nothing to do.
    pub(super) entries: Vec<Option<usize>>,
    /// Vectors of room that the code needs behind the scratch arrays.
    pub(super) spills: usize,
}

const UNIFORMS: General = General::RDI;
const ARRAYS: General = General::RSI;
const SCRATCH: General = General::RDX;
const WEIGHTS: General = General::RCX;
const OUTPUTS: General = General::R8;
const BYTES: General = General::R9;
/// Bytes from the start of the block to the turn.
const OFFSET: General = General::R10;
/// For a pointer that is needed once.
const POINTER: General = General::RAX;

/// Hold pointers to arrays; arrays beyond are reached through [`POINTER`].
const ARRAY_POINTERS: [General; 7] =
    [General::R11, General::RBX, General::RBP, General::R12, General::R13, General::R14, General::R15];

/// The first of these that a caller wants back; only r11 is free.
const KEPT_FROM: usize = 1;

const VECTORS: usize = 16;

/// At most so many sums stay in registers, from the last one down; more are added to memory.
const SUMS_IN_REGISTERS: usize = 4;

/// Registers that one step takes at most, beside values that were computed before: three operands, two temporaries.
const STEP_REGISTERS: usize = 5;

/// Code for a plan.
pub(super) fn assemble(program: &Program, plan: &Plan, sink: Sink) -> WideCode {
    let mut assembler = Assembler::default();
    let mut homes: FxHashMap<ValueId, Home> = FxHashMap::default();
    homes.extend(plan.uniforms.iter().enumerate().map(|(index, &value)| (value, Home::Uniform(index))));
    homes.extend(plan.arrays.iter().enumerate().map(|(index, &value)| (value, Home::Array(index))));
    let mut entries = Vec::with_capacity(plan.loops.len());
    let mut spills = 0;
    let last = plan.loops.len() - 1;
    for (index, calls) in plan.calls_after.iter().enumerate() {
        let steps = steps(plan, &homes, index);
        entries.push((!steps.is_empty()).then(|| {
            assembler.align();
            let entry = assembler.position();
            let summed = if index == last && sink == Sink::WeightedSum { plan.outputs.len() } else { 0 };
            let mut writer = LoopWriter::new(&mut assembler, program, plan, &mut homes, steps, summed);
            writer.write(sink);
            spills = spills.max(writer.spills);
            entry
        }));
        for &call in calls {
            let result = plan.calls[call].result;
            homes.insert(result, Home::Scratch(plan.slots[&result]));
        }
    }
    WideCode { bytes: assembler.finish(), entries, spills }
}

/// Where a value stands in memory.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
enum Home {
    Uniform(usize),
    Array(usize),
    /// A scratch array.
    Scratch(usize),
    /// A vector behind the scratch arrays, for this turn only.
    Spill(usize),
}

/// What is done in a turn.
#[derive(Clone, Copy, Debug)]
enum Step {
    /// Computes a value, and stores it if it lives across loops.
    Compute(ValueId),
    /// Copies a value from outside to its scratch array, for a call.
    Copy(ValueId),
    /// Hands over a value as the output at this position.
    Deliver(usize, ValueId),
}

/// The steps of a loop; outputs are handed over as soon as they are known, so that they need not be kept.
fn steps(plan: &Plan, homes: &FxHashMap<ValueId, Home>, index: usize) -> Vec<Step> {
    let is_last = index == plan.loops.len() - 1;
    let mut waiting: FxHashMap<ValueId, Vec<usize>> = FxHashMap::default();
    if is_last {
        for (position, &output) in plan.outputs.iter().enumerate() {
            waiting.entry(output).or_default().push(position);
        }
    }
    let mut steps = Vec::new();
    for &value in &plan.loops[index] {
        steps.push(Step::Compute(value));
        let outputs = waiting.remove(&value).unwrap_or_default();
        steps.extend(outputs.into_iter().map(|position| Step::Deliver(position, value)));
    }
    let mut copied: Vec<ValueId> = Vec::new();
    for argument in plan.calls_after[index].iter().flat_map(|&call| &plan.calls[call].arguments) {
        let outside = matches!(homes.get(argument), Some(Home::Uniform(_) | Home::Array(_)));
        if outside && !copied.contains(argument) {
            copied.push(*argument);
        }
    }
    steps.extend(copied.into_iter().map(Step::Copy));
    let rest = plan.outputs.iter().enumerate().filter(|(_, output)| waiting.contains_key(output));
    steps.extend(rest.map(|(position, &output)| Step::Deliver(position, output)));
    steps
}

/// Writes one loop.
struct LoopWriter<'a> {
    assembler: &'a mut Assembler,
    program: &'a Program,
    plan: &'a Plan,
    homes: &'a mut FxHashMap<ValueId, Home>,
    steps: Vec<Step>,
    /// Position in `steps`.
    now: usize,
    /// Steps that use each value, the next one last.
    uses: FxHashMap<ValueId, Vec<usize>>,
    /// Arrays of this loop in the order of first use.
    arrays: Vec<usize>,
    holds: [Option<ValueId>; VECTORS],
    place: FxHashMap<ValueId, Vector>,
    /// Registers that hold what the current instructions read or write.
    locked: u16,
    /// Number of sums in registers, from the last register down.
    sums: usize,
    /// Uniform values that keep a register in all turns, below the sums.
    pinned: Vec<ValueId>,
    /// Spilled vectors, the most there are at a time.
    spills: usize,
    free_spills: Vec<usize>,
    /// Spilled vectors that the current step reads for the last time.
    dying_spills: Vec<usize>,
}

impl<'a> LoopWriter<'a> {
    fn new(
        assembler: &'a mut Assembler,
        program: &'a Program,
        plan: &'a Plan,
        homes: &'a mut FxHashMap<ValueId, Home>,
        steps: Vec<Step>,
        summed: usize,
    ) -> Self {
        let mut uses: FxHashMap<ValueId, Vec<usize>> = FxHashMap::default();
        let mut arrays = Vec::new();
        for (position, step) in steps.iter().enumerate().rev() {
            for operand in operands(program, *step) {
                uses.entry(operand).or_default().push(position);
            }
        }
        for operand in steps.iter().flat_map(|step| operands(program, *step)) {
            if let Some(&Home::Array(array)) = homes.get(&operand)
                && !arrays.contains(&array)
            {
                arrays.push(array);
            }
        }
        let sums = summed.min(SUMS_IN_REGISTERS);
        let room = (VECTORS - sums).saturating_sub(most_alive(&steps, &uses) + STEP_REGISTERS);
        let pinned: Vec<ValueId> = most_used_uniforms(&uses, homes).into_iter().take(room).collect();
        let place = pinned.iter().enumerate().map(|(index, &value)| (value, from_the_top(sums + index))).collect();
        Self {
            assembler,
            program,
            plan,
            homes,
            steps,
            now: 0,
            uses,
            arrays,
            holds: [None; VECTORS],
            place,
            locked: 0,
            sums,
            pinned,
            spills: 0,
            free_spills: Vec::new(),
            dying_spills: Vec::new(),
        }
    }

    fn write(&mut self, sink: Sink) {
        let pointers: Vec<General> = ARRAY_POINTERS.iter().copied().take(self.arrays.len()).collect();
        let kept = pointers.get(KEPT_FROM..).unwrap_or_default();
        kept.iter().for_each(|&register| self.assembler.push(register));
        for (&register, &array) in pointers.iter().zip(&self.arrays) {
            self.assembler.load_pointer(register, entry_of(ARRAYS, array));
        }
        for k in 0..self.sums {
            // Partial sums go on from where the block before left them.
            self.assembler.load_pointer(POINTER, entry_of(OUTPUTS, k));
            self.assembler.load(from_the_top(k), Operand::Memory(at(POINTER, 0)));
        }
        for index in 0..self.pinned.len() {
            let home = self.memory(self.pinned[index]);
            self.assembler.load(from_the_top(self.sums + index), Operand::Memory(home));
        }
        self.assembler.clear(OFFSET);
        self.assembler.align();
        let turn = self.assembler.position();
        for position in 0..self.steps.len() {
            self.now = position;
            self.step(self.steps[position], sink);
        }
        self.assembler.add_immediate(OFFSET, VECTOR as i8);
        self.assembler.repeat_while_below(OFFSET, BYTES, turn);
        for k in 0..self.sums {
            self.assembler.load_pointer(POINTER, entry_of(OUTPUTS, k));
            self.assembler.store(at(POINTER, 0), from_the_top(k));
        }
        self.assembler.clear_upper_halves();
        kept.iter().rev().for_each(|&register| self.assembler.pop(register));
        self.assembler.return_();
    }

    fn step(&mut self, step: Step, sink: Sink) {
        for operand in operands(self.program, step) {
            if let Some(&register) = self.place.get(&operand) {
                self.lock(register);
            }
        }
        match step {
            Step::Compute(value) => {
                self.compute(value);
                if let Some(&slot) = self.plan.slots.get(&value) {
                    self.assembler.store(scratch_array(slot), self.place[&value]);
                    self.homes.insert(value, Home::Scratch(slot));
                }
            }
            Step::Copy(value) => {
                let register = self.in_register(value);
                self.assembler.store(scratch_array(self.plan.slots[&value]), register);
            }
            Step::Deliver(output, value) if sink == Sink::Store => {
                let register = self.in_register(value);
                self.assembler.load_pointer(POINTER, entry_of(OUTPUTS, output));
                self.assembler.store(in_turn(POINTER, 0), register);
            }
            Step::Deliver(output, value) => self.add_up(output, value),
        }
        self.release_dead(step);
        self.locked = 0;
        self.free_spills.append(&mut self.dying_spills);
        if let Step::Compute(value) = step
            && self.next_use(value).is_none()
        {
            self.forget(value);
        }
    }

    /// Adds the value times its weight to a sum, rounding twice as the interpreter does.
    fn add_up(&mut self, output: usize, value: ValueId) {
        let register = self.in_register(value);
        let product = self.temporary();
        self.assembler.packed(Packed::Multiply, product, register, Operand::Memory(in_turn(WEIGHTS, 0)));
        if output < self.sums {
            let sum = from_the_top(output);
            self.assembler.packed(Packed::Add, sum, sum, Operand::Register(product));
        } else {
            self.assembler.load_pointer(POINTER, entry_of(OUTPUTS, output));
            self.assembler.packed(Packed::Add, product, product, Operand::Memory(at(POINTER, 0)));
            self.assembler.store(at(POINTER, 0), product);
        }
    }

    fn compute(&mut self, value: ValueId) {
        use Instruction::*;
        match self.program.instructions()[value.index()] {
            Add(a, b) => self.commutative(Packed::Add, value, a, b),
            Multiply(a, b) | And(a, b) => self.commutative(Packed::Multiply, value, a, b),
            Subtract(a, b) => self.binary(Packed::Subtract, value, a, b),
            Divide(a, b) => self.binary(Packed::Divide, value, a, b),
            MultiplyAdd(a, b, c) => self.fused(Fused::MultiplyAdd, value, a, b, c),
            MultiplySubtract(a, b, c) => self.fused(Fused::MultiplySubtract, value, a, b, c),
            NegateMultiplyAdd(a, b, c) => self.fused(Fused::NegateMultiplyAdd, value, a, b, c),
            SquareRoot(a) => {
                let operand = self.operand(a);
                let result = self.result(value);
                self.assembler.square_root(result, operand);
            }
            Negate(a) => self.with_constant(Packed::ExclusiveOr, value, a, SIGN),
            Magnitude(a) => self.with_constant(Packed::And, value, a, !SIGN),
            Not(a) => {
                let a = self.operand(a);
                let one = self.temporary();
                let constant = self.constant(ONE);
                self.assembler.load(one, constant);
                let result = self.result(value);
                self.assembler.packed(Packed::Subtract, result, one, a);
            }
            Minimum(a, b) => self.extreme(Packed::Minimum, value, a, b),
            Maximum(a, b) => self.extreme(Packed::Maximum, value, a, b),
            Less(a, b) => self.comparison(Comparison::Less, value, a, b),
            LessEqual(a, b) => self.comparison(Comparison::LessEqual, value, a, b),
            Or(a, b) => self.either(value, a, b),
            Select(condition, yes, no) => self.select(value, condition, yes, no),
            instruction @ (Constant(_) | Parameter(_) | Variable(_) | Call(..) | Call2(..) | Power(..)) => {
                unreachable!("{instruction:?} is not arithmetic of a loop")
            }
        }
    }

    fn binary(&mut self, operation: Packed, value: ValueId, a: ValueId, b: ValueId) {
        let first = self.in_register(a);
        let second = self.operand(b);
        let result = self.result(value);
        self.assembler.packed(operation, result, first, second);
    }

    fn commutative(&mut self, operation: Packed, value: ValueId, a: ValueId, b: ValueId) {
        let (first, second) = self.register_and_operand(a, b);
        let result = self.result(value);
        self.assembler.packed(operation, result, first, second);
    }

    fn with_constant(&mut self, operation: Packed, value: ValueId, a: ValueId, bits: u64) {
        let first = self.in_register(a);
        let constant = self.constant(bits);
        let result = self.result(value);
        self.assembler.packed(operation, result, first, constant);
    }

    /// One operand is overwritten: best one that dies here, else one that is read from memory anyway, else a copy.
    fn fused(&mut self, kind: Fused, value: ValueId, a: ValueId, b: ValueId, c: ValueId) {
        let candidates = [c, a, b];
        let dies = |value: &&ValueId| self.place.contains_key(*value) && !self.is_used_later(**value);
        let dying = candidates.iter().find(dies).copied();
        let in_memory = candidates.iter().find(|value| !self.place.contains_key(value)).copied();
        let overwritten = dying.or(in_memory).unwrap_or(c);
        let result = match dying {
            Some(dying) => self.place[&dying],
            None => {
                let register = self.temporary();
                let from = match self.place.get(&overwritten) {
                    Some(&register) => Operand::Register(register),
                    None => Operand::Memory(self.memory(overwritten)),
                };
                self.assembler.load(register, from);
                register
            }
        };
        if overwritten == c {
            let (middle, last) = self.register_and_operand(a, b);
            self.assembler.fused(kind, FusedForm::Form231, result, middle, last);
        } else {
            let factor = if overwritten == a { b } else { a };
            if self.place.contains_key(&factor) {
                let (middle, last) = (self.in_register(factor), self.operand(c));
                self.assembler.fused(kind, FusedForm::Form213, result, middle, last);
            } else {
                let (middle, last) = (self.in_register(c), self.operand(factor));
                self.assembler.fused(kind, FusedForm::Form132, result, middle, last);
            }
        }
        if let Some(dying) = dying {
            self.place.remove(&dying);
        }
        self.define(value, result);
    }

    /// `b` where it is smaller (or larger), else `a`; NaN where either is NaN. The processor's instruction gives its
    /// second operand where either is NaN, and where both are zeros, so only NaN in `b` needs care.
    fn extreme(&mut self, operation: Packed, value: ValueId, a: ValueId, b: ValueId) {
        let first = self.in_register(b);
        let second = self.operand(a);
        let undefined = self.temporary();
        self.assembler.compare(Comparison::Unordered, undefined, first, second);
        let result = self.result(value);
        self.assembler.packed(operation, result, first, second);
        self.undefine(result, undefined);
    }

    /// 1 where the comparison holds, 0 where it does not, NaN where a side is NaN.
    fn comparison(&mut self, comparison: Comparison, value: ValueId, a: ValueId, b: ValueId) {
        let first = self.in_register(a);
        let second = self.operand(b);
        let undefined = self.temporary();
        self.assembler.compare(Comparison::Unordered, undefined, first, second);
        let result = self.result(value);
        self.assembler.compare(comparison, result, first, second);
        let one = self.constant(ONE);
        self.assembler.packed(Packed::And, result, result, one);
        self.undefine(result, undefined);
    }

    /// 1 where the sum of two truth values is above 0.
    fn either(&mut self, value: ValueId, a: ValueId, b: ValueId) {
        let (first, second) = self.register_and_operand(a, b);
        let sum = self.temporary();
        self.assembler.packed(Packed::Add, sum, first, second);
        let result = self.result(value);
        let zero = self.constant(0);
        self.assembler.compare(Comparison::Greater, result, sum, zero);
        let one = self.constant(ONE);
        self.assembler.packed(Packed::And, result, result, one);
        self.assembler.compare(Comparison::Unordered, sum, sum, Operand::Register(sum));
        self.undefine(result, sum);
    }

    fn select(&mut self, value: ValueId, condition: ValueId, yes: ValueId, no: ValueId) {
        let condition = self.in_register(condition);
        let no = self.in_register(no);
        let yes = self.operand(yes);
        let (holds, undefined) = (self.temporary(), self.temporary());
        let zero = self.constant(0);
        self.assembler.compare(Comparison::NotEqual, holds, condition, zero);
        self.assembler.compare(Comparison::Unordered, undefined, condition, Operand::Register(condition));
        let result = self.result(value);
        self.assembler.blend(result, no, yes, holds);
        self.undefine(result, undefined);
    }

    /// NaN where the mask is set: all bits set are a NaN.
    fn undefine(&mut self, result: Vector, mask: Vector) {
        self.assembler.packed(Packed::Or, result, result, Operand::Register(mask));
    }

    fn constant(&mut self, bits: u64) -> Operand {
        Operand::Memory(self.assembler.constant(bits))
    }

    // Registers. A step locks what it reads, takes temporaries, and asks for the register of its result last.

    /// A value in a register, for this step at least.
    fn in_register(&mut self, value: ValueId) -> Vector {
        if let Some(&register) = self.place.get(&value) {
            self.lock(register);
            return register;
        }
        let register = self.temporary();
        let memory = self.memory(value);
        self.assembler.load(register, Operand::Memory(memory));
        self.define(value, register);
        register
    }

    /// A value as the last operand: from memory if it has no register and is not worth one.
    fn operand(&mut self, value: ValueId) -> Operand {
        let worth_a_register = self.is_used_later(value) && self.unused_register().is_some();
        if self.place.contains_key(&value) || worth_a_register {
            Operand::Register(self.in_register(value))
        } else {
            Operand::Memory(self.memory(value))
        }
    }

    /// Two operands of which either may be the one in memory.
    fn register_and_operand(&mut self, a: ValueId, b: ValueId) -> (Vector, Operand) {
        let swap = !self.place.contains_key(&a) && (self.place.contains_key(&b) || self.is_used_later(b));
        let (first, second) = if swap { (b, a) } else { (a, b) };
        (self.in_register(first), self.operand(second))
    }

    /// A register for the rest of this step.
    fn temporary(&mut self) -> Vector {
        let register = self.unused_register().unwrap_or_else(|| self.evict());
        self.lock(register);
        register
    }

    /// The register of the result: the last instruction of a step may overwrite operands that are not used again.
    /// Temporaries stay locked.
    fn result(&mut self, value: ValueId) -> Vector {
        let step = Step::Compute(value);
        for operand in operands(self.program, step) {
            if let Some(&register) = self.place.get(&operand) {
                self.locked &= !(1 << register.0);
            }
        }
        self.release_dead(step);
        let register = self.temporary();
        self.define(value, register);
        register
    }

    fn define(&mut self, value: ValueId, register: Vector) {
        self.holds[usize::from(register.0)] = Some(value);
        self.place.insert(value, register);
    }

    fn lock(&mut self, register: Vector) {
        self.locked |= 1 << register.0;
    }

    /// Registers that steps may use: all but those of the sums and the pinned values.
    fn registers(&self) -> impl Iterator<Item = Vector> + use<> {
        (0..(VECTORS - self.sums - self.pinned.len()) as u8).map(Vector)
    }

    fn unused_register(&self) -> Option<Vector> {
        let is_unused =
            |register: &Vector| self.holds[usize::from(register.0)].is_none() && self.locked & (1 << register.0) == 0;
        self.registers().find(is_unused)
    }

    /// Takes the register of the value that is used last, or not again.
    fn evict(&mut self) -> Vector {
        let farthest = self
            .registers()
            .filter(|register| self.locked & (1 << register.0) == 0)
            .max_by_key(|register| {
                let value = self.holds[usize::from(register.0)].expect("no register is unused");
                self.next_use(value).unwrap_or(usize::MAX)
            })
            .expect("a step locks fewer registers than there are");
        let value = self.holds[usize::from(farthest.0)].take().expect("no register is unused");
        self.place.remove(&value);
        if !self.homes.contains_key(&value) && self.next_use(value).is_some() {
            let spill = self.free_spills.pop().unwrap_or_else(|| {
                self.spills += 1;
                self.spills - 1
            });
            self.homes.insert(value, Home::Spill(spill));
            let memory = self.memory(value);
            self.assembler.store(memory, farthest);
        }
        farthest
    }

    /// The next step that uses a value, this one if it still does.
    fn next_use(&self, value: ValueId) -> Option<usize> {
        let uses = self.uses.get(&value)?;
        // Uses are in descending order.
        let passed = uses.partition_point(|&position| position >= self.now);
        passed.checked_sub(1).map(|next| uses[next])
    }

    /// Pinned values are used in the next turn, too.
    fn is_used_later(&self, value: ValueId) -> bool {
        self.pinned.contains(&value) || self.uses.get(&value).is_some_and(|uses| uses[0] > self.now)
    }

    /// Gives back the registers and spilled vectors of operands that no later step uses.
    fn release_dead(&mut self, step: Step) {
        for operand in operands(self.program, step) {
            if !self.is_used_later(operand) {
                self.forget(operand);
            }
        }
    }

    fn forget(&mut self, value: ValueId) {
        if let Some(register) = self.place.remove(&value) {
            self.holds[usize::from(register.0)] = None;
        }
        if let Some(&Home::Spill(spill)) = self.homes.get(&value) {
            self.homes.remove(&value);
            self.dying_spills.push(spill);
        }
    }

    /// Where a value stands; may load [`POINTER`], so one such place at a time.
    fn memory(&mut self, value: ValueId) -> Memory {
        match self.homes[&value] {
            Home::Uniform(index) => at(UNIFORMS, VECTOR * index),
            Home::Array(array) => {
                let position =
                    self.arrays.iter().position(|&used| used == array).expect("arrays of the loop are listed");
                match ARRAY_POINTERS.get(position) {
                    Some(&register) => in_turn(register, 0),
                    None => {
                        self.assembler.load_pointer(POINTER, entry_of(ARRAYS, array));
                        in_turn(POINTER, 0)
                    }
                }
            }
            Home::Scratch(slot) => scratch_array(slot),
            Home::Spill(spill) => at(SCRATCH, 8 * STRIDE * self.plan.scratch + VECTOR * spill),
        }
    }
}

/// The sign bit of a double.
const SIGN: u64 = 1 << 63;

const ONE: u64 = 1.0f64.to_bits();

/// The largest number of values of a loop that are computed and not yet used up.
fn most_alive(steps: &[Step], uses: &FxHashMap<ValueId, Vec<usize>>) -> usize {
    let mut ends = vec![0usize; steps.len()];
    let (mut alive, mut most) = (0, 0);
    for (position, step) in steps.iter().enumerate() {
        alive -= ends[position];
        if let Step::Compute(value) = step
            && let Some(uses) = uses.get(value)
        {
            ends[uses[0]] += 1;
            alive += 1;
            most = most.max(alive);
        }
    }
    most
}

/// Uniform values of a loop, those with the most uses first.
fn most_used_uniforms(uses: &FxHashMap<ValueId, Vec<usize>>, homes: &FxHashMap<ValueId, Home>) -> Vec<ValueId> {
    let mut uniforms: Vec<ValueId> =
        uses.keys().copied().filter(|value| matches!(homes.get(value), Some(Home::Uniform(_)))).collect();
    uniforms.sort_unstable_by_key(|value| (std::cmp::Reverse(uses[value].len()), *value));
    uniforms
}

/// What a step reads.
fn operands(program: &Program, step: Step) -> impl Iterator<Item = ValueId> {
    let (computed, read) = match step {
        Step::Compute(value) => (Some(program.instructions()[value.index()]), None),
        Step::Copy(value) | Step::Deliver(_, value) => (None, Some(value)),
    };
    computed.into_iter().flat_map(|instruction| instruction.operands()).chain(read)
}

/// Register k, counted down from the last.
fn from_the_top(k: usize) -> Vector {
    Vector((VECTORS - 1 - k) as u8)
}

/// A vector at a fixed place.
fn at(base: General, displacement: usize) -> Memory {
    Memory::At { base, index: None, displacement: displacement as i32 }
}

/// The vector of the current turn in an array.
fn in_turn(base: General, displacement: usize) -> Memory {
    Memory::At { base, index: Some(OFFSET), displacement: displacement as i32 }
}

fn scratch_array(slot: usize) -> Memory {
    in_turn(SCRATCH, 8 * STRIDE * slot)
}

/// An entry in a table of pointers.
fn entry_of(table: General, index: usize) -> Memory {
    at(table, 8 * index)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::expression::Graph;
    use crate::kernel::Stage;

    /// Code for the sum over k of t_k t_(n+1-k), t_k = (u + k) v: half of the terms are alive at once.
    fn code(terms: i64) -> WideCode {
        let mut graph = Graph::new();
        let variables = [graph.new_symbol("u"), graph.new_symbol("v")];
        let (u, v) = (graph.symbol(variables[0]), graph.symbol(variables[1]));
        let terms: Vec<_> = (1..=terms)
            .map(|k| {
                let k = graph.integer(k);
                let factor = graph.add(u, k);
                graph.multiply(factor, v)
            })
            .collect();
        let products: Vec<_> = terms.iter().zip(terms.iter().rev()).map(|(&a, &b)| graph.multiply(a, b)).collect();
        let sum = products[1..].iter().fold(products[0], |sum, &product| graph.add(sum, product));
        let program = Program::new(&graph, &[sum], variables, &[]).unwrap();
        let mixed = |value: &ValueId| program.stages()[value.index()] == Stage::Mixed;
        let body: Vec<ValueId> = (0..program.len() as u32).map(ValueId).filter(mixed).collect();
        let is_table = |value: ValueId| program.stages()[value.index()] == Stage::Second;
        let plan = Plan::new(&program, &body, program.outputs(), is_table);
        assemble(&program, &plan, Sink::WeightedSum)
    }

    /// The values themselves are checked in tests/kernel_limits.rs; here, that such formulas do spill.
    #[test]
    fn long_formulas_spill_and_short_ones_do_not() {
        assert_eq!(code(4).spills, 0);
        let long = code(100);
        // 50 terms and a running sum do not fit into 15 registers; none needs more than one place.
        assert!((36..=100).contains(&long.spills), "{} vectors are spilled", long.spills);
    }
}
