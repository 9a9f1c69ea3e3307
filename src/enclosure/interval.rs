//! Closed intervals of real numbers with outward rounding.
//!
//! An infinite end means that the interval is not bounded on that side; infinity itself is not a member. The empty set and
//! the entire line are intervals too. Operations return the smallest interval of doubles around the exact result or one
//! that is a place wider; exact results stay exact: [2, 2] + [3, 3] = [5, 5].

use super::image::{Defined, Image, Truth};
use super::rounding::{add_down, add_up, divide_down, divide_up, multiply_down, multiply_up, square_root_bounds};
use crate::expression::Exact;
use std::fmt;
use std::ops::{Add, Mul, Neg, Sub};

/// A closed set of real numbers between two doubles, perhaps unbounded, perhaps empty.
#[derive(Clone, Copy, PartialEq, Debug)]
pub struct Interval {
    // Of the empty set: plus infinity and minus infinity, which makes hulls plain minima and maxima.
    lower: f64,
    upper: f64,
}

impl Interval {
    /// No number at all.
    pub const EMPTY: Interval = Interval { lower: f64::INFINITY, upper: f64::NEG_INFINITY };
    /// All real numbers.
    pub const ENTIRE: Interval = Interval { lower: f64::NEG_INFINITY, upper: f64::INFINITY };
    /// The number 0.
    pub const ZERO: Interval = Interval { lower: 0.0, upper: 0.0 };
    /// The number 1.
    pub const ONE: Interval = Interval { lower: 1.0, upper: 1.0 };
    /// 0 and above.
    pub const NOT_NEGATIVE: Interval = Interval { lower: 0.0, upper: f64::INFINITY };
    /// From 0 to 1.
    pub const UNIT: Interval = Interval { lower: 0.0, upper: 1.0 };

    /// The numbers from `lower` to `upper`. Empty if there are none; the entire line if an end is NaN, because then
    /// nothing is known.
    pub fn new(lower: f64, upper: f64) -> Interval {
        if lower.is_nan() || upper.is_nan() {
            return Interval::ENTIRE;
        }
        if lower > upper || lower == f64::INFINITY || upper == f64::NEG_INFINITY {
            return Interval::EMPTY;
        }
        // A negative zero becomes the positive one.
        Interval { lower: lower + 0.0, upper: upper + 0.0 }
    }

    /// One number; the entire line for a NaN, empty for an infinity.
    pub fn point(x: f64) -> Interval {
        Interval::new(x, x)
    }

    /// The tightest interval around an exact number.
    pub fn from_exact(exact: &Exact) -> Interval {
        let nearest = exact.to_f64().clamp(f64::MIN, f64::MAX);
        let Some(value) = Exact::from_f64(nearest) else { return Interval::ENTIRE };
        let (mut lower, mut upper) = (nearest, nearest);
        if value < *exact {
            upper = nearest.next_up();
        } else if value > *exact {
            lower = nearest.next_down();
        }
        Interval::new(lower, upper)
    }

    /// The circle constant, 3.14159265358979311600 < pi < 3.14159265358979356009.
    pub fn pi() -> Interval {
        Interval::new(std::f64::consts::PI, std::f64::consts::PI.next_up())
    }

    /// Half the circle constant.
    pub fn half_pi() -> Interval {
        Interval::new(std::f64::consts::FRAC_PI_2, std::f64::consts::FRAC_PI_2.next_up())
    }

    /// The lower end; minus infinity if there is none, plus infinity for the empty set.
    pub fn lower(self) -> f64 {
        self.lower
    }

    /// The upper end; plus infinity if there is none, minus infinity for the empty set.
    pub fn upper(self) -> f64 {
        self.upper
    }

    /// Whether no number is a member.
    pub fn is_empty(self) -> bool {
        self.lower > self.upper
    }

    /// Whether every real number is a member.
    pub fn is_entire(self) -> bool {
        self == Interval::ENTIRE
    }

    /// Whether both ends are finite (the empty set is bounded too).
    pub fn is_bounded(self) -> bool {
        self.is_empty() || (self.lower.is_finite() && self.upper.is_finite())
    }

    /// Whether exactly one number is a member.
    pub fn is_thin(self) -> bool {
        self.lower == self.upper
    }

    /// Whether `x` is a member; a NaN or an infinity never is.
    pub fn contains(self, x: f64) -> bool {
        x.is_finite() && self.lower <= x && x <= self.upper
    }

    /// Whether every member of `self` is one of `other`.
    pub fn is_within(self, other: Interval) -> bool {
        self.is_empty() || (other.lower <= self.lower && self.upper <= other.upper)
    }

    /// Whether the interval has members and all are above 0.
    pub fn is_positive(self) -> bool {
        self.lower > 0.0 && !self.is_empty()
    }

    /// Whether the interval has members and all are below 0.
    pub fn is_negative(self) -> bool {
        self.upper < 0.0 && !self.is_empty()
    }

    /// `upper - lower`, rounded up; 0 for the empty set.
    pub fn width(self) -> f64 {
        if self.is_empty() { 0.0 } else { add_up(self.upper, -self.lower) }
    }

    /// A finite member near the middle; NaN for the empty set.
    pub fn midpoint(self) -> f64 {
        if self.is_empty() {
            return f64::NAN;
        }
        match (self.lower.is_finite(), self.upper.is_finite()) {
            (true, true) => (0.5 * self.lower + 0.5 * self.upper).clamp(self.lower, self.upper),
            (false, false) => 0.0,
            (true, false) => (2.0 * self.lower.max(1.0)).min(f64::MAX),
            (false, true) => -(-self).midpoint(),
        }
    }

    /// The largest absolute value of a member; 0 for the empty set.
    pub fn magnitude(self) -> f64 {
        if self.is_empty() { 0.0 } else { self.lower.abs().max(self.upper.abs()) }
    }

    /// The smallest interval that contains both.
    pub fn hull(self, other: Interval) -> Interval {
        Interval { lower: self.lower.min(other.lower), upper: self.upper.max(other.upper) }
    }

    /// The numbers that are members of both.
    pub fn intersection(self, other: Interval) -> Interval {
        Interval::new(self.lower.max(other.lower), self.upper.min(other.upper))
    }

    /// The absolute values of the members.
    pub fn abs(self) -> Interval {
        if self.is_empty() || self.lower >= 0.0 {
            self
        } else if self.upper <= 0.0 {
            -self
        } else {
            Interval::new(0.0, self.magnitude())
        }
    }

    /// The signs -1, 0, 1 of the members, as a hull.
    pub fn sign(self) -> Interval {
        if self.is_empty() {
            return self;
        }
        let sign = |x: f64| {
            if x > 0.0 {
                1.0
            } else if x < 0.0 {
                -1.0
            } else {
                0.0
            }
        };
        Interval::new(sign(self.lower), sign(self.upper))
    }

    /// The smaller of a member of each.
    pub fn min(self, other: Interval) -> Interval {
        if self.is_empty() || other.is_empty() {
            return Interval::EMPTY;
        }
        Interval::new(self.lower.min(other.lower), self.upper.min(other.upper))
    }

    /// The larger of a member of each.
    pub fn max(self, other: Interval) -> Interval {
        if self.is_empty() || other.is_empty() {
            return Interval::EMPTY;
        }
        Interval::new(self.lower.max(other.lower), self.upper.max(other.upper))
    }

    /// The squares of the members; tighter than `self * self`, which takes two members independently.
    pub fn square(self) -> Interval {
        if self.is_empty() {
            return self;
        }
        let size = self.abs();
        Interval::new(multiply_down(size.lower, size.lower), multiply_up(size.upper, size.upper))
    }

    /// The square roots of the members that are not negative.
    pub fn square_root(self) -> Interval {
        let inside = self.intersection(Interval::NOT_NEGATIVE);
        if inside.is_empty() {
            return inside;
        }
        Interval::new(square_root_bounds(inside.lower).0, square_root_bounds(inside.upper).1)
    }

    /// The quotients by the members of `divisor` that are not 0.
    pub fn divide(self, divisor: Interval) -> Image {
        if self.is_empty() || divisor.is_empty() || divisor == Interval::ZERO {
            return Image::NOWHERE;
        }
        if divisor.lower > 0.0 {
            return Image::everywhere(self.divide_by_positive(divisor));
        }
        if divisor.upper < 0.0 {
            return Image::everywhere((-self).divide_by_positive(-divisor));
        }
        let range = if divisor.lower == 0.0 {
            self.divide_by_positive(divisor)
        } else if divisor.upper == 0.0 {
            (-self).divide_by_positive(-divisor)
        } else if self == Interval::ZERO {
            Interval::ZERO
        } else {
            Interval::ENTIRE
        };
        Image::new(range, Defined::Partly)
    }

    /// The quotient where the divisor is positive, or 0 at its lower end and meant to be approached.
    fn divide_by_positive(self, divisor: Interval) -> Interval {
        let low = if self.lower >= 0.0 { divisor.upper } else { divisor.lower };
        let high = if self.upper >= 0.0 { divisor.lower } else { divisor.upper };
        Interval::new(divide_down(self.lower, low), divide_up(self.upper, high))
    }

    /// Whether `a < b` for members `a` of `self` and `b` of `other`: for all, for none, or for some.
    pub fn less(self, other: Interval) -> Truth {
        if self.is_empty() || other.is_empty() {
            Truth::Unknown
        } else if self.upper < other.lower {
            Truth::True
        } else if self.lower >= other.upper {
            Truth::False
        } else {
            Truth::Unknown
        }
    }

    /// Whether `a <= b` for members `a` of `self` and `b` of `other`: for all, for none, or for some.
    pub fn less_equal(self, other: Interval) -> Truth {
        other.less(self).opposite()
    }
}

impl Neg for Interval {
    type Output = Interval;
    fn neg(self) -> Interval {
        if self.is_empty() { self } else { Interval::new(-self.upper, -self.lower) }
    }
}

impl Add for Interval {
    type Output = Interval;
    fn add(self, other: Interval) -> Interval {
        if self.is_empty() || other.is_empty() {
            return Interval::EMPTY;
        }
        Interval::new(add_down(self.lower, other.lower), add_up(self.upper, other.upper))
    }
}

impl Sub for Interval {
    type Output = Interval;
    fn sub(self, other: Interval) -> Interval {
        self + -other
    }
}

impl Mul for Interval {
    type Output = Interval;
    /// The ends that give the least and the greatest product follow from the signs; only where both factors change
    /// sign there are two candidates for each.
    fn mul(self, other: Interval) -> Interval {
        if self.is_empty() || other.is_empty() {
            return Interval::EMPTY;
        }
        let (a, b, c, d) = (self.lower, self.upper, other.lower, other.upper);
        if a < 0.0 && b > 0.0 && c < 0.0 && d > 0.0 {
            let lower = multiply_down(a, d).min(multiply_down(b, c));
            let upper = multiply_up(a, c).max(multiply_up(b, d));
            return Interval::new(lower, upper);
        }
        let (low, high) = if a >= 0.0 {
            (if c >= 0.0 { (a, c) } else { (b, c) }, if d >= 0.0 { (b, d) } else { (a, d) })
        } else if b <= 0.0 {
            (if d >= 0.0 { (a, d) } else { (b, d) }, if c >= 0.0 { (b, c) } else { (a, c) })
        } else if c >= 0.0 {
            ((a, d), (b, d))
        } else {
            ((b, c), (a, c))
        };
        Interval::new(multiply_down(low.0, low.1), multiply_up(high.0, high.1))
    }
}

impl fmt::Display for Interval {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.is_empty() { f.write_str("empty") } else { write!(f, "[{}, {}]", self.lower, self.upper) }
    }
}
