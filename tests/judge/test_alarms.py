"""The life of an alarm, step by step, in data time."""

from __future__ import annotations

from typing import Any

import pytest

from rtid.judge.alarms import AlarmBook, Finding
from rtid.report import Transition
from rtid.settings import DEFAULT_ALARMS, AlarmSetting

ABSENT = Finding(False)


class Story:
    """A book and its clock; a stamp is the data time and a thousand."""

    def __init__(self, alarm: str = "plant_drift", **setting: Any) -> None:
        self.alarm = alarm
        self.book = AlarmBook({alarm: AlarmSetting(**setting)} if setting else {})

    def note(self, time_s: float, finding: Finding, *, signal: str | None = None) -> list[Transition]:
        self.book.note(self.alarm, finding, time_s=time_s, stamp=time_s + 1000.0, signal=signal)
        return list(self.book.take_transitions())

    def at(self, time_s: float, present: bool, **fields: Any) -> list[str]:
        return [str(t.transition) for t in self.note(time_s, Finding(present, "words", **fields))]

    def acknowledge(self, time_s: float) -> list[Transition]:
        self.book.acknowledge(self.alarm, time_s=time_s, stamp=time_s + 1000.0, by="night shift")
        return list(self.book.take_transitions())


def test_raised_and_cleared_at_once_without_delays() -> None:
    story = Story()
    assert [story.at(t, present) for t, present in enumerate([False, True, True, False, False])] == [
        [], ["active"], [], ["cleared"], [],
    ]  # fmt: skip


def test_transition_carries_what_was_found_and_when() -> None:
    finding = Finding(True, "gain fell", "gain", -21.0, -24.0, -18.0)
    (raised,) = Story(priority="high").note(7.0, finding, signal="drive.speed")
    assert raised == Transition(
        alarm="plant_drift", transition="active", priority="high", text="gain fell", time_s=7.0, stamp=1007.0,
        signal="drive.speed", quantity="gain", change_pct=-21.0, low_pct=-24.0, high_pct=-18.0, retain=True,
    )  # fmt: skip


def test_on_delay_wants_the_condition_all_the_time() -> None:
    story = Story(on_delay_s=10.0)
    steps = [(0.0, True), (9.9, True), (10.0, False), (11.0, True), (20.9, True), (21.0, True)]
    assert [story.at(t, present) for t, present in steps] == [[], [], [], [], [], ["active"]]


def test_off_delay_wants_the_absence_all_the_time() -> None:
    story = Story(off_delay_s=10.0)
    steps = [(0.0, True), (1.0, False), (10.9, False), (10.95, True), (11.0, False), (20.9, False), (21.0, False)]
    assert [story.at(t, present) for t, present in steps] == [["active"], [], [], [], [], [], ["cleared"]]


def test_latching_holds_until_acknowledged() -> None:
    story = Story(latching=True)
    assert story.at(0.0, True) == ["active"]
    assert story.at(1.0, False) == story.at(1e6, False) == []
    assert [a.alarm for a in story.book.active()] == ["plant_drift"]
    done = story.acknowledge(1e6 + 1.0) + story.note(1e6 + 2.0, ABSENT)
    assert [t.transition for t in done] == ["acknowledged", "cleared"]
    assert not done[-1].retain
    assert story.book.active() == ()


def test_acknowledged_first_a_latching_alarm_clears_by_itself() -> None:
    story = Story(latching=True)
    story.at(0.0, True)
    (told,) = story.acknowledge(1.0)
    assert (told.transition, told.by, told.retain) == ("acknowledged", "night shift", True)
    assert story.book.active()[0].acknowledged
    (cleared,) = story.note(2.0, ABSENT)
    assert (cleared.transition, cleared.retain) == ("cleared", False)


def test_cleared_then_acknowledged_empties_the_retained_message() -> None:
    story = Story()
    story.at(0.0, True)
    (cleared,) = story.note(1.0, ABSENT)
    assert cleared.retain
    (told,) = story.acknowledge(2.0)
    assert (told.transition, told.retain) == ("acknowledged", False)


def test_acknowledging_during_the_off_delay_does_not_shorten_it() -> None:
    story = Story(off_delay_s=60.0)
    story.at(0.0, True)
    story.at(1.0, False)
    assert [t.transition for t in story.acknowledge(2.0)] == ["acknowledged"]
    assert story.at(60.9, False) == []
    assert story.at(61.0, False) == ["cleared"]


def test_an_alarm_that_stands_through_its_off_delay_keeps_its_retained_message() -> None:
    """The condition comes back without another transition: nothing would put the message there again."""
    story = Story(off_delay_s=60.0)
    story.at(0.0, True)
    story.at(1.0, False)
    (told,) = story.acknowledge(2.0)
    assert story.at(3.0, True) == []
    assert [a.alarm for a in story.book.active()] == ["plant_drift"]
    assert told.retain


def test_there_is_nothing_to_acknowledge_before_an_alarm_was_raised() -> None:
    story = Story(on_delay_s=10.0)
    assert story.acknowledge(0.0) == []
    story.at(1.0, True)
    assert not story.book.acknowledge("plant_drift", time_s=2.0, stamp=2.0, by="night shift")
    assert story.book.take_transitions() == ()


def test_acknowledging_twice_tells_once() -> None:
    story = Story()
    story.at(0.0, True)
    assert len(story.acknowledge(1.0)) == 1
    assert story.acknowledge(2.0) == []


def test_raised_again_an_alarm_is_not_acknowledged() -> None:
    story = Story()
    for time_s, present in ((0.0, True), (2.0, False), (3.0, True)):
        story.at(time_s, present)
        if time_s == 0.0:
            story.acknowledge(1.0)
    assert not story.book.active()[0].acknowledged
    assert [t.transition for t in story.acknowledge(4.0)] == ["acknowledged"]


def test_updated_on_a_new_name() -> None:
    story = Story()
    assert story.at(0.0, True, quantity="undecided") == ["active"]
    assert story.at(1.0, True, quantity="undecided") == []
    assert story.at(2.0, True, quantity="gain") == ["updated"]
    assert story.book.active()[0].quantity == "gain"


def test_updated_on_clearly_sharper_limits_only() -> None:
    story = Story()
    limits = [(-30.0, -10.0), (-26.0, -14.0), (-23.0, -16.0), (-22.0, -17.0), (-20.5, -19.5)]
    told = [story.at(t, True, quantity="gain", low_pct=low, high_pct=high) for t, (low, high) in enumerate(limits)]
    assert told == [["active"], [], ["updated"], [], ["updated"]]


def test_wider_limits_are_no_news() -> None:
    story = Story()
    story.at(0.0, True, quantity="gain", low_pct=-21.0, high_pct=-19.0)
    assert story.at(1.0, True, quantity="gain", low_pct=-41.0, high_pct=1.0) == []


def test_since_stays_at_the_beginning() -> None:
    story = Story()
    story.at(5.0, True, quantity="undecided")
    story.at(9.0, True, quantity="gain")
    assert story.book.active()[0].since == 1005.0


@pytest.mark.parametrize("name", DEFAULT_ALARMS)
def test_every_alarm_has_its_default_priority(name: str) -> None:
    (raised,) = Story(name).note(0.0, Finding(True, "words"))
    medium = {"estimate_invalid", "data_stale", "out_of_range", "storage"}
    assert raised.priority == DEFAULT_ALARMS[name].priority == ("medium" if name in medium else "low")


def test_each_signal_has_its_own_life() -> None:
    story = Story("out_of_range")
    assert [t.signal for t in story.note(0.0, Finding(True, "words"), signal="drive.volts")] == ["drive.volts"]
    assert [t.signal for t in story.note(1.0, Finding(True, "words"), signal="drive.speed")] == ["drive.speed"]
    assert [t.signal for t in story.note(2.0, ABSENT, signal="drive.volts")] == ["drive.volts"]
    assert [alarm.signal for alarm in story.book.active()] == ["drive.speed"]


def test_taken_transitions_are_gone() -> None:
    story = Story()
    story.at(0.0, True)
    assert story.book.take_transitions() == ()
