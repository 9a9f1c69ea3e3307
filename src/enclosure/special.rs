//! Ranges of the special functions.
//!
//! The values come from the project's own table, whose accuracy `tests/functions.rs` measures against mpmath. Each value is
//! widened by at least twice the bound that holds there ([`margin`]); for orders and arguments that are not tested nothing
//! but the known sign and size of the function is used. The shapes used, all from the NIST Digital Library of
//! Mathematical Functions (DLMF):
//!
//! - K^(n)(m) is the integral of (1/2)_n sin^2n / (1 - m sin^2)^(n + 1/2), so positive and increasing; E^(n) is
//!   decreasing, positive for n = 0 and negative after (19.2.8).
//! - psi^(n)(x) = (-1)^(n+1) n! sum over k of (x + k)^(-n-1) (5.15.1): for even n increasing between any two poles, for
//!   odd n positive and convex, and decreasing on x > 0.
//! - log |gamma| has the derivative psi^(0), so it is convex between any two poles.
//! - J_n' = (J_(n-1) - J_(n+1))/2 (10.6.1), |J_0| <= 1 and |J_n| <= 1/sqrt(2) (10.14.1). The same rule holds for Y_n, and
//!   J_n^2 + Y_n^2 decreases (10.9.30, Nicholson's integral).

use super::elementary::{Inside, inside, widened};
use super::image::{Defined, Image};
use super::interval::Interval;
use crate::expression::Function;

/// By how much a value of the table is moved outward: places, and an absolute amount for functions whose accuracy
/// beside their zeros is absolute.
struct Margin {
    places: u32,
    absolute: f64,
}

/// The margin at `x`, or `None` where the accuracy is not tested.
fn margin(function: Function, x: f64) -> Option<Margin> {
    let (places, absolute) = match function {
        Function::Gamma => (4, 0.0),
        Function::LogGamma => (4, 1e-19),
        Function::Polygamma(0) => (4, 1e-19),
        Function::Polygamma(1) => (4, 0.0),
        Function::Polygamma(2 | 4) if x > -20.0 => (20, 1e-13),
        Function::Polygamma(n) if n % 2 == 1 && n <= 9 && x > -20.0 => (40, 0.0),
        Function::Polygamma(n) if n <= 40 && x > 0.0 => (100, 0.0),
        Function::BesselJ(0 | 1) | Function::BesselY(0 | 1) if x.abs() <= 1e6 => (4, 1e-22),
        Function::BesselJ(n) | Function::BesselY(n) if n <= 5 && x.abs() <= 1e6 => (16, 1e-15),
        Function::BesselJ(n) | Function::BesselY(n) if n <= 40 && x.abs() <= 1e4 => (48, 1e-15),
        Function::EllipticK(n) | Function::EllipticE(n) if n <= 4 && x >= -1e10 => (4, 0.0),
        Function::EllipticK(n) | Function::EllipticE(n) if n <= 130 && x >= -1e4 => (8, 0.0),
        _ => return None,
    };
    Some(Margin { places, absolute })
}

/// Results below this size may have lost digits on the way, so they only say that the true value is small.
const SMALL: f64 = 1e-290;

/// The value at a finite `x` inside the domain, not at a pole.
fn value(function: Function, x: f64) -> Interval {
    if let Some(exact) = exact_value(function, x) {
        return Interval::point(exact);
    }
    let Some(Margin { places, absolute }) = margin(function, x) else { return Interval::ENTIRE };
    let y = function.evaluate(x);
    // An overflow on the way cannot be told from one of the result.
    if !y.is_finite() {
        return Interval::ENTIRE;
    }
    let spread = if y.abs() < SMALL { absolute.max(SMALL) } else { absolute };
    widened(y, places) + Interval::new(-spread, spread)
}

/// Values that are known without rounding: factorials that are doubles, and the ends of series.
fn exact_value(function: Function, x: f64) -> Option<f64> {
    match function {
        Function::Gamma if (1.0..=23.0).contains(&x) && x.fract() == 0.0 => {
            Some((1..x as u32).map(f64::from).product())
        }
        Function::LogGamma if x == 1.0 || x == 2.0 => Some(0.0),
        Function::BesselJ(0) if x == 0.0 => Some(1.0),
        Function::BesselJ(_) if x == 0.0 => Some(0.0),
        Function::EllipticE(0) if x == 1.0 => Some(1.0),
        _ => None,
    }
}

/// The hull of the values at both ends of a bounded piece where the function is monotone.
fn between_ends(function: Function, x: Interval) -> Interval {
    value(function, x.lower()).hull(value(function, x.upper()))
}

/// K^(n), increasing and positive on m < 1, infinite at 1 and 0 at minus infinity.
pub(super) fn elliptic_first(n: u8, m: Interval) -> Image {
    let Inside { part, defined } = inside(m, (f64::NEG_INFINITY, true), (1.0, false));
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    let function = Function::EllipticK(n);
    let lower = if part.lower().is_finite() { value(function, part.lower()).lower() } else { 0.0 };
    let upper = if part.upper() < 1.0 { value(function, part.upper()).upper() } else { f64::INFINITY };
    Image::new(Interval::new(lower, upper).intersection(Interval::NOT_NEGATIVE), defined)
}

/// E^(n), decreasing: from infinity to 1 for n = 0, from 0 to minus infinity after.
pub(super) fn elliptic_second(n: u8, m: Interval) -> Image {
    let Inside { part, defined } = inside(m, (f64::NEG_INFINITY, true), (1.0, n == 0));
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    let function = Function::EllipticE(n);
    let possible = if n == 0 { Interval::new(1.0, f64::INFINITY) } else { Interval::new(f64::NEG_INFINITY, 0.0) };
    let upper = if part.lower().is_finite() { value(function, part.lower()).upper() } else { possible.upper() };
    let unbounded = n > 0 && part.upper() == 1.0;
    let lower = if unbounded { f64::NEG_INFINITY } else { value(function, part.upper()).lower() };
    Image::new(Interval::new(lower, upper).intersection(possible), defined)
}

/// Whether `x` lies on x > 0 or strictly between two of the poles 0, -1, -2, ... of the gamma function.
fn between_poles(x: Interval) -> bool {
    let (a, b) = (x.lower(), x.upper());
    a > 0.0 || (b < 0.0 && a.is_finite() && a.floor() == b.floor() && a.fract() != 0.0 && b.fract() != 0.0)
}

/// The common frame of the functions with poles at 0, -1, -2, ...: `range` where they have the given shape, and `outside`
/// on an interval that contains a pole and negative numbers.
fn with_poles(x: Interval, outside: Interval, range: impl Fn() -> Interval) -> Image {
    let is_pole = x.is_thin() && x.upper() <= 0.0 && x.upper().fract() == 0.0;
    if is_pole {
        Image::NOWHERE
    } else if between_poles(x) {
        Image::everywhere(range())
    } else {
        Image::new(if x.lower() == 0.0 { range() } else { outside }, Defined::Partly)
    }
}

/// The values of a convex function between two poles, given its derivative.
///
/// The greatest value stands at an end. The least one does too if the derivative keeps its sign; else the tangent at the
/// middle bounds it.
fn convex(function: Function, derivative: Function, x: Interval) -> Interval {
    let ends = between_ends(function, x);
    let (first, last) = (value(derivative, x.lower()), value(derivative, x.upper()));
    if x.is_thin() || first.lower() >= 0.0 || last.upper() <= 0.0 {
        return ends;
    }
    let middle = x.midpoint();
    let tangent = value(function, middle) + value(derivative, middle) * (x - Interval::point(middle));
    Interval::new(tangent.lower().min(ends.lower()), ends.upper())
}

/// Gamma and log gamma on x >= 0: both fall from infinity to their least value, taken between 1.46 and 1.47, and rise to
/// infinity.
fn valley(function: Function, x: Interval, least: f64) -> Interval {
    let end = |x: f64| if x == 0.0 || x.is_infinite() { Interval::ENTIRE } else { value(function, x) };
    let ends = end(x.lower()).hull(end(x.upper()));
    let lower = if x.upper() <= 1.46 {
        end(x.upper()).lower()
    } else if x.lower() >= 1.47 {
        end(x.lower()).lower()
    } else {
        least
    };
    Interval::new(lower.max(least), ends.upper())
}

/// The gamma function. 0.88560319441088870027... is its least value on x > 0 (DLMF 5.4(iii)), here rounded
/// down.
pub(super) fn gamma(x: Interval) -> Image {
    const LEAST: f64 = 0.885_603_194_410_888_6;
    with_poles(x, Interval::ENTIRE, || {
        if x.lower() >= 0.0 {
            return valley(Function::Gamma, x, LEAST);
        }
        // The sign is the parity of the strip, and |gamma| = exp(log |gamma|) is convex.
        let positive = (x.lower().floor() / 2.0).fract() == 0.0;
        let ends = between_ends(Function::Gamma, x).abs();
        let log = convex(Function::LogGamma, Function::Polygamma(0), x);
        let least = super::elementary::elementary(Function::Exp, log).range.lower();
        let rising_or_falling = value(Function::Polygamma(0), x.lower()).lower() >= 0.0
            || value(Function::Polygamma(0), x.upper()).upper() <= 0.0;
        let lower = if x.is_thin() || rising_or_falling { ends.lower() } else { least.min(ends.lower()) };
        let size = Interval::new(lower, ends.upper());
        if positive { size } else { -size }
    })
}

/// log |gamma|. Its least value on x > 0 is log(0.885603...) = -0.12148629053584960809..., here rounded down.
pub(super) fn log_gamma(x: Interval) -> Image {
    const LEAST: f64 = -0.121_486_290_535_849_63;
    with_poles(x, Interval::ENTIRE, || {
        if x.lower() >= 0.0 {
            valley(Function::LogGamma, x, LEAST)
        } else {
            convex(Function::LogGamma, Function::Polygamma(0), x)
        }
    })
}

/// The n-th derivative of the digamma function.
pub(super) fn polygamma(n: u8, x: Interval) -> Image {
    let function = Function::Polygamma(n);
    let end = |x: f64| if x == 0.0 || x.is_infinite() { Interval::ENTIRE } else { value(function, x) };
    if n.is_multiple_of(2) {
        // Negative on x > 0 except for n = 0.
        let possible = if n > 0 && x.lower() >= 0.0 { -Interval::NOT_NEGATIVE } else { Interval::ENTIRE };
        return with_poles(x, Interval::ENTIRE, || {
            Interval::new(end(x.lower()).lower(), end(x.upper()).upper()).intersection(possible)
        });
    }
    with_poles(x, Interval::NOT_NEGATIVE, || {
        let range = if x.lower() >= 0.0 {
            Interval::new(end(x.upper()).lower(), end(x.lower()).upper())
        } else {
            match n.checked_add(1) {
                Some(next) => convex(function, Function::Polygamma(next), x),
                None => Interval::ENTIRE,
            }
        };
        range.intersection(Interval::NOT_NEGATIVE)
    })
}

/// Up to this order the accuracy of the Bessel functions is tested.
const HIGHEST_ORDER: u8 = 40;

/// J_n
pub(super) fn bessel_first(n: u8, x: Interval) -> Image {
    let most = |k: u8| if k == 0 { 1.0 } else { std::f64::consts::FRAC_1_SQRT_2.next_up() };
    Image::everywhere(wave(Function::BesselJ, n, x, most))
}

/// Y_n on x > 0, which rises from minus infinity to its first maximum and oscillates from there.
pub(super) fn bessel_second(n: u8, x: Interval) -> Image {
    let Inside { part, defined } = inside(x, (0.0, false), (f64::INFINITY, true));
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    // The first maximum of Y_0 is at 2.19714, of Y_1 at 3.68302 (Abramowitz and Stegun, table 9.5), of Y_n above n
    // (DLMF 10.21.3).
    let summit = match n {
        0 => 2.1875,
        1 => 3.65625,
        _ => f64::from(n),
    };
    let function = Function::BesselY(n);
    let rising = part.intersection(Interval::new(0.0, summit));
    let mut range = Interval::EMPTY;
    if !rising.is_empty() {
        let lower = if rising.lower() == 0.0 { f64::NEG_INFINITY } else { value(function, rising.lower()).lower() };
        range = Interval::new(lower, value(function, rising.upper()).upper());
    }
    let rest = part.intersection(Interval::new(summit, f64::INFINITY));
    if !rest.is_empty() {
        let modulus = |k: u8| {
            let of = |function| value(function, rest.lower()).square();
            (of(Function::BesselJ(k)) + of(Function::BesselY(k))).square_root().upper()
        };
        range = range.hull(wave(Function::BesselY, n, rest, modulus));
    }
    Image::new(range, defined)
}

/// The values of the Bessel function of order n on `x`, where |f_k| is at most `most(k)`.
///
/// The values at the middle and the bounds of the derivatives enclose the orders n - 1, n, n + 1, and so f_n'. If that has
/// one sign the values at the ends are the extreme ones, else the mean value theorem gives a range.
fn wave(family: fn(u8) -> Function, n: u8, x: Interval, most: impl Fn(u8) -> f64) -> Interval {
    let bound = |k: u8| Interval::new(-most(k), most(k));
    if n > HIGHEST_ORDER || !x.is_bounded() {
        return bound(n);
    }
    let function = family(n);
    if x.is_thin() {
        return value(function, x.lower()).intersection(bound(n));
    }
    let half = Interval::point(0.5);
    let middle = x.midpoint();
    let offset = x - Interval::point(middle);
    let derivative = |below: Interval, above: Interval| (below - above) * half;
    let roughly = |k: u8| {
        let rate = if k == 0 { bound(1) } else { derivative(bound(k - 1), bound(k + 1)) };
        (value(family(k), middle) + rate * offset).intersection(bound(k))
    };
    let slope = if n == 0 { -roughly(1) } else { derivative(roughly(n - 1), roughly(n + 1)) };
    if slope.lower() >= 0.0 || slope.upper() <= 0.0 {
        return between_ends(function, x).intersection(bound(n));
    }
    (value(function, middle) + slope * offset).intersection(roughly(n))
}
