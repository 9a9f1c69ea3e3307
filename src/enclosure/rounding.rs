//! One operation, rounded down or up, exact where the exact result is a double.
//!
//! The rounding error of a sum is a double, found by the two-sum of Knuth (The Art of Computer Programming 2, 4.2.2); that
//! of a product, quotient or root has a sign that one fused multiply-add tells as long as nothing underflows. So the
//! nearest result is moved by one place only when it lies on the wrong side. A bound is never turned into the infinity on
//! the wrong side by overflow. Rounding up is rounding down of the mirrored operation.

/// Below this size the error of a product may be too small for a double, so its sign is not relied on.
/// The error is a multiple of 2^-106 times the result, and the smallest double is 2^-1074.
const TINY: f64 = f64::from_bits((1023 - 960) << 52);

/// The largest double not above `a + b`, or the one before it. Not both may be infinite with different signs.
pub(super) fn add_down(a: f64, b: f64) -> f64 {
    let sum = a + b;
    if a.is_infinite() || b.is_infinite() {
        return sum;
    }
    if sum.is_infinite() {
        return finite_below(sum);
    }
    let shadow = sum - a;
    let error = (a - (sum - shadow)) + (b - shadow);
    // Written so that an overflow on the way (a NaN) gives the safe side.
    if error >= 0.0 { sum } else { sum.next_down() }
}

pub(super) fn add_up(a: f64, b: f64) -> f64 {
    -add_down(-a, -b)
}

/// A lower bound of `a * b`, where 0 times an infinite end is 0: the end is only approached.
pub(super) fn multiply_down(a: f64, b: f64) -> f64 {
    if a == 0.0 || b == 0.0 {
        return 0.0;
    }
    let product = a * b;
    if a.is_infinite() || b.is_infinite() {
        return product;
    }
    if product.is_infinite() {
        return finite_below(product);
    }
    let error = a.mul_add(b, -product);
    if error > 0.0 || (error == 0.0 && product.abs() >= TINY) {
        return product;
    }
    let below = product.next_down();
    if (a > 0.0) == (b > 0.0) { below.max(0.0) } else { below }
}

pub(super) fn multiply_up(a: f64, b: f64) -> f64 {
    -multiply_down(-a, b)
}

/// A lower bound of `a / b`; a divisor 0 is approached from above, and a quotient by an infinite end is 0.
pub(super) fn divide_down(a: f64, b: f64) -> f64 {
    if a == 0.0 || b.is_infinite() {
        return 0.0;
    }
    if b == 0.0 {
        return if a > 0.0 { f64::INFINITY } else { f64::NEG_INFINITY };
    }
    let quotient = a / b;
    if a.is_infinite() {
        return quotient;
    }
    if quotient.is_infinite() {
        return finite_below(quotient);
    }
    if a.abs() >= TINY && quotient.abs() >= TINY {
        // The exact quotient is `quotient + rest/b`.
        let rest = (-quotient).mul_add(b, a);
        if rest == 0.0 || (rest > 0.0) == (b > 0.0) {
            return quotient;
        }
        return quotient.next_down();
    }
    let below = quotient.next_down();
    if (a > 0.0) == (b > 0.0) { below.max(0.0) } else { below }
}

pub(super) fn divide_up(a: f64, b: f64) -> f64 {
    -divide_down(-a, b)
}

/// Bounds of the square root of a number that is not negative.
pub(super) fn square_root_bounds(x: f64) -> (f64, f64) {
    let root = x.sqrt();
    if x == 0.0 || x.is_infinite() {
        return (root, root);
    }
    if x < TINY {
        return (root.next_down(), root.next_up());
    }
    let excess = root.mul_add(root, -x);
    if excess > 0.0 {
        (root.next_down(), root)
    } else if excess < 0.0 {
        (root, root.next_up())
    } else {
        (root, root)
    }
}

/// What an overflowed lower bound of a finite number really says.
pub(super) fn finite_below(overflowed: f64) -> f64 {
    if overflowed > 0.0 { f64::MAX } else { f64::NEG_INFINITY }
}
