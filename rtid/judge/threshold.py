"""The threshold of an exponentially weighted score chart for a stated number of rows per false alarm.

The statistic D = sᵀV⁻¹s of n directions behaves like the squared radius of an Ornstein-Uhlenbeck process; its mean
exit time is a hypergeometric series, corrected for overshoot between discrete readings by Siegmund's constant
(Siegmund, Sequential Analysis, 1985; run lengths checked against Rigdon, J. Stat. Comput. Simul. 52, 1995).
"""

from __future__ import annotations

import math

SIEGMUND = 0.5826


def mean_run_length(h: float, n: int, gamma: float, *, every: int = 1) -> float:
    """Rows to a false alarm of one chart read every `every` rows; gamma = -ln λ a row."""
    overshoot = SIEGMUND - gamma * (0.00695 * h - 0.0106 * n)
    w = 0.5 * (math.sqrt(h) + overshoot * math.sqrt(2.0 * gamma * every)) ** 2
    return _exit_time(w, n) / gamma


def threshold(n: int, gamma: float, run_length: float, *, every: int = 1) -> float:
    """The h at which `mean_run_length` equals `run_length`, by bisection."""
    low, high = 0.0, 4.0
    while mean_run_length(high, n, gamma, every=every) < run_length:
        low, high = high, 2.0 * high
    for _ in range(60):
        middle = 0.5 * (low + high)
        if mean_run_length(middle, n, gamma, every=every) < run_length:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


def _exit_time(w: float, n: int) -> float:
    """F(w) = Σ c_k w^k, c_1 = 1/n, c_(k+1) = c_k · 2k/((k+1)(2k+n))."""
    term, total, k = w / n, 0.0, 1
    while term > 1e-12 * total or k < w:
        total += term
        term *= w * 2.0 * k / ((k + 1.0) * (2.0 * k + n))
        k += 1
    return total
