//! Ranges of the functions of the table over intervals.

use super::elementary::{elementary, widened};
use super::image::{Defined, Image};
use super::interval::Interval;
use super::special;
use crate::expression::{BinaryFunction, Function};

/// The range of a function of one argument over `x`.
pub fn image_of(function: Function, x: Interval) -> Image {
    use Function::*;
    if x.is_empty() {
        return Image::NOWHERE;
    }
    match function {
        Sin | Cos | Tan | Asin | Acos | Atan | Sinh | Cosh | Tanh | Asinh | Acosh | Atanh | Exp | Log | Sqrt | Cbrt
        | Erf | Erfc => elementary(function, x),
        Abs => Image::everywhere(x.abs()),
        Sign => {
            let image = Image::everywhere(x.sign());
            if image.range.is_thin() { image } else { image.with_jumps() }
        }
        Gamma => special::gamma(x),
        LogGamma => special::log_gamma(x),
        Polygamma(n) => special::polygamma(n, x),
        BesselJ(n) => special::bessel_first(n, x),
        BesselY(n) => special::bessel_second(n, x),
        EllipticK(n) => special::elliptic_first(n, x),
        EllipticE(n) => special::elliptic_second(n, x),
    }
}

/// The range of a function of two arguments over `a` and `b`.
pub fn image_of_two(function: BinaryFunction, a: Interval, b: Interval) -> Image {
    if a.is_empty() || b.is_empty() {
        return Image::NOWHERE;
    }
    match function {
        BinaryFunction::Min => Image::everywhere(a.min(b)),
        BinaryFunction::Max => Image::everywhere(a.max(b)),
        BinaryFunction::Hypot => Image::everywhere(hypotenuse(a, b)),
        BinaryFunction::Atan2 => angle(a, b),
    }
}

/// Places by which a value of two arguments is widened: four times the bound of `tests/functions.rs`.
const PLACES: u32 = 4;

/// The hypotenuse grows with both sides.
fn hypotenuse(a: Interval, b: Interval) -> Interval {
    let value = |a: f64, b: f64| {
        if a == 0.0 || b == 0.0 {
            return Interval::new(a + b, a + b);
        }
        widened(BinaryFunction::Hypot.evaluate(a, b), PLACES)
    };
    let (a, b) = (a.abs(), b.abs());
    let upper = a.upper().max(b.upper());
    let upper = if upper.is_infinite() { upper } else { value(a.upper(), b.upper()).upper() };
    Interval::new(value(a.lower(), b.lower()).lower(), upper)
}

/// The angle of the points (x, y), in (-pi, pi]. A box that holds neither the origin nor a piece of the cut (y = 0, x < 0)
/// seen from below is convex, so its extreme angles are those of corners.
fn angle(y: Interval, x: Interval) -> Image {
    let pi = Interval::pi().upper();
    let turn = Interval::new(-pi, pi);
    if y.contains(0.0) && x.contains(0.0) {
        if y == Interval::ZERO && x == Interval::ZERO {
            // Undefined, though plain evaluation gives an angle.
            return Image::new(turn, Defined::Partly);
        }
        let half = Interval::half_pi().upper();
        let (low, high) = if y.lower() >= 0.0 {
            (0.0, if x.lower() >= 0.0 { half } else { pi })
        } else if x.lower() >= 0.0 {
            (-half, if y.upper() > 0.0 { half } else { 0.0 })
        } else {
            (-pi, pi)
        };
        return Image::new(Interval::new(low, high), Defined::Partly);
    }
    if x.lower() < 0.0 && y.lower() < 0.0 && y.upper() >= 0.0 {
        return Image::everywhere(turn).with_jumps();
    }
    let value = |y: f64, x: f64| {
        if y == 0.0 && x > 0.0 {
            return Interval::ZERO;
        }
        widened(BinaryFunction::Atan2.evaluate(y, x), PLACES)
    };
    let corners = [(y.lower(), x.lower()), (y.lower(), x.upper()), (y.upper(), x.lower()), (y.upper(), x.upper())];
    let range = corners.iter().fold(Interval::EMPTY, |range, &(y, x)| range.hull(value(y, x)));
    Image::everywhere(range.intersection(turn))
}
