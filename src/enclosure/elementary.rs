//! Ranges of the elementary functions.
//!
//! On a piece where a function is monotone its range lies between the values at the ends. These values come from the
//! project's own table (`pxfm`), whose results differ from the true values by at most 0.51 units in the last place in
//! `tests/functions.rs`; no proof of that bound exists. So each value is widened by 2 places on both sides, four times
//! the largest error seen, and by 4 where the library is less widely tested ([`margin`]). Values known exactly (sin 0,
//! exp 0, log 1, ...) are not widened, and every range is cut to the set of values that the function can take.

use super::image::{Defined, Image};
use super::interval::Interval;
use super::rounding::finite_below;
use crate::expression::Function;

/// How many places a value of the table is moved outward.
fn margin(function: Function) -> u32 {
    match function {
        Function::Erf | Function::Erfc => 4,
        _ => 2,
    }
}

/// The value `y`, wrong by at most `places` places, as an interval. An overflow says that the true value is at least
/// the largest double, give or take the places.
pub(super) fn widened(y: f64, places: u32) -> Interval {
    if y.is_nan() {
        return Interval::ENTIRE;
    }
    let below = |y: f64| (0..places).fold(if y.is_infinite() { finite_below(y) } else { y }, |y, _| y.next_down());
    Interval::new(below(y), -below(-y))
}

/// An argument inside the domain, with what that says about the domain.
#[derive(Clone, Copy)]
pub(super) struct Inside {
    /// The part of the argument in the domain, its open ends included.
    pub(super) part: Interval,
    pub(super) defined: Defined,
}

/// The part of `x` between two ends of a domain, each with whether it belongs to the domain.
pub(super) fn inside(x: Interval, (lower, lower_closed): (f64, bool), (upper, upper_closed): (f64, bool)) -> Inside {
    let part = x.intersection(Interval::new(lower, upper));
    let meets_open_end = (!lower_closed && part.contains(lower)) || (!upper_closed && part.contains(upper));
    if part.is_empty() || (part.is_thin() && meets_open_end) {
        return Inside { part: Interval::EMPTY, defined: Defined::Nowhere };
    }
    let whole = part == x && !meets_open_end;
    Inside { part, defined: if whole { Defined::Everywhere } else { Defined::Partly } }
}

/// The values of an increasing function.
fn increasing(function: Function, x: Interval) -> Interval {
    let (low, high) = at_ends(function, x);
    Interval::new(low.lower(), high.upper())
}

/// The values of a decreasing function.
fn decreasing(function: Function, x: Interval) -> Interval {
    let (high, low) = at_ends(function, x);
    Interval::new(low.lower(), high.upper())
}

/// The values at both ends of an interval, which are one for a thin interval and empty for the empty one.
fn at_ends(function: Function, x: Interval) -> (Interval, Interval) {
    if x.is_empty() {
        return (x, x);
    }
    let first = value(function, x.lower());
    (first, if x.is_thin() { first } else { value(function, x.upper()) })
}

/// The value of a function at one argument inside its domain, or its limit at an infinite or open end.
pub(super) fn value(function: Function, x: f64) -> Interval {
    if let Some(exact) = exact_value(function, x) {
        // An infinite limit is no member; the half-line beyond the doubles stands for it.
        return match exact {
            f64::INFINITY => Interval::new(f64::MAX, f64::INFINITY),
            f64::NEG_INFINITY => Interval::new(f64::NEG_INFINITY, f64::MIN),
            exact => Interval::point(exact),
        };
    }
    widened(function.evaluate(x), margin(function))
}

/// Values and limits that are known without rounding.
fn exact_value(function: Function, x: f64) -> Option<f64> {
    use Function::*;
    let infinity = f64::INFINITY;
    match function {
        Sin | Tan | Asin | Atan | Sinh | Tanh | Asinh | Atanh | Erf if x == 0.0 => Some(0.0),
        Cos | Cosh | Exp | Erfc if x == 0.0 => Some(1.0),
        Log | Acosh | Acos if x == 1.0 => Some(0.0),
        Sinh | Asinh | Cbrt if x.is_infinite() => Some(x),
        Cosh if x.is_infinite() => Some(infinity),
        Exp | Log | Acosh if x == infinity => Some(infinity),
        Exp if x == -infinity => Some(0.0),
        Log if x == 0.0 => Some(-infinity),
        Tanh | Erf if x.is_infinite() => Some(x.signum()),
        Atanh if x.abs() == 1.0 => Some(infinity.copysign(x)),
        Erfc if x == infinity => Some(0.0),
        Erfc if x == -infinity => Some(2.0),
        Cbrt => exact_cube_root(x),
        _ => None,
    }
}

/// The cube root of the cube of an integer below 2^17; the products are then exact.
fn exact_cube_root(x: f64) -> Option<f64> {
    let root = Function::Cbrt.evaluate(x).round();
    (root.abs() <= 131_072.0 && root * root * root == x).then_some(root)
}

/// The set of values that a function can take.
fn values(function: Function) -> Interval {
    use Function::*;
    let half_pi = Interval::half_pi().upper();
    match function {
        Sin | Cos | Tanh | Erf => Interval::new(-1.0, 1.0),
        Asin | Atan => Interval::new(-half_pi, half_pi),
        Acos => Interval::new(0.0, Interval::pi().upper()),
        Cosh => Interval::new(1.0, f64::INFINITY),
        Exp | Acosh => Interval::NOT_NEGATIVE,
        Erfc => Interval::new(0.0, 2.0),
        _ => Interval::ENTIRE,
    }
}

/// The range of an elementary function over `x`.
pub(super) fn elementary(function: Function, x: Interval) -> Image {
    use Function::*;
    const ALL: ((f64, bool), (f64, bool)) = ((f64::NEG_INFINITY, true), (f64::INFINITY, true));
    if x.is_empty() {
        return Image::NOWHERE;
    }
    let (lower, upper) = match function {
        Asin | Acos => ((-1.0, true), (1.0, true)),
        Atanh => ((-1.0, false), (1.0, false)),
        Acosh => ((1.0, true), ALL.1),
        Log => ((0.0, false), ALL.1),
        Sqrt => ((0.0, true), ALL.1),
        _ => ALL,
    };
    let Inside { part, defined } = inside(x, lower, upper);
    if defined == Defined::Nowhere {
        return Image::NOWHERE;
    }
    let range = match function {
        Sin => {
            // Extreme values at pi/2 + k pi.
            let turns = half_turns(part, Interval::point(0.5));
            oscillation(function, part, turns)
        }
        Cos => oscillation(function, part, half_turns(part, Interval::ZERO)),
        Tan => {
            let turns = half_turns(part, Interval::point(0.5));
            if turns.lower().ceil() <= turns.upper() {
                return Image::unknown();
            }
            increasing(function, part)
        }
        Acos | Erfc => decreasing(function, part),
        Cosh => increasing(function, part.abs()),
        Sqrt => part.square_root(),
        _ => increasing(function, part),
    };
    Image::new(range.intersection(values(function)), defined)
}

/// Where `x` lies in units of half turns, less `offset`: the interval contains k if `x` contains (k + offset) pi.
fn half_turns(x: Interval, offset: Interval) -> Interval {
    x.divide(Interval::pi()).range - offset
}

/// The values of sine or cosine, which are 1 where `turns` is an even integer and -1 where it is an odd one, and monotone
/// in between. A large or wide argument holds both kinds and so gives [-1, 1].
fn oscillation(function: Function, x: Interval, turns: Interval) -> Interval {
    let holds = |remainder: f64| {
        let first = ((turns.lower() - remainder) / 2.0).ceil() * 2.0 + remainder;
        first <= turns.upper()
    };
    if !x.is_bounded() {
        return Interval::new(-1.0, 1.0);
    }
    let (first, last) = at_ends(function, x);
    let mut range = first.hull(last);
    if holds(0.0) {
        range = range.hull(Interval::ONE);
    }
    if holds(1.0) {
        range = range.hull(Interval::point(-1.0));
    }
    range
}

/// The cube roots of the members.
pub(super) fn cube_root(x: Interval) -> Interval {
    increasing(Function::Cbrt, x)
}
