//! What evaluating the area element of a patch costs on this machine.

use super::error::IntegralError;
use crate::expression::{SymbolId, evaluate};
use crate::geometry::Surface;
use crate::kernel::{Kernel, KernelError, Lanes, Program};
use crate::language::{Bindings, Bound, Model, PatchId};
use crate::simplify::{element_form, evaluation_form};
use std::hint::black_box;
use std::time::Instant;

/// Nanoseconds for one point.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Timing {
    /// Fastest repeat.
    pub fastest: f64,
    /// Median of the repeats.
    pub median: f64,
}

/// A measurement of one patch.
#[derive(Clone, PartialEq, Debug)]
pub struct SpeedRun {
    /// Sum of dA over a midpoint grid.
    pub grid: Timing,
    /// The area that the grid gives.
    pub sum: f64,
    /// Values of dA at scattered points written to an array.
    pub scattered: Timing,
    /// Seconds from formula to callable code.
    pub compile_seconds: f64,
    /// What is evaluated: the closed form of dA, or the norm of the cross product.
    pub formula: &'static str,
    /// Which engine ran.
    pub route: &'static str,
    /// Points in one vector of the machine code.
    pub lanes: Option<usize>,
    /// Instructions of the kernel.
    pub instructions: usize,
    /// Instructions that depend on both variables.
    pub mixed_instructions: usize,
}

/// What is measured, and how.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct SpeedSettings {
    /// Points of the midpoint grid in each variable.
    pub grid: (usize, usize),
    /// Number of scattered points.
    pub scattered: usize,
    /// Repeats; the fastest counts.
    pub repeats: usize,
    /// Whether the closed form of dA is evaluated where it is accurate.
    pub simplify: bool,
    /// Points in one vector of the machine code.
    pub lanes: Lanes,
}

impl SpeedRun {
    /// Measures the area element of a patch on a grid and at scattered points; with the interpreter where the formula is too
    /// large for machine code.
    ///
    /// # Errors
    /// For limits that are infinite or depend on a variable, formulas that are too large, and lanes that the machine has
    /// not.
    pub fn measure(
        model: &Model,
        bindings: &Bindings,
        patch: PatchId,
        settings: &SpeedSettings,
    ) -> Result<Self, IntegralError> {
        let id = patch;
        let patch = &model.patches[id.0];
        let &SpeedSettings { grid, scattered, repeats, simplify, lanes } = settings;
        let mut graph = model.graph.clone();
        let norm = Surface::new(&mut graph, patch).element;
        let value_of = |symbol| bindings.value(symbol);
        let form = if simplify { element_form(model, id) } else { None };
        let closed = form.and_then(|form| evaluation_form(model, id, &mut graph, norm, &value_of, &form));
        let outputs = [closed.unwrap_or(norm)];
        let parameters: Vec<SymbolId> =
            graph.symbols_of(&outputs).into_iter().filter(|symbol| !patch.variables.contains(symbol)).collect();
        let values: Vec<f64> = parameters.iter().map(|&symbol| bindings.value(symbol)).collect();
        let fail = |error: KernelError| IntegralError::new("formula", format!("{}: {error}", patch.name));
        let program = Program::new(&graph, &outputs, patch.variables, &parameters).map_err(fail)?;
        let kernel = match Kernel::compiled_for(program.clone(), lanes) {
            Err(KernelError::TooLargeToCompile(_)) => Kernel::interpreted(program),
            kernel => kernel.map_err(fail)?,
        };
        let mut limits = [(0.0, 0.0); 2];
        for (limit, interval) in limits.iter_mut().zip(&patch.intervals) {
            let (Bound::Finite(lower), Bound::Finite(upper)) = (interval.lower, interval.upper) else {
                return Err(IntegralError::new("limits", format!("{}: a grid needs finite limits", patch.name)));
            };
            let ends = evaluate(&graph, &[lower, upper], |symbol| bindings.value(symbol));
            if ends.iter().any(|end| end.is_nan()) {
                return Err(IntegralError::new(
                    "limits",
                    format!("{}: a product grid needs limits that depend on no variable", patch.name),
                ));
            }
            *limit = (ends[0], ends[1]);
        }
        let axis = |(low, high): (f64, f64), n: usize| -> (Vec<f64>, Vec<f64>) {
            let step = (high - low) / n as f64;
            ((0..n).map(|i| low + step * (i as f64 + 0.5)).collect(), vec![step; n])
        };
        let (u, wu) = axis(limits[0], grid.0);
        let (v, wv) = axis(limits[1], grid.1);
        let mut sum = 0.0;
        let grid_times = repeat(repeats, || {
            sum = kernel.sum_grid(&values, &u, &wu, &v, &wv)[0];
            black_box(sum);
        });
        // Reproducible scattered points: an additive recurrence with two irrational steps.
        let share = |i: usize, step: f64| (i as f64 * step).fract();
        let place = |(low, high): (f64, f64), share: f64| low + (high - low) * share;
        let us: Vec<f64> = (0..scattered).map(|i| place(limits[0], share(i, 0.754_877_666_246_692_8))).collect();
        let vs: Vec<f64> = (0..scattered).map(|i| place(limits[1], share(i, 0.569_840_290_998_053_3))).collect();
        let mut out = vec![0.0; scattered];
        let scattered_times = repeat(repeats, || {
            kernel.evaluate(&values, &us, &vs, &mut out);
            black_box(&out);
        });
        Ok(Self {
            grid: timing(grid_times, grid.0 * grid.1),
            sum,
            scattered: timing(scattered_times, scattered.max(1)),
            compile_seconds: kernel.compile_seconds(),
            formula: if closed.is_some() { "closed form" } else { "norm of the cross product" },
            route: if kernel.lanes().is_some() { "machine code" } else { "interpreter" },
            lanes: kernel.lanes().map(Lanes::count),
            instructions: kernel.program().len(),
            mixed_instructions: kernel.program().mixed_count(),
        })
    }
}

fn repeat(repeats: usize, mut work: impl FnMut()) -> Vec<f64> {
    (0..repeats)
        .map(|_| {
            let start = Instant::now();
            work();
            start.elapsed().as_secs_f64()
        })
        .collect()
}

fn timing(mut seconds: Vec<f64>, points: usize) -> Timing {
    seconds.sort_by(f64::total_cmp);
    let scale = 1e9 / points as f64;
    Timing { fastest: seconds[0] * scale, median: seconds[seconds.len() / 2] * scale }
}
