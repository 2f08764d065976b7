"""How fast the score sees a change: core figures of a plant with pole 0.95, noise a tenth of the gain's swing.

The signal of two levels, four rows each, makes a known change of gain by 10, 20, 40 % or of the time constant by 30 %
detectable at the best in 233, 58, 15 and 82 rows (ln B over the divergence a row); in the table 211, 54, 14, 78.
"""

from __future__ import annotations

import math

import numpy as np
import pytest

from rtid.plants.linear import LinearPlant, first_order
from rtid.settings import AlarmBudget
from tests.support.plants import PERIOD_S, Scenario, changed

PLANT = first_order(2.0, -PERIOD_S / math.log(0.95), dead_time_s=2 * PERIOD_S, noise=0.2, offset=5.0)
BUDGET = AlarmBudget(1.0, 1e5 * PERIOD_S / 86400.0)  # B = 1e5 rows
SCENARIO = Scenario(PLANT, learnt=6000, bit=4, memory=1000, budget=BUDGET)
RUNS = 6
FACTOR = 2.0  # over the reach, which a second detector shares; one block more because the end of a block decides


def delay(plant: LinearPlant, seed: int, most: int) -> int:
    loop = SCENARIO.watching()
    for rows in SCENARIO.next_rows(plant, most, seed=seed):
        report = loop.advance(rows)
        if any(t.alarm in {"plant_shift", "plant_drift"} and t.transition == "active" for t in report.transitions):
            return rows.first + len(rows.values) - SCENARIO.learnt
    return most


@pytest.mark.parametrize(
    ("plant", "reach"),
    [
        (changed(PLANT, gain=2.2), 350),
        (changed(PLANT, gain=2.4), 105),
        (changed(PLANT, gain=2.8), 32),
        (changed(PLANT, slower=1.3), 115),
        (changed(PLANT, dead_time_s=4 * PERIOD_S), 35),
    ],
    ids=["gain+10", "gain+20", "gain+40", "time_constant+30", "dead_time+2"],
)
def test_a_change_is_flagged_in_time(plant: LinearPlant, reach: int) -> None:
    delays = [delay(plant, seed, 10 * reach) for seed in range(RUNS)]
    assert np.mean(delays) <= FACTOR * reach + SCENARIO.settings.block_rows


def test_no_change_is_not_flagged() -> None:
    """30 000 rows in all, 0.3 false alarms expected: three or more in 1 of 250 runs."""
    early = [delay(PLANT, 100 + seed, 5000) < 5000 for seed in range(RUNS)]
    assert sum(early) < 3
