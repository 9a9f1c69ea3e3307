//! Exact rational numbers with a bound on their size.
//!
//! Numbers of a sheet stay exact until evaluation: `0.1` is one tenth. An operation whose result would need more than
//! [`MAXIMUM_BITS`] bits is not carried out (it returns `None`), so that `9^9^9` cannot exhaust memory.

use dashu_base::{Abs, BitTest, Sign, UnsignedAbs};
use dashu_int::{IBig, UBig};
use dashu_ratio::RBig;
use std::cmp::Ordering;
use std::fmt;

/// Largest number of bits in a numerator or a denominator.
pub const MAXIMUM_BITS: usize = 4096;

/// Largest power of ten that [`MAXIMUM_BITS`] bits can hold.
const MAXIMUM_DECIMAL_EXPONENT: i64 = 1233;

/// An exact rational number, numerator and denominator at most [`MAXIMUM_BITS`] bits.
#[derive(Clone, PartialEq, Eq, Hash, Debug)]
pub struct Exact(RBig);

impl Exact {
    /// The number 0.
    pub fn zero() -> Self {
        Self(RBig::ZERO)
    }

    /// The number 1.
    pub fn one() -> Self {
        Self(RBig::ONE)
    }

    /// The fraction `numerator / denominator`; `None` for a zero denominator.
    pub fn fraction(numerator: i64, denominator: i64) -> Option<Self> {
        if denominator == 0 {
            return None;
        }
        Some(Self(RBig::from_parts_signed(IBig::from(numerator), IBig::from(denominator))))
    }

    /// Reads an unsigned decimal number such as `12`, `0.5`, `.5`, `3e-9` exactly. `None` if it is malformed or
    /// larger than the bound.
    pub fn parse_decimal(text: &str) -> Option<Self> {
        let (mantissa, exponent) = match text.find(['e', 'E']) {
            Some(at) => (&text[..at], text[at + 1..].parse::<i64>().ok()?),
            None => (text, 0),
        };
        let (whole, decimals) = mantissa.split_once('.').unwrap_or((mantissa, ""));
        let digits: String = [whole, decimals].concat();
        if digits.is_empty() || digits.len() > 1024 || !digits.bytes().all(|b| b.is_ascii_digit()) {
            return None;
        }
        let shift = exponent.checked_sub(decimals.len() as i64)?;
        let unscaled = UBig::from_str_radix(&digits, 10).ok()?;
        if unscaled == UBig::ZERO {
            return Some(Self::zero());
        }
        if shift.abs() > MAXIMUM_DECIMAL_EXPONENT {
            return None;
        }
        let power = UBig::from(10u8).pow(shift.unsigned_abs() as usize);
        Self::bounded(if shift >= 0 {
            RBig::from_parts(IBig::from(unscaled * power), UBig::ONE)
        } else {
            RBig::from_parts(IBig::from(unscaled), power)
        })
    }

    /// The exact value of a finite double; `None` for NaN, infinities and values outside the bound.
    pub fn from_f64(value: f64) -> Option<Self> {
        Self::bounded(RBig::try_from(value).ok()?)
    }

    /// The nearest double (ties to even).
    pub fn to_f64(&self) -> f64 {
        self.0.to_f64().value()
    }

    /// The value as a small integer, if it is one.
    pub fn to_i64(&self) -> Option<i64> {
        if self.is_integer() { i64::try_from(self.0.numerator()).ok() } else { None }
    }

    /// Numerator and denominator as small integers, if both fit.
    pub fn to_fraction(&self) -> Option<(i64, i64)> {
        Some((i64::try_from(self.0.numerator()).ok()?, i64::try_from(self.0.denominator()).ok()?))
    }

    /// Whether the denominator is 1.
    pub fn is_integer(&self) -> bool {
        *self.0.denominator() == UBig::ONE
    }

    /// Whether the number is 0.
    pub fn is_zero(&self) -> bool {
        self.0.is_zero()
    }

    /// Whether the number is 1.
    pub fn is_one(&self) -> bool {
        self.0.is_one()
    }

    /// Whether the number is below 0.
    pub fn is_negative(&self) -> bool {
        self.0.sign() == Sign::Negative && !self.0.is_zero()
    }

    /// -1, 0 or 1.
    pub fn signum(&self) -> i64 {
        if self.is_zero() {
            0
        } else if self.is_negative() {
            -1
        } else {
            1
        }
    }

    /// A general-purpose rational number within the bound.
    pub(crate) fn from_rational(value: RBig) -> Option<Self> {
        Self::bounded(value)
    }

    /// The number as a general-purpose rational number.
    pub(crate) fn as_rational(&self) -> &RBig {
        &self.0
    }

    /// `-self`.
    pub fn negate(&self) -> Self {
        Self(-self.0.clone())
    }

    /// `|self|`.
    pub fn magnitude(&self) -> Self {
        Self(self.0.clone().abs())
    }

    /// `self + other`, `None` beyond the bound.
    pub fn add(&self, other: &Self) -> Option<Self> {
        Self::bounded(&self.0 + &other.0)
    }

    /// `self - other`, `None` beyond the bound.
    pub fn subtract(&self, other: &Self) -> Option<Self> {
        Self::bounded(&self.0 - &other.0)
    }

    /// `self * other`, `None` beyond the bound.
    pub fn multiply(&self, other: &Self) -> Option<Self> {
        Self::bounded(&self.0 * &other.0)
    }

    /// `self / other`, `None` beyond the bound or for a zero divisor.
    pub fn divide(&self, other: &Self) -> Option<Self> {
        if other.is_zero() { None } else { Self::bounded(&self.0 / &other.0) }
    }

    /// `self ^ exponent` for an integer exponent, `None` beyond the bound and for a zero base with a negative exponent.
    pub fn power(&self, exponent: i64) -> Option<Self> {
        if self.is_zero() && exponent < 0 {
            return None;
        }
        let trivial = self.is_zero() || self.magnitude().is_one();
        if trivial {
            let odd = exponent % 2 != 0;
            return Some(match (self.is_zero(), self.is_negative() && odd) {
                (true, _) if exponent == 0 => Self::one(),
                (true, _) => Self::zero(),
                (false, true) => Self::one().negate(),
                (false, false) => Self::one(),
            });
        }
        let bits = self.bits() as u64;
        if bits.saturating_mul(exponent.unsigned_abs()) > 2 * MAXIMUM_BITS as u64 {
            return None;
        }
        Self::bounded(self.0.pow(isize::try_from(exponent).ok()?))
    }

    /// The exact square root, if the number is the square of a rational.
    pub fn square_root(&self) -> Option<Self> {
        use dashu_base::SquareRoot;
        if self.is_negative() {
            return None;
        }
        let numerator = UBig::try_from(self.0.numerator().clone()).ok()?;
        let denominator = self.0.denominator().clone();
        let (top, bottom) = (numerator.sqrt(), denominator.sqrt());
        if &top * &top == numerator && &bottom * &bottom == denominator {
            Some(Self(RBig::from_parts(IBig::from(top), bottom)))
        } else {
            None
        }
    }

    fn bits(&self) -> usize {
        self.0.numerator().bit_len().max(self.0.denominator().bit_len())
    }

    fn bounded(value: RBig) -> Option<Self> {
        let number = Self(value);
        if number.bits() <= MAXIMUM_BITS { Some(number) } else { None }
    }

    /// The terminating decimal expansion, if there is one with at most `places` places.
    fn terminating_decimal(&self, places: usize) -> Option<String> {
        let scale = UBig::from(10u8).pow(places);
        if &scale % self.0.denominator() != UBig::ZERO {
            return None;
        }
        let scaled = self.0.numerator().clone().unsigned_abs() * (&scale / self.0.denominator());
        let digits = scaled.to_string();
        let digits = format!("{digits:0>width$}", width = places + 1);
        let (whole, decimals) = digits.split_at(digits.len() - places);
        let decimals = decimals.trim_end_matches('0');
        let sign = if self.is_negative() { "-" } else { "" };
        Some(if decimals.is_empty() { format!("{sign}{whole}") } else { format!("{sign}{whole}.{decimals}") })
    }
}

impl PartialOrd for Exact {
    fn partial_cmp(&self, other: &Self) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl Ord for Exact {
    fn cmp(&self, other: &Self) -> Ordering {
        self.0.cmp(&other.0)
    }
}

impl fmt::Display for Exact {
    /// In the syntax of a sheet: an integer, a small fraction `p/q`, a terminating decimal, or the fraction.
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let small_fraction = *self.0.denominator() <= UBig::from(16u8);
        if !small_fraction && let Some(decimal) = self.terminating_decimal(24) {
            return f.write_str(&decimal);
        }
        if self.is_integer() {
            return write!(f, "{}", self.0.numerator());
        }
        write!(f, "{}/{}", self.0.numerator(), self.0.denominator())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn decimals_are_exact() {
        assert_eq!(Exact::parse_decimal("0.1"), Exact::fraction(1, 10));
        assert_eq!(Exact::parse_decimal(".5e-3"), Exact::fraction(1, 2000));
        assert_eq!(Exact::parse_decimal("3e2"), Exact::fraction(300, 1));
        assert_eq!(Exact::parse_decimal("1e999999999999"), None);
        assert_eq!(Exact::parse_decimal("0e5000"), Some(Exact::zero()));
    }

    #[test]
    fn operations_stop_at_the_bound() {
        let nine = Exact::fraction(9, 1).unwrap();
        assert_eq!(nine.power(9 * 9 * 9 * 9 * 9), None);
        assert_eq!(Exact::fraction(-1, 1).unwrap().power(i64::MAX), Exact::fraction(-1, 1));
        assert_eq!(Exact::zero().power(-1), None);
        let mut value = Exact::fraction(3, 1).unwrap();
        for _ in 0..64 {
            match value.multiply(&value) {
                Some(next) => value = next,
                None => return,
            }
        }
        panic!("the bound was never reached");
    }

    #[test]
    fn square_roots_are_exact_or_absent() {
        assert_eq!(Exact::fraction(9, 4).unwrap().square_root(), Exact::fraction(3, 2));
        assert_eq!(Exact::fraction(2, 1).unwrap().square_root(), None);
    }

    #[test]
    fn numbers_print_as_a_sheet_writes_them() {
        let shown = |p, q| Exact::fraction(p, q).unwrap().to_string();
        assert_eq!(shown(-6, 2), "-3");
        assert_eq!(shown(1, 3), "1/3");
        assert_eq!(shown(3, 2), "3/2");
        assert_eq!(shown(7, 20), "0.35");
        assert_eq!(shown(1, 97), "1/97");
    }
}
