"""What the recent data know is forgotten at λ; what they do not know is kept for ever."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from rtid.identify.forgetting import KNOWN, SubspaceForgetting, informed

Array = NDArray[np.float64]

PRIOR = np.array([0.5, 0.5, 3.0, 2.0])


def full(seed: int, size: float) -> Array:
    root = np.random.default_rng(seed).standard_normal((4, 6)) / PRIOR[:, None]
    return np.asarray(size * root @ root.T)


def informed_directions(window: Array) -> tuple[Array, Array]:
    """In the parameters' own units: bases of what the window knows and does not know, by scipy-free definition."""
    values, vectors = np.linalg.eigh(window * np.outer(PRIOR, PRIOR))
    return PRIOR[:, None] * vectors[:, values > KNOWN], PRIOR[:, None] * vectors[:, values <= KNOWN]


def test_with_everything_known_it_is_exponential_forgetting() -> None:
    information = full(1, 1e5)
    forgetting = SubspaceForgetting(information, full(2, 1e5), PRIOR)
    forgetting.forget(0.9)
    assert forgetting.information == pytest.approx(0.9 * information, rel=1e-9)


def test_with_nothing_known_recently_nothing_is_forgotten() -> None:
    information = full(1, 1e5)
    forgetting = SubspaceForgetting(information, full(2, 1e-3), PRIOR)
    forgetting.forget(0.9)
    assert np.array_equal(forgetting.information, information)
    assert forgetting.window == pytest.approx(0.9 * full(2, 1e-3))


@settings(max_examples=50, deadline=None, derandomize=True)
@given(seed=st.integers(0, 10_000), known=st.integers(1, 3), factor=st.floats(0.1, 0.999))
def test_only_informed_directions_are_weakened_and_by_lambda(seed: int, known: int, factor: float) -> None:
    """Lai & Bernstein 2024: KᵀR'K = λKᵀRK on the informed subspace K, and by Woodbury's identity
    R'⁻¹ = R⁻¹ + (1/λ - 1)K(KᵀRK)⁻¹Kᵀ, so that the variance of every other combination stays."""
    rng = np.random.default_rng(seed)
    rows = rng.standard_normal((known, 4)) / PRIOR
    information, window = full(seed + 1, 1e3), 1e4 * rows.T @ rows
    k, _ = informed_directions(window)
    assert k.shape[1] <= known
    forgetting = SubspaceForgetting(information, window, PRIOR)
    forgetting.forget(factor)
    weakened = k.T @ forgetting.information @ k
    assert weakened == pytest.approx(factor * k.T @ information @ k, rel=1e-7, abs=1e-7 * np.abs(weakened).max())
    inverse = np.linalg.inv(information)
    expected = inverse + (1.0 / factor - 1.0) * k @ np.linalg.inv(k.T @ information @ k) @ k.T
    scale = np.sqrt(np.outer(np.diag(expected), np.diag(expected)))
    assert np.abs((np.linalg.inv(forgetting.information) - expected) / scale).max() < 1e-6


def test_a_quiet_direction_keeps_its_information_for_ever() -> None:
    """20 000 blocks with one moving regressor: exponential forgetting would have multiplied P by 0.97^-20000."""
    forgetting = SubspaceForgetting(full(3, 1e3), full(3, 1e3), PRIOR)
    rng = np.random.default_rng(1)
    ends = []
    for block in range(20_000):
        forgetting.forget(0.97)
        forgetting.add(np.outer(rng.standard_normal(16), [0.0, 0.0, 0.0, 3.0]))
        if block in {1999, 19_999}:
            ends.append(forgetting.information.copy())
    assert ends[1][:3, :3] == pytest.approx(ends[0][:3, :3], rel=1e-6)
    assert np.linalg.eigvalsh(forgetting.information * np.outer(PRIOR, PRIOR)).min() > 0.5 * KNOWN


def test_an_informed_direction_settles_where_news_and_forgetting_balance() -> None:
    """R = λR + r has its rest at r/(1 - λ)."""
    forgetting = SubspaceForgetting(np.diag([1.0, 1.0]), np.zeros((2, 2)), np.ones(2))
    for _ in range(2000):
        forgetting.forget(0.97)
        forgetting.add(np.array([[4.0, 0.0], [0.0, 4.0]]))
    assert forgetting.information == pytest.approx(16.0 / 0.03 * np.eye(2), rel=1e-9)
    assert informed(forgetting.window, np.ones(2)).all()


def test_letting_a_parameter_walk_adds_to_its_variance_alone() -> None:
    information = full(4, 1e3)
    forgetting = SubspaceForgetting(information, full(4, 1.0), PRIOR)
    forgetting.loosen(3, 0.04)
    expected = np.linalg.inv(information)
    expected[3, 3] += 0.04
    assert np.linalg.inv(forgetting.information) == pytest.approx(expected, rel=1e-8, abs=1e-10)


def test_informed_needs_the_window_alone_to_know_the_parameter() -> None:
    window = np.diag([KNOWN * 1.1, KNOWN * 0.9, 0.0, KNOWN * 100.0]) / np.outer(PRIOR, PRIOR)
    assert informed(window, PRIOR).tolist() == [True, False, False, True]
