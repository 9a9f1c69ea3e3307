//! Numbers of about 31 digits, as unevaluated sums of two doubles.
//!
//! For intermediate results of special functions that cancel. The algorithms are the classical ones of Dekker (1971)
//! and Knuth in the form given by Joldes, Muller and Popescu, "Tight and rigorous error bounds for basic building blocks
//! of double-word arithmetic" (ACM TOMS 44, 2017); their relative errors are a few units of 2^-104.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// `high + low` with `|low|` at most half a unit in the last place of `high`.
#[derive(Clone, Copy, Debug)]
pub(super) struct Wide {
    high: f64,
    low: f64,
}

impl Wide {
    /// pi/2, its 33 digits split into two doubles.
    pub(super) const HALF_PI: Wide = Wide { high: std::f64::consts::FRAC_PI_2, low: 6.123233995736766e-17 };

    /// The nearest double.
    pub(super) fn to_f64(self) -> f64 {
        self.high
    }

    pub(super) fn square_root(self) -> Wide {
        if self.high <= 0.0 {
            return Wide::from(self.high.sqrt());
        }
        let root = self.high.sqrt();
        let rest = (-root).mul_add(root, self.high) + self.low;
        Wide::renormalized(root, rest / (2.0 * root))
    }

    /// `high + low` where `|high| >= |low|` or `high` is 0.
    fn renormalized(high: f64, low: f64) -> Wide {
        // Past the range of doubles the second part is inf - inf.
        if !high.is_finite() {
            return Wide::from(high);
        }
        let sum = high + low;
        Wide { high: sum, low: low - (sum - high) }
    }
}

impl From<f64> for Wide {
    fn from(high: f64) -> Wide {
        Wide { high, low: 0.0 }
    }
}

/// The rounded sum and its exact error.
fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let sum = a + b;
    let shadow = sum - a;
    (sum, (a - (sum - shadow)) + (b - shadow))
}

impl Add for Wide {
    type Output = Wide;
    fn add(self, other: Wide) -> Wide {
        let (sum, error) = two_sum(self.high, other.high);
        let (low_sum, low_error) = two_sum(self.low, other.low);
        let first = Wide::renormalized(sum, error + low_sum);
        Wide::renormalized(first.high, first.low + low_error)
    }
}

impl Neg for Wide {
    type Output = Wide;
    fn neg(self) -> Wide {
        Wide { high: -self.high, low: -self.low }
    }
}

impl Sub for Wide {
    type Output = Wide;
    fn sub(self, other: Wide) -> Wide {
        self + -other
    }
}

impl Mul for Wide {
    type Output = Wide;
    fn mul(self, other: Wide) -> Wide {
        let product = self.high * other.high;
        let error = self.high.mul_add(other.high, -product);
        Wide::renormalized(product, error + (self.high * other.low + self.low * other.high))
    }
}

impl Div for Wide {
    type Output = Wide;
    fn div(self, other: Wide) -> Wide {
        let quotient = self.high / other.high;
        let rest = self - other * Wide::from(quotient);
        Wide::renormalized(quotient, rest.high / other.high)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn identities_hold_to_thirty_digits() {
        let third = Wide::from(1.0) / Wide::from(3.0);
        let one = third + third + third;
        assert!(((one - Wide::from(1.0)).to_f64()).abs() < 1e-31);
        for x in [2.0, 0.7, 1e100, 3e-200] {
            let root = Wide::from(x).square_root();
            assert!(((root * root - Wide::from(x)).to_f64() / x).abs() < 1e-30, "{x}");
        }
    }

    #[test]
    fn overflow_is_an_infinity() {
        let huge = Wide::from(1e200);
        assert_eq!((huge * huge).to_f64(), f64::INFINITY);
        assert_eq!((-huge * huge).to_f64(), f64::NEG_INFINITY);
    }
}
