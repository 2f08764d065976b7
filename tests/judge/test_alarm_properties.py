"""Whatever is found, and in whatever order: every alarm is raised, told of and cleared in turn."""

from __future__ import annotations

from dataclasses import dataclass

from hypothesis import Phase, given
from hypothesis import settings as hypothesis_settings
from hypothesis import strategies as st

from rtid.judge.alarms import AlarmBook, Finding
from rtid.report import Transition
from rtid.settings import AlarmSetting

SIGNALS = ("drive.speed", None)
seeded = hypothesis_settings(derandomize=True, phases=[Phase.generate])


@dataclass(frozen=True)
class Step:
    """What happens `wait_s` after the step before; no finding: a person acknowledges."""

    wait_s: float
    signal: str | None
    finding: Finding | None


@st.composite
def some_finding(draw: st.DrawFn) -> Finding:
    quantity = draw(st.sampled_from(["gain", "dead_time", "undecided", None]))
    low, width = draw(st.floats(-90.0, 90.0)), draw(st.floats(0.0, 50.0))
    known = (low, low, low + width) if draw(st.booleans()) else (None, None, None)
    return Finding(draw(st.booleans()), "words", quantity, *known)


told_or_acknowledged = st.one_of(some_finding(), some_finding(), some_finding(), st.none())
steps = st.lists(
    st.builds(Step, st.floats(0.0, 20.0), st.sampled_from(SIGNALS), told_or_acknowledged), min_size=15, max_size=60
)
settings = st.builds(
    AlarmSetting,
    on_delay_s=st.sampled_from([0.0, 5.0, 30.0]),
    off_delay_s=st.sampled_from([0.0, 5.0, 30.0]),
    latching=st.booleans(),
)


def play(setting: AlarmSetting, story: list[Step]) -> tuple[AlarmBook, list[Transition]]:
    book, time_s = AlarmBook({"plant_drift": setting}), 0.0
    for step in story:
        time_s += step.wait_s
        if step.finding is None:
            book.acknowledge("plant_drift", time_s=time_s, stamp=time_s, by="x", signal=step.signal)
        else:
            book.note("plant_drift", step.finding, time_s=time_s, stamp=time_s, signal=step.signal)
    return book, list(book.take_transitions())


@seeded
@given(settings, steps)
def test_active_and_cleared_alternate_and_never_repeat(setting: AlarmSetting, story: list[Step]) -> None:
    book, told = play(setting, story)
    standing = {alarm.signal for alarm in book.active()}
    for signal in SIGNALS:
        ends = [t.transition for t in told if t.signal == signal and t.transition in {"active", "cleared"}]
        assert ends == (["active", "cleared"] * len(ends))[: len(ends)]
        assert (signal in standing) == (len(ends) % 2 == 1)


@seeded
@given(settings, steps)
def test_updates_are_told_only_while_an_alarm_stands(setting: AlarmSetting, story: list[Step]) -> None:
    _, told = play(setting, story)
    for signal in SIGNALS:
        stands = False
        for t in (t for t in told if t.signal == signal):
            assert stands or t.transition != "updated"
            stands = {"active": True, "cleared": False}.get(str(t.transition), stands)


@seeded
@given(settings, steps)
def test_only_what_was_raised_is_acknowledged_and_only_once(setting: AlarmSetting, story: list[Step]) -> None:
    _, told = play(setting, story)
    for signal in SIGNALS:
        open_to_acknowledge = False
        for t in (t for t in told if t.signal == signal):
            if t.transition == "acknowledged":
                assert open_to_acknowledge
                open_to_acknowledge = False
            elif t.transition == "active":
                open_to_acknowledge = True


@seeded
@given(settings, steps)
def test_the_retained_message_is_emptied_exactly_when_cleared_and_acknowledged(
    setting: AlarmSetting, story: list[Step]
) -> None:
    """The last word on an alarm is what the broker keeps."""
    _, told = play(setting, story)
    for signal in SIGNALS:
        since: set[str] = set()
        for t in (t for t in told if t.signal == signal):
            since = {"active"} if t.transition == "active" else since | {str(t.transition)}
            assert t.retain != ({"cleared", "acknowledged"} <= since)


@seeded
@given(steps)
def test_delays_are_kept(story: list[Step]) -> None:
    setting = AlarmSetting(on_delay_s=5.0, off_delay_s=30.0)
    book, time_s = AlarmBook({"plant_drift": setting}), 0.0
    since: dict[str | None, tuple[bool, float]] = {}
    for step in (s for s in story if s.finding is not None):
        assert step.finding is not None
        time_s += step.wait_s
        present_before, start = since.get(step.signal, (False, 0.0))
        if present_before != step.finding.present:
            since[step.signal] = (step.finding.present, time_s)
        book.note("plant_drift", step.finding, time_s=time_s, stamp=time_s, signal=step.signal)
        for t in book.take_transitions():
            waited = time_s - since[step.signal][1]
            assert t.transition == "updated" or waited >= (5.0 if t.transition == "active" else 30.0)


def test_the_strategies_reach_every_transition() -> None:
    """Nothing above holds for want of anything that happens."""
    finding = Finding(True, "words", "gain")
    story = [Step(0.0, None, finding), Step(1.0, None, Finding(True, "words", "dead_time"))]
    story += [Step(1.0, None, None), Step(1.0, None, Finding(False))]
    _, told = play(AlarmSetting(), story)
    assert [t.transition for t in told] == ["active", "updated", "acknowledged", "cleared"]
