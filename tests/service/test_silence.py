"""Who has gone without readings, by a clock that the test turns."""

from __future__ import annotations

from rtid.service.silence import SilenceWatch


def test_a_loop_is_due_once_its_readings_have_been_away_long_enough() -> None:
    watch = SilenceWatch({"belt": 5.0, "oven": 60.0}, now=100.0)
    assert watch.due(104.9) == []
    assert watch.due(105.0) == [("belt", 5.0)]


def test_it_is_told_again_only_after_the_same_time_with_the_whole_silence() -> None:
    watch = SilenceWatch({"belt": 5.0}, now=0.0)
    watch.heard("belt", 1.0)
    assert watch.due(6.0) == [("belt", 5.0)]
    assert watch.due(10.9) == []
    assert watch.due(11.5) == [("belt", 10.5)]


def test_a_reading_ends_the_silence() -> None:
    watch = SilenceWatch({"belt": 5.0}, now=0.0)
    assert watch.due(5.0) == [("belt", 5.0)]
    watch.heard("belt", 9.0)
    assert watch.due(10.0) == []
    assert watch.due(14.0) == [("belt", 5.0)]


def test_another_configuration_keeps_the_times_of_the_loops_that_stay() -> None:
    watch = SilenceWatch({"belt": 5.0, "oven": 60.0}, now=0.0)
    watch.follow({"belt": 8.0, "mill": 5.0}, now=4.0)
    assert watch.due(7.9) == []
    assert watch.due(8.0) == [("belt", 8.0)]
    assert watch.due(9.0) == [("mill", 5.0)]
