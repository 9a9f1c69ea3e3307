//! Roots of a function on an interval, found by sampling and bisection; used to split integrals at kinks.

use crate::quadrature::Segment;

/// Samples per interval at first; neighbours with one sign are searched for a pair of roots where the function dips
/// towards zero.
const SAMPLES: usize = 33;

/// How often the samples are doubled until two numbers of them show the same number of sign changes.
const DOUBLINGS: usize = 5;

/// Where a function changes its sign.
pub(super) struct SignChanges {
    /// The places, ascending.
    pub(super) at: Vec<f64>,
    /// Whether more samples showed no more of them; otherwise there may be others between these.
    pub(super) settled: bool,
}

/// Sign changes of `f` inside `segment`. `f` maps a batch of points to values; NaN counts as no sign.
pub(super) fn sign_changes(segment: Segment, f: &mut dyn FnMut(&[f64]) -> Vec<f64>) -> SignChanges {
    let ends = [inside(segment.from, segment, true), inside(segment.to, segment, false)];
    let mut sample = |count: usize| {
        let mut x = vec![ends[0]];
        x.extend((0..count).map(|i| point(segment, (i as f64 + 0.5) / count as f64)));
        x.push(ends[1]);
        let values = f(&x);
        (x, values)
    };
    let crossings = |values: &[f64]| values.windows(2).filter(|pair| pair[0] * pair[1] < 0.0).count();
    let (mut x, mut values) = sample(SAMPLES);
    let mut settled = false;
    for doubling in 1..=DOUBLINGS {
        let before = crossings(&values);
        (x, values) = sample(((SAMPLES - 1) << doubling) + 1);
        settled = crossings(&values) == before;
        if settled {
            break;
        }
    }
    // A sample that hits a root is moved a little, so that the sign on either side decides.
    for i in 1..x.len() - 1 {
        if values[i] == 0.0 {
            x[i] += 1e-5 * (x[i + 1] - x[i]);
            values[i] = f(&[x[i]])[0];
        }
    }
    let mut roots = Vec::new();
    for i in 0..x.len() - 1 {
        let (a, b) = (values[i], values[i + 1]);
        if a * b < 0.0 {
            roots.push(narrow(x[i], x[i + 1], a, f));
        } else if i > 0 && dips(values[i - 1], a, b) {
            roots.extend(pair_between([x[i - 1], x[i], x[i + 1]], a, f));
        }
    }
    roots.sort_by(f64::total_cmp);
    roots.dedup();
    SignChanges { at: roots, settled }
}

/// The point of a segment at a fraction of the way; infinite ends are compactified.
pub(super) fn point(segment: Segment, fraction: f64) -> f64 {
    let Segment { from, to } = segment;
    match (from.is_finite(), to.is_finite()) {
        (true, true) => from + (to - from) * fraction,
        (true, false) => from + fraction / (1.0 - fraction),
        (false, true) => to - (1.0 - fraction) / fraction,
        (false, false) => (2.0 * fraction - 1.0) / (4.0 * fraction * (1.0 - fraction)),
    }
}

/// An end, or a far point in place of an infinite one.
fn inside(end: f64, segment: Segment, lower: bool) -> f64 {
    if end.is_finite() { end } else { point(segment, if lower { 1e-9 } else { 1.0 - 1e-9 }) }
}

/// Whether the middle value is nearer to zero than both neighbours of the same sign.
fn dips(a: f64, b: f64, c: f64) -> bool {
    a * b > 0.0 && b * c > 0.0 && b.abs() <= a.abs() && b.abs() <= c.abs()
}

/// The two roots beside an extreme value that crosses zero, if it does: the lowest of some points and its neighbors, again
/// and again.
fn pair_between(x: [f64; 3], middle: f64, f: &mut dyn FnMut(&[f64]) -> Vec<f64>) -> Vec<f64> {
    let sign = middle.signum();
    let (mut low, mut high) = (x[0], x[2]);
    for _ in 0..12 {
        let step = (high - low) / PARTS as f64;
        let inner: Vec<f64> = (1..PARTS).map(|i| low + step * i as f64).collect();
        let values = f(&inner);
        let Some(lowest) = (0..inner.len()).min_by(|&i, &j| (values[i] * sign).total_cmp(&(values[j] * sign))) else {
            break;
        };
        let (at, value) = (inner[lowest], values[lowest]);
        if value * sign < 0.0 {
            let before = narrow(x[0], at, sign, f);
            let after = narrow(at, x[2], -sign, f);
            return vec![before, after];
        }
        (low, high) = (at - step, at + step);
    }
    Vec::new()
}

/// Points at which [`narrow`] looks at once: a batch costs little more than one point.
const PARTS: usize = 16;

/// The sign change between `low` and `high`, to the last place; `at_low` has the sign of the value at `low`.
fn narrow(mut low: f64, mut high: f64, at_low: f64, f: &mut dyn FnMut(&[f64]) -> Vec<f64>) -> f64 {
    for _ in 0..30 {
        let step = (high - low) / PARTS as f64;
        let x: Vec<f64> = (1..PARTS).map(|i| low + step * i as f64).filter(|&x| x > low && x < high).collect();
        if x.len() + 1 < PARTS {
            break;
        }
        let values = f(&x);
        let crossed = values.iter().position(|&value| value == 0.0 || value * at_low <= 0.0 || value.is_nan());
        match crossed {
            Some(i) if values[i] == 0.0 => return x[i],
            Some(0) => high = x[0],
            Some(i) => (low, high) = (x[i - 1], x[i]),
            None => low = x[PARTS - 2],
        }
    }
    bisect(low, high, at_low, f)
}

/// The same by halving, for functions where every point counts.
pub(super) fn bisect(mut low: f64, mut high: f64, at_low: f64, f: &mut dyn FnMut(&[f64]) -> Vec<f64>) -> f64 {
    for _ in 0..120 {
        let middle = 0.5 * (low + high);
        if middle <= low || middle >= high {
            break;
        }
        let value = f(&[middle])[0];
        if value == 0.0 {
            return middle;
        }
        if value * at_low > 0.0 {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn simple_and_paired_roots_are_found() {
        let mut cubic = |x: &[f64]| x.iter().map(|x| (x - 0.2) * (x - 0.5) * (x - 0.505)).collect();
        let roots = sign_changes(Segment::new(0.0, 1.0), &mut cubic).at;
        assert_eq!(roots.len(), 3);
        for (root, expected) in roots.iter().zip([0.2, 0.5, 0.505]) {
            assert!((root - expected).abs() < 1e-15);
        }
        let mut touching = |x: &[f64]| x.iter().map(|x| (x - 0.3) * (x - 0.3)).collect();
        assert!(sign_changes(Segment::new(0.0, 1.0), &mut touching).at.is_empty());
    }
}
