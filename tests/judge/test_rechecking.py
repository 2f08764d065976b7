"""A recursion that has gone astray is replaced by a fit of the recent rows; one that agrees with them is left alone."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from rtid.identify.output_error import OutputError
from rtid.identify.record import Record
from rtid.judge.rechecking import Rechecking
from rtid.plants.linear import first_order, simulate
from tests.support.plants import prbs

PERIOD, ROWS = 1.0, 1600
STRUCTURE = OutputError(1, PERIOD, (0.0, 8.0))


def moving() -> Record:
    drive = prbs(ROWS, bit=16, seed=3)
    speed = simulate(first_order(2.0, 8.0, dead_time_s=2.0, noise=0.1), drive, period_s=PERIOD, seed=4)
    return Record(drive[:, None], speed, np.ones(ROWS, dtype=np.bool_), (0,))


def after_one_look(astray: float) -> tuple[float, float]:
    """ln gain before and after, of an estimator whose ln gain is `astray` off and sure of it."""
    record = moving()
    fit = STRUCTURE.first_fit(record)
    assert fit is not None
    theta = fit.theta.copy()
    theta[0] += astray
    sure = replace(fit, theta=theta, covariance=1e-8 * fit.covariance)
    estimator = STRUCTURE.estimator(sure, record, memory=400.0)
    look = Rechecking(STRUCTURE, memory=400.0, settling=42)
    found = estimator
    for first in range(0, 480, 16):
        rows = slice(first, first + 16)
        found = look.step(found, record.inputs[rows], record.output[rows], record.ok[rows], new_stretch=first == 0)
    return float(estimator.fit.theta[0]), float(found.fit.theta[0])


def test_an_estimate_that_contradicts_its_rows_is_replaced() -> None:
    before, after = after_one_look(0.5)
    assert abs(before - np.log(2.0)) > 0.4
    assert abs(after - np.log(2.0)) < 0.05


def test_an_estimate_that_agrees_is_left_alone() -> None:
    before, after = after_one_look(0.0)
    assert after == before
