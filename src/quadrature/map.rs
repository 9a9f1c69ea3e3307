//! Changes of variable that make an integrand smooth up to the ends of its interval.
//!
//! A finite interval is mapped by x = from + (to - from) I_t(p, q), the regularized incomplete beta function with integer
//! orders p and q: near an end it behaves like t^p (or (1-t)^q), which turns (x - from)^alpha dx into t^(p(alpha+1)-1) dt.
//! Order 1 at both ends is the plain affine map. An infinite end uses the algebraic map x = t/(1-t), after which the same
//! orders apply to t.

/// An interval of the line; ends may be infinite.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Segment {
    /// Lower end.
    pub from: f64,
    /// Upper end.
    pub to: f64,
}

impl Segment {
    /// The interval between two ends.
    pub fn new(from: f64, to: f64) -> Self {
        Self { from, to }
    }
}

/// Largest order of a map.
pub(super) const MAXIMUM_ORDER: u8 = 6;

/// Relative distance from an end below which nodes are not placed by refinement.
const RESOLUTION: f64 = 256.0 * f64::EPSILON;

/// A change of variable from t in (0, 1) to a segment.
#[derive(Clone, Debug)]
pub(super) struct Map {
    segment: Segment,
    /// Unit of length for an infinite segment.
    scale: f64,
    orders: (u8, u8),
    /// 1/B(p, q) of the beta function.
    density_factor: f64,
}

impl Map {
    /// The map onto `segment` with the given orders at its ends (1 to [`MAXIMUM_ORDER`]).
    pub(super) fn new(segment: Segment, orders: (u8, u8)) -> Self {
        let (p, q) = orders;
        let factorial = |n: u8| (1..=u64::from(n)).product::<u64>() as f64;
        let density_factor = factorial(p + q - 1) / (factorial(p - 1) * factorial(q - 1));
        let finite_end = [segment.from, segment.to].into_iter().find(|end| end.is_finite()).unwrap_or(0.0);
        let scale = if finite_end == 0.0 { 1.0 } else { finite_end.abs() };
        Self { segment, scale, orders, density_factor }
    }

    /// The point at `t` and the derivative of the map there.
    pub(super) fn at(&self, t: f64) -> (f64, f64) {
        let (fraction, complement, slope) = self.stretch(t);
        let Segment { from, to } = self.segment;
        match (from.is_finite(), to.is_finite()) {
            (true, true) => {
                let width = to - from;
                let x = if fraction <= 0.5 { from + width * fraction } else { to - width * complement };
                // Rounding must not put a node on an end, where the function may be infinite.
                let inside = if from.next_up() < to { x.clamp(from.next_up(), to.next_down()) } else { x };
                (inside, width * slope)
            }
            (true, false) => {
                (from + self.scale * fraction / complement, self.scale * slope / (complement * complement))
            }
            (false, true) => (to - self.scale * complement / fraction, self.scale * slope / (fraction * fraction)),
            (false, false) => {
                // x = s/(1 - s^2) with s = 2 fraction - 1; 1 - s^2 = 4 fraction complement
                let s = fraction - complement;
                let rest = 4.0 * fraction * complement;
                (self.scale * s / rest, self.scale * 2.0 * slope * (1.0 + s * s) / (rest * rest))
            }
        }
    }

    /// Whether the halves of a panel at an end still have nodes that doubles tell from the end: closer than that, the
    /// distance to the end is rounding, and a function that grows there would be sampled at the wrong place.
    pub(super) fn resolves(&self, from: f64, to: f64) -> bool {
        let Segment { from: lower, to: upper } = self.segment;
        let near = |end: f64, t: f64| !end.is_finite() || (self.at(t).0 - end).abs() > RESOLUTION * end.abs();
        let node = 1e-3 * (to - from);
        (from > 0.0 || near(lower, from + node)) && (to < 1.0 || near(upper, to - node))
    }

    /// I_t(p, q), 1 - I_t(p, q) and the derivative, each without cancellation.
    fn stretch(&self, t: f64) -> (f64, f64, f64) {
        let (p, q) = self.orders;
        let rest = 1.0 - t;
        if (p, q) == (1, 1) {
            return (t, rest, 1.0);
        }
        let slope = self.density_factor * t.powi(i32::from(p) - 1) * rest.powi(i32::from(q) - 1);
        (incomplete_beta(t, rest, p, q), incomplete_beta(rest, t, q, p), slope)
    }
}

/// I_x(p, q) = sum over j from p to p+q-1 of C(p+q-1, j) x^j y^(p+q-1-j) with y = 1 - x (DLMF 8.17.5).
fn incomplete_beta(x: f64, y: f64, p: u8, q: u8) -> f64 {
    let n = p + q - 1;
    let mut binomial = 1.0;
    let mut sum = 0.0;
    for j in 0..=n {
        if j >= p {
            sum += binomial * x.powi(i32::from(j)) * y.powi(i32::from(n - j));
        }
        binomial *= f64::from(n - j) / f64::from(j + 1);
    }
    sum
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn maps_are_monotone_and_integrate_the_length() {
        for p in 1..=MAXIMUM_ORDER {
            for q in 1..=MAXIMUM_ORDER {
                let map = Map::new(Segment::new(-1.0, 3.0), (p, q));
                let n = 4000;
                let mut length = 0.0;
                let mut last = -1.0;
                for i in 0..n {
                    let (x, slope) = map.at((f64::from(i) + 0.5) / f64::from(n));
                    assert!(x >= last && x <= 3.0);
                    last = x;
                    length += slope / f64::from(n);
                }
                assert!((length - 4.0).abs() < 1e-5, "orders {p}, {q}: {length}");
            }
        }
    }

    #[test]
    fn infinite_segments_have_consistent_slopes() {
        for segment in [
            Segment::new(2.0, f64::INFINITY),
            Segment::new(f64::NEG_INFINITY, -3.0),
            Segment::new(f64::NEG_INFINITY, f64::INFINITY),
        ] {
            let map = Map::new(segment, (1, 1));
            for t in [0.1, 0.3, 0.7, 0.9] {
                let h = 1e-6;
                let difference = (map.at(t + h).0 - map.at(t - h).0) / (2.0 * h);
                let slope = map.at(t).1;
                assert!((difference - slope).abs() < 1e-6 * slope, "{segment:?} at {t}");
            }
        }
    }
}
