"""What holds for every stream of readings, not only for those somebody thought of."""

from __future__ import annotations

import json
import math
from itertools import pairwise

from hypothesis import given, settings
from hypothesis import strategies as st

from rtid.intake.grid import Grid
from rtid.intake.reading import Reading
from rtid.rows import Rows
from tests.support.gridding import both, by_tick, feed, plain, started, told

FEW = settings(max_examples=150, deadline=None, derandomize=True)
values = st.floats(-1e6, 1e6)
rates = st.sampled_from([0.5, 1, 1.5, 2, 3, 10])  # readings per period
SIGNALS = ("a.u", "b.y", "c.mode")


@st.composite
def topics(draw: st.DrawFn) -> list[list[Reading]]:
    """One list of readings per signal, each with its own rate, phase, jitter and lost readings; a period is 1 s."""
    lists = []
    for name in SIGNALS:
        rate, phase = draw(rates), draw(st.floats(0.0, 1.0))
        random = draw(st.randoms(use_true_random=False))
        times = [phase + (j + random.uniform(-0.3, 0.3)) / rate for j in range(1, int(22 * rate))]
        kept = [time for time in times if random.random() > 0.15]
        lists.append([Reading(name[0], 100.0 + time, {name: random.gauss(0.0, 1.0)}) for time in kept])
    return lists


@st.composite
def storms(draw: st.DrawFn) -> list[Reading]:
    """Times that step a little, stand, run back, jump far, or are no times at all."""
    steps = st.one_of(
        st.floats(0.0, 2.5), st.just(1.0), st.floats(-12.0, 30.0), st.sampled_from([1e3, -1e3, 1e15, -1e15, 1e300])
    )
    time, readings = 0.0, []
    for step in draw(st.lists(steps, max_size=80)):
        time += step
        shown = draw(st.sets(st.sampled_from(SIGNALS), min_size=1))
        readings.append(Reading("a", time, {name: draw(values) for name in shown}))
        if abs(step) > 100.0 and draw(st.booleans()):
            time -= step
    return readings


def run(readings: list[Reading]) -> tuple[list[Rows], Grid]:
    grid = Grid(told(gate="c.mode"))
    rows = feed(grid, readings)
    return rows + grid.flush(0.0), grid


@FEW
@given(topics(), st.lists(st.floats(0.0, 1.0), min_size=3, max_size=3))
def test_topics_that_arrive_up_to_a_period_later_give_the_same_rows(
    lists: list[list[Reading]], delays: list[float]
) -> None:
    def rows_before_tick_16(delays: list[float]) -> list[object]:
        """The last ticks are left out: the flush at the end closes them before all of their readings came."""
        arrivals = [(r.time + delay, i, r) for i, (d, delay) in enumerate(zip(lists, delays, strict=True)) for r in d]
        ordered = [reading for _, _, reading in sorted(arrivals, key=lambda arrival: arrival[:2])]
        blocks, _ = run([Reading("a", 100.0, {"a.u": 0.5}), *ordered])
        return [block for block in plain(blocks) if block[0] < 16]

    assert rows_before_tick_16(delays) == rows_before_tick_16([0.0, 0.0, 0.0])


@FEW
@given(storms(), st.data())
def test_a_state_saved_at_any_point_goes_on_to_the_same_rows(readings: list[Reading], data: st.DataObject) -> None:
    cut = data.draw(st.integers(0, len(readings)))
    loop = told(gate="c.mode")
    whole, follower = Grid(loop), Grid(loop)
    feed(whole, readings[:cut])
    follower.from_state(json.loads(json.dumps(whole.to_state(), allow_nan=False)))
    assert follower.to_state() == whole.to_state()
    expected = feed(whole, readings[cut:], stamp=7.0) + whole.flush(8.0)
    found = feed(follower, readings[cut:], stamp=7.0) + follower.flush(8.0)
    assert plain(found) == plain(expected)
    assert [rows.stamp for rows in found] == [rows.stamp for rows in expected]


@FEW
@given(topics(), st.data())
def test_a_state_saved_in_the_middle_of_averages_goes_on_to_the_same_rows(
    lists: list[list[Reading]], data: st.DataObject
) -> None:
    readings = sorted((reading for readings in lists for reading in readings), key=lambda reading: reading.time)
    cut = data.draw(st.integers(0, len(readings)))
    loop = told(gate="c.mode")
    whole, follower = Grid(loop), Grid(loop)
    feed(whole, readings[:cut])
    follower.from_state(json.loads(json.dumps(whole.to_state(), allow_nan=False)))
    assert plain(feed(follower, readings[cut:])) == plain(feed(whole, readings[cut:]))


@FEW
@given(st.lists(st.floats(-0.4, 0.4), min_size=30, max_size=30))
def test_jitter_up_to_four_tenths_of_a_period_changes_no_row(jitter: list[float]) -> None:
    exact = [both(float(k), u=math.sin(k), y=math.cos(k)) for k in range(31)]
    late = [exact[0]] + [Reading("a", r.time + j, r.values) for r, j in zip(exact[1:], jitter, strict=True)]
    assert plain(feed(Grid(told()), late)) == plain(feed(Grid(told()), exact))


@FEW
@given(st.lists(st.floats(0.05, 3.0), min_size=12, max_size=60))
def test_a_reading_stands_within_half_a_period_of_its_tick(steps: list[float]) -> None:
    grid, time, readings = started(told()), 11.5, []
    for step in steps:
        time += step
        readings.append(both(time, u=time, y=time))
    rows = by_tick(feed(grid, readings) + grid.flush(0.0))
    shown = [(k, value) for k, row in rows.items() for value in row[1:] if not math.isnan(value)]
    assert shown
    assert all(abs(value - k) <= 0.5 for k, value in shown)


@FEW
@given(st.one_of(storms(), topics().map(lambda lists: sorted(sum(lists, []), key=lambda reading: reading.time))))
def test_blocks_follow_on_and_never_cross_a_boundary(readings: list[Reading]) -> None:
    blocks, _ = run(readings)
    for block in blocks:
        last = block.first + len(block.values) - 1
        assert block.first // 4 == last // 4
        assert block.values.shape[1] == 3
        assert all(math.isfinite(value) for row in block.values for value in (row[0], row[2]))
    for before, after in pairwise(blocks):
        step = after.first - before.first - len(before.values) + 1
        if after.restart:
            assert (after.first >= 0, after.gap_s) == (True, 0.0)
        elif after.gap_s > 0.0:
            assert step > 4
            assert after.gap_s == step
        else:
            assert step == 1


@FEW
@given(storms())
def test_memory_stays_bounded_in_any_storm(readings: list[Reading]) -> None:
    grid = Grid(told(gate="c.mode"))
    for reading in readings:
        grid.feed(reading, 0.0)
        ticks = grid.to_state()["ticks"]
        assert len(ticks["cells"]) + len(ticks["waiting"]) <= 24
