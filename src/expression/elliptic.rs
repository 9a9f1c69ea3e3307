//! Complete elliptic integrals K(m) and E(m), m = k^2 < 1, and their derivatives by m.
//!
//! Values by the arithmetic-geometric mean (DLMF 19.8.5, 19.8.6). Derivatives follow from the differential equations
//! (DLMF 19.4.8, 19.4.9 rewritten in m)
//!
//!   m(1-m) K'' + (1-2m) K' - K/4 = 0,      m(1-m) E'' + (1-m) E' + E/4 = 0,
//!
//! differentiated n times; near m = 0, where that recurrence divides by m, from the power series (DLMF 19.5.1, 19.5.2).

/// The n-th derivative of K at `m`; NaN for m > 1, infinite at 1.
pub(super) fn first_kind(n: u8, m: f64) -> f64 {
    if m.is_nan() || m > 1.0 {
        return f64::NAN;
    }
    if m == 1.0 {
        return f64::INFINITY;
    }
    if n == 0 {
        return std::f64::consts::FRAC_PI_2 / mean(m).0;
    }
    if m.abs() <= SERIES_RADIUS {
        return series(n, m, 1.0);
    }
    let (k, e) = (first_kind(0, m), second_kind(0, m));
    let slope = (e - (1.0 - m) * k) / (2.0 * m * (1.0 - m));
    // m(1-m) K^(j+2) = (j + 1/2)^2 K^(j) - (j+1)(1-2m) K^(j+1)
    recur(n, k, slope, |j, low, high| {
        ((j + 0.5) * (j + 0.5) * low - (j + 1.0) * (1.0 - 2.0 * m) * high) / (m * (1.0 - m))
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
    if n == 0 {
        let (limit, sum) = mean(m);
        return std::f64::consts::FRAC_PI_2 / limit * (1.0 - sum);
    }
    if m.abs() <= SERIES_RADIUS {
        return series(n, m, -1.0);
    }
    let (k, e) = (first_kind(0, m), second_kind(0, m));
    let slope = (e - k) / (2.0 * m);
    // m(1-m) E^(j+2) = (j^2 - 1/4) E^(j) - (j + 1 - (2j+1) m) E^(j+1)
    recur(n, e, slope, |j, low, high| ((j * j - 0.25) * low - (j + 1.0 - (2.0 * j + 1.0) * m) * high) / (m * (1.0 - m)))
}

/// Below this |m| the power series converges fast and the recurrence loses digits.
const SERIES_RADIUS: f64 = 0.4;

/// The arithmetic-geometric mean of 1 and sqrt(1-m), and sum over n >= 0 of 2^(n-1) c_n^2.
fn mean(m: f64) -> (f64, f64) {
    let (mut a, mut g) = (1.0, (1.0 - m).sqrt());
    let (mut sum, mut weight) = (0.5 * m, 0.5);
    // c_n = (a - g)/2 squares in each step: 40 steps reach any finite m, most need 5.
    for _ in 0..40 {
        let c = 0.5 * (a - g);
        let next = 0.5 * (a + g);
        g = (a * g).sqrt();
        a = next;
        weight *= 2.0;
        sum += weight * c * c;
        if c.abs() <= 1e-9 * a {
            break;
        }
    }
    (a, sum)
}

/// The n-th derivative of (pi/2) sum over j of ((1/2)_j/j!)^2 s_j m^j with s_j = 1 for K and 1/(1-2j) for E.
fn series(n: u8, m: f64, kind: f64) -> f64 {
    let order = f64::from(n);
    let mut coefficient = 1.0;
    let mut total = 0.0;
    let mut power = 1.0;
    for j in 0..400 {
        let index = f64::from(j);
        if j >= u32::from(n) {
            let falling: f64 = (0..u32::from(n)).map(|i| index - f64::from(i)).product();
            let sign = if kind > 0.0 { 1.0 } else { 1.0 / (1.0 - 2.0 * index) };
            let term = coefficient * coefficient * sign * falling * power;
            total += term;
            power *= m;
            if index > 2.0 * order + 4.0 && term.abs() <= 1e-19 * total.abs() {
                break;
            }
        }
        coefficient *= (index + 0.5) / (index + 1.0);
    }
    std::f64::consts::FRAC_PI_2 * total
}

fn recur(n: u8, value: f64, slope: f64, next: impl Fn(f64, f64, f64) -> f64) -> f64 {
    let (mut low, mut high) = (value, slope);
    for j in 0..n.saturating_sub(1) {
        (low, high) = (high, next(f64::from(j), low, high));
    }
    high
}
