"""Series M of Box & Jenkins, sales with a leading indicator, on differences.

Printed there: ∇Y = 0.035 + 4.82/(1 - 0.72B) ∇X(t-3) + (1 - 0.54B)a. The exact figures below are ordinary and
conditional nonlinear least squares computed by other programs; in our terms lag 3 is a dead time of two rows.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.record import Record
from tests.identify.synthetic import guess, whole_record

DATA = Path(__file__).with_name("sales_with_leading_indicator.csv")


def differences() -> Record:
    table = np.loadtxt(DATA, delimiter=",", skiprows=3)
    return whole_record(np.diff(table[:, 1]), np.diff(table[:, 2]))


def test_the_data_are_the_published_ones() -> None:
    """First pairs 10.01 200.1; 10.07 199.5; 10.32 199.4; the last 13.40 262.7."""
    table = np.loadtxt(DATA, delimiter=",", skiprows=3)
    assert table[:3].tolist() == [[1, 10.01, 200.1], [2, 10.07, 199.5], [3, 10.32, 199.4]]
    assert table[-1].tolist() == [150, 13.40, 262.7]


def test_regression_at_lag_three() -> None:
    """Ordinary least squares, n = 146: a 0.69066417 (.0225), b 4.55452968 (.1035), c 0.02853849; s² 0.133141."""
    fit = EquationError(1, 1.0, (2.0, 2.0)).refit(differences(), guess([0.0, 0.0, 0.0]))
    assert fit.rows == 146
    assert [-fit.theta[0], fit.theta[1], fit.theta[2]] == pytest.approx([0.69066417, 4.55452968, 0.02853849], abs=5e-9)
    assert np.sqrt(np.diag(fit.covariance))[:2] == pytest.approx([0.0225, 0.1035], abs=5.1e-5)
    assert fit.sigma**2 == pytest.approx(0.133141, abs=5.1e-7)


@pytest.mark.parametrize(("lag", "variance"), [(2, 1.57), (4, 1.88)])
def test_regression_at_the_neighbouring_lags(lag: int, variance: float) -> None:
    fit = EquationError(1, 1.0, (lag - 1.0, lag - 1.0)).refit(differences(), guess([0.0, 0.0, 0.0]))
    assert fit.sigma**2 == pytest.approx(variance, abs=5.1e-3)


def test_the_bank_of_dead_times_finds_lag_three() -> None:
    fit = EquationError(1, 1.0, (0.0, 6.0)).refit(differences(), guess([0.0, 0.0, 0.0]))
    assert fit.delay == 2
    assert fit.delay_error < 0.3  # the residual sum is twelve times larger beside it: certain to the row


@pytest.mark.parametrize("dead_time", [(2.0, 2.0), (0.0, 6.0)], ids=["lag three", "any lag"])
def test_output_error_fit(dead_time: tuple[float, float]) -> None:
    """c 0.0323, w0 4.693, delta 0.726; gain w0/(1 - δ) = 17.16. Bands: w0 ± 0.15, δ ± 0.01, as the printed 4.82 and
    0.72 are two standard errors off; the gain's is two of its standard errors by those of w0 (.056) and δ (.004),
    0.056/0.274 and 4.69·0.004/0.274² in quadrature: 0.32. Of c it is two printed ones, 0.02."""
    structure = OutputError(1, 1.0, dead_time)
    record = differences()
    start = guess([math.log(10.0), math.log(5.0), 2.0, 0.0], centre=float(record.inputs.mean()))
    fit = structure.refit(record, start)
    quantities = structure.quantities(fit.theta, fit)
    delta = math.exp(-1.0 / quantities["time_constant_1"])
    assert delta == pytest.approx(0.726, abs=0.01)
    assert quantities["gain"] * (1.0 - delta) == pytest.approx(4.693, abs=0.15)
    assert quantities["gain"] == pytest.approx(17.16, abs=0.64)
    assert quantities["dead_time"] == pytest.approx(2.0, abs=0.1)
    assert quantities["offset"] == pytest.approx(0.0323, abs=0.02)
