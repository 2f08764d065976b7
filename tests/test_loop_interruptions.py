"""Gaps, holes, restarts, silence and closed gates: what a loop does when rows do not follow on each other."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from rtid import settings
from rtid.loop import Loop
from rtid.plants.linear import first_order
from rtid.report import Quantity, Report
from rtid.rows import Rows
from tests.support.plants import INPUT, OUTPUT, PERIOD_S, Scenario, blocks, feed, later_by, prbs, told, transitions

T = PERIOD_S
PLANT = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.2, offset=5.0)
SCENARIO = Scenario(PLANT)
SETTLING = 2 + 5 * 8  # rows of dead time and five time constants, to be found within a row or two


def going_on(rows: int = 800, **first: Any) -> tuple[Loop, list[Rows]]:
    """A loop that watches, and its next blocks; `first`: how the first of them differs."""
    data = list(SCENARIO.next_rows(PLANT, rows))
    return SCENARIO.watching(), [replace(data[0], **first), *data[1:]]


def told_of(reports: list[Report], alarm: str) -> list[str]:
    return [str(t.transition) for t in transitions(reports, alarm)]


def same(loop: Loop, before: dict[str, Quantity]) -> bool:
    found = loop.snapshot("asked")["quantities"]
    return all(found[name] == before[name] for name in ("gain", "time_constant_1", "dead_time", "noise"))


def test_a_gap_is_told_and_is_over_with_the_next_block() -> None:
    loop, data = going_on(gap_s=12.5)
    reports = feed(loop, data[:3])
    assert told_of(reports[:1], "data_gap") == ["active"]
    assert "12.5 s" in transitions(reports[:1], "data_gap")[0].text
    assert told_of(reports[1:2], "data_gap") == ["cleared"]
    assert reports[-1].alarms == ()


@pytest.mark.parametrize("first", [{"gap_s": 12.5}, {"restart": True}])
def test_after_a_gap_rows_teach_nothing_until_the_plant_has_settled(first: dict[str, Any]) -> None:
    loop, data = going_on(**first)
    assert loop.report is not None
    before = loop.report.samples
    after = [report.samples - before for report in feed(loop, data[:10])]
    frozen = 160 - after[-1]
    assert SETTLING - 4 <= frozen <= SETTLING + 4
    assert after == [max(0, 16 * k - frozen) for k in range(1, 11)]


def test_nothing_moves_while_the_loop_settles_after_a_gap() -> None:
    loop, data = going_on(gap_s=12.5)
    before, ratio = loop.snapshot("asked")["quantities"], loop.report and loop.report.drift.ratio
    wild = replace(data[0], values=data[0].values + np.array([0.0, 50.0]))
    reports = feed(loop, [wild, data[1]])
    assert same(loop, before)
    assert all(report.drift.ratio == ratio for report in reports)


def test_a_gap_makes_no_drift() -> None:
    """The plant is elsewhere after the gap than the model was before it."""
    loop = SCENARIO.watching()
    feed(loop, SCENARIO.next_rows(PLANT, 160, inputs=np.full(160, 3.0)))
    later = list(later_by(160, SCENARIO.next_rows(PLANT, 1600, inputs=prbs(1600, bit=12) - 3.0)))
    reports = feed(loop, [replace(later[0], gap_s=1000.0), *later[1:]])
    assert transitions(reports, "plant_shift", "plant_drift") == []


def test_a_restart_of_the_device_is_a_gap_with_its_own_words() -> None:
    loop, data = going_on(restart=True)
    reports = feed(loop, data[:2])
    assert told_of(reports, "data_gap") == ["active", "cleared"]
    assert "restarted" in transitions(reports, "data_gap")[0].text


def test_bridged_ticks_are_no_samples_and_the_rest_goes_on() -> None:
    loop, data = going_on()
    assert loop.report is not None
    before = loop.report.samples
    holed = data[0].values.copy()
    holed[5:8, 1] = np.nan
    report = loop.advance(replace(data[0], values=holed))
    assert report.samples == before + 13
    assert told_of([report], "data_gap") == []
    assert all(math.isfinite(q.value) for q in report.quantities.values() if q.value is not None)


def test_rows_without_an_output_update_nothing() -> None:
    loop, data = going_on()
    before = loop.snapshot("asked")
    empty = [replace(block, values=np.where([False, True], np.nan, block.values)) for block in data[:4]]
    feed(loop, empty)
    after = loop.snapshot("asked")
    assert same(loop, before["quantities"])
    assert (after["samples"], after["parameters"]) == (before["samples"], before["parameters"])


def test_the_estimate_does_not_suffer_from_holes() -> None:
    loop = SCENARIO.watching()
    rng = np.random.default_rng(3)
    reports = []
    for block in SCENARIO.next_rows(PLANT, 3200):
        values = block.values.copy()
        values[rng.random(16) < 0.1, 1] = np.nan
        reports.append(loop.advance(replace(block, values=values)))
    gain = reports[-1].quantities["gain"]
    assert gain.value is not None
    assert gain.std_error is not None
    assert abs(gain.value - 2.0) < 4.0 * gain.std_error
    assert transitions(reports) == []


def test_silence_is_nothing_before_its_time_then_stale_then_said() -> None:
    loop, data = going_on()
    report = loop.advance(data[0])
    assert loop.silence(4.99, report.stamp + 4.99) is None
    stale = loop.silence(5.0, report.stamp + 5.0)
    assert stale is not None
    assert (stale.state, stale.health, stale.due) == ("stale", "failure", True)
    assert stale.time_s == pytest.approx(report.time_s + 5.0)
    assert told_of([stale], "data_stale") == ["active"]
    assert loop.silence(6.0, report.stamp + 6.0) is None
    assert loop.state == "stale"


def test_with_the_first_reading_after_silence_it_watches_again() -> None:
    loop, data = going_on()
    report = loop.advance(data[0])
    assert loop.silence(60.0, report.stamp + 60.0) is not None
    back = loop.advance(replace(data[1], gap_s=60.0))
    assert back.state == "watching"
    assert told_of([back], "data_stale") == ["cleared"]
    assert told_of([back], "data_gap") == ["active"]
    assert back.health != "failure"


def test_a_loop_that_never_had_a_reading_waits_through_any_silence() -> None:
    loop = Loop(told())
    assert loop.silence(1e6, 0.0) is None
    assert loop.state == "waiting"


GATED = told(
    active_when=settings.Gate((settings.Condition("plc.mode", equals=1.0),)),
    baseline=settings.Baseline(after_s=1000 * T),
)


def gated_rows(mode: np.ndarray) -> np.ndarray:
    (block,) = [list(SCENARIO.next_rows(PLANT, len(mode)))]
    values = np.concatenate([rows.values for rows in block])
    return np.column_stack((values, mode))


def test_the_gates_signal_is_the_last_column() -> None:
    assert GATED.signals == (INPUT, OUTPUT, "plc.mode")


def test_behind_a_closed_gate_nothing_is_learnt() -> None:
    loop = Loop(GATED)
    reports = feed(loop, blocks(GATED, gated_rows(np.zeros(1600))))
    assert {report.state for report in reports} == {"inactive"}
    assert {report.health for report in reports} == {"function_check"}
    assert {report.samples for report in reports} == {0}


def test_only_active_rows_count_and_behind_the_gate_the_loop_stands_still() -> None:
    loop = Loop(GATED)
    mode = np.concatenate((np.ones(1604), np.zeros(400), np.ones(396)))
    reports = feed(loop, blocks(GATED, gated_rows(mode)))
    active, closed, again = reports[:100], reports[100:125], reports[125:]
    assert active[-1].state == "watching"
    assert {report.state for report in closed} == {"inactive"}
    assert {report.samples for report in closed} == {1604}
    assert {report.quantities["gain"] for report in closed if report.due} == {closed[-1].quantities["gain"]}
    assert [report.state for report in again] == ["watching"] * len(again)
    frozen = 396 - (again[-1].samples - 1604)
    assert SETTLING - 4 <= frozen <= SETTLING + 4
    assert transitions(reports, "plant_shift", "plant_drift") == []


def test_readings_outside_the_instruments_range_are_told_and_not_used() -> None:
    scenario = SCENARIO
    loop = Loop(replace(scenario.settings, ranges={OUTPUT: (-10.0, 20.0)}, limits={INPUT: (-24.0, 24.0)}))
    feed(loop, blocks(scenario.settings, np.concatenate([b.values for b in scenario.next_rows(PLANT, 800)])))
    assert loop.report is not None
    before, quantities = loop.report.samples, loop.snapshot("asked")["quantities"]
    bad = Rows(first=800, time_s=800 * T, values=np.tile([24.0, 500.0], (16, 1)), stamp=loop.report.stamp + 4.0)
    report = loop.advance(bad)
    assert report.samples == before
    assert same(loop, quantities)
    assert {(a.alarm, a.signal) for a in report.alarms} == {("out_of_range", OUTPUT), ("saturated", INPUT)}
