//! The table of functions: name, domain, exact values, evaluation.
//!
//! A new function is a new variant here; the compiler then points at every `match` that must learn it (its derivative
//! in `derivative.rs`, its range in `enclosure`). Elementary functions come from `pxfm`, whose results were measured within
//! half a unit in the last place and are the same bits on every machine; the standard library is never used, because
//! its `acosh` and `atanh` lose up to 10^5 units in the last place.

use super::bessel;
use super::elliptic;
use super::number::Exact;
use super::polygamma::polygamma;

/// A function of one argument.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
#[allow(missing_docs)]
pub enum Function {
    Sin,
    Cos,
    Tan,
    Asin,
    Acos,
    Atan,
    Sinh,
    Cosh,
    Tanh,
    Asinh,
    Acosh,
    Atanh,
    Exp,
    Log,
    Sqrt,
    Cbrt,
    Abs,
    Sign,
    Erf,
    Erfc,
    Gamma,
    /// log |gamma(x)|
    LogGamma,
    /// n-th derivative of the digamma function; appears in derivatives of gamma and lgamma.
    Polygamma(u8),
    /// Bessel function of the first kind and integer order.
    BesselJ(u8),
    /// Bessel function of the second kind and integer order.
    BesselY(u8),
    /// n-th derivative of the complete elliptic integral K(m), m = k^2.
    EllipticK(u8),
    /// n-th derivative of the complete elliptic integral E(m), m = k^2.
    EllipticE(u8),
}

/// A function of two arguments.
#[derive(Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Debug)]
#[allow(missing_docs)]
pub enum BinaryFunction {
    /// atan2(y, x), the angle of the point (x, y), in (-pi, pi].
    Atan2,
    /// sqrt(a^2 + b^2) without overflow.
    Hypot,
    Min,
    Max,
}

impl Function {
    /// The functions that a sheet can name with one plain argument.
    pub const NAMED: &[Function] = &[
        Function::Sin,
        Function::Cos,
        Function::Tan,
        Function::Asin,
        Function::Acos,
        Function::Atan,
        Function::Sinh,
        Function::Cosh,
        Function::Tanh,
        Function::Asinh,
        Function::Acosh,
        Function::Atanh,
        Function::Exp,
        Function::Log,
        Function::Sqrt,
        Function::Cbrt,
        Function::Abs,
        Function::Sign,
        Function::Erf,
        Function::Erfc,
        Function::Gamma,
        Function::LogGamma,
        Function::EllipticK(0),
        Function::EllipticE(0),
    ];

    /// The name in a sheet; for the derivative families the name of the family.
    pub fn name(self) -> &'static str {
        match self {
            Function::Sin => "sin",
            Function::Cos => "cos",
            Function::Tan => "tan",
            Function::Asin => "asin",
            Function::Acos => "acos",
            Function::Atan => "atan",
            Function::Sinh => "sinh",
            Function::Cosh => "cosh",
            Function::Tanh => "tanh",
            Function::Asinh => "asinh",
            Function::Acosh => "acosh",
            Function::Atanh => "atanh",
            Function::Exp => "exp",
            Function::Log => "log",
            Function::Sqrt => "sqrt",
            Function::Cbrt => "cbrt",
            Function::Abs => "abs",
            Function::Sign => "sign",
            Function::Erf => "erf",
            Function::Erfc => "erfc",
            Function::Gamma => "gamma",
            Function::LogGamma => "lgamma",
            Function::Polygamma(_) => "polygamma",
            Function::BesselJ(_) => "bessel_j",
            Function::BesselY(_) => "bessel_y",
            Function::EllipticK(_) => "elliptic_k",
            Function::EllipticE(_) => "elliptic_e",
        }
    }

    /// The value at `x`; NaN outside the domain, an infinity at a pole.
    pub fn evaluate(self, x: f64) -> f64 {
        match self {
            Function::Sin => pxfm::f_sin(x),
            Function::Cos => pxfm::f_cos(x),
            Function::Tan => pxfm::f_tan(x),
            Function::Asin => pxfm::f_asin(x),
            Function::Acos => pxfm::f_acos(x),
            Function::Atan => pxfm::f_atan(x),
            Function::Sinh => pxfm::f_sinh(x),
            Function::Cosh => pxfm::f_cosh(x),
            Function::Tanh => pxfm::f_tanh(x),
            Function::Asinh => pxfm::f_asinh(x),
            Function::Acosh => pxfm::f_acosh(x),
            Function::Atanh => pxfm::f_atanh(x),
            Function::Exp => pxfm::f_exp(x),
            Function::Log => pxfm::f_log(x),
            Function::Sqrt => x.sqrt(),
            Function::Cbrt => pxfm::f_cbrt(x),
            Function::Abs => x.abs(),
            Function::Sign => sign(x),
            Function::Erf => pxfm::f_erf(x),
            Function::Erfc => pxfm::f_erfc(x),
            Function::Gamma => gamma(x),
            Function::LogGamma => pxfm::f_lgamma(x),
            Function::Polygamma(n) => polygamma(n, x),
            Function::BesselJ(n) => bessel::first_kind(n, x),
            Function::BesselY(n) => bessel::second_kind(n, x),
            Function::EllipticK(n) => elliptic::first_kind(n, x),
            Function::EllipticE(n) => elliptic::second_kind(n, x),
        }
    }

    /// The set of arguments for which the function is defined, in words for a message.
    pub fn domain(self) -> &'static str {
        match self {
            Function::Asin | Function::Acos => "arguments in [-1, 1]",
            Function::Acosh => "arguments of at least 1",
            Function::Atanh => "arguments in (-1, 1)",
            Function::Log => "positive arguments",
            Function::Sqrt => "arguments of at least 0",
            Function::Gamma | Function::LogGamma | Function::Polygamma(_) => "arguments other than 0, -1, -2, ...",
            Function::BesselY(_) => "positive arguments",
            Function::EllipticK(_) => "arguments below 1",
            Function::EllipticE(0) => "arguments of at most 1",
            Function::EllipticE(_) => "arguments below 1",
            Function::Tan => "arguments other than odd multiples of pi/2",
            Function::Sin
            | Function::Cos
            | Function::Atan
            | Function::Sinh
            | Function::Cosh
            | Function::Tanh
            | Function::Asinh
            | Function::Exp
            | Function::Cbrt
            | Function::Abs
            | Function::Sign
            | Function::Erf
            | Function::Erfc
            | Function::BesselJ(_) => "all real arguments",
        }
    }

    /// The exact value at a rational argument where it is rational and simple enough to be worth folding.
    pub(super) fn exact_value(self, x: &Exact) -> Option<Exact> {
        match self {
            Function::Sqrt => x.square_root(),
            Function::Abs => Some(x.magnitude()),
            Function::Sign => Exact::fraction(x.signum(), 1),
            Function::Sin
            | Function::Tan
            | Function::Asin
            | Function::Atan
            | Function::Sinh
            | Function::Tanh
            | Function::Asinh
            | Function::Atanh
            | Function::Cbrt
            | Function::Erf
                if x.is_zero() =>
            {
                Some(Exact::zero())
            }
            Function::Cos | Function::Cosh | Function::Exp | Function::Erfc | Function::BesselJ(0) if x.is_zero() => {
                Some(Exact::one())
            }
            Function::Log | Function::Acosh | Function::Acos if x.is_one() => Some(Exact::zero()),
            Function::Cbrt if x.magnitude().is_one() => Some(x.clone()),
            _ => None,
        }
    }
}

impl BinaryFunction {
    /// The functions of two arguments that a sheet can name.
    pub const NAMED: &[BinaryFunction] =
        &[BinaryFunction::Atan2, BinaryFunction::Hypot, BinaryFunction::Min, BinaryFunction::Max];

    /// The name in a sheet.
    pub fn name(self) -> &'static str {
        match self {
            BinaryFunction::Atan2 => "atan2",
            BinaryFunction::Hypot => "hypot",
            BinaryFunction::Min => "min",
            BinaryFunction::Max => "max",
        }
    }

    /// The value at (`a`, `b`). `min` and `max` of a NaN are NaN.
    pub fn evaluate(self, a: f64, b: f64) -> f64 {
        match self {
            BinaryFunction::Atan2 => pxfm::f_atan2(a, b),
            BinaryFunction::Hypot => pxfm::f_hypot(a, b),
            BinaryFunction::Min => minimum(a, b),
            BinaryFunction::Max => maximum(a, b),
        }
    }

    /// Whether the order of the arguments does not matter.
    pub(super) fn is_commutative(self) -> bool {
        self != BinaryFunction::Atan2
    }

    pub(super) fn exact_value(self, a: &Exact, b: &Exact) -> Option<Exact> {
        match self {
            BinaryFunction::Min => Some(a.min(b).clone()),
            BinaryFunction::Max => Some(a.max(b).clone()),
            BinaryFunction::Hypot => a.multiply(a)?.add(&b.multiply(b)?)?.square_root(),
            BinaryFunction::Atan2 => None,
        }
    }
}

/// -1, 0 or 1; NaN for NaN.
fn sign(x: f64) -> f64 {
    if x > 0.0 {
        1.0
    } else if x < 0.0 {
        -1.0
    } else if x == 0.0 {
        0.0
    } else {
        f64::NAN
    }
}

/// The gamma function, NaN at its poles (where a one-sided infinity would hide which side was meant).
fn gamma(x: f64) -> f64 {
    if x <= 0.0 && x.fract() == 0.0 { f64::NAN } else { pxfm::f_tgamma(x) }
}

/// The smaller value; a NaN wins, so that an undefined argument is never dropped.
fn minimum(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() {
        f64::NAN
    } else if b < a {
        b
    } else {
        a
    }
}

/// The larger value; a NaN wins, so that an undefined argument is never dropped.
fn maximum(a: f64, b: f64) -> f64 {
    if a.is_nan() || b.is_nan() {
        f64::NAN
    } else if b > a {
        b
    } else {
        a
    }
}
