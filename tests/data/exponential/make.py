#!/usr/bin/env python3
"""Prints the polynomial of src/numeric/exponential.rs and writes the reference values beside this file.

    python3 tests/data/exponential/make.py

Needs nothing but Python: all arithmetic is decimal, with 50 digits.

The polynomial: q(r) = 1/2 + c_1 r + ... + c_9 r^9 in e^r = 1 + r (1 + r q(r)), |r| <= ln 2 / 2, by Remez's
exchange (Remez 1934): the largest |q(r) - Q(r)| (r^2 + WEIGHT_AT_ZERO) is least, Q = (e^r - 1 - r)/r^2. The
weight keeps both e^r and, where r is small, q itself close.

exponentials.csv: x, and e^x as the nearest double and what that leaves, in units of its last place (ulps).
escapes.csv: x, g = (1 - e^-x)/x and dg/dx, each as the nearest double.
"""

import math
import random
from decimal import Decimal, getcontext
from pathlib import Path

getcontext().prec = 50

DEGREE = 9
WEIGHT_AT_ZERO = Decimal("0.02")
# A little beyond ln 2 / 2: the integer is rounded from a rounded product.
HALF_RANGE = Decimal(2).ln() / 2 * Decimal("1.0000001")


def quotient(r):
    """(e^r - 1 - r)/r^2, by its series where that loses no digits."""
    if abs(r) > 1:
        return (r.exp() - 1 - r) / (r * r)
    total, term, k = Decimal(0), Decimal(1) / 2, 2
    while abs(term) > Decimal("1e-52"):
        total += term
        k += 1
        term = term * r / k
    return total


def polynomial(coefficients, r):
    total = Decimal(0)
    for coefficient in reversed(coefficients):
        total = total * r + coefficient
    return total


def solve(matrix, right):
    """Gauss elimination with row exchange."""
    rows = [list(row) + [value] for row, value in zip(matrix, right)]
    size = len(rows)
    for i in range(size):
        pivot = max(range(i, size), key=lambda k: abs(rows[k][i]))
        rows[i], rows[pivot] = rows[pivot], rows[i]
        for k in range(i + 1, size):
            factor = rows[k][i] / rows[i][i]
            rows[k] = [a - factor * b for a, b in zip(rows[k], rows[i])]
    solution = [Decimal(0)] * size
    for i in reversed(range(size)):
        known = sum(rows[i][j] * solution[j] for j in range(i + 1, size))
        solution[i] = (rows[i][size] - known) / rows[i][i]
    return solution


def remez():
    """Coefficients 1/2, c_1, ... c_9; the error alternates in sign over r at ten points."""
    points_needed = DEGREE + 1

    def error(coefficients, r):
        return (polynomial(coefficients, r) - quotient(r)) * (r * r + WEIGHT_AT_ZERO)

    points = [
        HALF_RANGE * Decimal(repr(math.cos(math.pi * (i + 0.5) / points_needed)))
        for i in reversed(range(points_needed))
    ]
    grid = [HALF_RANGE * (Decimal(i) / 400 - 1) for i in range(801)]
    coefficients = []
    for _ in range(12):
        matrix, right = [], []
        for i, r in enumerate(points):
            # All terms hold a factor r, which changes its sign at zero.
            sign = (-1) ** i if r > 0 else -((-1) ** i)
            powers = [r]
            while len(powers) < DEGREE:
                powers.append(powers[-1] * r)
            matrix.append(powers + [sign / (r * r + WEIGHT_AT_ZERO)])
            right.append(quotient(r) - Decimal("0.5"))
        coefficients = [Decimal("0.5")] + solve(matrix, right)[:-1]
        errors = [error(coefficients, r) * (1 if r > 0 else -1) for r in grid]
        extrema = []
        for i, value in enumerate(errors):
            before = abs(errors[i - 1]) if i else Decimal(-1)
            after = abs(errors[i + 1]) if i + 1 < len(errors) else Decimal(-1)
            if value and abs(value) >= before and abs(value) > after:
                if extrema and (errors[extrema[-1]] > 0) == (value > 0):
                    if abs(value) > abs(errors[extrema[-1]]):
                        extrema[-1] = i
                else:
                    extrema.append(i)
        while len(extrema) > points_needed:
            first_is_less = abs(errors[extrema[0]]) < abs(errors[extrema[-1]])
            extrema.pop(0 if first_is_less else -1)
        points = [grid[i] for i in extrema]
    return coefficients


def print_polynomial():
    doubles = [float(c) for c in remez()]
    exact = [Decimal(c) for c in doubles]
    of_q = of_exp = Decimal(0)
    for i in range(2001):
        r = HALF_RANGE * (Decimal(i) / 1000 - 1)
        difference = abs(polynomial(exact, r) - quotient(r))
        of_q = max(of_q, difference)
        of_exp = max(of_exp, difference * r * r / r.exp())
    print("c_9 down to c_0, rounded to doubles:")
    for c in reversed(doubles):
        print(f"    {c!r},")
    print(f"largest error of q {of_q:.1e}, relative error of e^r {of_exp:.1e}")


def parts(exact):
    """The nearest double, and the rest in units of its last place."""
    nearest = float(exact)
    return f"{nearest!r},{(exact - Decimal(nearest)) / Decimal(math.ulp(nearest)):.4f}"


def write_references(folder):
    numbers = random.Random(1)
    arguments = [numbers.uniform(-1, 1) for _ in range(500)]
    arguments += [numbers.uniform(-40, 40) for _ in range(500)]
    arguments += [numbers.uniform(-708, 709.7) for _ in range(500)]
    # Where the reduced argument is largest: near odd multiples of ln 2 / 2.
    arguments += [(k + 0.5) * math.log(2) + numbers.uniform(-1e-3, 1e-3) for k in range(-60, 60)]
    arguments += [sign * 10.0**-k for k in range(1, 20) for sign in (1, -1)]
    lines = ["x,nearest,rest_ulps"]
    lines += [f"{x!r},{parts(Decimal(x).exp())}" for x in sorted(arguments)]
    (folder / "exponentials.csv").write_text("\n".join(lines) + "\n")

    depths = [10.0 ** numbers.uniform(-12, 2.8) for _ in range(500)]
    depths += [numbers.uniform(0, 2) for _ in range(500)]
    # On either side of where the formula changes.
    depths += [numbers.uniform(0.33, 0.37) for _ in range(300)]
    lines = ["x,g,slope"]
    for x in sorted(depths):
        exact = Decimal(x)
        # (1 - e^-x)/x = 1 - x Q(-x); its slope (e^-x - g)/x = Q(-x) (1 + x) - 1.
        q = quotient(-exact)
        lines.append(f"{x!r},{float(1 - exact * q)!r},{float(q * (1 + exact) - 1)!r}")
    (folder / "escapes.csv").write_text("\n".join(lines) + "\n")


if __name__ == "__main__":
    print_polynomial()
    write_references(Path(__file__).parent)
