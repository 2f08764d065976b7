"""Signals faster than the grid: what is averaged over what, and how the shift is told. A period is 1 s."""

from __future__ import annotations

import math
from collections.abc import Callable

import pytest

from rtid.intake.grid import Grid
from rtid.intake.oversampling import window_shift
from rtid.intake.reading import Reading
from rtid.intake.ticks import CROWD
from tests.support.gridding import both, by_tick, feed, only_input, only_output, plain, told


def sampled(
    per_period: int, periods: float, *, u: Callable[[float], float], y: Callable[[float], float], jitter: float = 0.0
) -> list[Reading]:
    """Both signals at j / per_period; every second reading `jitter` of a sub-sample early."""
    readings = []
    for j in range(int(periods * per_period)):
        time = j / per_period
        early = jitter / per_period * (j % 2)
        readings.append(both(time - early, u=u(time), y=y(time)))
    return readings


def test_the_output_is_the_mean_of_its_readings_nearest_to_the_tick() -> None:
    rows = feed(Grid(told()), sampled(10, 14, u=lambda t: 0.0, y=lambda t: t))
    values = by_tick(rows)
    assert values[0][1] == pytest.approx(0.2)  # 0 … 0.4
    for k in range(1, 12):
        assert values[k][1] == pytest.approx(k - 0.05)  # k - 0.5 … k + 0.4


def test_an_averaged_sine_is_the_closed_sum() -> None:
    w = 1.3
    rows = feed(Grid(told()), sampled(10, 30, u=lambda t: 0.0, y=lambda t: math.sin(w * t)))
    damping = math.sin(w / 2) / (10 * math.sin(w / 20))  # of ten samples over one period
    for k, row in by_tick(rows).items():
        if k > 0:
            assert row[1] == pytest.approx(damping * math.sin(w * (k - 0.05)), abs=1e-12)


def test_the_shift_is_how_much_later_than_the_tick_the_output_was_taken() -> None:
    rows = feed(Grid(told()), sampled(10, 30, u=lambda t: 0.0, y=lambda t: 0.0))
    assert rows[0].output_shift_s == pytest.approx(
        (0.2 - 3 * 0.05) / 4
    )  # row 0 has the later half of its readings only
    assert [r.output_shift_s for r in rows[1:]] == pytest.approx([-0.05] * (len(rows) - 1))


def test_the_shift_is_in_seconds() -> None:
    grid = Grid(told(period_s=0.01))
    rows = feed(grid, [both(j / 1000.0) for j in range(400)])
    assert [r.output_shift_s for r in rows[1:]] == pytest.approx([-0.0005] * (len(rows) - 1))


def test_the_shift_added_to_the_dead_time_in_the_rows_is_the_true_one() -> None:
    """A ramp that begins 2 s after a step at 0: the rows show it at 2 s less the shift."""
    true_dead_time = 2.0
    rows = feed(Grid(told()), sampled(4, 30, u=lambda t: 1.0, y=lambda t: max(0.0, t - true_dead_time)))
    row = by_tick(rows)[10][1]
    shown = 10.0 - row  # where the line through the rows meets zero
    assert shown + rows[2].output_shift_s == pytest.approx(true_dead_time)


def test_a_fast_input_is_the_mean_over_the_hold_that_follows_the_tick() -> None:
    rows = feed(Grid(told()), sampled(10, 14, u=lambda t: math.floor(t), y=lambda t: 0.0))
    assert all(row[0] == k for k, row in by_tick(rows).items())


def test_a_step_inside_the_hold_counts_by_the_share_in_which_it_is_applied() -> None:
    rows = feed(Grid(told()), sampled(10, 14, u=lambda t: 1.0 if t >= 5.7 else 0.0, y=lambda t: 0.0))
    inputs = {k: row[0] for k, row in by_tick(rows).items()}
    assert inputs[4] == 0.0
    assert inputs[5] == pytest.approx(0.3)
    assert inputs[6] == 1.0


@pytest.mark.parametrize("per_period", [2, 3, 4, 10, 50])
@pytest.mark.parametrize("jitter", [-0.2, 0.4])
def test_jitter_does_not_move_a_reading_at_the_edge_into_another_window(per_period: int, jitter: float) -> None:
    def rows(jitter: float) -> dict[int, list[float]]:
        readings = sampled(per_period, 16, u=lambda t: t, y=lambda t: t, jitter=jitter)
        return by_tick(feed(Grid(told()), readings))

    assert rows(jitter) == rows(0.0)


@pytest.mark.parametrize(("late", "output_shift"), [(0.1, -0.15), (0.25, 0.0), (0.4, -0.35), (0.48, -0.27)])
def test_a_topic_out_of_phase_with_the_ticks_has_two_readings_in_every_window(late: float, output_shift: float) -> None:
    """Two readings per period; of the output, every other one 0.1 early and late in turn."""
    inputs = [only_input(j / 2, 0.0) for j in range(32)]
    outputs = [only_output(j / 2 + late + 0.1 * ((j % 4 == 1) - (j % 4 == 3)), float(j)) for j in range(32)]
    rows = feed(Grid(told()), sorted([*inputs, *outputs], key=lambda reading: reading.time))
    values = by_tick(rows)
    assert {values[k + 1][1] - values[k][1] for k in range(1, 11)} == {2.0}
    assert [r.output_shift_s for r in rows[1:]] == pytest.approx([output_shift] * (len(rows) - 1))


def test_two_readings_per_period_are_averaged() -> None:
    rows = feed(Grid(told()), sampled(2, 16, u=lambda t: t, y=lambda t: t))
    values = by_tick(rows)
    assert len(values) == 12
    assert all(row == [k + 0.25, k - 0.25] for k, row in values.items() if k > 0)
    assert {r.output_shift_s for r in rows[1:]} == {-0.25}


def test_fewer_than_two_readings_per_period_are_not_averaged() -> None:
    readings = [both(j / 1.5, u=float(j), y=float(j)) for j in range(24)]
    rows = feed(Grid(told()), readings)
    assert by_tick(rows)[2] == [3.0, 3.0]  # 2.0
    assert by_tick(rows)[3] == [
        5.0,
        4.0,
    ]  # 2.67 and 3.33: the last input, the nearest output (the first of two as near)
    assert {r.output_shift_s for r in rows} == {0.0}


def test_a_slow_input_beside_a_fast_output_counts_at_its_nearest_tick() -> None:
    outputs = [only_output(j / 10, 0.0) for j in range(200)]
    inputs = [only_input(k + (0.3 if k % 2 else -0.3), float(k)) for k in range(1, 20)]
    readings = sorted([only_input(0.0, 0.0), *inputs, *outputs], key=lambda reading: reading.time)
    rows = feed(Grid(told()), readings)
    assert all(row[0] == k for k, row in by_tick(rows).items())
    assert rows[1].output_shift_s == pytest.approx(-0.05)


def test_a_fast_input_beside_a_slow_output_is_averaged_and_the_output_is_not() -> None:
    outputs = [only_output(k + 0.2, float(k)) for k in range(20)]
    inputs = [only_input(j / 10, math.floor(j / 10) + 0.5 * (j % 2)) for j in range(200)]
    rows = feed(Grid(told()), sorted([*inputs, *outputs], key=lambda reading: reading.time))
    assert all(row == pytest.approx([k + 0.25, k]) for k, row in by_tick(rows).items())
    assert {r.output_shift_s for r in rows} == {0.0}


def test_a_fast_signal_that_only_the_gate_reads_is_not_averaged() -> None:
    readings = [Reading("a", j / 10, {"a.u": 0.0, "b.y": 0.0, "c.mode": float(j)}) for j in range(140)]
    rows = feed(Grid(told(gate="c.mode")), readings)
    assert all(row[2] == 10 * k + 4 for k, row in by_tick(rows).items())


def test_a_fast_input_that_stops_is_held_at_its_last_reading() -> None:
    readings = sampled(10, 12, u=lambda t: t, y=lambda t: 0.0)
    rows = feed(Grid(told()), readings + [only_output(j / 10, 0.0) for j in range(120, 240)])
    inputs = {k: row[0] for k, row in by_tick(rows).items()}
    assert inputs[11] == pytest.approx(11.45)
    assert [inputs[k] for k in (12, 13, 16)] == [11.9, 11.9, 11.9]


def test_with_a_fast_input_a_row_waits_for_the_tick_after_the_next() -> None:
    grid = Grid(told(period_s=3.0))
    feed(grid, [both(j * 0.3) for j in range(200)])  # the last one at 59.7 s, nearest to tick 20
    assert [r.first for r in feed(grid, [both(61.4)])] == []  # still tick 20
    assert [r.first for r in feed(grid, [both(61.6)])] == [19]  # tick 21


def test_no_row_comes_before_the_first_eight_ticks_have_decided() -> None:
    grid = Grid(told(period_s=3.0))
    assert feed(grid, [both(3.0 * k) for k in range(8)]) == []
    assert [r.first for r in feed(grid, [both(24.0)])] == list(range(8))


def test_the_mean_of_equal_readings_is_exactly_that_value() -> None:
    rows = feed(Grid(told()), sampled(10, 14, u=lambda t: 0.1, y=lambda t: -23.9))
    assert {tuple(row) for row in by_tick(rows).values()} == {(0.1, -23.9)}


def test_the_decision_is_made_once() -> None:
    slow_first = [both(float(k), y=float(k)) for k in range(12)]
    fast_later = [both(12 + j / 10, y=12 + j / 10) for j in range(60)]
    rows = by_tick(feed(Grid(told()), slow_first + fast_later))
    assert [rows[k][1] for k in range(12, 16)] == [12.0, 13.0, 14.0, 15.0]


def test_the_decision_is_made_again_after_a_restart() -> None:
    slow_first = [both(1000.0 + k) for k in range(12)]
    rows = feed(Grid(told()), slow_first + sampled(10, 14, u=lambda t: 0.0, y=lambda t: t))
    assert rows[-1].output_shift_s == pytest.approx(-0.05)


def test_a_burst_when_the_port_opens_does_not_make_a_signal_fast() -> None:
    burst = [both(0.0, y=float(j)) for j in range(30)]
    rows = feed(Grid(told()), burst + [both(k + 0.3, y=float(k)) for k in range(1, 14)])
    assert {r.output_shift_s for r in rows} == {0.0}


def test_a_pause_after_the_first_reading_does_not_make_a_signal_slow() -> None:
    late = [both(500 + j / 10, y=500 + j / 10) for j in range(150)]
    rows = feed(Grid(told()), [both(0.0), *late])
    assert by_tick(rows)[508][1] == pytest.approx(507.95)


def test_rows_flushed_before_the_decision_are_not_averaged_and_the_count_begins_anew() -> None:
    grid = Grid(told())
    readings = sampled(10, 16, u=lambda t: 0.0, y=lambda t: t)
    feed(grid, readings[:21])
    assert by_tick(grid.flush(0.0)) == {0: [0.0, 0.0], 1: [0.0, 1.0], 2: [0.0, 2.0]}
    rows = by_tick(feed(grid, readings[25:]))
    assert [rows[k][1] for k in (3, 4, 9)] == pytest.approx([2.95, 3.95, 8.95])


def test_after_an_early_flush_the_eight_deciding_ticks_are_counted_again() -> None:
    grid = Grid(told())
    readings = sampled(2, 24, u=lambda t: t, y=lambda t: 0.0)
    feed(grid, readings[:13])
    grid.flush(0.0)
    rows = by_tick(feed(grid, readings[13:]))
    assert rows[9] == [9.25, 0.0]


def test_a_fast_input_for_a_flushed_tick_is_held_from_there() -> None:
    grid = Grid(told())
    feed(grid, sampled(10, 12.05, u=lambda t: t, y=lambda t: 0.0))
    grid.flush(0.0)  # tick 12 is closed: the readings at 11.5 … 11.9 are nearest to it
    feed(grid, [only_input(12.6, 55.0), only_output(13.0, 1.0)])
    assert by_tick(grid.flush(0.0)) == {13: [55.0, 1.0]}
    assert grid.rejected == {}


def test_a_fast_output_for_a_flushed_tick_is_late() -> None:
    grid = Grid(told())
    outputs = [only_output(j / 2 + 0.3, 1.0) for j in range(25)]  # windows begin 0.45 before the tick
    feed(grid, [only_input(0.0, 0.0), *outputs])
    grid.flush(0.0)  # up to 12.3
    feed(grid, [only_output(12.52, 99.0), only_output(13.3, 2.0)])
    assert by_tick(grid.flush(0.0)) == {13: [0.0, 2.0]}
    assert grid.rejected == {"late": 1}


def test_a_crowd_of_readings_on_the_deciding_ticks_decides_at_once() -> None:
    per_period = CROWD
    grid = Grid(told(period_s=3.0))
    rows = feed(grid, [both(3.0 * j / per_period) for j in range(5 * per_period)])
    assert len(grid.to_state()["ticks"]["waiting"]) == 0
    assert rows[1].output_shift_s == pytest.approx(-0.5 * 3.0 / per_period)


def test_a_crowd_while_a_signal_is_still_unknown_keeps_only_what_it_holds() -> None:
    grid = Grid(told())
    feed(grid, [only_input(j / (2 * CROWD), float(j)) for j in range(CROWD + 1)])
    assert grid.to_state()["ticks"]["waiting"] == []
    rows = feed(grid, [only_output(0.5, 1.0)]) + grid.flush(0.0)
    assert by_tick(rows) == {1: [CROWD, 1.0]}


def test_a_state_in_the_middle_of_a_mean_goes_on_at_the_same_digit() -> None:
    loop = told()
    readings = sampled(7, 30, u=lambda t: math.sin(t), y=lambda t: math.cos(t))
    grid, follower = Grid(loop), Grid(loop)
    feed(grid, readings[:100])
    follower.from_state(grid.to_state())
    assert plain(feed(follower, readings[100:])) == plain(feed(grid, readings[100:]))


@pytest.mark.parametrize(
    ("positions", "shift"),
    [
        ([0.1 * j for j in range(8)], None),  # too few
        ([0.5 * j for j in range(9)], -0.25),
        ([0.5625 * j for j in range(9)], None),  # nine readings span 4.5 periods
        ([0.0] * 9, 0.0),
        ([0.0, *(5 + j / 8 for j in range(9))], -0.0625),  # the last nine count
        ([0.5 * j + 0.25 for j in range(9)], 0.0),  # the edge is in the middle already
        ([0.5 * j - 0.1 for j in range(9)], -0.35),  # a reading just before the edge counts as at it
        ([0.5 * j - 0.2 for j in range(9)], 0.05),  # this one does not
        ([0.5 * j + 0.3 for j in range(9)], 0.05),
    ],
)
def test_the_window_edge_moves_to_the_middle_between_readings(positions: list[float], shift: float | None) -> None:
    assert window_shift(positions, 0.0) == (None if shift is None else pytest.approx(shift))
