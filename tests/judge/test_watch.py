"""What becomes of a change: from the first sign to a named drift, and back."""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np
import pytest

from rtid.plants.linear import LinearPlant, first_order, second_order, two_lags
from rtid.report import ActiveAlarm, Report
from tests.support.plants import PERIOD_S, Scenario, changed, feed, later_by, prbs, transitions

T = PERIOD_S
ONE = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.2, offset=5.0)
LIGHT = second_order(2.0, 0.25 / T, 0.7, dead_time_s=2 * T, noise=0.2, offset=5.0)
LAGS = two_lags(2.0, 12 * T, 3 * T, dead_time_s=2 * T, noise=0.2, offset=5.0)
ARX = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.03, offset=0.0)
RAISED = changed(ARX, offset=50.0)
SCENARIOS = {
    "order 1": Scenario(ONE),
    "order 2, oscillating": Scenario(LIGHT),
    "order 2, two lags": Scenario(LAGS),
    "equation error": Scenario(ARX, "equation_error"),
}
ROWS = 1200


def seeds(scenario: str) -> range:
    """Two runs where the fits are quick, else one."""
    return range(2) if scenario == "equation error" else range(1)


@dataclass(frozen=True)
class Change:
    scenario: str
    quantity: str
    later: LinearPlant
    pct: float


CHANGES = [
    Change("order 1", "gain", changed(ONE, gain=1.6), -20.0),
    Change("order 1", "time_constant_1", changed(ONE, slower=1.35), 35.0),
    Change("order 1", "dead_time", changed(ONE, dead_time_s=5 * T), 150.0),
    Change("order 2, oscillating", "gain", changed(LIGHT, gain=1.6), -20.0),
    Change("order 2, oscillating", "natural_frequency", changed(LIGHT, slower=1.35), 100.0 / 1.35 - 100.0),
    Change("order 2, oscillating", "dead_time", changed(LIGHT, dead_time_s=5 * T), 150.0),
    Change("order 2, two lags", "time_constant_1",
           two_lags(2.0, 1.35 * 12 * T, 3 * T, dead_time_s=2 * T, noise=0.2, offset=5.0), 35.0),
    Change("equation error", "gain", changed(ARX, gain=1.6), -20.0),
    Change("equation error", "time_constant_1", changed(ARX, slower=1.35), 35.0),
    Change("equation error", "dead_time", changed(ARX, dead_time_s=5 * T), 150.0),
]  # fmt: skip
every_change = pytest.mark.parametrize("change", CHANGES, ids=[f"{c.scenario}: {c.quantity}" for c in CHANGES])


@functools.cache
def story(change: Change, seed: int) -> list[Report]:
    return SCENARIOS[change.scenario].goes_on(change.later, ROWS, seed=seed)


def standing(report: Report, alarm: str) -> ActiveAlarm | None:
    return next((a for a in report.alarms if a.alarm == alarm), None)


def covers(low: float | None, high: float | None, truth: float) -> bool:
    """Within the limits, of two standard errors, widened to four: left in 1 of 16 000 cases."""
    assert low is not None
    assert high is not None
    margin = 0.5 * (high - low)
    return low - margin <= truth <= high + margin


@every_change
def test_a_change_beyond_tolerance_ends_as_drift_of_that_quantity(change: Change) -> None:
    for seed in seeds(change.scenario):
        reports = story(change, seed)
        drift = standing(reports[-1], "plant_drift")
        assert drift is not None
        assert drift.quantity == change.quantity
        assert standing(reports[-1], "plant_shift") is None
        assert reports[-1].health == "maintenance_required"
        assert reports[-1].reason == drift.text


@every_change
def test_the_published_limits_cover_the_truth(change: Change) -> None:
    for seed in seeds(change.scenario):
        reports = story(change, seed)
        told = [t for t in transitions(reports, "plant_drift") if t.quantity == change.quantity]
        assert told
        assert all(covers(t.low_pct, t.high_pct, change.pct) for t in told)
        last = reports[-1].drift
        assert last.worst_quantity == change.quantity
        assert covers(last.low_pct, last.high_pct, change.pct)


@every_change
def test_the_first_sign_is_a_shift_that_the_drift_replaces(change: Change) -> None:
    told = transitions(story(change, 0), "plant_shift", "plant_drift")
    assert (told[0].alarm, told[0].transition, told[0].quantity) == ("plant_shift", "active", "undecided")
    raised = next(i for i, t in enumerate(told) if t.alarm == "plant_drift")
    assert told[raised].transition == "active"
    moment = [(t.alarm, t.transition) for t in told if t.time_s == told[raised].time_s]
    assert moment == [("plant_drift", "active"), ("plant_shift", "cleared")]


@pytest.mark.parametrize("structure", ["order 1", "equation error"])
@pytest.mark.parametrize("part", [{"gain": 1.9}, {"slower": 1.1}], ids=["gain", "time_constant"])
def test_half_the_tolerance_is_a_shift_at_most(structure: str, part: dict[str, float]) -> None:
    scenario = SCENARIOS[structure]
    reports = scenario.goes_on(changed(scenario.plant, **part), ROWS)
    assert transitions(reports, "plant_drift") == []


def test_no_change_is_neither_and_stays_good() -> None:
    scenario = SCENARIOS["order 1"]
    for seed in range(3):
        reports = scenario.goes_on(ONE, ROWS, seed=seed)
        assert transitions(reports) == []
        assert {report.health for report in reports} == {"good"}
        assert max(report.drift.ratio or 0.0 for report in reports) < 1.0


@pytest.mark.parametrize("structure", ["order 1", "order 2, oscillating", "equation error"])
def test_a_gain_that_changes_its_sign_is_a_drift_of_the_gain(structure: str) -> None:
    scenario = SCENARIOS[structure]
    last = scenario.goes_on(changed(scenario.plant, gain=-2.0), ROWS)[-1]
    drift = standing(last, "plant_drift")
    assert drift is not None
    assert drift.quantity == "gain"
    assert covers(last.drift.low_pct, last.drift.high_pct, -200.0)


@pytest.mark.parametrize(
    ("quantity", "later", "pct"),
    [
        pytest.param("gain", changed(ONE, gain=8.0), 300.0, id="gain times 4"),
        pytest.param("gain", changed(ONE, gain=0.2), -90.0, id="gain over 10"),
        pytest.param("gain", changed(ONE, gain=0.0), -100.0, id="gain lost"),
        pytest.param("time_constant_1", changed(ONE, slower=4.0), 300.0, id="time constant times 4"),
        pytest.param("dead_time", changed(ONE, dead_time_s=0.0), -100.0, id="dead time gone"),
        pytest.param("dead_time", changed(ONE, dead_time_s=8 * T), 300.0, id="dead time + 6 rows"),
    ],
)
def test_a_large_change_is_named_and_measured(quantity: str, later: LinearPlant, pct: float) -> None:
    report = SCENARIOS["order 1"].goes_on(later, 800)[-1]
    drift = standing(report, "plant_drift")
    assert drift is not None
    assert drift.quantity == quantity
    assert covers(report.drift.low_pct, report.drift.high_pct, pct)


def test_drift_clears_when_the_plant_comes_back() -> None:
    scenario = SCENARIOS["order 1"]
    loop = scenario.watching()
    feed(loop, scenario.next_rows(changed(ONE, gain=1.6), 1600))
    assert loop.report is not None
    assert standing(loop.report, "plant_drift") is not None
    reports = feed(loop, later_by(1600, scenario.next_rows(ONE, 6000, seed=7)))
    assert [t.transition for t in transitions(reports, "plant_drift")][-1] == "cleared"
    assert standing(reports[-1], "plant_drift") is None


@pytest.mark.parametrize("structure", ["order 1", "order 2, oscillating"])
def test_a_load_at_constant_input_is_no_drift(structure: str) -> None:
    """An unmeasured load moves the offset by a deviation of the output while the input stands still."""
    scenario = SCENARIOS[structure]
    for seed in seeds(structure):
        moving = prbs(800, bit=12, seed=seed)
        inputs = np.concatenate((moving, np.full(200, moving[-1])))
        loop = scenario.watching()
        feed(loop, scenario.next_rows(scenario.plant, 1000, seed=seed, inputs=inputs))
        resting = np.full(1000, moving[-1])
        loaded = scenario.next_rows(changed(scenario.plant, offset=6.7), 1000, seed=50 + seed, inputs=resting)
        assert transitions(feed(loop, later_by(1000, loaded)), "plant_drift") == []


def test_a_drift_is_seen_wherever_the_output_has_its_zero() -> None:
    """The same plant and change, but readings 50 higher, 25 times their deviation: say kelvin in place of celsius."""
    for scenario in (Scenario(RAISED), Scenario(RAISED, "equation_error")):
        reports = scenario.goes_on(changed(RAISED, gain=1.6), ROWS)
        drift = standing(reports[-1], "plant_drift")
        assert drift is not None, scenario.structure
        assert drift.quantity == "gain"


def test_blindness_is_told_when_the_input_rests_and_ends_when_it_moves_again() -> None:
    scenario = SCENARIOS["order 1"]
    inputs = np.concatenate((np.ones(20_000), prbs(3000, bit=12, seed=3)))
    reports = scenario.goes_on(ONE, len(inputs), inputs=inputs)
    told = transitions(reports, "cannot_judge")
    assert [t.transition for t in told] == ["active", "cleared"]
    blind = [r for r in reports if standing(r, "cannot_judge")]
    assert {r.health for r in blind} == {"function_check"}
    assert all(r.drift.detectable_gain_pct is None or r.drift.detectable_gain_pct > 10.0 for r in blind if r.due)
    assert transitions(reports, "plant_drift", "plant_shift") == []


def test_the_detectable_gain_change_is_detected() -> None:
    """What is said to be seen within the memory, with 95 % power, is seen by at least 8 of 10 (95 %: 8 or more in
    99 of 100 runs)."""
    scenario = SCENARIOS["order 1"]
    report = scenario.watching().report
    assert report is not None
    assert report.drift.detectable_gain_pct is not None
    less = changed(ONE, gain=2.0 * (1.0 - report.drift.detectable_gain_pct / 100.0))
    assert sum(is_flagged(scenario, less, seed) for seed in range(10)) >= 8


def is_flagged(scenario: Scenario, plant: LinearPlant, seed: int) -> bool:
    """Within the memory."""
    loop = scenario.watching()
    reports = (loop.advance(rows) for rows in scenario.next_rows(plant, scenario.memory, seed=seed))
    return any(t.alarm == "plant_shift" for report in reports for t in report.transitions)
