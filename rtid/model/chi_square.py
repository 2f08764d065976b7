"""The upper tail of the chi-square distribution, without scipy in the service."""

from __future__ import annotations

import math


def upper_tail(x: float, freedom: int) -> float:
    """P(χ² > x) by the incomplete gamma function: series below, continued fraction above (Abramowitz & Stegun 6.5)."""
    a, z = 0.5 * freedom, 0.5 * max(x, 0.0)
    if z == 0.0:
        return 1.0
    front = math.exp(-z + a * math.log(z) - math.lgamma(a))
    if z < a + 1.0:
        return max(0.0, 1.0 - front * _series(a, z))
    return front * _fraction(a, z)


def _series(a: float, z: float) -> float:
    term = total = 1.0 / a
    n = a
    while abs(term) > 1e-16 * abs(total):
        n += 1.0
        term *= z / n
        total += term
    return total


def _fraction(a: float, z: float) -> float:
    """Lentz's method."""
    b = z + 1.0 - a
    c, d = 1e300, 1.0 / b
    value = d
    for i in range(1, 500):
        an = -i * (i - a)
        b += 2.0
        d = 1.0 / (an * d + b)
        c = b + an / c
        step = d * c
        value *= step
        if abs(step - 1.0) < 1e-15:
            break
    return value
