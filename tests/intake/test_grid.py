"""Ticks, rows, holes and blocks, each rule worked by hand. A period is 1 s and a block 4 rows by default."""

from __future__ import annotations

import json
import math

import numpy as np
import pytest

from rtid.intake.grid import Grid
from rtid.intake.reading import Reading
from rtid.rows import Rows
from tests.support.gridding import both, by_tick, feed, only_input, only_output, plain, started, told

NAN = math.nan


def steady(ticks: int, start: float = 0.0) -> list[Reading]:
    return [both(start + k, u=10.0 + k, y=float(k)) for k in range(ticks)]


def test_tick_0_is_the_first_reading_of_any_signal() -> None:
    grid = Grid(told())
    rows = feed(grid, [only_input(7.25, 1.0), only_output(8.25, 5.0)]) + grid.flush(0.0)
    assert [(r.first, r.time_s) for r in rows] == [(1, 8.25)]


def test_a_row_is_inputs_then_output_then_signals_of_the_gate_only() -> None:
    grid = Grid(told(inputs=("a.u", "a.v"), gate="c.mode"))
    rows = feed(grid, [Reading("a", 0.0, {"c.mode": 4.0, "b.y": 3.0, "a.v": 2.0, "a.u": 1.0})]) + grid.flush(0.0)
    np.testing.assert_array_equal(rows[0].values, [[1.0, 2.0, 3.0, 4.0]])


def test_a_reading_without_a_signal_of_the_loop_is_ignored_wholly() -> None:
    grid = Grid(told())
    feed(grid, [Reading("z", 5.0, {"z.other": 1.0})])
    rows = feed(grid, [both(100.0)]) + grid.flush(0.0)
    assert [r.time_s for r in rows] == [100.0]
    assert grid.rejected == {}


def test_a_reading_belongs_to_the_nearest_tick_and_a_half_goes_up() -> None:
    grid = started(told(), ticks=12)
    rows = feed(grid, [both(12.49, y=1.0), both(12.5, y=2.0), both(14.2, y=3.0)]) + grid.flush(0.0)
    assert {k: row[1] for k, row in by_tick(rows).items()} == {12: 1.0, 13: 2.0, 14: 3.0}


def test_row_time_is_anchor_plus_k_periods_and_never_accumulated() -> None:
    loop = told(period_s=0.1)
    grid = started(loop, at=0.3)
    rows: list[Rows] = feed(grid, (both(0.3 + k * 0.1) for k in range(12, 5000)))
    assert rows
    assert all(r.time_s == 0.3 + r.first * 0.1 for r in rows)


def test_there_are_no_rows_before_every_signal_was_read_and_that_is_no_gap() -> None:
    grid = Grid(told())
    outputs = [only_output(float(k), float(k)) for k in range(10)]
    rows = feed(grid, [*outputs, only_input(9.0, 5.0), *steady(3, start=10.0)]) + grid.flush(0.0)
    assert sorted(by_tick(rows)) == [9, 10, 11, 12]
    assert {r.gap_s for r in rows} == {0.0}


def test_an_input_is_held_without_limit() -> None:
    grid = started(told())
    rows = feed(grid, [only_output(float(k), 0.0) for k in range(12, 200)]) + grid.flush(0.0)
    assert {row[0] for row in by_tick(rows).values()} == {11.0}
    assert len(by_tick(rows)) == 188


def test_the_last_input_and_the_nearest_output_of_a_tick_count() -> None:
    grid = started(told())
    rows = feed(grid, [both(11.8, u=1.0, y=1.0), both(12.1, u=2.0, y=2.0), both(12.4, u=3.0, y=3.0)]) + grid.flush(0.0)
    assert by_tick(rows) == {12: [3.0, 2.0]}


def test_of_two_outputs_equally_near_the_first_counts() -> None:
    grid = started(told())
    rows = feed(grid, [both(11.75, y=1.0), both(12.25, y=2.0)]) + grid.flush(0.0)
    assert by_tick(rows)[12][1] == 1.0


def test_three_missing_ticks_are_rows_with_the_inputs_of_their_ticks_and_no_output() -> None:
    grid = started(told())
    rows = feed(grid, [only_input(13.0, 50.0), both(15.0, u=60.0, y=7.0)]) + grid.flush(0.0)
    assert [r.gap_s for r in rows] == [0.0]
    np.testing.assert_array_equal(rows[0].values, [[11.0, NAN], [50.0, NAN], [50.0, NAN], [60.0, 7.0]])


def test_four_missing_ticks_are_a_gap_without_rows_as_long_as_the_hole() -> None:
    grid = started(told())
    rows = feed(grid, [only_input(13.0, 50.0), only_output(16.0, 7.0)]) + grid.flush(0.0)
    assert plain(rows) == [(16, 16.0, [["50.0", "7.0"]], 5.0, False, 0.0)]


def test_a_gap_closes_the_block_early_and_only_the_next_block_tells_it() -> None:
    grid = started(told())
    before = feed(grid, [both(12.0), both(13.0), only_input(17.0, 0.0)])
    assert before == []
    closed = feed(grid, [only_input(18.0, 0.0), only_input(21.0, 0.0)])
    assert [(r.first, len(r.values), r.gap_s) for r in closed] == [(12, 2, 0.0)]
    after = feed(grid, steady(12, start=22.0))
    assert [(r.first, len(r.values), r.gap_s) for r in after] == [(22, 2, 9.0), (24, 4, 0.0), (28, 4, 0.0)]


def test_a_block_comes_when_its_last_tick_is_final() -> None:
    grid = started(told())
    assert feed(grid, steady(4, start=12.0)) == []
    assert [(r.first, len(r.values)) for r in feed(grid, [both(16.0)])] == [(12, 4)]


@pytest.mark.parametrize(("period_s", "size"), [(0.3, 16), (0.5, 8), (1.0, 4), (2.5, 2), (3.0, 1)])
def test_blocks_begin_where_k_is_a_multiple_of_their_size(period_s: float, size: int) -> None:
    grid = Grid(told(period_s=period_s))
    rows = feed(grid, [both(k * period_s) for k in range(65)])
    assert [(r.first, len(r.values)) for r in rows] == [(first, size) for first in range(0, 64, size)]


def test_a_tick_is_final_when_every_signal_was_read_later() -> None:
    grid = started(told(period_s=3.0), ticks=12)
    assert feed(grid, [both(36.0), only_output(39.0, 1.0)]) == []
    assert [r.first for r in feed(grid, [only_input(39.0, 1.0)])] == [12]


def test_an_input_that_stays_away_holds_a_tick_open_for_three_more_ticks() -> None:
    grid = started(told(period_s=3.0), ticks=12)
    assert feed(grid, [only_output(3.0 * k, 1.0) for k in range(12, 16)]) == []
    assert [r.first for r in feed(grid, [only_output(48.0, 1.0)])] == [12]


def test_a_reading_for_a_final_tick_is_late() -> None:
    grid = started(told())
    feed(grid, [only_output(float(k), 1.0) for k in range(12, 17)])
    rows = feed(grid, [only_input(12.0, 99.0), only_input(13.0, 50.0)]) + grid.flush(0.0)
    assert grid.rejected == {"late": 1}
    assert [row[0] for row in by_tick(rows).values()] == [11.0, 50.0, 50.0, 50.0, 50.0]


def test_flush_closes_also_ticks_that_are_not_final_and_the_rest_of_the_block_follows() -> None:
    grid = started(told())
    feed(grid, [both(12.0), both(13.0)])
    assert [(r.first, len(r.values), r.stamp) for r in grid.flush(77.0)] == [(12, 2, 77.0)]
    rest = feed(grid, steady(4, start=14.0))
    assert [(r.first, len(r.values), r.gap_s) for r in rest] == [(14, 2, 0.0)]


def test_a_reading_for_a_flushed_tick_is_late() -> None:
    grid = started(told())
    feed(grid, [only_output(12.0, 1.0)])
    grid.flush(0.0)
    feed(grid, [only_input(12.0, 1.0)])
    assert grid.rejected == {"late": 1}


def test_flush_twice_gives_the_rows_once() -> None:
    grid = started(told())
    feed(grid, [both(12.0)])
    assert len(grid.flush(0.0)) == 1
    assert grid.flush(0.0) == []


def test_flush_before_any_reading_gives_nothing() -> None:
    assert Grid(told()).flush(0.0) == []


def test_a_hole_that_a_flush_falls_into_is_still_bridged() -> None:
    grid = started(told())
    feed(grid, [both(12.0), only_input(13.0, 5.0)])
    grid.flush(0.0)
    rows = feed(grid, [both(14.0, u=6.0, y=1.0)]) + grid.flush(0.0)
    np.testing.assert_array_equal(rows[0].values, [[5.0, NAN], [6.0, 1.0]])
    assert (rows[0].first, rows[0].gap_s) == (13, 0.0)


def test_in_blocks_of_one_a_bridged_tick_is_a_block_of_its_own() -> None:
    grid = started(told(period_s=3.0))
    rows = feed(grid, [both(36.0), both(42.0)]) + grid.flush(0.0)
    assert [(r.first, r.gap_s) for r in rows] == [(12, 0.0), (13, 0.0), (14, 0.0)]
    assert math.isnan(rows[1].values[0, 1])


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, 1e200])
def test_a_value_that_is_not_finite_even_squared_is_rejected_alone(value: float) -> None:
    grid = started(told())
    rows = feed(grid, [both(12.0, u=value, y=3.0)]) + grid.flush(0.0)
    assert by_tick(rows) == {12: [11.0, 3.0]}
    assert grid.rejected == {"not_finite": 1}


def test_the_stamp_is_the_label_of_the_reading_that_closed_the_block() -> None:
    grid = started(told())
    feed(grid, steady(4, start=12.0), stamp=500.0)
    assert [r.stamp for r in feed(grid, [both(16.0)], stamp=501.0)] == [501.0]


def test_a_message_with_an_input_that_changes_rarely_needs_no_other_input_to_go_on() -> None:
    grid = Grid(told(inputs=("a.u", "a.v")))
    first = [Reading("a", 0.0, {"a.v": 8.0})]
    rows = feed(grid, first + [both(float(k), u=1.0, y=2.0) for k in range(20)])
    assert [(r.first, len(r.values)) for r in rows] == [(0, 4), (4, 4), (8, 4), (12, 4)]
    assert {tuple(row) for row in by_tick(rows).values()} == {(1.0, 8.0, 2.0)}


def test_the_state_is_plain_json_and_goes_on_at_the_same_digit() -> None:
    loop = told(period_s=0.1)
    grid = started(loop, at=1.0 / 3.0)
    feed(grid, [both(1.0 / 3.0 + 1.2, u=0.1, y=1e-300), only_input(1.0 / 3.0 + 1.4, 0.7)])
    follower = Grid(loop)
    follower.from_state(json.loads(json.dumps(grid.to_state(), allow_nan=False)))
    more = [both(1.0 / 3.0 + 0.1 * k, u=0.3 * k, y=0.7 / k) for k in range(15, 40)]
    expected = feed(grid, more)
    assert plain(feed(follower, more)) == plain(expected)
    assert np.isnan(expected[0].values).any()


@pytest.mark.parametrize("other", [told(period_s=2.0), told(inputs=("a.u", "a.v"))])
def test_a_state_of_another_period_or_other_signals_is_a_restart(other: object) -> None:
    old = started(told())
    grid = Grid(other)  # type: ignore[arg-type]
    grid.from_state(old.to_state())
    reading = Reading("a", 500.0, {"a.u": 1.0, "a.v": 1.0, "b.y": 1.0})
    rows = feed(grid, [reading]) + grid.flush(0.0)
    assert [(r.first, r.time_s, r.restart) for r in rows] == [(0, 500.0, True)]
