"""The gate `active_when`."""

from __future__ import annotations

import numpy as np
import pytest

from rtid.judge.gate import GateKeeper
from rtid.settings import Condition, Gate

COLUMNS = ("drive.volts", "drive.speed", "plc.mode")


def rows(*, volts: list[float] | None = None, mode: list[float] | None = None) -> np.ndarray:
    n = len(volts or mode or [])
    values = np.zeros((n, 3))
    values[:, 0] = volts or [0.0] * n
    values[:, 2] = mode or [0.0] * n
    return values


def keeper(*conditions: Condition, settle_s: float = 0.0, period: float = 0.5) -> GateKeeper:
    return GateKeeper(Gate(conditions, settle_s), COLUMNS, period)


def test_without_a_gate_every_row_is_active() -> None:
    assert GateKeeper(None, COLUMNS, 1.0).active(rows(volts=[np.nan, 0.0, -5.0])).tolist() == [True] * 3


@pytest.mark.parametrize(
    ("condition", "expected"),
    [
        (Condition("drive.volts", above=1.0), [False, False, True]),
        (Condition("drive.volts", below=1.0), [True, False, False]),
        (Condition("drive.volts", equals=1.0), [False, True, False]),
    ],
)
def test_one_condition(condition: Condition, expected: list[bool]) -> None:
    assert keeper(condition).active(rows(volts=[0.0, 1.0, 2.0])).tolist() == expected


def test_all_conditions_must_hold() -> None:
    gate = keeper(Condition("drive.volts", above=1.0), Condition("plc.mode", equals=1.0))
    assert gate.active(rows(volts=[2.0, 2.0, 0.0], mode=[0.0, 1.0, 1.0])).tolist() == [False, True, False]


@pytest.mark.parametrize("condition", [{"above": 1.0}, {"below": 1.0}, {"equals": 1.0}])
def test_an_unknown_value_opens_no_gate(condition: dict[str, float]) -> None:
    assert not keeper(Condition("drive.volts", **condition)).active(rows(volts=[np.nan])).any()


def test_settling_counts_the_rows_since_the_gate_opened() -> None:
    """1.2 s at 0.5 s a row: the first three open rows only settle."""
    gate = keeper(Condition("drive.volts", above=1.0), settle_s=1.2)
    assert gate.active(rows(volts=[2.0] * 5)).tolist() == [False, False, False, True, True]


def test_settling_goes_on_over_blocks_and_begins_anew_when_the_gate_closes() -> None:
    gate = keeper(Condition("drive.volts", above=1.0), settle_s=1.0)
    assert gate.active(rows(volts=[2.0, 2.0])).tolist() == [False, False]
    assert gate.active(rows(volts=[2.0, 0.0, 2.0])).tolist() == [True, False, False]
    assert gate.active(rows(volts=[2.0, 2.0])).tolist() == [False, True]
