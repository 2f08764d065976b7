"""How well an estimate predicts: errors, whiteness, correlation with the input."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.signal import lfilter  # type: ignore[import-untyped]
from scipy.stats import chi2, kstest  # type: ignore[import-untyped]

from rtid.model.validation import LAGS, RecentRows, Validation, error_pct, input_residual, ljung_box


def white(rows: int, seed: int) -> np.ndarray:
    return np.random.default_rng(seed).standard_normal(rows)


def test_error_is_in_percent_of_the_outputs_deviation() -> None:
    output = np.array([1.0, 3.0, 1.0, 3.0])
    assert error_pct(np.zeros(4), output) == 0.0
    assert error_pct(output - output.mean(), output) == pytest.approx(100.0)
    assert error_pct(np.array([0.5, 0.0, 0.0, 0.0]), output) == pytest.approx(25.0)


def test_an_output_that_did_not_move_has_no_error_in_percent() -> None:
    assert error_pct(np.ones(4), np.full(4, 7.0)) is None


@pytest.mark.parametrize("series", [white(500, 1), lfilter([1.0], [1.0, -0.2], white(400, 2)) + 5.0])
def test_ljung_box_agrees_with_its_definition(series: np.ndarray) -> None:
    n, centred = len(series), series - series.mean()
    rho = np.array([np.sum(centred[k:] * centred[:-k]) for k in range(1, LAGS + 1)]) / np.sum(centred**2)
    statistic = n * (n + 2) * np.sum(rho**2 / (n - np.arange(1, LAGS + 1)))
    assert ljung_box(series, LAGS) == pytest.approx(chi2.sf(statistic, LAGS), rel=1e-9)


@pytest.mark.parametrize("lags", [5, 20])
@pytest.mark.parametrize("seed", range(4))
def test_ljung_box_agrees_with_statsmodels(seed: int, lags: int) -> None:
    diagnostic = pytest.importorskip("statsmodels.stats.diagnostic")
    series = lfilter([1.0], [1.0, -0.05 * seed], white(600, seed)) + 3.0
    expected = float(diagnostic.acorr_ljungbox(series, lags=[lags])["lb_pvalue"].iloc[0])
    assert ljung_box(series, lags) == pytest.approx(expected, rel=1e-9)


def test_a_residual_of_nothing_is_white() -> None:
    assert ljung_box(np.zeros(200), LAGS) == 1.0


def test_p_values_of_white_residuals_are_uniform() -> None:
    """By Kolmogorov and Smirnov at 1 in 1000."""
    p_values = [ljung_box(white(1000, seed), LAGS) for seed in range(300)]
    assert kstest(p_values, "uniform").pvalue > 1e-3


def coloured(seed: int) -> np.ndarray:
    return np.asarray(lfilter([1.0], [1.0, -0.8], white(2000, seed)))


def test_p_values_of_residuals_without_the_input_are_uniform_whatever_the_inputs_colour() -> None:
    p_values = [input_residual(white(2000, 1000 + s), coloured(s), LAGS) for s in range(200)]
    assert kstest([p for p in p_values if p is not None], "uniform").pvalue > 1e-3


@pytest.mark.parametrize("lag", [0, 1, 7, LAGS])
def test_what_the_model_left_of_the_input_is_found_at_every_lag(lag: int) -> None:
    drive = white(2000, 3)
    left = white(2000, 4) + 0.2 * np.concatenate((np.zeros(lag), drive[: len(drive) - lag]))
    found = input_residual(left, drive, LAGS)
    assert found is not None
    assert found < 1e-6


def test_no_input_no_test_against_it() -> None:
    assert input_residual(white(200, 5), np.full(200, 3.0), LAGS) is None
    assert input_residual(np.zeros(200), white(200, 5), LAGS) is None


def add(recent: RecentRows, rows: int, *, scale: float = 1.0, seed: int = 0) -> None:
    for k in range(rows // 10):
        e, drive = scale * white(10, seed + k), white(10, 5000 + seed + k)
        recent.add(one_step=e, free_run=2.0 * e, output=10.0 * drive, drive=drive)


def test_recent_rows_say_nothing_before_there_are_enough() -> None:
    recent = RecentRows(1000, 10)
    add(recent, 5 * LAGS - 10)
    assert recent.validate() == Validation()


def test_recent_rows_are_validated_together() -> None:
    recent = RecentRows(1000, 10)
    add(recent, 1000)
    found = recent.validate()
    assert found.one_step_error_pct == pytest.approx(10.0, rel=0.1)
    assert found.free_run_error_pct == pytest.approx(20.0, rel=0.1)
    assert found.whiteness_p is not None
    assert found.input_residual_p is not None
    assert 0.001 < found.whiteness_p <= 1.0
    assert 0.001 < found.input_residual_p <= 1.0


def test_only_the_newest_rows_count() -> None:
    recent = RecentRows(1000, 10)
    add(recent, 1000, scale=100.0)
    add(recent, 1000, seed=9000)
    error = recent.validate().one_step_error_pct
    assert error is not None
    assert error < 15.0
