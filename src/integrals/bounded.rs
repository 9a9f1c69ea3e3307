//! Numbers with an absolute error, for combining integrals: the error of a result covers the errors of its operands to
//! all orders, and rounding.

/// A number known to lie in [value - error, value + error].
#[derive(Clone, Copy, PartialEq, Debug)]
pub(super) struct Bounded {
    pub(super) value: f64,
    pub(super) error: f64,
}

impl Bounded {
    pub(super) fn exact(value: f64) -> Self {
        Self { value, error: 0.0 }
    }

    fn rounded(value: f64, error: f64) -> Self {
        Self { value, error: error + 2.0 * f64::EPSILON * value.abs() }
    }

    pub(super) fn add(self, other: Self) -> Self {
        Self::rounded(self.value + other.value, self.error + other.error)
    }

    pub(super) fn subtract(self, other: Self) -> Self {
        self.add(other.scale(-1.0))
    }

    pub(super) fn scale(self, factor: f64) -> Self {
        Self::rounded(self.value * factor, self.error * factor.abs())
    }

    pub(super) fn multiply(self, other: Self) -> Self {
        let error = self.error * other.value.abs() + other.error * self.value.abs() + self.error * other.error;
        Self::rounded(self.value * other.value, error)
    }

    /// The quotient; its error is infinite where the divisor may be zero.
    pub(super) fn divide(self, other: Self) -> Self {
        let quotient = self.value / other.value;
        let nearest_zero = other.value.abs() - other.error;
        let error =
            if nearest_zero > 0.0 { (self.error + quotient.abs() * other.error) / nearest_zero } else { f64::INFINITY };
        Self::rounded(quotient, error)
    }
}
