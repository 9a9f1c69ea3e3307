//! Polygamma functions psi^(n)(x), the derivatives of the digamma function.
//!
//! Orders 0 and 1 come from `pxfm`. Higher orders use reflection for negative arguments, upward recurrence
//! psi^(n)(x) = psi^(n)(x + 1) - (-1)^n n! x^(-n-1), and the asymptotic series for large arguments
//! (NIST Digital Library of Mathematical Functions, 5.15.5, 5.15.6 and 5.15.8).

/// Bernoulli numbers B_2, B_4, ..., B_20 (DLMF 24.2, table 24.2.3).
const BERNOULLI: [f64; 10] = [
    1.0 / 6.0,
    -1.0 / 30.0,
    1.0 / 42.0,
    -1.0 / 30.0,
    5.0 / 66.0,
    -691.0 / 2730.0,
    7.0 / 6.0,
    -3617.0 / 510.0,
    43867.0 / 798.0,
    -174611.0 / 330.0,
];

/// The n-th derivative of the digamma function at `x`; NaN at the poles 0, -1, -2, ...
pub(super) fn polygamma(n: u8, x: f64) -> f64 {
    if x.is_nan() || (x <= 0.0 && x.fract() == 0.0) {
        return f64::NAN;
    }
    match n {
        0 => pxfm::f_digamma(x),
        1 => pxfm::f_trigamma(x),
        _ if x < 0.0 => reflected(n, x),
        _ => positive(n, x),
    }
}

/// psi^(n)(1 - x) - (-1)^n psi^(n)(x) = (-1)^n pi d^n/dx^n cot(pi x), solved for a negative `x`.
fn reflected(n: u8, x: f64) -> f64 {
    let sign = if n.is_multiple_of(2) { 1.0 } else { -1.0 };
    sign * positive(n, 1.0 - x) - std::f64::consts::PI * cotangent_derivative(n, x)
}

fn positive(n: u8, x: f64) -> f64 {
    let order = f64::from(n);
    let factorial: f64 = (1..=u32::from(n)).map(f64::from).product();
    let sign = if n.is_multiple_of(2) { -1.0 } else { 1.0 };
    let exponent = -i32::from(n) - 1;
    let (mut shifted, mut recurrence) = (x, 0.0);
    let far_enough = 20.0 + order;
    while shifted < far_enough {
        recurrence += factorial * shifted.powi(exponent);
        shifted += 1.0;
    }
    // (n-1)!/x^n + n!/(2 x^(n+1)) + sum over k of B_2k (2k+n-1)!/((2k)! x^(2k+n))
    let leading = factorial / order * shifted.powi(-i32::from(n)) + factorial / 2.0 * shifted.powi(exponent);
    let mut series = 0.0;
    let mut ratio = factorial / order * shifted.powi(-i32::from(n));
    for (k, bernoulli) in BERNOULLI.iter().enumerate() {
        let two_k = 2.0 * (k as f64 + 1.0);
        ratio *= (two_k + order - 2.0) * (two_k + order - 1.0) / (two_k * (two_k - 1.0) * shifted * shifted);
        series += bernoulli * ratio;
    }
    sign * (recurrence + leading + series)
}

/// d^n/dx^n cot(pi x) as pi^n times a polynomial in c = cot(pi x): d/dx c = -pi (1 + c^2).
fn cotangent_derivative(n: u8, x: f64) -> f64 {
    let c = 1.0 / pxfm::f_tanpi(x);
    let mut coefficients = vec![0.0, 1.0];
    for _ in 0..n {
        let mut next = vec![0.0; coefficients.len() + 1];
        for (power, coefficient) in coefficients.iter().enumerate().skip(1) {
            next[power - 1] -= coefficient * power as f64;
            next[power + 1] -= coefficient * power as f64;
        }
        coefficients = next;
    }
    let value = coefficients.iter().rev().fold(0.0, |sum, coefficient| sum * c + coefficient);
    value * std::f64::consts::PI.powi(i32::from(n))
}
