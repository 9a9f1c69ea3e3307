//! Sum of dA over a 2000 x 2000 midpoint grid against hand-tabled C (baseline.c), in one run: `cargo bench`.
//!
//! Without a C compiler the baseline is left out with a message. Under `cargo test` it runs once on a small grid, so that it
//! keeps working.

use quadrel::geometry::Surface;
use quadrel::kernel::{Kernel, Lanes, Program};
use quadrel::language::{Source, check};
use std::collections::HashMap;
use std::f64::consts::{PI, TAU};
use std::hint::black_box;
use std::path::Path;
use std::process::Command;
use std::time::Instant;

type Limits = [(f64, f64); 2];

const SURFACES: &[(&str, &str, Limits)] = &[
    ("torus", "s(u, v) = ((3 + cos(v))*cos(u), (3 + cos(v))*sin(u), sin(v))", [(0.0, TAU), (0.0, TAU)]),
    ("ellipsoid", "s(u, v) = (3*sin(u)*cos(v), 2*sin(u)*sin(v), cos(u))", [(0.0, PI), (0.0, TAU)]),
    ("enneper", "s(u, v) = (u - u^3/3 + u*v^2, v - v^3/3 + v*u^2, u^2 - v^2)", [(-1.5, 1.5), (-1.5, 1.5)]),
];

/// Nanoseconds per point and sum of the C baseline: the better of 256 and 512 bits.
fn baseline() -> HashMap<String, (f64, f64)> {
    let mut best: HashMap<String, (f64, f64)> = HashMap::new();
    let source = Path::new(env!("CARGO_MANIFEST_DIR")).join("benches/baseline.c");
    for width in ["256", "512"] {
        let program = std::env::temp_dir().join(format!("quadrel-baseline-{}-{width}", std::process::id()));
        let mut gcc = Command::new("gcc");
        gcc.args(["-O3", "-march=native", "-ffast-math", &format!("-mprefer-vector-width={width}")]);
        if !gcc.arg(&source).arg("-o").arg(&program).arg("-lm").status().is_ok_and(|status| status.success()) {
            println!("no gcc: the baseline is left out");
            return best;
        }
        let output = Command::new(&program).output().expect("the baseline runs");
        let _ = std::fs::remove_file(&program);
        for line in String::from_utf8_lossy(&output.stdout).lines() {
            let fields: Vec<&str> = line.split_whitespace().collect();
            let (time, sum): (f64, f64) = (fields[1].parse().unwrap(), fields[2].parse().unwrap());
            let entry = best.entry(fields[0].to_owned()).or_insert((time, sum));
            entry.0 = entry.0.min(time);
        }
    }
    best
}

fn main() {
    let full = std::env::args().any(|argument| argument == "--bench");
    let (n, repeats) = if full { (2000, 11) } else { (100, 1) };
    let baseline = if full { baseline() } else { HashMap::new() };
    println!("surface    lanes    ns/point   median        C    ratio   difference   compile us");
    for (name, map, limits) in SURFACES {
        let sheet = format!("{map} on u in [0, 1], v in [0, 1]");
        let model = check(Source::new(*name, sheet)).expect("the sheet is right");
        let mut graph = model.graph.clone();
        let surface = Surface::new(&mut graph, &model.patches[0]);
        let program = Program::new(&graph, &[surface.element], model.patches[0].variables, &[]).expect("no parameters");
        let axis = |(low, high): (f64, f64)| -> (Vec<f64>, Vec<f64>) {
            let step = (high - low) / n as f64;
            ((0..n).map(|i| low + step * (i as f64 + 0.5)).collect(), vec![step; n])
        };
        let ((u, wu), (v, wv)) = (axis(limits[0]), axis(limits[1]));
        let pool = rayon::ThreadPoolBuilder::new().num_threads(1).build().expect("one thread");
        for lanes in [Lanes::Two, Lanes::Four].into_iter().filter(|lanes| lanes.is_supported()) {
            let compiled = || Kernel::compiled_for(program.clone(), lanes).expect("small enough");
            let compile_us =
                (0..10 * repeats).map(|_| compiled().compile_seconds() * 1e6).fold(f64::INFINITY, f64::min);
            let kernel = compiled();
            let mut sum = 0.0;
            let mut times: Vec<f64> = (0..repeats)
                .map(|_| {
                    let start = Instant::now();
                    sum = black_box(pool.install(|| kernel.sum_grid(&[], &u, &wu, &v, &wv)[0]));
                    start.elapsed().as_secs_f64() * 1e9 / (n * n) as f64
                })
                .collect();
            times.sort_by(f64::total_cmp);
            let [time, ratio, difference] = match baseline.get(*name) {
                Some(&(time, other)) => {
                    let difference = ((sum - other) / other).abs();
                    [format!("{time:.3}"), format!("{:.2}", times[0] / time), format!("{difference:.1e}")]
                }
                None => [(); 3].map(|()| "-".to_owned()),
            };
            let (fastest, median) = (times[0], times[times.len() / 2]);
            let lanes = lanes.count();
            println!(
                "{name:<10} {lanes:>5} {fastest:>11.3} {median:>8.3} {time:>8} {ratio:>8} {difference:>12} {compile_us:>12.0}"
            );
        }
    }
}
