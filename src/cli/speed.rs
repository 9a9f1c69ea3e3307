//! `quadrel speed`

use super::arguments::{SimplifyOption, SpeedOptions};
use super::{Exit, Failure, choose_patch, load, output, set_echo};
use crate::integrals::{SpeedRun, SpeedSettings};
use crate::kernel::Lanes;
use serde_json::json;

/// Largest grid and largest number of scattered points.
const MOST_POINTS: usize = 1 << 26;

pub(super) fn run(options: &SpeedOptions) -> Result<Exit, Failure> {
    let (model, bindings) = load(&options.sheet, &options.set)?;
    let patch = choose_patch(&model, options.patch.as_deref())?;
    let (first, second) = options.grid;
    if first.checked_mul(second).is_none_or(|points| points > 64 * MOST_POINTS) || first.max(second) > MOST_POINTS {
        return Err(Failure::Usage(format!("--grid {first}x{second} is too large")));
    }
    if options.scattered > MOST_POINTS {
        return Err(Failure::Usage(format!("--scattered takes at most {MOST_POINTS} points")));
    }
    if options.repeats == 0 || options.scattered == 0 {
        return Err(Failure::Usage("--repeats and --scattered are at least 1".to_owned()));
    }
    let lanes = options.lanes.unwrap_or_else(Lanes::widest);
    if !lanes.is_supported() {
        return Err(Failure::Usage(unsupported(lanes)));
    }
    let settings = SpeedSettings {
        grid: options.grid,
        scattered: options.scattered,
        repeats: options.repeats,
        simplify: options.simplify == SimplifyOption::On,
        lanes,
    };
    if model.patches[patch.0].trim.is_some() {
        output::note("the whole region is measured: `where` is not part of dA");
    }
    let measured = rayon::ThreadPoolBuilder::new()
        .num_threads(options.threads)
        .build()
        .map_err(|error| Failure::Usage(format!("--threads {}: {error}", options.threads)))?
        .install(|| SpeedRun::measure(&model, &bindings, patch, &settings))?;
    if options.json {
        output::print_json(&json!({
            "schema": "quadrel/1",
            "patch": model.patches[patch.0].name,
            "grid": {
                "ns_per_point": measured.grid.fastest,
                "median_ns_per_point": measured.grid.median,
                "points": first * second,
                "route": measured.route,
                "sum": measured.sum,
            },
            "scattered": {
                "ns_per_point": measured.scattered.fastest,
                "median_ns_per_point": measured.scattered.median,
                "points": options.scattered,
                "route": measured.route,
            },
            "formula": measured.formula,
            "lanes": measured.lanes,
            "instructions": measured.instructions,
            "mixed_instructions": measured.mixed_instructions,
            "compile_us": measured.compile_seconds * 1e6,
            "threads": options.threads,
            "repeats": options.repeats,
        }));
    } else {
        output::print(&set_echo(&model, &bindings, &options.set));
        let route = match measured.lanes {
            Some(lanes) => format!("{} for {lanes} lanes", measured.route),
            None => measured.route.to_owned(),
        };
        output::print(&format!(
            "patch {}, {}: {} instructions of which {} depend on both variables, {}, compiled in {:.0} us\n\
             sum of dA on a {first}x{second} grid: {:.3} ns per point (median {:.3}), sum {}\n\
             dA at {} scattered points:  {:.3} ns per point (median {:.3})\n\
             fastest of {} repeats, {} thread{}\n",
            model.patches[patch.0].name,
            measured.formula,
            measured.instructions,
            measured.mixed_instructions,
            route,
            measured.compile_seconds * 1e6,
            measured.grid.fastest,
            measured.grid.median,
            measured.sum,
            options.scattered,
            measured.scattered.fastest,
            measured.scattered.median,
            options.repeats,
            options.threads,
            if options.threads == 1 { "" } else { "s" },
        ));
    }
    Ok(Exit::Reached)
}

/// What a user reads who asks for vectors that the machine has not.
fn unsupported(lanes: Lanes) -> String {
    format!(
        "--lanes {}: this machine has no such vectors (they need x86-64 with AVX2 and FMA)\nhint: leave --lanes out, or \
         take --lanes 2",
        lanes.count()
    )
}
