#!/usr/bin/env python3
"""Writes derivatives.csv: first and second partial derivatives of formulas, by differences in mpmath at 40 digits.

    python3 tests/data/derivatives.py > tests/data/derivatives.csv

Each line is `formula;x;y;fx;fy;fxx;fxy;fyy`; the formula is in postfix notation, x and y are exact doubles. First every
function alone, then powers, then random formulas of all functions. Points where a value or a derivative is above 1e4 or
a kink is near are left out.
"""
import random

import mpmath as mp

mp.mp.dps = 40
random.seed(1729)


def elliptic(second, n):
    """n-th derivative of K or E by its differential equation (DLMF 19.4), differentiated; fast but loses digits near 0."""

    def f(m):
        with mp.extradps(30):
            k, e = mp.ellipk(m), mp.ellipe(m)
            if second:
                low, high = e, (e - k) / (2 * m)
            else:
                low, high = k, (e / (1 - m) - k) / (2 * m)
            for j in range(n):
                if second:
                    top = (mp.mpf(j) ** 2 - mp.mpf(1) / 4) * low - (j + 1 - (2 * j + 1) * m) * high
                else:
                    top = (j + mp.mpf(1) / 2) ** 2 * low - (j + 1) * (1 - 2 * m) * high
                low, high = high, top / (m * (1 - m))
            return low

    return f


# name: (function, lowest and highest argument to try)
UNARY = {
    "neg": (lambda x: -x, -3, 3),
    "sin": (mp.sin, -4, 4),
    "cos": (mp.cos, -4, 4),
    "tan": (mp.tan, -4, 4),
    "asin": (mp.asin, -0.97, 0.97),
    "acos": (mp.acos, -0.97, 0.97),
    "atan": (mp.atan, -5, 5),
    "sinh": (mp.sinh, -4, 4),
    "cosh": (mp.cosh, -4, 4),
    "tanh": (mp.tanh, -4, 4),
    "asinh": (mp.asinh, -5, 5),
    "acosh": (mp.acosh, 1.05, 8),
    "atanh": (mp.atanh, -0.97, 0.97),
    "exp": (mp.exp, -5, 5),
    "log": (mp.log, 0.05, 9),
    "sqrt": (mp.sqrt, 0.05, 9),
    "cbrt": (lambda x: mp.sign(x) * mp.cbrt(abs(x)), -5, 5),
    "abs": (abs, -5, 5),
    "sign": (mp.sign, -5, 5),
    "erf": (mp.erf, -2.5, 2.5),
    "erfc": (mp.erfc, -2.5, 2.5),
    "gamma": (mp.gamma, -3.8, 5),
    "lgamma": (lambda x: mp.log(abs(mp.gamma(x))), -3.8, 9),
    "elliptic_k": (elliptic(False, 0), -3, 0.9),
    "elliptic_e": (elliptic(True, 0), -3, 0.9),
}
for n in range(4):
    UNARY[f"polygamma:{n}"] = (lambda x, n=n: mp.psi(n, x), -3.8, 9)
    UNARY[f"bessel_j:{n}"] = (lambda x, n=n: mp.besselj(n, x), -9, 9)
    UNARY[f"bessel_y:{n}"] = (lambda x, n=n: mp.bessely(n, x), 0.5, 12)
    UNARY[f"elliptic_k:{n}"] = (elliptic(False, n), -3, 0.8)
    UNARY[f"elliptic_e:{n}"] = (elliptic(True, n), -3, 0.8)
BINARY = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "pow": lambda a, b: a**b,
    "atan2": lambda a, b: mp.atan2(a, b),
    "hypot": lambda a, b: mp.sqrt(a * a + b * b),
    "min": min,
    "max": max,
}


class Unusable(Exception):
    pass


def value(tokens, x, y, check=False):
    stack = []
    for place, token in enumerate(tokens):
        if token == "x":
            stack.append(x)
        elif token == "y":
            stack.append(y)
        elif token in UNARY:
            f, low, high = UNARY[token]
            a = stack.pop()
            if check and not (low <= a <= high):
                raise Unusable
            if check and token in ("abs", "sign", "cbrt") and abs(a) < 0.01:
                raise Unusable
            stack.append(f(a))
        elif token in BINARY:
            b, a = stack.pop(), stack.pop()
            if check and token in ("min", "max") and abs(a - b) < 0.01:
                raise Unusable
            if check and token == "/" and abs(b) < 0.05:
                raise Unusable
            if check and token in ("hypot", "atan2") and a * a + b * b < 0.01:
                raise Unusable
            if check and token == "atan2" and b < 0 and abs(a) < 0.01:
                raise Unusable
            # A negative base has derivatives only where the exponent is written as an integer.
            literal = tokens[place - 1].lstrip("-").isdigit()
            if check and token == "pow" and not (a > 0.05 or (literal and a < -0.05)):
                raise Unusable
            stack.append(BINARY[token](a, b))
        elif token == "if":  # a b c d: if(a < b, c, d)
            d, c, b, a = stack.pop(), stack.pop(), stack.pop(), stack.pop()
            if check and abs(a - b) < 0.01:
                raise Unusable
            stack.append(c if a < b else d)
        else:
            top, _, bottom = token.partition("/")
            stack.append(mp.mpf(int(top)) / (int(bottom) if bottom else 1))
        if check and (isinstance(stack[-1], mp.mpc) or abs(stack[-1]) > 1e4):
            raise Unusable
    (result,) = stack
    return result


def line(tokens, x, y):
    """Prints one line; returns whether the point could be used."""
    try:
        value(tokens, mp.mpf(x), mp.mpf(y), check=True)
        f = lambda a, b: value(tokens, a, b)
        parts = [mp.diff(f, (mp.mpf(x), mp.mpf(y)), order) for order in ((1, 0), (0, 1), (2, 0), (1, 1), (0, 2))]
    except (Unusable, ZeroDivisionError, ValueError, TypeError, OverflowError):
        return False
    if any(isinstance(p, mp.mpc) or abs(p) > 1e4 for p in parts):
        return False
    shown = ["0" if abs(p) < 1e-25 else mp.nstr(p, 18) for p in parts]
    print(";".join([" ".join(tokens), repr(x), repr(y)] + shown))
    return True


def random_tokens(size):
    if size <= 1:
        return [random.choice(["x", "y", "x", "y", "2", "1/3", "-3/2"])]
    kind = random.random()
    if kind < 0.4:
        return random_tokens(size - 1) + [random.choice(list(UNARY))]
    if kind < 0.46:
        third = max(1, size // 4)
        return sum((random_tokens(third) for _ in range(4)), []) + ["if"]
    left = random.randint(1, size - 1)
    return random_tokens(left) + random_tokens(size - left) + [random.choice(list(BINARY))]


for name, (_, low, high) in UNARY.items():
    found = 0
    while found < 6:
        found += line(["x", name], random.uniform(low, high), 0.5)
    found = 0
    while found < 2:
        found += line(["x", "y", "*", name], random.uniform(low, high), random.uniform(0.5, 2))
for name in BINARY:
    found = 0
    while found < 8:
        found += line(["x", "y", name], random.uniform(-3, 3), random.uniform(-3, 3))
for exponent in ("2", "3", "-1", "-2", "5", "1/2", "-1/2", "3/2", "1/3", "-7/5", "70", "-70"):
    for sign in (1, -1):
        if sign < 0 and "/" in exponent:
            continue
        found = 0
        while found < 3:
            found += line(["x", exponent, "pow"], sign * random.uniform(0.9, 1.1), 0.5)
for tokens in (["x", "x", "pow"], ["x", "y", "pow"], ["2", "x", "pow"], ["x", "y", "*", "y", "x", "-", "pow"],
               ["x", "x", "x", "pow", "pow"]):
    found = 0
    while found < 5:
        found += line(tokens, random.uniform(0.3, 2), random.uniform(0.3, 2))
found = 0
while found < 500:
    tokens = random_tokens(random.randint(3, 12))
    if "x" in tokens and "y" in tokens:
        found += line(tokens, random.uniform(-2, 2), random.uniform(0.1, 3))
