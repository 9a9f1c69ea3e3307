//! Sides of patches: which of them meet, so that an open or one-sided chain under a flux or a volume is noticed.
//!
//! Sides are compared numerically: two sides meet if samples of one lie on the other and the other way round, each within
//! rounding of its nearest point. A side at an infinite end is no boundary. A side
//! that collapses to a point has no boundary. A chain is closed when the sides cancel: each meets another with opposite
//! sense. It is one-sided where two sides of one patch meet with equal sense.

use super::run::Run;
use crate::expression::{ExpressionId, Graph, SymbolId, evaluate};
use crate::language::{Bindings, Bound, FunctionalId, FunctionalKind, Patch};

type Point = [f64; 3];

/// Samples along one side.
const SAMPLES: usize = 129;

/// Distance, relative to the size of the chain, within which two sides are taken to meet.
const MEETING: f64 = 1e-7;

/// Samples whose nearest point on the other side is searched for.
const SEARCHED: usize = 17;

/// Steps of that search; each leaves 0.62 of the interval.
const SEARCH_STEPS: usize = 80;

/// Where along an infinite interval the last sample of a side lies, as a part of the mapped length.
const FAR: f64 = 0.999;

struct Side<'a> {
    patch: String,
    label: String,
    /// Multiplicity with the sense of the boundary: positive when traversed with the surface on the left.
    coefficient: i64,
    points: Vec<Point>,
    /// The point at a fraction of the side.
    at: Box<dyn Fn(f64) -> Point + 'a>,
}

/// Warnings for a flux or a volume through a chain that is open or one-sided.
pub(super) fn chain_warnings(run: &Run<'_>, id: FunctionalId) -> Vec<String> {
    let functional = &run.functionals[id.0];
    if !matches!(functional.kind, FunctionalKind::Flux(_) | FunctionalKind::Volume) {
        return Vec::new();
    }
    let mut sides = Vec::new();
    for &(coefficient, patch) in &functional.chain.terms {
        let patch = &run.model.patches[patch.0];
        if patch.trim.is_some() {
            return vec![format!("{}: `{}` is trimmed, so its edge is not checked", functional.text, patch.name)];
        }
        sides.extend(sides_of(&run.graph, patch, coefficient, &run.bindings));
    }
    let size = extent(sides.iter().flat_map(|side| &side.points));
    sides.retain(|side| extent(side.points.iter()) > MEETING * size);
    let mut warnings = Vec::new();
    let mut open: Vec<String> = Vec::new();
    let mut left: Vec<i64> = sides.iter().map(|side| side.coefficient).collect();
    for a in 0..sides.len() {
        for b in a + 1..sides.len() {
            if left[a] == 0 || left[b] == 0 {
                continue;
            }
            let Some(same_sense) = meeting(&sides[a], &sides[b], MEETING * size) else { continue };
            let sense = if same_sense { 1 } else { -1 };
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
        if left[a] != 0 {
            open.push(format!("`{}` at {}", sides[a].patch, sides[a].label));
        }
    }
    if !open.is_empty() {
        let shown = open.iter().take(3).cloned().collect::<Vec<_>>().join(", ");
        let what = match functional.kind {
            FunctionalKind::Volume => "the volume of an open surface depends on where the origin is",
            _ => "the flux is through an open surface",
        };
        warnings.push(format!("{}: the surface is open ({shown}): {what}", functional.text));
    }
    warnings
}

/// The sides that are not at infinity, traversed counterclockwise in the plane of the variables.
fn sides_of<'a>(graph: &'a Graph, patch: &'a Patch, coefficient: i64, bindings: &'a Bindings) -> Vec<Side<'a>> {
    let multiplicity = coefficient * i64::from(patch.orientation);
    let name = |index: usize| graph.symbol_name(patch.variables[index]).to_owned();
    let side = |end: &str, coefficient: i64, along: usize, upper: bool| {
        let across = &patch.intervals[1 - along];
        let bound = if upper { across.upper } else { across.lower };
        if !matches!(bound, Bound::Finite(_)) {
            return None;
        }
        let at = move |share: f64| {
            let mut shares = [share; 2];
            shares[1 - along] = if upper { 1.0 } else { 0.0 };
            position(graph, patch, shares, bindings)
        };
        let points = (0..SAMPLES).map(|i| at(i as f64 / (SAMPLES - 1) as f64)).collect();
        let label = format!("the {end} end of {}", name(1 - along));
        Some(Side { patch: patch.name.clone(), label, coefficient, points, at: Box::new(at) })
    };
    [
        side("lower", multiplicity, 0, false),
        side("upper", multiplicity, 1, true),
        side("upper", -multiplicity, 0, true),
        side("lower", -multiplicity, 1, false),
    ]
    .into_iter()
    .flatten()
    .collect()
}

/// The position at fractions of the two intervals.
fn position(graph: &Graph, patch: &Patch, shares: [f64; 2], bindings: &Bindings) -> Point {
    let mut coordinates = [0.0; 2];
    let value = |formulas: &[ExpressionId], coordinates: [f64; 2]| {
        evaluate(graph, formulas, |symbol: SymbolId| match patch.variables.iter().position(|&v| v == symbol) {
            Some(index) => coordinates[index],
            None => bindings.value(symbol),
        })
    };
    // Twice: the second time an interval that depends on the other variable has its value.
    for _ in 0..2 {
        for index in 0..2 {
            let interval = &patch.intervals[index];
            let end = |bound: Bound| match bound {
                Bound::Finite(formula) => value(&[formula], coordinates)[0],
                Bound::MinusInfinity => f64::NEG_INFINITY,
                Bound::PlusInfinity => f64::INFINITY,
            };
            coordinates[index] = between(end(interval.lower), end(interval.upper), shares[index]);
        }
    }
    let position = value(&patch.position, coordinates);
    [position[0], position[1], position[2]]
}

/// The number at a fraction of an interval; infinite intervals are mapped to finite ones and end far out.
fn between(lower: f64, upper: f64, share: f64) -> f64 {
    let far = share.min(FAR);
    match (lower.is_finite(), upper.is_finite()) {
        (true, true) if share >= 1.0 => upper,
        (true, true) => lower + share * (upper - lower),
        (true, false) => lower + far / (1.0 - far),
        (false, true) => upper - (1.0 - share).min(FAR) / (1.0 - (1.0 - share).min(FAR)),
        (false, false) => {
            let t = (2.0 * share - 1.0).clamp(-FAR, FAR);
            t / (1.0 - t * t)
        }
    }
}

fn extent<'a>(points: impl Iterator<Item = &'a Point>) -> f64 {
    let (mut low, mut high) = ([f64::INFINITY; 3], [f64::NEG_INFINITY; 3]);
    for point in points {
        for axis in 0..3 {
            low[axis] = low[axis].min(point[axis]);
            high[axis] = high[axis].max(point[axis]);
        }
    }
    (0..3).map(|axis| high[axis] - low[axis]).fold(0.0, f64::max)
}

/// Whether two curves cover each other, and if so whether they are traversed in the same sense.
fn meeting(first: &Side<'_>, second: &Side<'_>, tolerance: f64) -> Option<bool> {
    let (a, b) = (&first.points[..], &second.points[..]);
    // Between samples a curve is known up to its sagitta only; this looks whether a closer search is worth while.
    let sagitta =
        |points: &[Point]| points.windows(3).map(|w| distance_to_segment(&w[1], &w[0], &w[2])).fold(0.0, f64::max);
    let near = tolerance + sagitta(a).max(sagitta(b));
    let covered = |from: &[Point], onto: &[Point]| {
        from.iter().all(|point| onto.windows(2).any(|w| distance_to_segment(point, &w[0], &w[1]) <= near))
    };
    if !covered(a, b) || !covered(b, a) || !lies_on(a, second, tolerance) || !lies_on(b, first, tolerance) {
        return None;
    }
    let nearest = |point: &Point| {
        (0..b.len()).min_by(|&i, &j| distance(point, &b[i]).total_cmp(&distance(point, &b[j]))).unwrap_or(0)
    };
    // The sense is what most neighbouring samples say; a jump over the seam of a closed side is a minority.
    let steps: i64 = [a.len() / 7, a.len() / 3, a.len() / 2, 2 * a.len() / 3]
        .iter()
        .map(|&i| {
            let step = nearest(&a[i + 3]) as i64 - nearest(&a[i]) as i64;
            if step.unsigned_abs() as usize > b.len() / 2 { -step.signum() } else { step.signum() }
        })
        .sum();
    Some(steps > 0)
}

/// Whether samples of a curve lie on a side, each found by a golden-section search around its nearest sample there.
fn lies_on(points: &[Point], side: &Side<'_>, tolerance: f64) -> bool {
    let last = (side.points.len() - 1) as f64;
    let step = (points.len() - 1) / (SEARCHED - 1);
    points.iter().step_by(step.max(1)).all(|point| {
        let nearest = (0..side.points.len())
            .min_by(|&i, &j| distance(point, &side.points[i]).total_cmp(&distance(point, &side.points[j])))
            .unwrap_or(0) as f64;
        let away = |share: f64| distance(point, &(side.at)(share));
        let (mut low, mut high) = ((nearest - 1.0).max(0.0) / last, (nearest + 1.0).min(last) / last);
        for end in [low, high, nearest / last] {
            if away(end) <= tolerance {
                return true;
            }
        }
        const GOLDEN: f64 = 0.618_033_988_749_894_9;
        for _ in 0..SEARCH_STEPS {
            let (left, right) = (high - GOLDEN * (high - low), low + GOLDEN * (high - low));
            if away(left) <= away(right) {
                high = right;
            } else {
                low = left;
            }
        }
        away(0.5 * (low + high)) <= tolerance
    })
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
