//! The one owner of machine code and of the memory it stands in.
//!
//! A [`Code`] runs a part of a program (its *body*) over a block of points. Values that the body takes from outside are
//! either uniform (one number for the block) or arrays (one number for each point). The code comes from one of two
//! generators: [`super::narrow_code`] for two points at a time on any machine, [`super::wide_code`] for four.
//!
//! Memory: neither generator frees what it made executable when it is dropped. [`Code`] does, and no pointer into the
//! memory leaves this file. A panic must not cross generated frames: host functions do arithmetic only, and
//! `extern "C"` would abort.

#![expect(unsafe_code, reason = "owns machine code and the pointers into it")]

use super::plan::{HostCall, Plan, SCRATCH_BLOCK, STRIDE, Sink, TURN};
use super::program::{KernelError, Program, ValueId};
use super::{narrow_code, wide_code};
use cranelift_jit::JITModule;
use memmap2::{Mmap, MmapMut};
use std::mem::ManuallyDrop;

/// Points in one block where nothing goes through scratch arrays: enough to forget the cost of a call, few enough for
/// tables to stay in the cache.
const PLAIN_BLOCK: usize = 2048;

/// Largest body that is worth compiling: register allocation is superlinear.
pub(super) const MAXIMUM_BODY: usize = 4_000;

/// How many points machine code takes in one vector. The values at each point and the sums have the same bits at either
/// level.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Lanes {
    /// 128-bit vectors of two: every machine that the code generator knows.
    Two,
    /// 256-bit vectors of four: x86-64 with AVX2 and FMA.
    Four,
}

impl Lanes {
    /// Whether this machine has the level.
    pub fn is_supported(self) -> bool {
        match self {
            Lanes::Two => true,
            Lanes::Four => cfg!(target_arch = "x86_64") && super::interpreter::fused(),
        }
    }

    /// The widest level of this machine.
    pub fn widest() -> Self {
        if Lanes::Four.is_supported() { Lanes::Four } else { Lanes::Two }
    }

    /// The number of points in one vector.
    pub fn count(self) -> usize {
        match self {
            Lanes::Two => 2,
            Lanes::Four => 4,
        }
    }
}

/// Code for two lanes: uniforms (each twice), arrays, scratch, weights, outputs, points.
type NarrowEntry = unsafe extern "C" fn(*const f64, *const *const f64, *mut f64, *const f64, *const *mut f64, i64);

/// One loop for four lanes: uniforms (each four times), arrays, scratch, weights, outputs, bytes of a block. The
/// convention is the same on every system.
#[cfg(target_arch = "x86_64")]
type WideEntry = unsafe extern "sysv64" fn(*const f64, *const *const f64, *mut f64, *const f64, *const *mut f64, i64);
/// Never called: [`Code::compile`] refuses four lanes.
#[cfg(not(target_arch = "x86_64"))]
type WideEntry = NarrowEntry;

/// Compiled code with the memory it stands in.
pub(super) struct Code {
    body: Body,
    uniforms: Vec<ValueId>,
    arrays: Vec<ValueId>,
    outputs: usize,
    /// Scratch arrays.
    scratch: usize,
    /// Vectors behind the scratch arrays that hold values which found no register.
    spills: usize,
    sink: Sink,
}

/// What a generator made.
enum Body {
    Narrow {
        /// Freed on drop; `ManuallyDrop` because freeing consumes it.
        module: ManuallyDrop<Box<JITModule>>,
        entry: NarrowEntry,
        /// Functions that the code calls; it holds pointers to these.
        _functions: Box<[HostCall]>,
    },
    Wide {
        /// Readable and executable, never writable again; unmapped on drop.
        memory: Mmap,
        parts: Vec<Part>,
    },
}

/// A loop of wide code, and the calls after it.
struct Part {
    /// Where the loop begins in the memory; none if it has nothing to do.
    entry: Option<usize>,
    calls: Vec<SlotCall>,
}

/// A host call between scratch arrays.
struct SlotCall {
    function: HostCall,
    first: usize,
    second: usize,
    result: usize,
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

impl Drop for Body {
    fn drop(&mut self) {
        match self {
            // SAFETY: `entry` is the only pointer into the memory, it is private, and it dies with `self`.
            Body::Narrow { module, .. } => unsafe { ManuallyDrop::take(module).free_memory() },
            Body::Wide { .. } => {}
        }
    }
}

/// Buffers for one block; padded and reused between calls.
pub(super) struct Buffers {
    /// Scratch arrays, then spilled vectors.
    scratch: Vec<f64>,
    /// Each value once for every lane.
    uniforms: Vec<f64>,
    /// Tables of pointers for the current call.
    arrays: Vec<*const f64>,
    outputs: Vec<*mut f64>,
}

impl Code {
    /// Compiles `body` (values in program order) with `outputs`; operands outside the body are uniform where
    /// `is_array(value)` is false.
    ///
    /// # Errors
    /// If the machine has not so many lanes, the body is too large, or the code generator refuses.
    pub(super) fn compile(
        program: &Program,
        body: &[ValueId],
        outputs: &[ValueId],
        is_array: impl Fn(ValueId) -> bool,
        sink: Sink,
        lanes: Lanes,
    ) -> Result<Self, KernelError> {
        if body.len() > MAXIMUM_BODY {
            return Err(KernelError::TooLargeToCompile(body.len()));
        }
        if !lanes.is_supported() {
            return Err(KernelError::UnsupportedLanes(lanes.count()));
        }
        let plan = Plan::new(program, body, outputs, is_array);
        let (code, spills) = match lanes {
            Lanes::Two => (Body::narrow(program, &plan, body.len(), sink)?, 0),
            Lanes::Four => Body::wide(program, &plan, sink)?,
        };
        Ok(Self {
            body: code,
            uniforms: plan.uniforms,
            arrays: plan.arrays,
            outputs: outputs.len(),
            scratch: plan.scratch,
            spills,
            sink,
        })
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

    fn lanes(&self) -> usize {
        match self.body {
            Body::Narrow { .. } => Lanes::Two.count(),
            Body::Wide { .. } => Lanes::Four.count(),
        }
    }

    fn scratch_length(&self) -> usize {
        self.scratch * STRIDE + self.spills * self.lanes()
    }

    /// Buffers for calls of this code.
    pub(super) fn buffers(&self) -> Buffers {
        Buffers {
            scratch: vec![0.0; self.scratch_length()],
            uniforms: vec![0.0; self.lanes() * self.uniforms.len()],
            arrays: Vec::new(),
            outputs: Vec::new(),
        }
    }

    /// Sets the uniform values for the following blocks; `value(id)` gives each.
    pub(super) fn set_uniforms(&self, buffers: &mut Buffers, mut value: impl FnMut(ValueId) -> f64) {
        for (copies, &id) in buffers.uniforms.chunks_exact_mut(self.lanes()).zip(&self.uniforms) {
            copies.fill(value(id));
        }
    }

    /// Runs one block: `arrays` in the order of [`Code::arrays`], each as long as the block. Output k begins at
    /// `outputs[k * distance]`. For [`Sink::Store`] it is as long as the block; for [`Sink::WeightedSum`] it holds [`TURN`]
    /// partial sums, which are added to.
    ///
    /// # Panics
    /// If the lengths do not fit or are no multiple of [`TURN`].
    pub(super) fn run(
        &self,
        buffers: &mut Buffers,
        arrays: &[&[f64]],
        weights: &[f64],
        outputs: &mut [f64],
        distance: usize,
    ) {
        let points = arrays.first().map_or(weights.len(), |array| array.len());
        assert!(points > 0 && points <= self.block() && points.is_multiple_of(TURN), "a block is whole turns");
        assert_eq!(arrays.len(), self.arrays.len(), "every array is given");
        assert!(arrays.iter().all(|array| array.len() == points), "arrays are as long as the block");
        assert!(buffers.scratch.len() >= self.scratch_length());
        assert!(buffers.uniforms.len() >= self.lanes() * self.uniforms.len());
        let room = if self.sink == Sink::Store { points } else { TURN };
        let needed = self.outputs.checked_sub(1).map_or(0, |last| last * distance + room);
        assert!(distance >= room && outputs.len() >= needed, "outputs have room");
        assert!(self.sink == Sink::Store || weights.len() == points, "a weight for each point");
        buffers.arrays.clear();
        buffers.arrays.extend(arrays.iter().map(|array| array.as_ptr()));
        buffers.outputs.clear();
        buffers.outputs.extend(outputs.chunks_mut(distance).take(self.outputs).map(|output| output.as_mut_ptr()));
        let uniforms = buffers.uniforms.as_ptr();
        let scratch = buffers.scratch.as_mut_ptr();
        let (arrays, weights, outputs) = (buffers.arrays.as_ptr(), weights.as_ptr(), buffers.outputs.as_ptr());
        match &self.body {
            // SAFETY: `entry` was finalized for exactly this signature and lives as long as `self`. It reads `points`
            // numbers from each array and the weights, one for each lane from each uniform, and writes `points` (or TURN)
            // numbers to each output and as many to each scratch array, which has room for a block; the lengths were
            // checked above. The outputs are an exclusive borrow, so nothing that is read is written.
            Body::Narrow { entry, .. } => unsafe {
                entry(uniforms, arrays, scratch, weights, outputs, points as i64);
            },
            Body::Wide { memory, parts } => {
                for part in parts {
                    if let Some(at) = part.entry {
                        // SAFETY: a function with these parameters begins at `at`, `wide_code` says so, in memory that
                        // lives as long as `self`. `compile` made sure that the processor has its instructions. It reads
                        // and writes what the narrow code does, and the spilled vectors behind the scratch arrays.
                        unsafe {
                            let entry = std::mem::transmute::<*const u8, WideEntry>(memory.as_ptr().add(at));
                            entry(uniforms, arrays, scratch, weights, outputs, (8 * points) as i64);
                        }
                    }
                    for call in &part.calls {
                        let slot = |index: usize| scratch.wrapping_add(index * STRIDE);
                        // SAFETY: the plan gives each value a scratch array of its own, and a result is none of its
                        // arguments; each has room for a block.
                        unsafe {
                            let (first, second) = (slot(call.first), slot(call.second));
                            host_call(&call.function, first, second, slot(call.result), points as i64);
                        }
                    }
                }
            }
        }
    }
}

impl Body {
    fn narrow(program: &Program, plan: &Plan, body: usize, sink: Sink) -> Result<Self, KernelError> {
        let mut module = narrow_code::module(body, host_call as *const u8)?;
        let functions: Box<[HostCall]> = plan.calls.iter().map(|call| call.function).collect();
        match narrow_code::emit(&mut module, program, plan, &functions, sink) {
            Ok(address) => Ok(Body::Narrow {
                module: ManuallyDrop::new(Box::new(module)),
                // SAFETY: the function was defined with exactly the parameters of `NarrowEntry`, in the platform's C
                // convention, which is the default of the code generator.
                entry: unsafe { std::mem::transmute::<*const u8, NarrowEntry>(address) },
                _functions: functions,
            }),
            Err(error) => {
                // SAFETY: nothing was handed out yet.
                unsafe { module.free_memory() };
                Err(error)
            }
        }
    }

    /// The code, and how many vectors it spills.
    fn wide(program: &Program, plan: &Plan, sink: Sink) -> Result<(Self, usize), KernelError> {
        let fail = |error: std::io::Error| KernelError::CodeGeneration(format!("no memory for code: {error}"));
        let code = wide_code::assemble(program, plan, sink);
        // Written first, executable after: at no time both.
        let mut memory = MmapMut::map_anon(code.bytes.len()).map_err(fail)?;
        memory.copy_from_slice(&code.bytes);
        let memory = memory.make_exec().map_err(fail)?;
        let slot_call = |&call: &usize| {
            let call = &plan.calls[call];
            let slots: Vec<usize> = call.arguments.iter().map(|argument| plan.slots[argument]).collect();
            SlotCall {
                function: call.function,
                first: slots[0],
                second: *slots.last().unwrap_or(&slots[0]),
                result: plan.slots[&call.result],
            }
        };
        let parts = code.entries.iter().zip(&plan.calls_after);
        let parts = parts.map(|(&entry, calls)| Part { entry, calls: calls.iter().map(slot_call).collect() }).collect();
        Ok((Body::Wide { memory, parts }, code.spills))
    }
}

/// Applies a function of the table to an array.
///
/// # Safety
/// `function` points to a [`HostCall`]; `a` and `b` to `count` numbers each (`b` is not read for a function of one
/// argument); `out` to room for `count` that overlaps neither. Generated code and [`Code::run`] are the only callers.
unsafe extern "C" fn host_call(function: *const HostCall, a: *const f64, b: *const f64, out: *mut f64, count: i64) {
    let count = count as usize;
    // SAFETY: promised by the caller; for a function of one argument it gives `a` twice.
    unsafe {
        let (a, b) = (std::slice::from_raw_parts(a, count), std::slice::from_raw_parts(b, count));
        (*function).apply(a, b, std::slice::from_raw_parts_mut(out, count));
    }
}
