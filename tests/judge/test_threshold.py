"""The threshold against published vectors, an independent solution of the integral equation, and simulation."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import ncx2  # type: ignore[import-untyped]

from rtid.judge.threshold import mean_run_length, threshold

VECTORS = [  # directions, memory in rows, rows per false alarm, threshold to the printed digit
    (4, 50, 1e5, 25.401),
    (4, 200, 1e6, 28.133),
    (4, 3200, 1e7, 27.481),
    (1, 200, 1e5, 14.044),
    (8, 50, 1e7, 45.533),
]


def rate(memory: float) -> float:
    return float(-np.log1p(-1.0 / memory))


def by_integral_equation(h: float, n: int, r: float, nodes: int = 160) -> float:
    """Mean run length of the chart read at every row, started at zero (Rigdon, J. Stat. Comput. Simul. 52, 1995).

    Given the statistic d now, the next one over 1 - λ² is noncentral χ²(n) with noncentrality λ²d/(1 - λ²). The
    equation L(d) = 1 + ∫ L(x) f(x|d) dx is solved at Gauss-Legendre nodes in √x.
    """
    kept = 1.0 - (1.0 - r) ** 2
    points, weights = np.polynomial.legendre.leggauss(nodes)
    root = 0.5 * np.sqrt(h) * (points + 1.0)
    weight = 0.5 * np.sqrt(h) * weights * 2.0 * root

    def kernel(d: np.ndarray) -> np.ndarray:
        noncentrality = np.maximum((1.0 - kept) * d / kept, 1e-12)
        return np.asarray(ncx2.pdf(root[None, :] ** 2 / kept, n, noncentrality[:, None]) / kept * weight[None, :])

    inside = np.linalg.solve(np.eye(nodes) - kernel(root**2), np.ones(nodes))
    return float(1.0 + (kernel(np.zeros(1)) @ inside)[0])


@pytest.mark.parametrize(("n", "memory", "run_length", "h"), VECTORS)
def test_published_vectors(n: int, memory: int, run_length: float, h: float) -> None:
    assert round(threshold(n, rate(memory), run_length), 3) == h


@pytest.mark.parametrize(
    ("n", "r", "h", "error"),
    [
        (4, 0.02, 25.401, 0.003),
        (1, 0.1, 12.0, 0.003),
        (4, 0.1, 20.0, 0.003),
        (4, 0.2, 20.0, 0.009),
        (4, 0.3, 20.0, 0.037),
    ],
)
def test_run_length_against_the_integral_equation(n: int, r: float, h: float, error: float) -> None:
    """The allowed errors are those stated for the approximation."""
    assert mean_run_length(h, n, rate(1.0 / r)) == pytest.approx(by_integral_equation(h, n, r), rel=error)


def test_run_length_of_a_chart_that_is_read_every_eight_rows() -> None:
    """2000 simulated charts, restarted at each alarm: 6000 alarms, so three deviations are 4 %, and 1 % for bias."""
    n, memory, every, charts, readings = 4, 50, 8, 2000, 750
    fade = 1.0 - 1.0 / memory
    h = threshold(n, rate(memory), 2000.0, every=every)
    deviation = np.sqrt((1.0 - fade ** (2 * every)) / (1.0 - fade**2))
    rng = np.random.default_rng(5)
    score, alarms = np.zeros((charts, n)), 0
    for _ in range(readings):
        score = fade**every * score + deviation * rng.standard_normal((charts, n))
        over = (score**2).sum(axis=1) * (1.0 - fade**2) > h
        score[over] = 0.0
        alarms += int(over.sum())
    assert charts * readings * every / alarms == pytest.approx(2000.0, rel=0.05)


@pytest.mark.parametrize("every", [1, 16])
@pytest.mark.parametrize("n", [1, 3, 5])
def test_threshold_grows_with_the_run_length_and_keeps_it(n: int, every: int) -> None:
    lengths = np.geomspace(1e3, 1e9, 25)
    found = np.array([threshold(n, rate(200), float(length), every=every) for length in lengths])
    assert np.all(np.diff(found) > 0.0)
    kept = [mean_run_length(float(h), n, rate(200), every=every) for h in found]
    assert kept == pytest.approx(lengths.tolist(), rel=1e-9)


def test_threshold_grows_with_the_directions_and_falls_with_the_memory() -> None:
    by_directions = [threshold(n, rate(200), 1e5) for n in (1, 2, 4, 8, 16)]
    by_memory = [threshold(4, rate(memory), 1e5) for memory in (50, 200, 800, 3200)]
    assert by_directions == sorted(by_directions)
    assert by_memory == sorted(by_memory, reverse=True)
