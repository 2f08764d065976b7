"""The step inside a box against scipy's bounded least squares."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import lsq_linear  # type: ignore[import-untyped]

from rtid.identify.bounded import bounded_step


@pytest.mark.parametrize("seed", range(20))
def test_one_held_parameter_agrees_with_bounded_least_squares(seed: int) -> None:
    """With one bound active the active set is that of the exact solution (scipy.optimize.lsq_linear)."""
    rng = np.random.default_rng(seed)
    a, b = rng.standard_normal((12, 4)), rng.standard_normal(12)
    free = np.linalg.lstsq(a, b, rcond=None)[0]
    high = np.full(4, np.inf)
    high[2] = free[2] - 0.3
    step = bounded_step(a.T @ a, a.T @ b, np.full(4, -np.inf), high)
    assert step == pytest.approx(lsq_linear(a, b, bounds=(-np.inf, high), tol=1e-14).x, abs=1e-7)


def test_inside_the_box_it_is_the_plain_step() -> None:
    normal, gradient = np.array([[4.0, 1.0], [1.0, 3.0]]), np.array([1.0, 2.0])
    assert bounded_step(normal, gradient, np.full(2, -9.0), np.full(2, 9.0)) == pytest.approx([1.0 / 11.0, 7.0 / 11.0])


def test_a_point_box_holds_everything() -> None:
    assert bounded_step(np.eye(3), np.ones(3), np.zeros(3), np.zeros(3)).tolist() == [0.0, 0.0, 0.0]
