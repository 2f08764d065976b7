"""The recursive kernel gives the digits of batch least squares at every step, however the rows come."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from rtid.identify.least_squares import LeastSquaresStack

Array = NDArray[np.float64]

ROWS, PARAMETERS = 80, 3
FAR = np.full(PARAMETERS, 1e6)


def problem(seed: int = 1) -> tuple[Array, Array]:
    rng = np.random.default_rng(seed)
    rows = rng.standard_normal((ROWS, PARAMETERS))
    return rows, rows @ [1.0, -2.0, 0.5] + 0.3 * rng.standard_normal(ROWS)


def weighted(
    rows: Array, output: Array, weights: Array, *, prior: float, deviation: float
) -> tuple[Array, Array, float]:
    """θ, P and residual sum by numpy.linalg.lstsq on the rows times √weight, the prior as rows of its own."""
    p = rows.shape[1]
    tall = np.vstack((np.sqrt(prior) / deviation * np.eye(p), np.sqrt(weights)[:, None] * rows))
    right = np.concatenate((np.zeros(p), np.sqrt(weights) * output))
    theta = np.linalg.lstsq(tall, right, rcond=None)[0]
    return theta, np.linalg.inv(tall.T @ tall), float(((right - tall @ theta) ** 2).sum())


def assert_equals(stack: LeastSquaresStack, expected: tuple[Array, Array, float], candidate: int = 0) -> None:
    assert stack.solve()[candidate] == pytest.approx(expected[0], rel=1e-9, abs=1e-11)
    assert stack.inverse(candidate) == pytest.approx(expected[1], rel=1e-9, abs=1e-11)
    assert stack.residual_sum()[candidate] == pytest.approx(expected[2], rel=1e-9, abs=1e-11)


HAND_TRACE = {  # factor: (K, θ, P) after each row
    1.0: (
        (0.990099010, 1.980198020, 0.990099010),
        (0.399201597, 1.996007984, 0.199600798),
        (0.214132762, 2.062812277, 0.071377587),
    ),
    0.95: (
        (0.990589401, 1.981178801, 0.990589401),
        (0.403305085, 1.996360172, 0.201652543),
        (0.218801245, 2.064389742, 0.072933748),
    ),
}


@pytest.mark.parametrize("factor", HAND_TRACE)
def test_the_hand_trace(factor: float) -> None:
    """One parameter, θ0 = 0, P0 = 100, (u, y) = (1, 2), (2, 4), (3, 6.3); every digit of the trace by hand.

    K = Pu/(λ + u²P), θ += K(y - uθ), P = (P - KuP)/λ; the gain of the step is also the new P times u.
    """
    stack = LeastSquaresStack(1, np.array([10.0]))
    for (u, y), (gain, theta, p) in zip(((1.0, 2.0), (2.0, 4.0), (3.0, 6.3)), HAND_TRACE[factor], strict=True):
        stack.fold(np.array([[[u]]]), np.array([y]), factor=factor)
        assert stack.inverse(0)[0, 0] * u == pytest.approx(gain, abs=5.1e-10)
        assert stack.solve()[0, 0] == pytest.approx(theta, abs=5.1e-10)
        assert stack.inverse(0)[0, 0] == pytest.approx(p, abs=5.1e-10)


def test_after_three_rows_of_the_hand_trace_p_is_one_over_fourteen_and_the_prior() -> None:
    stack = LeastSquaresStack(1, np.array([10.0]))
    stack.fold(np.array([[[1.0], [2.0], [3.0]]]), np.array([2.0, 4.0, 6.3]))
    assert stack.inverse(0)[0, 0] == pytest.approx(1.0 / 14.01, rel=1e-12)


@pytest.mark.parametrize("factor", [1.0, 0.98, 0.8])
def test_recursive_is_batch_at_every_step(factor: float) -> None:
    """Forgetting is weighted least squares with the weights λ^(N-t), the prior weighted λ^N (Ljung 1999, sec. 11.2)."""
    rows, output = problem()
    stack = LeastSquaresStack(1, np.full(PARAMETERS, 10.0))
    for n in range(1, ROWS + 1):
        stack.fold(rows[None, n - 1 : n], output[n - 1 : n], factor=factor)
        weights = factor ** np.arange(n - 1, -1, -1.0)
        assert_equals(stack, weighted(rows[:n], output[:n], weights, prior=factor**n, deviation=10.0))
        assert stack.weight == pytest.approx(weights.sum(), rel=1e-12)


@settings(max_examples=40, deadline=None, derandomize=True)
@given(cuts=st.sets(st.integers(1, ROWS - 1), max_size=ROWS))
def test_rows_may_come_in_blocks_of_any_length(cuts: set[int]) -> None:
    rows, output = problem()
    stack = LeastSquaresStack(1, FAR)
    for a, b in pairwise((0, *sorted(cuts), ROWS)):
        stack.fold(rows[None, a:b], output[a:b])
    assert_equals(stack, weighted(rows, output, np.ones(ROWS), prior=1.0, deviation=1e6))


def test_a_block_weakens_what_was_known_before_it() -> None:
    rows, output = problem()
    stack = LeastSquaresStack(1, FAR)
    stack.fold(rows[None, :60], output[:60])
    stack.fold(rows[None, 60:], output[60:], factor=0.5)
    weights = np.where(np.arange(ROWS) < 60, 0.5, 1.0)
    assert_equals(stack, weighted(rows, output, weights, prior=0.5, deviation=1e6))


def test_every_candidate_is_a_regression_of_its_own() -> None:
    problems = [problem(seed) for seed in (1, 2, 3)]
    output = problems[0][1]
    stack = LeastSquaresStack(3, FAR)
    stack.fold(np.array([rows for rows, _ in problems]), output)
    for c, (rows, _) in enumerate(problems):
        assert_equals(stack, weighted(rows, output, np.ones(ROWS), prior=1.0, deviation=1e6), c)


def test_the_variance_under_forgetting_is_the_one_of_theory() -> None:
    """σ²(1-λ)/((1+λ)E u²) for a regressor of constant power (DERIVED: Σλ^2k/(Σλ^k)²); λ = 0.98: 0.010101.

    1000 candidates with signs of their own as regressors; the output is noise of ±1 that all share, so that their
    products are independent. A variance of 1000 runs has the relative deviation √(2/1000); the band is four of these.
    """
    rng = np.random.default_rng(6)
    runs, steps, factor = 1000, 300, 0.98
    signs, noise = rng.choice([-1.0, 1.0], (steps, runs, 1, 1)), rng.choice([-1.0, 1.0], (steps, 1))
    stack = LeastSquaresStack(runs, FAR[:1])
    for t in range(steps):
        stack.fold(signs[t], noise[t], factor=factor)
    assert np.mean(stack.solve() ** 2) == pytest.approx(0.010101, rel=4.0 * np.sqrt(2.0 / runs))
