"""Noise models are statsmodels', always stable, and their filter leaves white noise."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from numpy.typing import NDArray
from scipy.linalg import solve_toeplitz
from scipy.signal import lfilter
from statsmodels.regression.linear_model import yule_walker
from statsmodels.stats.diagnostic import acorr_ljungbox

from rtid.identify.whitening import MAX_ORDER, Whitener, autocovariance, autoregression

Array = NDArray[np.float64]

MODELS = {  # A(q), all poles well inside the unit circle, and strong enough for BIC at 4000 rows
    1: [1.0, -0.9],
    2: [1.0, -1.5, 0.7],
    3: [1.0, -1.2, 0.2, 0.3],
    4: [1.0, -1.1, 0.6, -0.5, 0.35],
}
ROWS = 4000


def noise(order: int) -> Array:
    drawn = np.random.default_rng(order).standard_normal(ROWS + 2000)
    return np.asarray(lfilter([1.0], MODELS[order], drawn)[2000:])


def everywhere(values: Array) -> NDArray[np.bool_]:
    return np.ones(len(values), dtype=np.bool_)


@pytest.mark.filterwarnings("ignore:yule_walker currently returns:FutureWarning")
@pytest.mark.parametrize("order", MODELS)
def test_coefficients_agree_with_yule_walker(order: int) -> None:
    """statsmodels' yule_walker on the same (biased) autocovariances; it writes the model with the other sign."""
    values = noise(order)
    ours = autoregression(autocovariance(values, everywhere(values)), ROWS)
    assert len(ours) == order
    expected = yule_walker(values, order=order, method="mle", demean=False)[0]
    assert ours == pytest.approx(-expected, rel=1e-8)


@pytest.mark.parametrize("order", MODELS)
def test_the_order_is_the_one_with_the_least_bic(order: int) -> None:
    """BIC = N ln V_q + q ln N (Schwarz 1978), V_q from the normal equations by scipy.linalg.solve_toeplitz."""
    for rows in (30, 300, ROWS):
        values = noise(order)[:rows]
        r = autocovariance(values, everywhere(values))
        left = [r[0]] + [r[0] - r[1 : q + 1] @ solve_toeplitz(r[:q], r[1 : q + 1]) for q in range(1, MAX_ORDER + 1)]
        scores = [rows * np.log(v) + q * np.log(rows) for q, v in enumerate(left)]
        assert len(autoregression(r, rows)) == int(np.argmin(scores))


def test_autocovariance_skips_the_bad_rows() -> None:
    values = np.array([1.0, 2.0, np.nan, 4.0, 5.0, 6.0])
    good = np.isfinite(values)
    expected = np.array([1 + 4 + 16 + 25 + 36, 2 + 20 + 30, 8 + 24, 4 + 10, 5 + 12]) / 5.0
    assert autocovariance(values, good) == pytest.approx(expected)


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    power=st.floats(0.0, 1e12),
    correlations=arrays(np.float64, MAX_ORDER, elements=st.floats(-1.0, 1.0)),
    rows=st.floats(1.0, 1e6),
)
def test_a_noise_model_is_stable_whatever_the_numbers(power: float, correlations: Array, rows: float) -> None:
    """Also for correlations that no process has (gaps make such): all zeros of A inside the unit circle."""
    coefficients = autoregression(power * np.concatenate(([1.0], correlations)), rows)
    assert np.isfinite(coefficients).all()
    assert np.abs(np.roots([1.0, *coefficients])).max(initial=0.0) < 1.0


@pytest.mark.parametrize("order", MODELS)
def test_a_whitened_process_is_white(order: int) -> None:
    """Ljung-Box (statsmodels) over 20 lags: p of four seeded runs above 0.001; before whitening it is 0."""
    values = noise(order)
    whitener = Whitener(1)
    whitener.coefficients = autoregression(autocovariance(values, everywhere(values)), ROWS)
    e, _, good = whitener.run(values, np.zeros((ROWS, 1)), everywhere(values))
    assert good.sum() == ROWS - order
    assert acorr_ljungbox(values, lags=[20])["lb_pvalue"].item() < 1e-12
    assert acorr_ljungbox(e[good], lags=[20], model_df=order)["lb_pvalue"].item() > 1e-3


@settings(max_examples=50, deadline=None, derandomize=True)
@given(cuts=st.sets(st.integers(1, 59), max_size=59), bad=st.sets(st.integers(0, 59), max_size=6))
def test_any_chopping_gives_the_same_digits(cuts: set[int], bad: set[int]) -> None:
    values, psi = noise(2)[:60], np.random.default_rng(7).standard_normal((60, 3))
    ok = np.array([i not in bad for i in range(60)])

    def run(ends: tuple[int, ...]) -> list[Array]:
        whitener = Whitener(3)
        whitener.coefficients = np.array([-1.5, 0.7])
        parts = [whitener.run(values[a:b], psi[a:b], ok[a:b]) for a, b in pairwise(ends)]
        return [np.concatenate(column) for column in zip(*parts, strict=True)]

    for ours, expected in zip(run((0, *sorted(cuts), 60)), run((0, 60)), strict=True):
        assert np.array_equal(ours, expected)


def test_a_row_counts_only_with_its_whole_past() -> None:
    whitener = Whitener(1)
    whitener.coefficients = np.array([-0.5, 0.25])
    ok = np.array([True, True, True, True, False, True, True, True])
    values, psi = np.arange(8.0), np.arange(8.0)[:, None] ** 2
    e, phi, good = whitener.run(values, psi, ok)
    assert good.tolist() == [False, False, True, True, False, False, False, True]
    for row in (2, 3, 7):
        assert e[row] == values[row] - 0.5 * values[row - 1] + 0.25 * values[row - 2]
        assert phi[row, 0] == psi[row, 0] - 0.5 * psi[row - 1, 0] + 0.25 * psi[row - 2, 0]
    whitener.break_off()
    assert whitener.run(values[:3], psi[:3], ok[:3])[2].tolist() == [False, False, True]
