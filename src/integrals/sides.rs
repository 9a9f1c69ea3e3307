//! Sides of patches: which of them meet, so that an open or one-sided chain under a flux or a volume is noticed.
//!
//! Sides are compared numerically: two sides meet if every sample of one lies on the other and the other way round. A side
//! that collapses to a point has no boundary, one at an infinite end is looked at far out. A chain is closed when the sides
//! cancel: each meets another with opposite sense. It is one-sided where two sides of one patch meet with equal sense.

use super::roots::point;
use super::run::Run;
use crate::expression::{Graph, SymbolId};
use crate::kernel::{Kernel, Program};
use crate::language::{Bindings, Bound, Dimension, FunctionalId, FunctionalKind, Patch};
use crate::quadrature::Segment;
use std::rc::Rc;

type Point = [f64; 3];

/// Samples along one side.
const SAMPLES: usize = 129;

/// Distance, relative to the size of the chain, within which two sides are taken to meet: rounding of formulas, no gap
/// that anyone could mean.
const MEETING: f64 = 1e-9;

/// Distance, relative to the size of the chain, within which two open sides are said to leave a gap.
const GAP: f64 = 0.05;

/// A side at an infinite end is at infinity where it is this many times farther away than the chain is large.
const FAR_AWAY: f64 = 1e3;

/// Steps of the search for the nearest point: each takes a share of 0.38 off the distance of two samples.
const REFINEMENTS: usize = 60;

/// Values in place of an infinite end: the first at which the patch is defined.
const FAR: [f64; 7] = [1e150, 1e40, 1e12, 1e6, 1e3, 100.0, 10.0];

struct Side {
    patch: String,
    label: String,
    /// Multiplicity with the sense of the boundary: positive when traversed with the surface on the left.
    coefficient: i64,
    curve: Curve,
    points: Vec<Point>,
    /// Whether the variable that is constant here is infinite.
    at_infinity: bool,
}

/// Where two sides are farthest from each other.
#[derive(Clone, Copy)]
struct Separation {
    distance: f64,
    at: Point,
    /// Whether both are traversed in the same sense.
    same_sense: bool,
}

/// Warnings for a flux or a volume through a chain that is open or one-sided.
pub(super) fn chain_warnings(run: &Run<'_>, id: FunctionalId) -> Vec<String> {
    let functional = &run.functionals[id.0];
    if !matches!(functional.kind, FunctionalKind::Flux(_) | FunctionalKind::Volume) {
        return Vec::new();
    }
    let mut sides = Vec::new();
    let mut unit = Dimension::NONE;
    for &(coefficient, patch) in &functional.chain.terms {
        let patch = &run.model.patches[patch.0];
        unit = patch.dimension;
        if patch.trim.is_some() {
            return vec![format!("{}: `{}` is trimmed, so its edge is not checked", functional.text, patch.name)];
        }
        match sides_of(&run.graph, patch, coefficient, &run.bindings) {
            Some(found) => sides.extend(found),
            None => {
                return vec![format!("{}: the edge of `{}` is undefined and not checked", functional.text, patch.name)];
            }
        }
    }
    let mut warnings = Vec::new();
    // The part of a side that may run to infinity is left out of the size.
    let middle = |side: &Side| side.points[SAMPLES / 4..=3 * SAMPLES / 4].to_vec();
    let near: Vec<Point> = sides.iter().filter(|side| !side.at_infinity).flat_map(middle).collect();
    let whole = sides.iter().filter(|side| side.curve.map.is_finite()).flat_map(|side| &side.points);
    let size = extent(near.iter().chain(whole));
    sides.retain(|side| {
        let away = side.at_infinity && !near.is_empty() && distance_beyond(&side.points, &near) > FAR_AWAY * size;
        if away {
            warnings.push(format!(
                "{}: `{}` runs to infinity at {}, where its edge is not checked",
                functional.text, side.patch, side.label
            ));
        }
        !away && extent(side.points.iter()) > tolerance(size, &side.points[0])
    });
    let mut left: Vec<i64> = sides.iter().map(|side| side.coefficient).collect();
    let mut gaps: Vec<(usize, usize, Separation)> = Vec::new();
    for a in 0..sides.len() {
        for b in a + 1..sides.len() {
            if left[a] == 0 || left[b] == 0 {
                continue;
            }
            let Some(between) = separation(&sides[a], &sides[b], size) else { continue };
            if between.distance > tolerance(size, &between.at) {
                gaps.push((a, b, between));
                continue;
            }
            let sense = if between.same_sense { 1 } else { -1 };
            if sides[a].patch == sides[b].patch && left[a] * left[b] * sense > 0 {
                warnings.push(format!(
                    "{}: `{}` is one-sided, its normal has no consistent direction",
                    functional.text, sides[a].patch
                ));
                left[b] = 0;
                left[a] = 0;
            } else if left[a].signum() != (sense * left[b]).signum() {
                let common = left[a].abs().min(left[b].abs());
                left[a] -= left[a].signum() * common;
                left[b] -= left[b].signum() * common;
            }
        }
    }
    let named = |side: &Side| format!("`{}` at {}", side.patch, side.label);
    let open: Vec<String> =
        sides.iter().zip(&left).filter(|(_, left)| **left != 0).map(|(side, _)| named(side)).collect();
    if !open.is_empty() {
        let shown = open.iter().take(3).cloned().collect::<Vec<_>>().join(", ");
        let what = match functional.kind {
            FunctionalKind::Volume => "the volume of an open surface depends on where the origin is",
            _ => "the flux is through an open surface",
        };
        warnings.push(format!("{}: the surface is open ({shown}): {what}", functional.text));
    }
    gaps.retain(|(a, b, _)| left[*a] != 0 && left[*b] != 0);
    gaps.sort_by(|a, b| a.2.distance.total_cmp(&b.2.distance));
    for (a, b, between) in gaps.into_iter().take(3) {
        let [x, y, z] = between.at;
        let unit = if unit.is_none() { String::new() } else { format!(" {unit}") };
        warnings.push(format!(
            "{}: {} and {} leave a gap of {:.3e}{unit} at ({x:.6}, {y:.6}, {z:.6})",
            functional.text,
            named(&sides[a]),
            named(&sides[b]),
            between.distance
        ));
    }
    warnings
}

/// What rounding may move a point of a chain of this size.
fn tolerance(size: f64, at: &Point) -> f64 {
    MEETING * size + 64.0 * f64::EPSILON * at.iter().fold(0.0_f64, |most, x| most.max(x.abs()))
}

/// How far the farthest of `points` is from the first of `near`.
fn distance_beyond(points: &[Point], near: &[Point]) -> f64 {
    points.iter().map(|point| distance(point, &near[0])).fold(0.0, f64::max)
}

/// The four sides, traversed counterclockwise in the plane of the variables; `None` where one is undefined.
fn sides_of(graph: &Graph, patch: &Patch, coefficient: i64, bindings: &Bindings) -> Option<Vec<Side>> {
    let multiplicity = coefficient * i64::from(patch.orientation);
    let name = |index: usize| graph.symbol_name(patch.variables[index]).to_owned();
    let map = Rc::new(PatchMap::new(graph, patch, bindings)?);
    let fars: &[f64] = if map.is_finite() { &FAR[..1] } else { &FAR };
    fars.iter().find_map(|&far| {
        let side = |label: String, coefficient: i64, along: usize, upper: bool| {
            let curve = Curve { map: Rc::clone(&map), far, along, upper };
            let points = curve.points(&(0..SAMPLES).map(share).collect::<Vec<f64>>());
            let defined = points.iter().flatten().all(|x| x.is_finite());
            let at_infinity = map.ends[1 - along][usize::from(upper)] == End::Infinite;
            defined.then(|| Side { patch: patch.name.clone(), label, coefficient, curve, points, at_infinity })
        };
        [
            side(format!("the lower end of {}", name(1)), multiplicity, 0, false),
            side(format!("the upper end of {}", name(0)), multiplicity, 1, true),
            side(format!("the upper end of {}", name(1)), -multiplicity, 0, true),
            side(format!("the lower end of {}", name(0)), -multiplicity, 1, false),
        ]
        .into_iter()
        .collect()
    })
}

fn share(i: usize) -> f64 {
    i as f64 / (SAMPLES - 1) as f64
}

/// An end of an interval: an output of the kernel, or an infinity.
#[derive(Clone, Copy, PartialEq)]
enum End {
    Output(usize),
    Infinite,
}

/// Position and limits of a patch, compiled.
struct PatchMap {
    kernel: Kernel,
    parameters: Vec<f64>,
    /// Lower and upper end of each variable.
    ends: [[End; 2]; 2],
}

impl PatchMap {
    fn new(graph: &Graph, patch: &Patch, bindings: &Bindings) -> Option<Self> {
        let mut outputs = patch.position.to_vec();
        let ends = [0, 1].map(|index| {
            let interval = &patch.intervals[index];
            [interval.lower, interval.upper].map(|bound| match bound {
                Bound::Finite(formula) => {
                    outputs.push(formula);
                    End::Output(outputs.len() - 1)
                }
                Bound::MinusInfinity | Bound::PlusInfinity => End::Infinite,
            })
        });
        let parameters: Vec<SymbolId> =
            graph.symbols_of(&outputs).into_iter().filter(|symbol| !patch.variables.contains(symbol)).collect();
        let program = Program::new(graph, &outputs, patch.variables, &parameters).ok()?;
        let values = parameters.iter().map(|&symbol| bindings.value(symbol)).collect();
        Some(Self { kernel: Kernel::interpreted(program), parameters: values, ends })
    }

    fn is_finite(&self) -> bool {
        self.ends.iter().flatten().all(|end| *end != End::Infinite)
    }

    /// Positions at fractions of the two intervals; `far` stands for an infinite end.
    fn positions(&self, shares: &[[f64; 2]], far: f64) -> Vec<Point> {
        let count = shares.len();
        let mut out = vec![0.0; count * self.kernel.program().outputs().len()];
        let mut coordinates = [vec![0.0; count], vec![0.0; count]];
        // Twice: the second time an interval that depends on the other variable has its value.
        for _ in 0..2 {
            self.kernel.evaluate(&self.parameters, &coordinates[0], &coordinates[1], &mut out);
            for (index, coordinates) in coordinates.iter_mut().enumerate() {
                for (i, coordinate) in coordinates.iter_mut().enumerate() {
                    let value = |end: End, infinity: f64| match end {
                        End::Output(output) => out[output * count + i],
                        End::Infinite => infinity,
                    };
                    let [lower, upper] = self.ends[index];
                    let segment = Segment::new(value(lower, f64::NEG_INFINITY), value(upper, f64::INFINITY));
                    let at = match shares[i][index] {
                        share if share <= 0.0 => segment.from,
                        share if share >= 1.0 => segment.to,
                        share => point(segment, share),
                    };
                    let infinite = lower == End::Infinite || upper == End::Infinite;
                    *coordinate = if infinite { at.clamp(-far, far) } else { at };
                }
            }
        }
        self.kernel.evaluate(&self.parameters, &coordinates[0], &coordinates[1], &mut out);
        (0..count).map(|i| [out[i], out[count + i], out[2 * count + i]]).collect()
    }
}

/// A side as a curve.
#[derive(Clone)]
struct Curve {
    map: Rc<PatchMap>,
    far: f64,
    /// The variable that runs along it.
    along: usize,
    /// Whether the other one is at its upper end.
    upper: bool,
}

impl Curve {
    fn points(&self, shares: &[f64]) -> Vec<Point> {
        let end = if self.upper { 1.0 } else { 0.0 };
        let shares: Vec<[f64; 2]> =
            shares.iter().map(|&share| if self.along == 0 { [share, end] } else { [end, share] }).collect();
        self.map.positions(&shares, self.far)
    }
}

/// The corners of the box around points.
fn corners<'a>(points: impl Iterator<Item = &'a Point>) -> [Point; 2] {
    let (mut low, mut high) = ([f64::INFINITY; 3], [f64::NEG_INFINITY; 3]);
    for point in points {
        for axis in 0..3 {
            low[axis] = low[axis].min(point[axis]);
            high[axis] = high[axis].max(point[axis]);
        }
    }
    [low, high]
}

/// The longest edge of the box around points.
fn extent<'a>(points: impl Iterator<Item = &'a Point>) -> f64 {
    let [low, high] = corners(points);
    (0..3).map(|axis| high[axis] - low[axis]).fold(0.0, f64::max)
}

/// How far two sides are from covering each other, and whether they are traversed in the same sense; `None` where they are
/// far apart.
fn separation(a: &Side, b: &Side, size: f64) -> Option<Separation> {
    // Between samples a curve is known up to its sagitta only; both ends of a chord allow for that.
    let sagitta =
        |points: &[Point]| points.windows(3).map(|w| distance_to_segment(&w[1], &w[0], &w[2])).fold(0.0, f64::max);
    let near = GAP * size + sagitta(&a.points).max(sagitta(&b.points));
    let boxes = [a, b].map(|side| corners(side.points.iter()));
    if (0..2).any(|end| (0..3).any(|axis| (boxes[0][end][axis] - boxes[1][end][axis]).abs() > near)) {
        return None;
    }
    let covered = |from: &[Point], onto: &[Point]| {
        from.iter().all(|point| onto.windows(2).any(|w| distance_to_segment(point, &w[0], &w[1]) <= near))
    };
    if !covered(&a.points, &b.points) || !covered(&b.points, &a.points) {
        return None;
    }
    let (mut distance, mut at) = farthest(&a.points, b, size);
    let other = farthest(&b.points, a, size);
    if other.0 > distance {
        (distance, at) = other;
    }
    // The sense is what most neighbouring samples say; a jump over the seam of a closed side is a minority.
    let steps: i64 = [SAMPLES / 7, SAMPLES / 3, SAMPLES / 2, 2 * SAMPLES / 3]
        .iter()
        .map(|&i| {
            let step = nearest(&a.points[i + 3], &b.points) as i64 - nearest(&a.points[i], &b.points) as i64;
            if step.unsigned_abs() as usize > SAMPLES / 2 { -step.signum() } else { step.signum() }
        })
        .sum();
    Some(Separation { distance, at, same_sense: steps > 0 })
}

/// The sample with the largest distance from a side, and that distance.
fn farthest(samples: &[Point], side: &Side, size: f64) -> (f64, Point) {
    let mut distances = Vec::with_capacity(samples.len());
    let mut searched = Vec::new();
    for (i, sample) in samples.iter().enumerate() {
        let closest = nearest(sample, &side.points);
        let known = distance(sample, &side.points[closest]);
        distances.push(known);
        if known > 0.01 * tolerance(size, sample) {
            // A closed side has its seam at both ends.
            let seam = match closest {
                0 => Some(SAMPLES - 1),
                last if last == SAMPLES - 1 => Some(0),
                _ => None,
            };
            searched.extend([Some(closest), seam].into_iter().flatten().map(|closest| (i, closest)));
        }
    }
    for (&(i, _), found) in searched.iter().zip(refined(samples, &searched, side)) {
        distances[i] = f64::min(distances[i], found);
    }
    let worst = (0..samples.len()).max_by(|&i, &j| distances[i].total_cmp(&distances[j])).unwrap_or(0);
    (distances[worst], samples[worst])
}

/// Distances of samples from a side beside one of its own samples each: golden-section search, all at once.
fn refined(samples: &[Point], searched: &[(usize, usize)], side: &Side) -> Vec<f64> {
    let ratio = 0.5 * (5f64.sqrt() - 1.0);
    let last = SAMPLES - 1;
    let mut low: Vec<f64> = searched.iter().map(|&(_, near)| share(near.saturating_sub(1))).collect();
    let mut high: Vec<f64> = searched.iter().map(|&(_, near)| share((near + 1).min(last))).collect();
    let mut best = vec![f64::INFINITY; searched.len()];
    if searched.is_empty() {
        return best;
    }
    let distances = |shares: &[f64]| -> Vec<f64> {
        let points = side.curve.points(shares);
        searched.iter().zip(&points).map(|(&(i, _), point)| distance(&samples[i], point)).collect()
    };
    for _ in 0..REFINEMENTS {
        let left: Vec<f64> = low.iter().zip(&high).map(|(low, high)| high - ratio * (high - low)).collect();
        let right: Vec<f64> = low.iter().zip(&high).map(|(low, high)| low + ratio * (high - low)).collect();
        let (at_left, at_right) = (distances(&left), distances(&right));
        for k in 0..searched.len() {
            best[k] = best[k].min(at_left[k]).min(at_right[k]);
            if at_left[k] < at_right[k] {
                high[k] = right[k];
            } else {
                low[k] = left[k];
            }
        }
    }
    best
}

fn nearest(point: &Point, points: &[Point]) -> usize {
    (0..points.len()).min_by(|&i, &j| distance(point, &points[i]).total_cmp(&distance(point, &points[j]))).unwrap_or(0)
}

fn distance(a: &Point, b: &Point) -> f64 {
    (0..3).map(|axis| (a[axis] - b[axis]).powi(2)).sum::<f64>().sqrt()
}

fn distance_to_segment(point: &Point, from: &Point, to: &Point) -> f64 {
    let along: Point = std::array::from_fn(|axis| to[axis] - from[axis]);
    let offset: Point = std::array::from_fn(|axis| point[axis] - from[axis]);
    let length = along.iter().map(|x| x * x).sum::<f64>();
    let share = if length > 0.0 {
        (along.iter().zip(&offset).map(|(a, b)| a * b).sum::<f64>() / length).clamp(0.0, 1.0)
    } else {
        0.0
    };
    distance(point, &std::array::from_fn(|axis| from[axis] + share * along[axis]))
}
