//! Bessel functions J_n and Y_n of integer order n.
//!
//! Orders 0 and 1 come from `pxfm`. Higher orders, which only derivatives reach, follow from the recurrence
//! C_(k+1) = (2k/x) C_k - C_(k-1) (DLMF 10.6.1) where it is stable: upward for Y always, for J while n <= |x|. Below
//! that J_n comes from `libm`, which uses a continued fraction.

/// J_n(x)
pub(super) fn first_kind(n: u8, x: f64) -> f64 {
    match n {
        0 => pxfm::f_j0(x),
        1 => pxfm::f_j1(x),
        _ if f64::from(n) <= x.abs() => upward(n, x, pxfm::f_j0(x), pxfm::f_j1(x)),
        _ => libm::jn(i32::from(n), x),
    }
}

/// Y_n(x); NaN for negative x, minus infinity at 0.
pub(super) fn second_kind(n: u8, x: f64) -> f64 {
    match n {
        0 => pxfm::f_y0(x),
        1 => pxfm::f_y1(x),
        _ => upward(n, x, pxfm::f_y0(x), pxfm::f_y1(x)),
    }
}

fn upward(n: u8, x: f64, zeroth: f64, first: f64) -> f64 {
    let (mut low, mut high) = (zeroth, first);
    for k in (1..n).map(f64::from) {
        // Past the range of doubles only the sign is left, and the recurrence would give inf - inf.
        if high.is_infinite() {
            break;
        }
        (low, high) = (high, (2.0 * k / x).mul_add(high, -low));
    }
    high
}
