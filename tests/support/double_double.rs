//! Elementary functions to about 28 digits, to judge ranges of doubles by.
//!
//! A number is an unevaluated sum of two doubles (Dekker 1971). The functions use series, identities and one Newton step from
//! a value of the standard library, so they share neither code nor method with the library they judge. `tests/enclosure.rs`
//! first compares them with the mpmath values of `tests/data/functions.csv`.
//!
//! Why not a crate: CORE-MATH needs a C compiler and gives rounded doubles only, and arbitrary-precision crates need
//! tens of microseconds for one value, too long for 10^6 values of every function.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// `high + low` with `|low|` at most half a unit in the last place of `high`.
#[derive(Clone, Copy, Debug)]
pub struct Double {
    pub high: f64,
    pub low: f64,
}

const ZERO: Double = Double { high: 0.0, low: 0.0 };
const ONE: Double = Double { high: 1.0, low: 0.0 };
pub const NAN: Double = Double { high: f64::NAN, low: f64::NAN };
/// pi in three parts (its first 48 digits, mpmath).
const PI: [f64; 3] = [std::f64::consts::PI, 1.2246467991473532e-16, -2.9947698097183397e-33];
/// log(2) in three parts (mpmath).
const LN_2: [f64; 3] = [std::f64::consts::LN_2, 2.3190468138462996e-17, 5.707708438416212e-34];

fn two_sum(a: f64, b: f64) -> Double {
    let high = a + b;
    let shadow = high - a;
    Double { high, low: (a - (high - shadow)) + (b - shadow) }
}

fn two_product(a: f64, b: f64) -> Double {
    let high = a * b;
    Double { high, low: a.mul_add(b, -high) }
}

impl From<f64> for Double {
    fn from(high: f64) -> Double {
        Double { high, low: 0.0 }
    }
}

impl Add for Double {
    type Output = Double;
    fn add(self, other: Double) -> Double {
        let (high, low) = (two_sum(self.high, other.high), two_sum(self.low, other.low));
        let first = two_sum(high.high, high.low + low.high);
        two_sum(first.high, first.low + low.low)
    }
}

impl Neg for Double {
    type Output = Double;
    fn neg(self) -> Double {
        Double { high: -self.high, low: -self.low }
    }
}

impl Sub for Double {
    type Output = Double;
    fn sub(self, other: Double) -> Double {
        self + -other
    }
}

impl Mul for Double {
    type Output = Double;
    fn mul(self, other: Double) -> Double {
        let product = two_product(self.high, other.high);
        two_sum(product.high, product.low + (self.high * other.low + self.low * other.high))
    }
}

impl Div for Double {
    type Output = Double;
    fn div(self, other: Double) -> Double {
        let first = self.high / other.high;
        let rest = self - other * Double::from(first);
        let second = rest.high / other.high;
        let rest = rest - other * Double::from(second);
        two_sum(first, second) + Double::from(rest.high / other.high)
    }
}

impl Double {
    pub fn is_nan(self) -> bool {
        self.high.is_nan() || self.low.is_nan()
    }

    pub fn is_negative(self) -> bool {
        self.high < 0.0
    }

    pub fn abs(self) -> Double {
        if self.is_negative() { -self } else { self }
    }

    fn scaled(self, factor: f64) -> Double {
        Double { high: self.high * factor, low: self.low * factor }
    }

    pub fn sqrt(self) -> Double {
        if self.high < 0.0 {
            return NAN;
        }
        if self.high == 0.0 {
            return ZERO;
        }
        let root = Double::from(self.high.sqrt());
        root + (self - root * root) / root.scaled(2.0)
    }

    pub fn cbrt(self) -> Double {
        if self.high == 0.0 {
            return ZERO;
        }
        let root = Double::from(self.high.cbrt());
        root - (root * root * root - self) / (root * root * Double::from(3.0))
    }

    /// exp(x) - 1 by halving six times and the series; (1 + p)^2 - 1 = p (2 + p).
    fn exp_minus_one(self) -> Double {
        let turns = (self.high / LN_2[0]).round();
        let rest = LN_2.iter().fold(self, |rest, &part| rest - two_product(turns, part));
        let rest = rest.scaled(1.0 / 64.0);
        let (mut term, mut sum) = (rest, rest);
        for n in 2..=14 {
            term = term * rest / Double::from(f64::from(n));
            sum = sum + term;
        }
        for _ in 0..6 {
            sum = sum * (sum + Double::from(2.0));
        }
        if turns == 0.0 {
            return sum;
        }
        // In two factors, so that neither overflows.
        let half = 2.0_f64.powi((turns / 2.0) as i32);
        let other = 2.0_f64.powi((turns - (turns / 2.0).trunc()) as i32);
        (sum + ONE).scaled(half).scaled(other) - ONE
    }

    /// 0 below exp(-700), which no caller can tell from it.
    pub fn exp(self) -> Double {
        if self.high < -700.0 {
            return ZERO;
        }
        if self.high < -0.5 {
            // 1 + (exp(x) - 1) would lose digits.
            return ONE / (-self).exp();
        }
        self.exp_minus_one() + ONE
    }

    /// log(1 + z) by one step of Halley's rule on exp(y) - 1 = z.
    fn log_one_plus(self) -> Double {
        if self.high <= -1.0 {
            return NAN;
        }
        let y = Double::from(self.high.ln_1p());
        let p = y.exp_minus_one();
        y + (self - p).scaled(2.0) / (self + p + Double::from(2.0))
    }

    pub fn log(self) -> Double {
        if self.high.is_nan() || self.high <= 0.0 {
            return NAN;
        }
        // x = 2^k m with m between 0.7 and 1.5
        let mut k = f64::from(((self.high.to_bits() >> 52) & 0x7ff) as i32 - 1023);
        let mut m = self.scaled(2.0_f64.powi(-(k as i32) / 2)).scaled(2.0_f64.powi(-(k as i32) - (-(k as i32) / 2)));
        if m.high > 1.5 {
            m = m.scaled(0.5);
            k += 1.0;
        }
        LN_2.iter().fold((m - ONE).log_one_plus(), |sum, &part| sum + two_product(k, part))
    }

    pub fn sin_cos(self) -> (Double, Double) {
        let quarters = (self.high / (PI[0] / 2.0)).round();
        let rest = PI.iter().fold(self, |rest, &part| rest - two_product(quarters, part / 2.0));
        let square = rest * rest;
        let (mut sine, mut cosine) = (rest, ONE);
        let (mut odd, mut even) = (rest, ONE);
        for n in 1..=16 {
            let n = f64::from(n);
            even = -(even * square) / Double::from((2.0 * n - 1.0) * (2.0 * n));
            odd = -(odd * square) / Double::from((2.0 * n) * (2.0 * n + 1.0));
            cosine = cosine + even;
            sine = sine + odd;
        }
        match quarters.rem_euclid(4.0) as u8 {
            0 => (sine, cosine),
            1 => (cosine, -sine),
            2 => (-sine, -cosine),
            _ => (-cosine, sine),
        }
    }

    pub fn sin(self) -> Double {
        self.sin_cos().0
    }

    pub fn cos(self) -> Double {
        self.sin_cos().1
    }

    pub fn tan(self) -> Double {
        let (sine, cosine) = self.sin_cos();
        sine / cosine
    }

    pub fn sinh(self) -> Double {
        let p = self.exp_minus_one();
        if self.high.abs() > 1.0 {
            return (self.exp() - (-self).exp()).scaled(0.5);
        }
        (p + p / (p + ONE)).scaled(0.5)
    }

    pub fn cosh(self) -> Double {
        (self.exp() + (-self).exp()).scaled(0.5)
    }

    pub fn tanh(self) -> Double {
        if self.is_negative() {
            return -(-self).tanh();
        }
        if self.high > 300.0 {
            return ONE;
        }
        let p = self.scaled(2.0).exp_minus_one();
        p / (p + Double::from(2.0))
    }

    /// The angle of the point (x, y): a value of the standard library turned by the small angle that is left.
    pub fn angle(y: Double, x: Double) -> Double {
        let first = Double::from(y.high.atan2(x.high));
        let (sine, cosine) = first.sin_cos();
        let rest = (y * cosine - x * sine) / (x * cosine + y * sine);
        first + rest
    }

    pub fn atan(self) -> Double {
        Double::angle(self, ONE)
    }

    pub fn asin(self) -> Double {
        Double::angle(self, ((ONE - self) * (ONE + self)).sqrt())
    }

    pub fn acos(self) -> Double {
        Double::angle(((ONE - self) * (ONE + self)).sqrt(), self)
    }

    pub fn asinh(self) -> Double {
        let x = self.abs();
        let value = if x.high > 1e20 {
            // 1/x^2 no longer counts.
            x.scaled(2.0).log()
        } else {
            let square = x * x;
            (x + square / (ONE + (ONE + square).sqrt())).log_one_plus()
        };
        if self.is_negative() { -value } else { value }
    }

    pub fn acosh(self) -> Double {
        if self.high > 1e20 {
            return self.scaled(2.0).log();
        }
        let t = self - ONE;
        if t.is_negative() {
            return NAN;
        }
        (t + (t * (t + Double::from(2.0))).sqrt()).log_one_plus()
    }

    pub fn atanh(self) -> Double {
        if self.high.abs() >= 1.0 {
            return NAN;
        }
        let x = self.abs();
        let value = (x.scaled(2.0) / (ONE - x)).log_one_plus().scaled(0.5);
        if self.is_negative() { -value } else { value }
    }

    /// 2/sqrt(pi) exp(-x^2) sum of 2^n x^(2n+1)/(2n+1)!! (DLMF 7.6.2)
    pub fn erf(self) -> Double {
        if self.high.abs() > 3.0 {
            return if self.is_negative() { -(ONE - (-self).erfc()) } else { ONE - self.erfc() };
        }
        let square = self * self;
        let (mut term, mut sum) = (self, self);
        for n in 1..400 {
            term = term * square.scaled(2.0) / Double::from(f64::from(2 * n + 1));
            sum = sum + term;
            if term.high.abs() <= 1e-34 * sum.high.abs() {
                break;
            }
        }
        let root = Double { high: PI[0], low: PI[1] }.sqrt();
        sum.scaled(2.0) * (-square).exp() / root
    }

    /// 1 - erf(x), from 3 on the continued fraction DLMF 7.9.1.
    pub fn erfc(self) -> Double {
        if self.high <= 3.0 {
            return ONE - self.erf();
        }
        let mut fraction = self;
        for n in (1..200).rev() {
            fraction = self + Double::from(f64::from(n) / 2.0) / fraction;
        }
        let root = Double { high: PI[0], low: PI[1] }.sqrt();
        (-(self * self)).exp() / (fraction * root)
    }

    pub fn hypot(self, other: Double) -> Double {
        let scale = 2.0_f64.powi(self.high.abs().max(other.high.abs()).max(1e-300).log2() as i32);
        let (a, b) = (self.scaled(1.0 / scale), other.scaled(1.0 / scale));
        (a * a + b * b).sqrt().scaled(scale)
    }

    pub fn power(self, exponent: Double) -> Double {
        (self.log() * exponent).exp()
    }
}
