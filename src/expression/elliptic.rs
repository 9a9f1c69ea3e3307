//! Complete elliptic integrals K(m) and E(m), m = k^2 < 1, and their derivatives by m.
//!
//! Values by the arithmetic-geometric mean (DLMF 19.8.5, 19.8.6). Derivatives follow from the differential equations
//! (DLMF 19.4.8, 19.4.9 rewritten in m)
//!
//!   m(1-m) K'' + (1-2m) K' - K/4 = 0,      m(1-m) E'' + (1-m) E' + E/4 = 0,
//!
//! differentiated n times; that recurrence also has a solution that grows like |m|^-n, so that in the middle, where |m|
//! is not large against 1 - m, the hypergeometric series is used instead. The differences in both cancel a few digits
//! (E near m = 1, K' near m = 0), which arithmetic of twice the length absorbs: the results are good to the last place.

use super::wide::Wide;

/// The n-th derivative of K at `m`; NaN for m > 1, infinite at 1.
pub(super) fn first_kind(n: u8, m: f64) -> f64 {
    if m.is_nan() || m > 1.0 {
        return f64::NAN;
    }
    if m == 1.0 {
        return f64::INFINITY;
    }
    if n > 0 && in_the_middle(n, m) {
        return series(n, m, 0.5);
    }
    let (k, e) = both(m);
    if n == 0 {
        return k.to_f64();
    }
    let (m, rest) = (Wide::from(m), Wide::from(1.0) - Wide::from(m));
    // K' = (E/(1-m) - K)/(2m), DLMF 19.4.1
    let slope = (e / rest - k) / (Wide::from(2.0) * m);
    // m(1-m) K^(j+2) = (j + 1/2)^2 K^(j) - (j+1)(1-2m) K^(j+1)
    recur(n, k, slope, |j, low, high| {
        let outer = Wide::from((j + 0.5) * (j + 0.5)) * low;
        let inner = Wide::from(j + 1.0) * (rest - m) * high;
        (outer - inner) / m / rest
    })
}

/// The n-th derivative of E at `m`; NaN for m > 1.
pub(super) fn second_kind(n: u8, m: f64) -> f64 {
    if m.is_nan() || m > 1.0 {
        return f64::NAN;
    }
    if m == 1.0 {
        return if n == 0 { 1.0 } else { f64::NEG_INFINITY };
    }
    if n > 0 && in_the_middle(n, m) {
        return series(n, m, -0.5);
    }
    let (k, e) = both(m);
    if n == 0 {
        return e.to_f64();
    }
    let (m, rest) = (Wide::from(m), Wide::from(1.0) - Wide::from(m));
    // E' = (E - K)/(2m), DLMF 19.4.2
    let slope = (e - k) / (Wide::from(2.0) * m);
    // m(1-m) E^(j+2) = (j^2 - 1/4) E^(j) - (j + 1 - (2j+1) m) E^(j+1)
    recur(n, e, slope, |j, low, high| {
        let outer = Wide::from(j * j - 0.25) * low;
        let inner = (Wide::from(j + 1.0) - Wide::from(2.0 * j + 1.0) * m) * high;
        (outer - inner) / m / rest
    })
}

/// Where the series is used. Above 1/2 the recurrence cancels little; below, each order costs a factor (1-m)/|m|, which
/// 31 digits bear for 20 orders from m = -1 down and for 255 orders from m = -9 down.
fn in_the_middle(n: u8, m: f64) -> bool {
    let lowest = if n <= 20 { -1.0 } else { -9.0 };
    (lowest..=0.5).contains(&m)
}

/// K and E.
fn both(m: f64) -> (Wide, Wide) {
    let half = Wide::from(0.5);
    let (mut a, mut g) = (Wide::from(1.0), (Wide::from(1.0) - Wide::from(m)).square_root());
    // sum over n >= 0 of 2^(n-1) c_n^2 with c_0^2 = m
    let (mut sum, mut weight) = (half * Wide::from(m), 0.5);
    // c_n = (a - g)/2 is squared in each step: 20 steps reach any finite m, most need 6.
    for _ in 0..20 {
        let c = half * (a - g);
        let next = half * (a + g);
        g = (a * g).square_root();
        a = next;
        weight *= 2.0;
        sum = sum + Wide::from(weight) * c * c;
        if c.to_f64().abs() <= 1e-16 * a.to_f64() {
            break;
        }
    }
    let k = Wide::HALF_PI / a;
    (k, k * (Wide::from(1.0) - sum))
}

/// The n-th derivative, n > 0, of (pi/2) 2F1(s, 1/2; 1; m), which is K for s = 1/2 and E for s = -1/2:
///
///   (pi/2) (s)_n (1/2)_n/n! 2F1(s + n, 1/2 + n; 1 + n; m)      (DLMF 19.5.1, 19.5.2, 15.5.2),
///
/// for negative m with 2F1(a, b; c; m) = (1-m)^-a 2F1(a, c-b; c; m/(m-1)) (DLMF 15.8.1), so that no terms cancel.
fn series(n: u8, m: f64, s: f64) -> f64 {
    let order = f64::from(n);
    let (a, b, c) = (s + order, 0.5 + order, 1.0 + order);
    let rest = Wide::from(1.0) - Wide::from(m);
    let mut factor = Wide::HALF_PI;
    for i in (0..n).map(f64::from) {
        factor = factor * Wide::from((s + i) * (0.5 + i)) / Wide::from(1.0 + i);
        if m < 0.0 {
            factor = factor / rest;
        }
    }
    let sum = if m < 0.0 {
        // (1-m)^-a = (1-m)^-n (1-m)^-s
        let root = rest.square_root();
        factor = if s > 0.0 { factor / root } else { factor * root };
        hypergeometric(a, c - b, c, -Wide::from(m) / rest)
    } else {
        hypergeometric(a, b, c, Wide::from(m))
    };
    (factor * sum).to_f64()
}

/// 2F1(a, b; c; z) for positive arguments and z at most 0.9.
fn hypergeometric(a: f64, b: f64, c: f64, z: Wide) -> Wide {
    let mut term = Wide::from(1.0);
    let mut total = term;
    for k in (0..5000).map(f64::from) {
        term = term * Wide::from((a + k) * (b + k)) / Wide::from((c + k) * (1.0 + k)) * z;
        total = total + term;
        // The terms may grow at first; once their ratio is below 0.95 the rest is at most 20 terms of this size.
        let ratio = (a + k) * (b + k) / ((c + k) * (1.0 + k)) * z.to_f64();
        if ratio < 0.95 && term.to_f64() <= 1e-20 * total.to_f64() {
            break;
        }
    }
    total
}

fn recur(n: u8, value: Wide, slope: Wide, next: impl Fn(f64, Wide, Wide) -> Wide) -> f64 {
    let (mut low, mut high) = (value, slope);
    for j in (0..n - 1).map(f64::from) {
        (low, high) = (high, next(j, low, high));
    }
    high.to_f64()
}
