"""The first-order form of a model."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.signal import lfilter  # type: ignore[import-untyped]

from rtid.identify.held import held_map
from rtid.model.reduced import LARGEST_DEVIATION, reduced, unit_step

Array = NDArray[np.float64]


def coefficients(order: int, *plant: float, period: float, gain: float = 1.0, sign: float = 1.0) -> tuple[Array, Array]:
    """Numerator and denominator of the exact held map; `plant`: shape parameters, then a dead time below a period."""
    logs = [math.log(gain), *(math.log(v) for v in plant[:-1]), plant[-1]]
    model = held_map(order, np.array(logs), sign=sign, period=period)
    return np.concatenate(([0.0], model.b[: order + 1])), np.concatenate(([1.0], model.f[:order]))


def lags(slow: float, fast: float) -> tuple[float, float]:
    """Natural frequency and damping ratio."""
    return 1.0 / math.sqrt(slow * fast), (slow + fast) / (2.0 * math.sqrt(slow * fast))


def test_the_worked_example() -> None:
    """Lags 20 and 6 and dead time 2: τ 21.9, L 6.5."""
    form = reduced(*coefficients(2, *lags(20.0, 6.0), 0.0, period=0.1), delay=2.0, period=0.1)
    assert form is not None
    assert (round(form.time_constant_s, 1), round(form.dead_time_s, 1)) == (21.9, 6.5)
    assert form.gain == pytest.approx(1.0, rel=1e-9)


def test_an_oscillating_model_has_no_first_order_form() -> None:
    """ζ 0.35: the largest deviation is 0.31, above 0.15."""
    assert LARGEST_DEVIATION == 0.15
    assert reduced(*coefficients(2, 0.1, 0.35, 0.0, period=0.1), delay=0.0, period=0.1) is None


@pytest.mark.parametrize(("damping", "has_form"), [(0.35, False), (0.5, False), (0.8, True), (1.0, True), (3.0, True)])
def test_the_form_is_refused_by_its_largest_deviation(damping: float, has_form: bool) -> None:
    form = reduced(*coefficients(2, 0.1, damping, 0.0, period=0.1), delay=0.0, period=0.1)
    assert (form is not None) == has_form


@pytest.mark.parametrize(
    ("tau", "fraction", "delay"),
    [(8.0, 0.0, 0.0), (8.0, 0.0, 3.0), (8.0, 0.4, 3.0), (0.7, 0.0, 0.0), (300.0, 0.9, 1.0)],
)
def test_a_first_order_model_is_its_own_form(tau: float, fraction: float, delay: float) -> None:
    form = reduced(*coefficients(1, tau, fraction, period=1.0, gain=2.5), delay=delay, period=1.0)
    assert form is not None
    assert form.gain == pytest.approx(2.5, rel=1e-9)
    assert form.time_constant_s == pytest.approx(tau, rel=1e-4)
    assert form.dead_time_s == pytest.approx(delay + fraction, abs=1e-3 * max(1.0, tau))


def test_a_negative_gain_stays_negative() -> None:
    form = reduced(*coefficients(1, 8.0, 0.0, period=1.0, gain=2.0, sign=-1.0), delay=0.0, period=1.0)
    assert form is not None
    assert (form.gain, form.time_constant_s, form.dead_time_s) == pytest.approx((-2.0, 8.0, 0.0), rel=1e-4, abs=1e-2)


@pytest.mark.parametrize("pole", [1.0, 1.05, 0.99999])
def test_a_response_without_an_end_has_no_form(pole: float) -> None:
    assert reduced(np.array([0.0, 0.1]), np.array([1.0, -pole]), delay=0.0, period=1.0) is None


def test_the_step_response_agrees_with_scipy() -> None:
    numerator, denominator = coefficients(2, *lags(20.0, 6.0), 0.3, period=1.0)
    expected = lfilter(numerator, denominator, np.ones(500))
    assert unit_step(numerator, denominator)[:500] == pytest.approx(expected, rel=1e-9, abs=1e-12)
