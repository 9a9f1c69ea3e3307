//! Small places where a formula may change its sign, found by interval arithmetic: what samples of a line can step over.

use crate::enclosure::{Interval, Ranges};
use crate::expression::{ExpressionId, Graph, SymbolId};
use crate::quadrature::Segment;
use rustc_hash::FxHashMap;

/// Boxes that are looked at for one formula.
const MOST_BOXES: usize = 6_000;

/// How often boxes are halved in both variables.
const MOST_LEVELS: u32 = 14;

/// Where a small place is looked at, as shares of its extent.
const SHARES: [f64; 5] = [0.1, 0.3, 0.5, 0.7, 0.9];

/// Outer values through the places where `formula` may be zero on the rectangle `outer` x `inner`, of those places that are
/// narrower than `width` in the outer variable. Places that hang together are one. The rest of the rectangle is proved to be
/// free of zeros; what is narrower still may be no zero at all.
pub(super) fn small_places(
    graph: &Graph,
    formula: ExpressionId,
    variables: [SymbolId; 2],
    [outer, inner]: [Segment; 2],
    width: f64,
    value_of: &dyn Fn(SymbolId) -> f64,
) -> Vec<f64> {
    let ranges = Ranges::new(graph, &[formula]);
    let part = |segment: Segment, place: u32, level: u32| {
        let at = |place: u32| segment.from + (segment.to - segment.from) * f64::from(place) / f64::from(1u32 << level);
        Interval::new(at(place), at(place + 1))
    };
    let may_vanish = |[i, j]: [u32; 2], level: u32| {
        let (u, v) = (part(outer, i, level), part(inner, j, level));
        let range_of = |symbol: SymbolId| match variables.iter().position(|&variable| variable == symbol) {
            Some(0) => u,
            Some(_) => v,
            None => Interval::point(value_of(symbol)),
        };
        ranges.evaluate(range_of)[0].range.contains(0.0)
    };
    let mut level = 0;
    let mut boxes = vec![[0u32, 0u32]];
    let mut looked_at = 0;
    while level < MOST_LEVELS && looked_at + 4 * boxes.len() <= MOST_BOXES {
        looked_at += 4 * boxes.len();
        level += 1;
        boxes = boxes
            .iter()
            .flat_map(|&[i, j]| [[2 * i, 2 * j], [2 * i + 1, 2 * j], [2 * i, 2 * j + 1], [2 * i + 1, 2 * j + 1]])
            .filter(|&place| may_vanish(place, level))
            .collect();
    }
    let mut samples = Vec::new();
    for [first, last] in extents(&boxes) {
        let (from, to) = (part(outer, first, level).lower(), part(outer, last, level).upper());
        if to - from < width {
            samples.extend(SHARES.map(|share| from + share * (to - from)));
        }
    }
    samples
}

/// First and last outer index of boxes that touch each other, for each such group.
fn extents(boxes: &[[u32; 2]]) -> Vec<[u32; 2]> {
    let mut left: FxHashMap<[u32; 2], bool> = boxes.iter().map(|&place| (place, false)).collect();
    let mut found = Vec::new();
    for &start in boxes {
        if std::mem::replace(left.get_mut(&start).expect("a box"), true) {
            continue;
        }
        let mut extent = [start[0], start[0]];
        let mut todo = vec![start];
        while let Some([i, j]) = todo.pop() {
            extent = [extent[0].min(i), extent[1].max(i)];
            for next in
                [i.wrapping_sub(1), i, i + 1].into_iter().flat_map(|i| [j.wrapping_sub(1), j, j + 1].map(|j| [i, j]))
            {
                if let Some(seen) = left.get_mut(&next).filter(|seen| !**seen) {
                    *seen = true;
                    todo.push(next);
                }
            }
        }
        found.push(extent);
    }
    found
}
