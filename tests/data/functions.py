#!/usr/bin/env python3
"""Writes functions.csv: values of every function of the table at exact doubles, from mpmath (60 digits).

    python3 tests/data/functions.py > tests/data/functions.csv

Each line is `function,x,value,rest` or `function,x,y,value,rest`. Arguments are doubles in shortest round-trip form;
`value` is the double nearest to the true value and `rest` the true value minus that double, so that errors far below one
unit in the last place can be seen. Values beyond the range of doubles are left out.

Derivatives of the elliptic integrals come from the hypergeometric series (DLMF 19.5.1, 19.5.2 differentiated with
15.5.2), which is another route than the one in the program.
"""
import math
import random

import mpmath as mp

mp.mp.dps = 60
random.seed(20240229)


def doubles(low, high, count, tiny=False):
    """Random doubles: half uniform, half logarithmic in the distance from 0 (or from `low` if that is positive)."""
    out = [random.uniform(low, high) for _ in range(count // 2)]
    for _ in range(count - len(out)):
        side = high if (high > 0 and (low >= 0 or random.random() < 0.5)) else low
        if low > 0:
            out.append(math.exp(random.uniform(math.log(low), math.log(high))))
        else:
            out.append(math.copysign(math.exp(random.uniform(math.log(1e-300 if tiny else 1e-12), math.log(abs(side)))), side))
    return out


def near(points, spread=(0, 1e-15, 1e-12, 1e-8, 1e-5, 1e-3)):
    """Doubles around each point, the nearest double first."""
    out = []
    for p in points:
        c = float(p)
        for s in spread:
            for sign in (1, -1):
                out.append(c + sign * s * max(abs(c), 1.0))
    return out


def real(f, x):
    y = f(mp.mpf(x))
    if isinstance(y, mp.mpc):
        if y.imag != 0:
            return None
        y = y.real
    return y


def emit(name, arguments, value):
    if value is None or mp.isnan(value) or mp.isinf(value):
        return
    if abs(value) > mp.mpf(1.7e308) or (value != 0 and abs(value) < mp.mpf(2.3e-308)):
        return
    head = float(value)
    rest = float(value - mp.mpf(head))
    print(",".join([name] + [repr(a) for a in arguments] + [repr(head), "%.6e" % rest]))


def table(name, f, arguments):
    for x in sorted(set(arguments)):
        if not math.isfinite(x):
            continue
        try:
            emit(name, [x], real(f, x))
        except (ValueError, ZeroDivisionError, OverflowError, mp.libmp.NoConvergence):
            pass


def table2(name, f, pairs):
    for a, b in sorted(set(pairs)):
        emit(name, [a, b], f(mp.mpf(a), mp.mpf(b)))


half_pi = [k * mp.pi / 2 for k in range(1, 9)] + [100 * mp.pi, 12345 * mp.pi / 2, mp.mpf(10) ** 6 * mp.pi]
wide = doubles(-30, 30, 80, True) + doubles(-1e6, 1e6, 40) + [1e15, 1e22, -1e100, 1e300]
table("sin", mp.sin, wide + near(half_pi))
table("cos", mp.cos, wide + near(half_pi))
table("tan", mp.tan, wide + near(half_pi))
ends = [1 - 2.0**-k for k in range(1, 54)]
unit = doubles(-1, 1, 140, True) + ends + [-e for e in ends] + [1.0, -1.0]
table("asin", mp.asin, unit)
table("acos", mp.acos, unit)
table("atanh", mp.atanh, unit)
table("atan", mp.atan, doubles(-1e3, 1e3, 160, True) + [1e10, 1e100, 1e300, -1e17] + near([1, -1]))
big = doubles(-30, 30, 120, True) + doubles(-700, 700, 80)
table("sinh", mp.sinh, big)
table("cosh", mp.cosh, big)
table("tanh", mp.tanh, doubles(-25, 25, 200, True))
table("asinh", mp.asinh, doubles(-1e3, 1e3, 180, True) + [1e10, -1e100, 1e300])
table("acosh", mp.acosh, [1.0] + [1 + 2.0**-k for k in range(1, 53)] + doubles(1, 1e3, 140) + [1e10, 1e100, 1e300])
table("exp", mp.exp, big + [-1e-17, 709.7])
table("log", mp.log, doubles(1e-300, 1e300, 140) + doubles(0.5, 2, 60) + near([1]))
table("sqrt", mp.sqrt, doubles(1e-300, 1e300, 100) + doubles(0, 10, 100))
table("cbrt", lambda x: mp.sign(x) * mp.cbrt(abs(x)), doubles(-1e3, 1e3, 180, True) + [1e300, -1e300])
table("abs", abs, doubles(-5, 5, 20, True))
table("sign", mp.sign, doubles(-5, 5, 20, True) + [0.0])
table("erf", mp.erf, doubles(-6, 6, 200, True))
table("erfc", mp.erfc, doubles(-6, 26.5, 200, True) + doubles(15, 26.5, 30))

poles = list(range(-20, 1))
gamma_zone = doubles(-30, 30, 120, True) + doubles(30, 171, 40) + doubles(-170, -30, 30)
table("gamma", mp.gamma, gamma_zone + near(poles, (1e-15, 1e-9, 1e-4, 0.1)) + [float(n) for n in range(1, 40)] + near([1, 2]))
log_gamma_zeros = [mp.findroot(lambda x: mp.log(abs(mp.gamma(x))), g) for g in (-2.457, -2.747, -3.143, -3.955, -4.039, -4.991)]
table(
    "lgamma",
    lambda x: mp.log(abs(mp.gamma(x))),
    gamma_zone + near(poles[-6:], (1e-15, 1e-9, 1e-4, 0.1)) + near([1, 2]) + near(log_gamma_zeros)
    + doubles(1e3, 1e300, 20),
)
for n in range(5):
    guesses = {0: (1.4616, -0.504, -1.573, -2.61, -3.63), 2: (-0.47, -1.48, -2.48), 4: (-0.49, -1.49, -2.49)}.get(n, ())
    zeros = [mp.findroot(lambda x: mp.psi(n, x), g) for g in guesses]
    table(
        f"polygamma {n}",
        lambda x: mp.psi(n, x),
        doubles(1e-3, 30, 80) + doubles(-10, 0, 60) + doubles(30, 1e6, 20) + doubles(1e-60, 1e-3, 20) + near(zeros)
        + near(poles[-5:], (1e-10, 1e-4, 0.05)) + [1e10, 1e15, 1e50],
    )
for n in range(6):
    zeros = [mp.besseljzero(n, k) for k in (1, 2, 3, 5, 10, 30)]
    table(
        f"bessel_j {n}",
        lambda x: mp.besselj(n, x),
        doubles(-40, 40, 100, False) + doubles(0, 40, 60) + doubles(40, 1e4, 40) + [0.0, 1e5, 1e6] + near(zeros),
    )
    zeros = [mp.besselyzero(n, k) for k in (1, 2, 3, 5, 10, 30)]
    table(
        f"bessel_y {n}",
        lambda x: mp.bessely(n, x),
        doubles(1e-3, 40, 120) + doubles(1e-30, 1, 40) + doubles(40, 1e4, 40) + [1e5, 1e6] + near(zeros),
    )


def elliptic(a, b, n):
    """n-th derivative of (pi/2) 2F1(a, b; 1; m)."""
    scale = mp.pi / 2 * mp.rf(mp.mpf(a), n) * mp.rf(mp.mpf(b), n) / mp.factorial(n)
    return lambda m: scale * mp.hyp2f1(mp.mpf(a) + n, mp.mpf(b) + n, 1 + n, m)


zone = doubles(-1, 1, 80) + doubles(-1e3, -1, 40) + doubles(-1, 1, 40, True) + [-1e4, -1e6, -1e10] + ends[::3]
zone += [0.0, 0.39, 0.4, 0.41, -0.39, -0.4, -0.41, 0.5, -1.0, 0.9, 0.99]
for n in range(5):
    table(f"elliptic_k {n}", elliptic(0.5, 0.5, n), zone)
    table(f"elliptic_e {n}", elliptic(-0.5, 0.5, n), zone)

# High orders, which only repeated derivatives reach.
for n in (12, 60, 130):
    table(f"elliptic_k {n}", elliptic(0.5, 0.5, n), zone[::8] + [-1.0, -9.0, -9.1])
    table(f"elliptic_e {n}", elliptic(-0.5, 0.5, n), zone[::8] + [-1.0, -9.0, -9.1])
for n in (9, 40):
    table(f"polygamma {n}", lambda x: mp.psi(n, x), doubles(1e-2, 30, 30) + doubles(-6, 0, 20) + doubles(30, 1e3, 20))
    table(f"bessel_j {n}", lambda x: mp.besselj(n, x), doubles(0, 100, 40) + doubles(-30, 0, 10) + [1e3, 1e4])
    table(f"bessel_y {n}", lambda x: mp.bessely(n, x), doubles(1e-3, 100, 40) + [1e3, 1e4])

plane = list(zip(doubles(-10, 10, 120, True), random.sample(doubles(-10, 10, 120, True), 120)))
plane += [(1e-3 * a, b) for a, b in plane[:20]] + [(1e150 * a, 1e150 * b) for a, b in plane[:20]]
plane += [(1e-150 * a, 1e-150 * b) for a, b in plane[:20]] + [(a, 1e-17 * b) for a, b in plane[:20]]
table2("atan2", mp.atan2, plane)
table2("hypot", mp.hypot, plane)
table2("min", min, plane[:20])
table2("max", max, plane[:20])
bases = doubles(1e-3, 50, 60)
powers = [(b, e) for b, e in zip(bases, doubles(-20, 20, 60))]
powers += [(b, e) for b in bases[:12] for e in (2.0, 3.0, 7.0, -1.0, -2.0, 16.0, 63.0, 0.5, 1.5, -0.5, -2.5, 7.5, 1 / 3)]
powers += [(-b, e) for b in bases[:6] for e in (2.0, 3.0, -3.0)] + [(1 + 1e-10, 1e9), (1e-100, 2.5), (1e100, -2.5)]
table2("pow", lambda b, e: b**e, powers)
