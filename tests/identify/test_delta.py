"""Uncertainty goes from parameters to quantities by their derivatives, which are known in closed form here."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from rtid.identify.delta import quantity_jacobian
from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from tests.identify.synthetic import guess


def test_first_order_quantities_are_the_parameters_but_for_the_offset() -> None:
    """offset = y0 - K·centre, so its derivative by ln K is -K·centre."""
    fit = replace(guess([math.log(2.0), math.log(8.0), 1.5, 3.0], sign=-1.0, centre=5.0), covariance=0.01 * np.eye(4))
    values, jacobian = quantity_jacobian(OutputError(1, 1.0, (0.0, 4.0)), fit)
    assert values == pytest.approx({"gain": -2.0, "time_constant_1": 8.0, "dead_time": 1.5, "offset": 13.0})
    expected = [[1, 0, 0, 0], [0, 1, 0, 0], [0, 0, 1, 0], [10, 0, 0, 1]]
    assert jacobian == pytest.approx(np.array(expected), abs=1e-7)


def test_time_constants_of_an_overdamped_plant() -> None:
    """τ = (ζ ± √(ζ²-1))/ω: ∂ln τ/∂ln ω = -1, ∂ln τ/∂ln ζ = ±ζ/√(ζ²-1)."""
    fit = guess([0.0, math.log(0.2), math.log(1.3), 1.0, 0.0])
    values, jacobian = quantity_jacobian(OutputError(2, 1.0, (0.0, 4.0)), fit)
    rows = dict(zip(values, jacobian, strict=True))
    slope = 1.3 / math.sqrt(0.69)
    assert values["time_constant_1"] * values["time_constant_2"] == pytest.approx(25.0, rel=1e-12)
    assert rows["time_constant_1"][:3] == pytest.approx([0.0, -1.0, slope], abs=1e-6)
    assert rows["time_constant_2"][:3] == pytest.approx([0.0, -1.0, -slope], abs=1e-6)
    assert rows["damping_ratio"][:3] == pytest.approx([0.0, 0.0, 1.0], abs=1e-8)


def test_what_does_not_exist_has_no_derivative() -> None:
    values, jacobian = quantity_jacobian(OutputError(2, 1.0, (0.0, 4.0)), guess([0.0, math.log(0.2), -1.0, 1.0, 0.0]))
    rows = dict(zip(values, jacobian, strict=True))
    assert math.isnan(values["time_constant_1"])
    assert np.isnan(rows["time_constant_1"]).all()
    assert np.isfinite(rows["natural_frequency"]).all()


def test_gain_of_a_regression() -> None:
    """ln|B(1)/A(1)|: ∂/∂a = -1/A(1), ∂/∂b = 1/B(1); the dead time is no parameter."""
    fit = replace(guess([-1.5, 0.7, 1.0, 0.5, 3.0]), delay=4)
    values, jacobian = quantity_jacobian(EquationError(2, 0.5, (0.0, 4.0)), fit)
    rows = dict(zip(values, jacobian, strict=True))
    assert rows["gain"] == pytest.approx([-5.0, -5.0, 1 / 1.5, 1 / 1.5, 0.0], abs=1e-6)
    assert values["dead_time"] == 2.0
    assert not rows["dead_time"].any()
