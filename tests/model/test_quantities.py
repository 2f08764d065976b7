"""Engineering quantities, their errors and limits, and when they are unknown."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.signal import lfilter  # type: ignore[import-untyped]

from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.structure import Fit, Structure
from rtid.model.quantities import names_of, quantities, units_of, unknown
from rtid.report import Quantity

PERIOD = 0.5
UNITS = units_of(["V"], "rad/s")
ONE = OutputError(1, PERIOD, (0.0, 5.0))
TWO = OutputError(2, PERIOD, (0.0, 5.0))
ARX = EquationError(1, PERIOD, (0.0, 5.0))
NORMAL_95 = 1.959964


def make_fit(theta: list[float], covariance: NDArray[np.float64] | list[float], **fields: Any) -> Fit:
    """A list of deviations stands for a diagonal covariance."""
    full = np.diag(np.square(covariance)) if isinstance(covariance, list) else covariance
    told: dict[str, Any] = {"sigma": 0.1, "noise": 0.3, "ar": np.zeros(0), "rows": 1000, "centre": np.array([4.0]),
                            "noise_rows": 1000.0}  # fmt: skip
    return Fit(theta=np.array(theta), covariance=full, **told | fields)


def one(deviations: list[float] | None = None, **fields: Any) -> Fit:
    return make_fit([math.log(2.0), math.log(8.0), 1.5, 20.0], deviations or [0.01, 0.02, 0.1, 0.05], **fields)


def two(damping: float, **fields: Any) -> Fit:
    return make_fit(
        [math.log(2.0), math.log(0.2), math.log(damping), 1.5, 20.0], [0.01, 0.02, 0.02, 0.1, 0.05], **fields
    )


def found(structure: Structure, fit: Fit, **options: Any) -> dict[str, Quantity]:
    return quantities(structure, fit, UNITS, **options)


def known(quantity: Quantity) -> tuple[float, float, float, float]:
    values = (quantity.value, quantity.std_error, quantity.low, quantity.high)
    assert not any(v is None for v in values)
    return values  # type: ignore[return-value]


def test_values_and_limits_of_order_1_by_hand() -> None:
    now = found(ONE, one())
    assert tuple(now) == names_of(1, 1)
    e = NORMAL_95
    expected = {
        "gain": (2.0, 0.02, 2.0 * math.exp(-0.01 * e), 2.0 * math.exp(0.01 * e)),
        "time_constant_1": (8.0, 0.16, 8.0 * math.exp(-0.02 * e), 8.0 * math.exp(0.02 * e)),
        "dead_time": (1.5, 0.1, 1.5 - 0.1 * e, 1.5 + 0.1 * e),
        "noise": (0.3, 0.3 / math.sqrt(2000.0), 0.3 - 0.3 / math.sqrt(2000.0) * e, 0.3 + 0.3 / math.sqrt(2000.0) * e),
    }
    for name, values in expected.items():
        assert known(now[name]) == pytest.approx(values, rel=1e-5), name


def test_the_offset_is_the_output_at_input_zero_and_counts_the_gains_error() -> None:
    """y0 = θ - K·ū = 20 - 2·4; its variance has that of θ and (K·ū)² of ln K."""
    value, error, *_ = known(found(ONE, one())["offset"])
    assert value == pytest.approx(12.0)
    assert error == pytest.approx(math.hypot(0.05, 0.01 * 2.0 * 4.0), rel=1e-4)


def test_values_of_order_2_by_hand() -> None:
    now = found(TWO, two(1.25))
    values = {name: quantity.value for name, quantity in now.items()}
    assert tuple(now) == names_of(2, 1)
    assert values == pytest.approx(
        {"gain": 2.0, "natural_frequency": 0.2, "damping_ratio": 1.25, "time_constant_1": 10.0, "time_constant_2": 2.5,
         "dead_time": 1.5, "offset": 12.0, "noise": 0.3}
    )  # fmt: skip


@pytest.mark.parametrize("damping", [0.05, 0.5, 0.99])
def test_below_damping_1_there_are_no_time_constants(damping: float) -> None:
    now = found(TWO, two(damping))
    for name in ("time_constant_1", "time_constant_2"):
        assert now[name] == Quantity(None, None, None, None, "s")
    assert now["damping_ratio"].value == pytest.approx(damping)


@pytest.mark.parametrize(("structure", "fit"), [(ONE, one()), (TWO, two(0.4)), (TWO, two(1.8))])
def test_the_delta_method_agrees_with_drawn_parameters(structure: Structure, fit: Fit) -> None:
    """Correlated parameters, 4000 draws: the deviation is known to 1.1 %, and 3 % for the curvature."""
    rng = np.random.default_rng(1)
    p = len(fit.theta)
    mix = np.eye(p) + 0.4 * rng.standard_normal((p, p))
    scale = 0.3 * np.sqrt(np.diag(fit.covariance))
    fit = replace(fit, covariance=scale[:, None] * (mix @ mix.T) * scale)
    drawn = [structure.quantities(theta, fit) for theta in rng.multivariate_normal(fit.theta, fit.covariance, 4000)]
    for name, quantity in found(structure, fit).items():
        if quantity.value is not None and quantity.std_error is not None and name != "noise":
            sample = np.array([values[name] for values in drawn])
            assert quantity.std_error == pytest.approx(float(sample.std()), rel=0.065), name
            assert quantity.value == pytest.approx(float(np.median(sample)), abs=0.1 * quantity.std_error), name


@pytest.mark.parametrize("negative", [False, True])
def test_limits_hold_the_value_also_of_a_negative_gain(negative: bool) -> None:
    value, error, low, high = known(found(ONE, one(sign=-1.0 if negative else 1.0))["gain"])
    assert low < value < high
    assert error > 0.0
    assert (value < 0.0) == negative


@pytest.mark.parametrize(("error", "is_known"), [(0.149, True), (0.151, False)])
@pytest.mark.parametrize("position", [0, 1])
def test_unknown_above_15_percent_of_error(error: float, is_known: bool, position: int) -> None:
    deviations = [0.01, 0.02, 0.1, 0.05]
    deviations[position] = error
    name = ("gain", "time_constant_1")[position]
    quantity = found(ONE, one(deviations))[name]
    assert (quantity.value is not None) == is_known
    assert quantity.unit == UNITS[name]


@pytest.mark.parametrize(
    ("error", "dead_time", "is_known"),
    [(1.42, 1.5, True), (1.43, 1.5, False), (1.21, 0.0, False), (1.19, 0.0, True)],
)
def test_dead_time_is_unknown_above_15_percent_of_itself_and_the_time_constant(
    error: float, dead_time: float, is_known: bool
) -> None:
    """τ = 8: the limit is 0.15·(L + 8), above the period of 0.5."""
    fit = make_fit([0.7, math.log(8.0), dead_time, 0.0], [0.01, 0.02, error, 0.05])
    assert (found(ONE, fit)["dead_time"].value is not None) == is_known


@pytest.mark.parametrize(("error", "is_known"), [(0.49, True), (0.51, False)])
def test_dead_time_is_known_to_a_period_at_the_least(error: float, is_known: bool) -> None:
    fit = make_fit([0.7, math.log(1.0), 0.0, 0.0], [0.01, 0.02, error, 0.05])
    assert (found(ONE, fit)["dead_time"].value is not None) == is_known


def test_whole_rows_of_dead_time_bring_the_banks_error() -> None:
    fit = make_fit([-0.9, 0.2, 0.5], [0.001] * 3, delay=3, delay_error=0.4)
    value, error, *_ = known(found(ARX, fit)["dead_time"])
    assert (value, error) == pytest.approx((1.5, 0.2))


def test_offset_and_noise_are_never_unknown() -> None:
    now = found(ONE, one([10.0, 10.0, 100.0, 1000.0]))
    assert now["gain"].value is now["time_constant_1"].value is now["dead_time"].value is None
    known(now["offset"])
    known(now["noise"])


def test_a_known_dead_time_has_no_error() -> None:
    assert known(found(ONE, one([0.01, 0.02, 0.0, 0.05]))["dead_time"]) == (1.5, 0.0, 1.5, 1.5)


def test_averaging_shifts_the_dead_time() -> None:
    shifted, plain = (known(found(ONE, one(), output_shift=shift)["dead_time"]) for shift in (0.25, 0.0))
    assert np.subtract(shifted, plain) == pytest.approx([0.25, 0.0, 0.25, 0.25])


def test_noise_that_remembers_itself_is_known_less() -> None:
    """AR(1) with pole a: the effective number of rows is (1 - a²)/(1 + a²) of them (Bartlett)."""
    a = 0.8
    _, error, *_ = known(found(ONE, one(ar=np.array([-a])))["noise"])
    assert error == pytest.approx(0.3 * math.sqrt((1 + a * a) / (1 - a * a) / 2000.0), rel=1e-3)


def test_the_error_of_the_noise_is_the_spread_of_its_estimates() -> None:
    rng = np.random.default_rng(2)
    ar = np.array([-0.9, 0.3])
    noise = lfilter([1.0], [1.0, *ar], rng.standard_normal((400, 1100)))[:, 100:]
    level = float(noise.std())
    _, error, *_ = known(found(ONE, one(ar=ar, noise=level))["noise"])
    assert error == pytest.approx(float(noise.std(axis=1).std()), rel=0.15)


@pytest.mark.parametrize("order", [1, 2])
def test_unknown_quantities_have_all_names_and_units(order: int) -> None:
    nothing = unknown(names_of(order, 1), UNITS)
    assert tuple(nothing) == names_of(order, 1)
    assert all(q == Quantity(None, None, None, None, UNITS[name]) for name, q in nothing.items())


@pytest.mark.parametrize(
    ("input_unit", "output_unit", "gain", "offset"),
    [("V", "rad/s", "rad/s/V", "rad/s"), ("", "degC", "degC/1", "degC"), ("%", "", "1/%", "1"), ("", "", "1", "1")],
)
def test_units(input_unit: str, output_unit: str, gain: str, offset: str) -> None:
    units = units_of([input_unit], output_unit)
    assert (units["gain"], units["offset"], units["noise"], units["dead_time"]) == (gain, offset, offset, "s")
    assert set(units) == {*names_of(1, 1), *names_of(2, 1)}
