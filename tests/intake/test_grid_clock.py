"""Jumps, restarts and times that run backwards, each rule worked by hand. One period is 1 s, a block 4 rows."""

from __future__ import annotations

import math

import pytest

from rtid.intake.grid import Grid
from rtid.intake.reading import Reading
from tests.support.gridding import both, by_tick, feed, only_input, only_output, plain, started, told


def test_ten_periods_ahead_is_no_jump() -> None:
    grid = started(told())  # the newest time is 11
    rows = feed(grid, [both(21.0)]) + grid.flush(0.0)
    assert [(r.first, r.gap_s) for r in rows] == [(21, 10.0)]


def test_a_jump_ahead_waits_for_the_next_reading_and_then_is_a_gap() -> None:
    grid = started(told())
    assert feed(grid, [both(1000.0, y=1.0)]) + grid.flush(0.0) == []
    rows = feed(grid, [both(1001.0, y=2.0)]) + grid.flush(0.0)
    assert plain(rows) == [(1000, 1000.0, [["0.0", "1.0"], ["0.0", "2.0"]], 989.0, False, 0.0)]
    assert grid.rejected == {}


def test_a_confirmed_jump_ahead_closes_the_open_block_with_the_stamp_of_before() -> None:
    grid = started(told())
    feed(grid, [both(12.0), both(13.0)], stamp=13.0)
    assert feed(grid, [both(1000.0)], stamp=1000.0) == []
    closed = feed(grid, [both(1001.0)], stamp=1001.0)
    assert [(r.first, len(r.values), r.stamp) for r in closed] == [(12, 2, 13.0)]


def test_an_input_read_before_a_jump_ahead_is_held_over_it() -> None:
    grid = started(told())
    feed(grid, [only_input(12.0, 42.0), only_output(1000.0, 1.0), only_output(1001.0, 1.0)])
    assert {row[0] for row in by_tick(grid.flush(0.0)).values()} == {42.0}


def test_missing_ticks_right_before_a_jump_ahead_make_no_rows() -> None:
    grid = started(told())
    ahead = [only_input(1000.0, 1.0), only_input(1000.0, 1.0), only_output(997.0, 1.0)]
    rows = feed(grid, [both(12.0), only_input(13.0, 1.0), *ahead]) + grid.flush(0.0)
    assert sorted(by_tick(rows)) == [12, 997]


def test_a_topic_that_lags_by_a_tick_is_not_late_after_a_jump_ahead() -> None:
    grid = started(told())
    feed(grid, [only_input(1000.0, 1.0), only_input(1001.0, 1.0), only_output(999.0, 5.0)])
    assert by_tick(grid.flush(0.0)) == {999: [11.0, 5.0]}
    assert grid.rejected == {}


def test_a_topic_that_lags_does_not_take_the_newest_time_back() -> None:
    grid = started(told())
    feed(grid, [only_input(14.0, 1.0), only_output(12.0, 2.0), only_input(23.5, 3.0), only_output(22.0, 4.0)])
    assert by_tick(grid.flush(0.0))[22] == [1.0, 4.0]
    assert grid.rejected == {}


def test_the_block_after_a_gap_ends_at_its_own_boundary() -> None:
    grid = started(told())
    rows = feed(grid, [both(1001.0 + k) for k in range(12)])
    assert [(r.first, len(r.values)) for r in rows] == [(1001, 3), (1004, 4), (1008, 4)]


@pytest.mark.parametrize("stray", [1000.0, -1000.0, 22.5, 0.5])
def test_a_single_stray_time_changes_nothing(stray: float) -> None:
    clean, disturbed = started(told()), started(told())
    readings = [both(float(k), u=float(k)) for k in range(12, 30)]
    expected = feed(clean, readings)
    assert plain(feed(disturbed, [both(stray, u=77.0), *readings])) == plain(expected)
    assert disturbed.rejected == {"time_jump": 1}


def test_a_second_jump_that_does_not_confirm_the_first_becomes_the_candidate() -> None:
    grid = started(told())
    feed(grid, [both(1000.0, y=1.0), both(5000.0, y=2.0), both(5001.0, y=3.0)])
    assert by_tick(grid.flush(0.0)) == {5000: [0.0, 2.0], 5001: [0.0, 3.0]}
    assert grid.rejected == {"time_jump": 1}


def test_a_reading_before_the_candidate_does_not_confirm_it() -> None:
    grid = started(told())
    feed(grid, [both(1000.0), both(999.9)])
    assert grid.rejected == {"time_jump": 1}
    assert [r.first for r in feed(grid, [both(1000.9)]) + grid.flush(0.0)] == [1000]


def test_equal_times_confirm_a_jump() -> None:
    grid = started(told())
    feed(grid, [only_input(1000.0, 3.0), only_output(1000.0, 4.0)])
    assert by_tick(grid.flush(0.0)) == {1000: [3.0, 4.0]}


def test_a_confirmed_jump_back_is_a_restart_with_a_new_anchor() -> None:
    grid = started(told(), at=1000.0)
    feed(grid, [both(1012.0), both(1013.0)])
    assert feed(grid, [both(0.5, u=1.0, y=2.0)]) == []
    closed = feed(grid, [both(1.5, u=3.0, y=4.0)])
    assert [(r.first, len(r.values), r.restart) for r in closed] == [(12, 2, False)]
    assert plain(grid.flush(0.0)) == [(0, 0.5, [["1.0", "2.0"], ["3.0", "4.0"]], 0.0, True, 0.0)]


def test_only_the_first_block_after_a_restart_says_so() -> None:
    grid = started(told(), at=1000.0)
    rows = feed(grid, [both(float(k)) for k in range(12)])
    assert [(r.first, r.restart, r.gap_s) for r in rows] == [(0, True, 0.0), (4, False, 0.0)]


def test_after_a_restart_no_value_of_before_is_held() -> None:
    grid = started(told(), at=1000.0)
    feed(grid, [only_output(float(k), 1.0) for k in range(5)])
    assert grid.flush(0.0) == []
    rows = feed(grid, [both(5.0, u=9.0)]) + grid.flush(0.0)
    assert by_tick(rows) == {5: [9.0, 0.0]}
    assert rows[0].restart


def test_a_signal_that_runs_backwards_is_rejected_and_the_others_of_its_reading_count() -> None:
    grid = started(told())
    feed(grid, [only_output(12.4, 1.0), both(12.3, u=5.0, y=2.0)])
    assert by_tick(grid.flush(0.0)) == {12: [5.0, 1.0]}
    assert grid.rejected == {"backwards": 1}


def test_a_reading_of_which_all_runs_backwards_changes_nothing() -> None:
    grid = started(told())
    feed(grid, [both(12.4, y=1.0), both(12.0, y=2.0), both(13.0, y=3.0)])
    assert by_tick(grid.flush(0.0)) == {12: [0.0, 1.0], 13: [0.0, 3.0]}
    assert grid.rejected == {"backwards": 1}


def test_equal_times_of_a_signal_are_accepted() -> None:
    grid = started(told())
    feed(grid, [both(12.0, u=1.0), both(12.0, u=2.0)])
    assert by_tick(grid.flush(0.0))[12][0] == 2.0
    assert grid.rejected == {}


def test_one_topic_may_lag_behind_the_other() -> None:
    grid = started(told())
    rows = [
        rows
        for k in range(12, 40)
        for rows in feed(grid, [only_input(k + 0.2, float(k)), only_output(k - 0.7, 2.0 * k)])
    ]
    assert all(row == [k, 2.0 * (k + 1)] for k, row in by_tick(rows).items())
    assert len(by_tick(rows)) == 24
    assert grid.rejected == {"late": 1}  # the output at 11.3 belongs to tick 11, which was flushed


@pytest.mark.parametrize("time", [math.nan, math.inf, -math.inf])
def test_a_time_that_is_not_finite_is_rejected(time: float) -> None:
    grid = started(told())
    feed(grid, [both(time), both(12.0)])
    assert sorted(by_tick(grid.flush(0.0))) == [12]
    assert grid.rejected == {"not_finite": 1}


def test_a_jump_too_far_ahead_to_count_ticks_is_a_restart() -> None:
    grid = started(told())
    feed(grid, [both(1e20), both(1e20)])
    rows = grid.flush(0.0)
    assert [(r.first, r.time_s, r.restart) for r in rows] == [(0, 1e20, True)]


def test_a_first_reading_with_a_wrong_time_does_not_lock_the_loop() -> None:
    grid = Grid(told())
    rows = feed(grid, [both(1e9), *(both(float(k)) for k in range(12))])
    assert [(r.first, r.time_s, r.restart) for r in rows] == [(0, 1e9, False), (0, 0.0, True), (4, 4.0, False)]


def test_a_waiting_candidate_is_part_of_the_state() -> None:
    loop = told()
    grid, follower = started(loop), Grid(loop)
    feed(grid, [both(1000.0, u=1.5, y=2.5)])
    follower.from_state(grid.to_state())
    feed(follower, [Reading("a", 1001.0, {"a.u": 1.0})])
    assert by_tick(follower.flush(0.0)) == {1000: [1.5, 2.5]}
