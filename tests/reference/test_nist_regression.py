"""NIST StRD linear regression (itl.nist.gov/div898/strd), fed to the recursive kernel row by row.

Certified values as NIST prints them; Longley's data and Norris' come inside statsmodels and scipy, the others are
made by the formulas of their data files. LRE is the number of correct digits, -log10 of the worst relative error.
"""

from __future__ import annotations

import math
from importlib import resources

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.signal import lfilter
from statsmodels.datasets import longley

from rtid.identify.least_squares import LeastSquaresStack
from tests.identify.synthetic import switching

Array = NDArray[np.float64]

NO_PRIOR = 1e15  # deviation: its weight 1e-30 leaves every certified digit alone
D = [759, -2048, 2048, -2048, 2523, -2048, 2048, -2048, 1838, -2048, 2048]
DISTURBANCE = np.array([*D, *D[-2::-1]], dtype=np.float64)

LONGLEY = [
    -3482258.63459582, 15.0618722713733, -0.358191792925910e-01, -2.02022980381683, -1.03322686717359,
    -0.511041056535807e-01, 1829.15146461355,
]  # fmt: skip
LONGLEY_SD = [
    890420.383607373, 84.9149257747669, 0.334910077722432e-01, 0.488399681651699, 0.214274163161675,
    0.226073200069370, 455.478499142212,
]  # fmt: skip
WAMPLER3_SD = [
    2152.32624678170, 2363.55173469681, 779.343524331583, 101.475507550350, 5.64566512170752, 0.112324854679312,
]  # fmt: skip


def row_by_row(rows: Array, output: Array) -> tuple[Array, Array, float]:
    """Coefficients, their standard deviations, residual standard deviation."""
    stack = LeastSquaresStack(1, np.full(rows.shape[1], NO_PRIOR))
    for row, value in zip(rows, output, strict=True):
        stack.fold(row[None, None, :], np.array([value]))
    residual = math.sqrt(stack.residual_sum()[0] / (len(output) - rows.shape[1]))
    return stack.solve()[0], residual * np.sqrt(np.diag(stack.inverse(0))), residual


def digits(found: Array, certified: list[float]) -> float:
    wrong = np.abs(found / np.array(certified) - 1.0).max()
    return -math.log10(max(float(wrong), 1e-16))


def wampler() -> tuple[Array, Array]:
    x = np.arange(21.0)
    rows = x[:, None] ** np.arange(6)
    return rows, rows.sum(axis=1)


def test_longley() -> None:
    data = longley.load_pandas()
    names = ["GNPDEFL", "GNP", "UNEMP", "ARMED", "POP", "YEAR"]
    rows = np.column_stack((np.ones(16), data.exog[names].to_numpy(dtype=np.float64)))
    theta, deviation, residual = row_by_row(rows, data.endog.to_numpy(dtype=np.float64))
    assert digits(theta, LONGLEY) >= 9.0
    assert digits(deviation, LONGLEY_SD) >= 9.0
    assert residual == pytest.approx(304.854073561965, rel=1e-9)


def test_wampler_1() -> None:
    assert digits(row_by_row(*wampler())[0], [1.0] * 6) >= 9.0


def test_wampler_2() -> None:
    powers = (np.arange(21.0) / 10.0)[:, None] ** np.arange(6)
    rows, _ = wampler()
    theta = row_by_row(rows, powers.sum(axis=1))[0]
    assert digits(theta, [1.0, 0.1, 0.01, 1e-3, 1e-4, 1e-5]) >= 12.0


@pytest.mark.parametrize(("size", "least"), [(1.0, 8.5), (100.0, 7.5), (10000.0, 5.5)], ids=["3", "4", "5"])
def test_wampler_with_residuals(size: float, least: float) -> None:
    """Where the textbook update of P fails altogether; a batch Householder QR has 9.1, 7.8 and 5.8 digits."""
    rows, output = wampler()
    theta, deviation, residual = row_by_row(rows, output + size * DISTURBANCE)
    assert digits(theta, [1.0] * 6) >= least
    assert digits(deviation, [size * v for v in WAMPLER3_SD]) >= 9.0
    assert residual == pytest.approx(size * 2360.14502379268, rel=1e-9)


def test_norris() -> None:
    text = resources.files("scipy.stats").joinpath("tests/data/nist_linregress/Norris.dat").read_text()
    table = np.array([[float(v) for v in line.split()] for line in text.splitlines()[60:96]])
    rows = np.column_stack((np.ones(len(table)), table[:, 1]))
    theta, deviation, residual = row_by_row(rows, table[:, 0])
    assert digits(theta, [-0.262323073774029, 1.00211681802045]) >= 11.0
    assert digits(deviation, [0.232818234301152, 0.429796848199937e-03]) >= 11.0
    assert residual == pytest.approx(0.884796396144373, rel=1e-11)


def test_no_intercept() -> None:
    theta, deviation, residual = row_by_row(np.arange(60.0, 71.0)[:, None], np.arange(130.0, 141.0))
    assert digits(theta, [2.07438016528926]) >= 13.0
    assert digits(deviation, [0.165289256198347e-01]) >= 13.0
    assert residual == pytest.approx(3.56753034006338, rel=1e-13)
    theta, deviation, _ = row_by_row(np.array([[4.0], [5.0], [6.0]]), np.array([3.0, 4.0, 4.0]))
    assert digits(theta, [0.727272727272727]) >= 13.0
    assert digits(deviation, [0.420827318078432e-01]) >= 13.0


def test_a_slow_plant_sampled_fast() -> None:
    """Poles at 0.999 and 0.997, noise-free: regressors [-y(t-1), -y(t-2), u(t-1), u(t-2)] nearly alike; 9 digits."""
    u = switching(np.random.default_rng(1), 2000, 50)
    theta = [-1.996, 0.996003, 3e-6, 2e-6]
    y = lfilter([0.0, *theta[2:]], [1.0, *theta[:2]], u)
    rows = np.column_stack((-y[1:-1], -y[:-2], u[1:-1], u[:-2]))
    assert digits(row_by_row(rows, y[2:])[0], theta) >= 9.0
