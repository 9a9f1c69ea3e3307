//! Powers of intervals.
//!
//! A power with an integer exponent is a product; so it is exact where the products are, and defined for negative
//! bases. Another power x^y is exp(y log x): over a box of positive bases y log x has its extreme values at corners, and
//! the values there come from `pxfm`, widened like the elementary functions. The meaning follows the sheet language:
//! 0^0 is undefined (a literal exponent 0 never reaches this stage), and a negative base needs an integer exponent.

use super::elementary::widened;
use super::image::{Defined, Image};
use super::interval::Interval;
use super::rounding::{multiply_down, multiply_up};
use crate::expression::Exact;

/// Places by which a power of `pxfm` is widened: four times the claimed error of half a place, and twice that, because
/// the function of two arguments can only be sampled thinly.
const PLACES: u32 = 4;

/// Up to this exponent products alone are as tight as a power of the library.
const FEW_FACTORS: u64 = 8;

/// `base ^ n`; for n = 0 the value is 1, undefined at base 0.
pub fn integer_power(base: Interval, n: i64) -> Image {
    let defined = match (base.contains(0.0), n <= 0) {
        _ if base.is_empty() => Defined::Nowhere,
        (true, true) if base.is_thin() => Defined::Nowhere,
        (true, true) => Defined::Partly,
        _ => Defined::Everywhere,
    };
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    let positive = positive_power(base, n.unsigned_abs());
    if n > 0 {
        return Image::new(positive, defined);
    }
    if n == 0 {
        return Image::new(Interval::ONE, defined);
    }
    let mut range = Interval::ONE.divide(positive).range;
    if range.is_empty() {
        // The power has underflowed to 0 altogether.
        range = Interval::ENTIRE;
    }
    Image::new(range, defined)
}

/// `base ^ n` for n > 0, or [1, 1] for n = 0.
fn positive_power(base: Interval, n: u64) -> Interval {
    if n.is_multiple_of(2) {
        let size = base.abs();
        Interval::new(power_of_size(size.lower(), n).lower(), power_of_size(size.upper(), n).upper())
    } else {
        Interval::new(odd_power(base.lower(), n).lower(), odd_power(base.upper(), n).upper())
    }
}

fn odd_power(x: f64, n: u64) -> Interval {
    if x < 0.0 { -power_of_size(-x, n) } else { power_of_size(x, n) }
}

/// `x ^ n` for x >= 0, by binary powering with both roundings.
fn power_of_size(x: f64, n: u64) -> Interval {
    if x == f64::INFINITY {
        return Interval::new(f64::MAX, f64::INFINITY);
    }
    let (mut lower, mut upper) = (1.0, 1.0);
    for bit in (0..u64::BITS - n.leading_zeros()).rev() {
        (lower, upper) = (multiply_down(lower, lower), multiply_up(upper, upper));
        if n & (1 << bit) != 0 {
            (lower, upper) = (multiply_down(lower, x), multiply_up(upper, x));
        }
    }
    let product = Interval::new(lower, upper);
    let exponent = n as f64;
    if n <= FEW_FACTORS || product.is_thin() || exponent as u64 != n {
        return product;
    }
    product.intersection(value(x, exponent))
}

/// `x ^ y` for x >= 0, limits at the ends included.
fn value(x: f64, y: f64) -> Interval {
    if x == 1.0 || y == 0.0 {
        return Interval::ONE;
    }
    if x == 0.0 && y > 0.0 {
        return Interval::ZERO;
    }
    widened(pxfm::f_pow(x, y), PLACES).intersection(Interval::NOT_NEGATIVE)
}

/// `base ^ exponent` for any numbers.
pub fn power(base: Interval, exponent: Interval) -> Image {
    if base.is_empty() || exponent.is_empty() {
        return Image::NOWHERE;
    }
    let n = exponent.lower();
    if exponent.is_thin() && n.fract() == 0.0 && n.abs() < i64::MAX as f64 {
        return integer_power(base, n as i64);
    }
    let (not_negative, at_integers) = (power_of_not_negative(base, exponent), power_of_negative(base, exponent));
    let range = not_negative.hull(at_integers);
    if range.is_empty() {
        return Image::NOWHERE;
    }
    let whole = base.lower() > 0.0 || (base.lower() == 0.0 && exponent.lower() > 0.0);
    Image::new(range, if whole { Defined::Everywhere } else { Defined::Partly })
}

fn power_of_not_negative(base: Interval, exponent: Interval) -> Interval {
    let base = base.intersection(Interval::NOT_NEGATIVE);
    if base.is_empty() {
        return base;
    }
    if base == Interval::ZERO {
        return if exponent.upper() > 0.0 { Interval::ZERO } else { Interval::EMPTY };
    }
    let corners = [
        (base.lower(), exponent.lower()),
        (base.lower(), exponent.upper()),
        (base.upper(), exponent.lower()),
        (base.upper(), exponent.upper()),
    ];
    corners.iter().fold(Interval::EMPTY, |range, &(x, y)| range.hull(value(x, y)))
}

/// A negative base has a power at integer exponents, of either sign.
fn power_of_negative(base: Interval, exponent: Interval) -> Interval {
    let integers = Interval::new(exponent.lower().ceil(), exponent.upper().floor());
    if integers.is_empty() || base.lower() >= 0.0 {
        return Interval::EMPTY;
    }
    let size = power_of_not_negative(-base, integers);
    size.hull(-size)
}

/// `base ^ exponent` for a literal exponent.
pub fn rational_power(base: Interval, exponent: &Exact) -> Image {
    if let Some(n) = exponent.to_i64() {
        return integer_power(base, n);
    }
    let root = |base: Interval, denominator| match denominator {
        2 => Some(base.square_root()),
        3 => Some(super::elementary::cube_root(base)),
        _ => None,
    };
    if exponent.is_integer() {
        return power(base, Interval::from_exact(exponent));
    }
    let inside = base.intersection(Interval::NOT_NEGATIVE);
    if inside.is_empty() {
        return Image::NOWHERE;
    }
    let image = match exponent.to_fraction() {
        Some((top, bottom))
            if top.unsigned_abs() <= FEW_FACTORS
                && let Some(root) = root(inside, bottom) =>
        {
            integer_power(root, top)
        }
        _ => power(inside, Interval::from_exact(exponent)),
    };
    if inside == base { image } else { image.given(&[Image::new(inside, Defined::Partly)]) }
}
