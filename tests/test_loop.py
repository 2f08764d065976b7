"""One loop from its first row: states, reports, baselines, and the same digits for the same rows."""

from __future__ import annotations

import copy
import functools

import numpy as np
import pytest

from rtid import settings
from rtid.judge import wording
from rtid.loop import Loop
from rtid.model.quantities import names_of
from rtid.plants.linear import LinearPlant, first_order, second_order, simulate
from rtid.report import Report
from tests.support.plants import (
    PERIOD_S,
    START_STAMP,
    Array,
    Scenario,
    blocks,
    changed,
    feed,
    prbs,
    told,
    transitions,
)

T = PERIOD_S
PLANT = first_order(2.0, 8 * T, dead_time_s=2 * T, noise=0.2, offset=5.0)
SHORT = told(baseline=settings.Baseline(after_s=1000 * T))
WATCHED = Scenario(PLANT)


def rows(count: int, plant: LinearPlant = PLANT, *, seed: int = 1) -> Array:
    drive = prbs(count, bit=12, seed=seed)
    return np.column_stack((drive, simulate(plant, drive, period_s=T, seed=seed)))


def lifetime(loop: settings.Loop, count: int, plant: LinearPlant = PLANT) -> list[Report]:
    return feed(Loop(loop), blocks(loop, rows(count, plant)))


@functools.cache
def short_life() -> list[Report]:
    """A baseline after 1000 of 3216 rows."""
    return lifetime(SHORT, 3216)


@functools.cache
def worn() -> list[Report]:
    """A loop that watches while its gain is a fifth lower."""
    return WATCHED.goes_on(changed(PLANT, gain=1.6), 1400)


def test_a_new_loop_waits() -> None:
    loop = Loop(SHORT)
    assert loop.state == "waiting"
    assert loop.report is None


def test_it_learns_and_then_watches() -> None:
    states = [report.state for report in short_life()]
    assert states == sorted(states, key=("learning", "watching").index)
    assert set(states) == {"learning", "watching"}


def test_the_baseline_comes_at_the_first_block_end_after_its_time_and_not_before() -> None:
    watching = next(r for r in short_life() if r.state == "watching")
    assert watching.samples == 1008  # the first block of 16 that ends at 1000 rows or later
    assert watching.drift.ratio is not None


def test_while_learning_nothing_is_judged_and_the_reason_says_what_is_missing() -> None:
    learning = short_life()[:62]
    assert all(r.drift.ratio is None and r.drift.worst_quantity is None for r in learning)
    assert {r.health for r in learning} == {"function_check"}
    assert all(r.reason.startswith("learning: ") for r in learning)
    assert transitions(learning) == []


def test_quantities_are_known_from_the_first_fit_on_also_while_learning() -> None:
    learning = short_life()[:62]
    assert learning[0].quantities["gain"].value is None
    assert learning[-1].quantities["gain"].value == pytest.approx(2.0, rel=0.1)


def test_below_3000_rows_a_baseline_is_provisional() -> None:
    reports = short_life()
    provisional = {r.samples: "provisional" in r.reason for r in reports if r.state == "watching" and r.due}
    assert {flag for samples, flag in provisional.items() if samples < 2900} == {True}
    assert {flag for samples, flag in provisional.items() if samples > 3100} == {False}


@pytest.mark.parametrize("every_s", [1.0, 10.0])
def test_a_report_is_due_at_the_first_block_end_that_is_late_enough(every_s: float) -> None:
    loop = told(publish_every_s=every_s)
    due = [r.time_s for r in lifetime(loop, 800) if r.due]
    assert due[0] == 15 * T
    assert np.all(np.diff(due) >= every_s)
    assert np.all(np.diff(due) < every_s + 16 * T)


def test_between_publications_only_time_and_samples_move() -> None:
    reports = lifetime(told(publish_every_s=20.0), 800)
    for before, now in zip(reports, reports[1:], strict=False):
        if not now.due:
            assert (now.samples, now.time_s) == (before.samples + 16, before.time_s + 16 * T)
            assert (now.quantities, now.drift, now.health, now.since) == (
                before.quantities, before.drift, before.health, before.since,
            )  # fmt: skip


@pytest.mark.parametrize("order", [1, 2])
def test_the_names_of_the_quantities_never_vary(order: int) -> None:
    model = settings.Model(order=order, dead_time_s=(0.0, 2.0))
    loop = told(model=model, baseline=settings.Baseline(after_s=600 * T))
    plant = PLANT if order == 1 else second_order(2.0, 0.25 / T, 0.9, dead_time_s=2 * T, noise=0.2)
    assert {tuple(r.quantities) for r in lifetime(loop, 1200, plant)} == {names_of(order, 1)}


def test_units_come_from_the_signals() -> None:
    quantities = lifetime(SHORT, 16)[0].quantities
    assert {name: q.unit for name, q in quantities.items()} == {
        "gain": "rad/s/V", "time_constant_1": "s", "dead_time": "s", "offset": "rad/s", "noise": "rad/s",
    }  # fmt: skip


def test_the_same_rows_give_the_same_digits() -> None:
    data = list(blocks(SHORT, rows(1200)))
    first, second = feed(Loop(SHORT), data), feed(Loop(SHORT), copy.deepcopy(data))
    assert repr(first) == repr(second)


def test_a_loop_leaves_its_rows_alone() -> None:
    data = list(blocks(SHORT, rows(1200)))
    kept = copy.deepcopy(data)
    feed(Loop(SHORT), data)
    assert all(np.array_equal(a.values, b.values) for a, b in zip(data, kept, strict=True))


@pytest.mark.parametrize("known", [333, 1600])
def test_from_its_state_a_loop_goes_on_to_the_last_digit(known: int) -> None:
    """While it learns, and while it watches."""
    data = list(blocks(SHORT, rows(2400)))
    at = known // 16
    whole = Loop(SHORT)
    feed(whole, data[:at])
    again = Loop.from_state(SHORT, copy.deepcopy(whole.to_state()))
    assert repr(feed(whole, data[at:])) == repr(feed(again, data[at:]))


def test_a_known_dead_time_is_taken_as_it_is() -> None:
    loop = told(model=settings.Model(dead_time_s=(2 * T, 2 * T)), baseline=settings.Baseline(after_s=600 * T))
    last = lifetime(loop, 1200)[-1]
    dead_time = last.quantities["dead_time"]
    assert (dead_time.value, dead_time.std_error, dead_time.low, dead_time.high) == (2 * T, 0.0, 2 * T, 2 * T)
    assert last.state == "watching"
    assert last.quantities["gain"].value == pytest.approx(2.0, rel=0.1)


def test_averaging_is_added_to_the_dead_time() -> None:
    plain = feed(Loop(SHORT), blocks(SHORT, rows(1200)))[-1].quantities["dead_time"]
    shifted_loop = Loop(SHORT)
    for block in blocks(SHORT, rows(1200)):
        fields = {name: getattr(block, name) for name in ("first", "time_s", "values", "stamp")}
        shifted_loop.advance(type(block)(**fields, output_shift_s=0.1))
    assert shifted_loop.report is not None
    shifted = shifted_loop.report.quantities["dead_time"]
    assert plain.value is not None
    assert plain.low is not None
    assert (shifted.value, shifted.low) == pytest.approx((plain.value + 0.1, plain.low + 0.1))
    assert shifted.std_error == plain.std_error


def test_a_negative_gain_is_learnt_and_watched_like_any_other() -> None:
    scenario = Scenario(changed(PLANT, gain=-2.0))
    reports = scenario.goes_on(changed(PLANT, gain=-1.6), 1400)
    gain = reports[0].quantities["gain"]
    assert gain.low is not None
    assert gain.high is not None
    assert gain.low < -1.9 < gain.high + 0.2
    (drift,) = [a for a in reports[-1].alarms if a.alarm == "plant_drift"]
    assert drift.quantity == "gain"
    assert reports[-1].drift.change_pct == pytest.approx(-20.0, abs=4.0)


def test_drift_names_the_worst_with_limits_and_the_alarms_words_become_the_reason() -> None:
    reports = worn()
    last = reports[-1]
    assert last.drift.ratio is not None
    assert last.drift.ratio > 1.0
    assert last.drift.worst_quantity == "gain"
    assert last.drift.low_pct is not None
    assert last.drift.high_pct is not None
    assert last.drift.change_pct is not None
    assert last.drift.low_pct < last.drift.change_pct < last.drift.high_pct < -10.0
    assert last.health == "maintenance_required"
    assert last.reason.startswith("gain is ")
    assert "beyond the tolerance of 10 %" in last.reason
    assert last.reason.endswith(wording.CAUTION)


def test_health_says_since_when() -> None:
    reports = worn()
    first_bad = next(r for r in reports if r.health != "good")
    assert reports[-1].since == first_bad.stamp
    assert reports[0].since <= reports[0].stamp


def test_last_informative_is_the_stamp_of_the_newest_informative_block() -> None:
    inputs = np.concatenate((prbs(160, bit=12, seed=5), np.ones(8000)))
    reports = [r for r in WATCHED.goes_on(PLANT, len(inputs), inputs=inputs) if r.due]
    lively = [r for r in reports if r.time_s < (3200 + 160) * T]
    assert all(r.drift.last_informative == r.stamp for r in lively)
    last = reports[-1].drift.last_informative
    assert last is not None
    assert START_STAMP + 3200 * T < last < reports[-1].stamp - 1000 * T


def test_what_becomes_detectable_shrinks_with_a_livelier_input() -> None:
    calm, lively = (
        WATCHED.goes_on(PLANT, 1600, inputs=swing * prbs(1600, bit=12, seed=5))[-1].drift.detectable_gain_pct
        for swing in (0.3, 1.0)
    )
    assert calm is not None
    assert lively is not None
    assert 0.0 < lively < calm
