"""The discrete map of a held input is exact: against scipy by three other ways, and against the handbook."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray
from scipy.signal import cont2discrete, lfilter, lsim

from rtid.identify.held import HeldMap, held_map
from tests.identify.synthetic import held_response, lag, switching

Array = NDArray[np.float64]

OVERSAMPLING = 10
SHAPES = {
    "first order": (1, (10.0,)),
    "first order, fast": (1, (0.4,)),
    "first order, slow": (1, (500.0,)),
    "hardly damped": (2, (0.4, 0.02)),
    "underdamped": (2, (0.2, 0.3)),
    "nearly critical from below": (2, (0.3, 1.0 - 1e-6)),
    "critical": (2, (0.3, 1.0)),
    "nearly critical from above": (2, (0.3, 1.0 + 1e-6)),
    "overdamped": (2, (0.3, 2.0)),
    "far overdamped": (2, (2.0, 20.0)),
}
every_shape = pytest.mark.parametrize(("order", "shape"), SHAPES.values(), ids=SHAPES.keys())
AT = 1e-10  # of the gain


def mapped(order: int, gain: float, shape: tuple[float, ...], dead_time: float, *, period: float = 1.0) -> HeldMap:
    parameters = np.array([math.log(abs(gain)), *np.log(shape), dead_time])
    return held_map(order, parameters, sign=math.copysign(1.0, gain), period=period)


def run(model: HeldMap, inputs: Array) -> Array:
    numerator = np.concatenate((np.zeros(model.d + 1), model.b))
    return np.asarray(lfilter(numerator, np.concatenate(([1.0], model.f)), inputs))


@every_shape
def test_whole_dead_time_agrees_with_cont2discrete(order: int, shape: tuple[float, ...]) -> None:
    """scipy.signal.cont2discrete, method zoh."""
    period = 0.5
    model = mapped(order, -3.0, shape, 4.0 * period, period=period)
    numerator, denominator, _ = cont2discrete(lag(order, -3.0, shape), period)
    assert model.d == 4
    assert model.f[:order] == pytest.approx(denominator[1:], abs=1e-12)
    expected = np.concatenate((numerator[0, 1:], np.zeros(3 - order)))
    assert np.abs(model.b - expected).max() < 1e-12


@every_shape
@pytest.mark.parametrize("tenths", [0, 1, 5, 9, 23])
def test_fractional_dead_time_agrees_with_tenfold_oversampling(
    order: int, shape: tuple[float, ...], tenths: int
) -> None:
    """Sampled ten times as fast the dead time is a whole number of rows: cont2discrete at a tenth of the period."""
    inputs = switching(np.random.default_rng(1), 300, 3)
    numerator, denominator, _ = cont2discrete(lag(order, 2.0, shape), 1.0 / OVERSAMPLING)
    fine = lfilter(np.concatenate((np.zeros(tenths), numerator[0])), denominator, np.repeat(inputs, OVERSAMPLING))
    ours = run(mapped(order, 2.0, shape, tenths / OVERSAMPLING), inputs)
    assert np.abs(ours - fine[::OVERSAMPLING]).max() < 2.0 * AT


@every_shape
def test_fractional_dead_time_agrees_with_lsim(order: int, shape: tuple[float, ...]) -> None:
    """scipy.signal.lsim of the continuous plant, the input held over each step of a grid ten times as fine."""
    inputs = switching(np.random.default_rng(2), 200, 4)
    delayed = np.concatenate((np.zeros(17), np.repeat(inputs, OVERSAMPLING)))[: 200 * OVERSAMPLING]
    times = np.arange(len(delayed)) / OVERSAMPLING
    fine = lsim(lag(order, 2.0, shape), delayed, times, interp=False)[1]
    ours = run(mapped(order, 2.0, shape, 1.7), inputs)
    assert np.abs(ours - fine[::OVERSAMPLING]).max() < 2.0 * AT


@settings(max_examples=60, deadline=None, derandomize=True)
@given(
    frequency=st.floats(0.01, 2.5),
    damping=st.floats(0.01, 8.0),
    dead_time=st.floats(0.0, 6.0),
    period=st.sampled_from([0.002, 1.0, 30.0]),
)
def test_any_second_order_plant_agrees_with_the_matrix_exponential(
    frequency: float, damping: float, dead_time: float, period: float
) -> None:
    """scipy.linalg.expm of the plant with its held input, at any dead time (no grid has to fit)."""
    shape = (frequency / period, damping)
    inputs = switching(np.random.default_rng(3), 150, 5)
    expected = held_response(*lag(2, 1.0, shape), dead_time * period, inputs, period=period)
    assert np.abs(run(mapped(2, 1.0, shape, dead_time * period, period=period), inputs) - expected).max() < AT


@settings(max_examples=60, deadline=None, derandomize=True)
@given(constant=st.floats(0.1, 1000.0), dead_time=st.floats(0.0, 6.0), period=st.sampled_from([0.002, 1.0, 30.0]))
def test_any_first_order_plant_agrees_with_the_matrix_exponential(
    constant: float, dead_time: float, period: float
) -> None:
    inputs = switching(np.random.default_rng(4), 150, 5)
    expected = held_response(*lag(1, 1.0, (constant * period,)), dead_time * period, inputs, period=period)
    assert (
        np.abs(run(mapped(1, 1.0, (constant * period,), dead_time * period, period=period), inputs) - expected).max()
        < AT
    )


@every_shape
@pytest.mark.parametrize("dead_time", [0.3, 2.75])
def test_sensitivities_are_the_derivatives(order: int, shape: tuple[float, ...], dead_time: float) -> None:
    """Fourth-order central differences of the coefficients themselves (error h⁴: 1e-12 at h = 1e-3; rounding 1e-13)."""
    at = np.array([math.log(2.0), *np.log(shape), dead_time])
    model = held_map(order, at, sign=1.0, period=1.0)
    for i in range(len(at)):
        steps = {k: at + k * 1e-3 * np.eye(len(at))[i] for k in (-2, -1, 1, 2)}
        ends = {k: held_map(order, point, sign=1.0, period=1.0) for k, point in steps.items()}
        for name, ours in (("f", model.df[:, i]), ("b", model.db[:, i])):
            values = {k: getattr(end, name) for k, end in ends.items()}
            expected = (8.0 * (values[1] - values[-1]) - (values[2] - values[-2])) / 12e-3
            assert np.abs(ours - expected).max() < 1e-8 * max(1.0, np.abs(expected).max())


def test_the_handbook_rows_of_zero_order_hold() -> None:
    """K = 2, T = 10, h = 1: y(k) = 0.904837418 y(k-1) + 0.190325164 u(k-3) at L = 2; two lags at L = 2.3.

    Derived from the step response: 1 - e^(-h/T) and its split at the fraction of the dead time.
    """
    whole, split = mapped(1, 2.0, (10.0,), 2.0), mapped(1, 2.0, (10.0,), 2.3)
    assert (whole.d, split.d) == (2, 2)
    assert -whole.f[0] == pytest.approx(0.904837418, abs=5e-10)
    assert whole.b == pytest.approx([0.190325164, 0.0, 0.0], abs=5e-10)
    assert split.b == pytest.approx([0.135212360, 0.055112804, 0.0], abs=5e-10)


def test_the_test_system_of_the_literature_is_reached_from_its_continuous_form() -> None:
    """1 - 1.5q⁻¹ + 0.7q⁻² is ω₀h = 0.492585, ζ = 0.362044 (references: identification, test system, rounded there)."""
    assert mapped(2, 7.5, (0.492585, 0.362044), 0.0).f == pytest.approx([-1.5, 0.7], abs=2e-6)


def test_a_dead_time_of_whole_periods_is_not_lost_to_rounding() -> None:
    """0.3 / 0.1 is 2.9999999999999996 in floating point."""
    model = mapped(1, 1.0, (1.0,), 0.3, period=0.1)
    assert model.d == 3
    assert abs(model.b[1]) < 1e-12


@every_shape
def test_the_steady_state_is_the_gain(order: int, shape: tuple[float, ...]) -> None:
    model = mapped(order, -5.0, shape, 1.4)
    assert model.b.sum() / model.steady == pytest.approx(-5.0, rel=1e-8)
