"""What is told was saved before: after a kill at any step nothing is lost, nothing is repeated."""

from __future__ import annotations

import logging
import shutil
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from rtid.actions import Action
from rtid.report import Report, Transition
from rtid.service.memory import SAVE_EVERY_S
from rtid.service.parts import Parts
from rtid.settings import AlarmBudget, AlarmSetting, Baseline, Node, Tolerance
from tests.support.remembering import (
    Killed,
    feed,
    killed_at,
    listed,
    names,
    node_in,
    readings,
    start,
    start_in_spite_of_kills,
)

LEARNT = 2048  # rows until the baseline of `node_in` is accepted, and a few more
ROWS = readings(3000)
ACTIONS = (
    Action("hold", "Kim", for_s=600.0),
    Action("note", "Kim", text="belt replaced"),
    Action("shelve", "Kim", alarm="plant_drift", for_s=60.0),
    Action("resume", "Kim"),
    Action("unshelve", "Kim", alarm="plant_drift"),
    Action("rebaseline", "Kim", because="repair", reason="new belt"),
    Action("restore", "Kim", baseline="belt-1", reason="a mistake"),
)
DONE = ["hold", "note", "plant_drift shelved", "resume", "plant_drift unshelved", "rebaseline", "restore"]


class Told:
    """An observer that keeps the events."""

    def __init__(self) -> None:
        self.events: list[dict[str, Any]] = []

    def report(self, report: Report) -> None:
        pass

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        self.events.append(dict(payload))


@pytest.fixture(scope="module")
def learning(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A state a few blocks before its baseline."""
    folder = tmp_path_factory.mktemp("learning")
    parts = start(folder / "state", node_in(folder))
    feed(parts, ROWS[: LEARNT - 96])
    parts.tend(2 * SAVE_EVERY_S)
    return folder / "state"


@pytest.fixture(scope="module")
def watching(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A state a few blocks behind its baseline."""
    folder = tmp_path_factory.mktemp("watching")
    parts = start(folder / "state", node_in(folder))
    feed(parts, ROWS[:LEARNT])
    parts.tend(2 * SAVE_EVERY_S)
    assert names(listed(folder / "state")) == ["baseline"]
    return folder / "state"


def act(parts: Parts, action: Action) -> None:
    parts.pipeline.act("belt", action, silent_s=0.0, stamp=1000.0)


def check_list(folder: Path, told: Told) -> list[str]:
    """Every event told is in the list, and the list has neither hole nor repetition."""
    events = listed(folder)
    assert [event["sequence"] for event in events] == list(range(1, len(events) + 1))
    assert [event for event in told.events if event not in events] == []
    return names(events)


@pytest.mark.parametrize("done", range(len(ACTIONS)))
def test_an_action_that_is_killed_at_any_step_is_done_once_or_not_at_all(
    tmp_path: Path, watching: Path, done: int
) -> None:
    node, outcomes = node_in(tmp_path), set()
    for step in range(1, 100):
        folder, told = tmp_path / f"at-{step}", Told()
        shutil.copytree(watching, folder)
        parts = start(folder, node, told)
        for action in ACTIONS[:done]:
            act(parts, action)
        try:
            with killed_at(step):
                act(parts, ACTIONS[done])
        except Killed:
            parts = start_in_spite_of_kills(folder, node)
            found = check_list(folder, told)
            outcomes.add(len(found) - 1 - done)
            assert found == ["baseline", *DONE[: len(found) - 1]]
            check_state(parts, found)
        else:
            break
    assert outcomes == {0, 1}
    assert check_list(folder, told) == ["baseline", *DONE[: done + 1]]


def check_state(parts: Parts, found: list[str]) -> None:
    """The loop is as its events say."""
    loop = parts.pipeline.loops["belt"]
    assert (loop.hold is not None) == (found.count("hold") > found.count("resume"))
    shelved = found.count("plant_drift shelved") > found.count("plant_drift unshelved")
    assert bool(loop.shelved) == shelved
    assert loop.baseline == (None if found[-1] == "rebaseline" else "belt-1")


def test_a_baseline_that_is_killed_at_any_step_is_accepted_once(tmp_path: Path, learning: Path) -> None:
    node, killed = node_in(tmp_path), 0
    for step in range(1, 100):
        folder, told = tmp_path / f"at-{step}", Told()
        shutil.copytree(learning, folder)
        parts, fed = start(folder, node, told), LEARNT - 96
        try:
            with killed_at(step):
                for fed in range(LEARNT - 96, LEARNT):  # noqa: B007
                    feed(parts, [ROWS[fed]])
        except Killed:
            killed += 1
            parts = start(folder, node)
            check_list(folder, told)
        feed(parts, ROWS[fed + 1 : LEARNT + 400])
        found = check_list(folder, told)  # the rows between save and kill are a gap
        assert [name for name in found if not name.startswith("data_gap")] == ["baseline"]
        assert parts.pipeline.loops["belt"].baseline == "belt-1"
        if killed < step:
            break
    assert killed > 10
    assert (folder / "baselines" / "belt-1.json").exists()


def test_after_a_start_it_goes_on_and_does_not_say_good_before_it_has_seen_a_reading(
    tmp_path: Path, watching: Path
) -> None:
    shutil.copytree(watching, tmp_path / "state")
    parts = start(tmp_path / "state", node_in(tmp_path))
    report = parts.pipeline.report("belt", 0.0)
    assert (report.state, report.health, report.due) == ("waiting", "function_check", True)
    assert "restarted" in report.reason
    assert report.quantities["gain"].value == pytest.approx(2.0, rel=0.03)
    assert report.drift.ratio is not None
    feed(parts, ROWS[LEARNT : LEARNT + 200])
    report = parts.pipeline.report("belt", 0.0)
    assert (report.state, report.health) == ("watching", "good")


def test_a_loop_that_a_person_holds_is_still_held_after_a_start(tmp_path: Path, watching: Path) -> None:
    shutil.copytree(watching, tmp_path / "state")
    node = node_in(tmp_path)
    act(start(tmp_path / "state", node), ACTIONS[0])
    report = start(tmp_path / "state", node).pipeline.report("belt", 0.0)
    assert (report.state, report.health) == ("held", "function_check")
    assert "held by Kim" in report.reason


def test_an_older_state_catches_up_with_the_event_list(
    tmp_path: Path, learning: Path, caplog: pytest.LogCaptureFixture
) -> None:
    """The present file is damaged and the one before knows neither baseline nor actions."""
    caplog.set_level(logging.INFO)
    folder, node = tmp_path / "state", node_in(tmp_path, alarms={"data_gap": AlarmSetting(latching=True)})
    shutil.copytree(learning, folder)
    early = (folder / "loops" / "belt.json").read_bytes()
    parts = start(folder, node)
    feed(parts, ROWS[LEARNT - 96 : LEARNT + 64])
    feed(parts, readings(32, first=LEARNT + 164))  # behind a gap of a second
    for action in (ACTIONS[0], ACTIONS[2], Action("ack", "Kim", alarm="data_gap")):
        act(parts, action)
    before = parts.pipeline.loops["belt"]
    (folder / "loops" / "belt.json").write_bytes(b"damaged")
    (folder / "loops" / "belt.previous.json").write_bytes(early)
    after = start(folder, node).pipeline.loops["belt"]
    assert after.baseline == before.baseline == "belt-1"
    assert after.hold is not None
    assert after.hold[0] == "Kim"
    assert [s[:2] for s in after.shelved] == [("plant_drift", None)]
    assert after.report is not None
    assert before.report is not None
    assert [replace(alarm, since=0.0) for alarm in after.report.alarms] == [
        replace(alarm, since=0.0) for alarm in before.report.alarms
    ]  # `since` is a label in milliseconds
    assert names(listed(folder)) == [
        "baseline", "data_gap active", "hold", "plant_drift shelved", "data_gap acknowledged",
    ]  # fmt: skip
    assert "is set aside" in caplog.text
    assert "5 events are taken from there (baseline belt-1)" in caplog.text


def test_a_flood_of_gaps_is_in_the_event_list_and_not_in_a_flood_of_states(tmp_path: Path, watching: Path) -> None:
    folder, node = tmp_path / "state", node_in(tmp_path)
    shutil.copytree(watching, folder)
    parts = start(folder, node)
    before = (folder / "loops" / "belt.json").read_bytes()
    for gap in range(1, 6):
        feed(parts, readings(32, first=LEARNT + 100 * gap))
    assert (folder / "loops" / "belt.json").read_bytes() == before
    found = check_list(folder, Told())
    assert found[:3] == ["baseline", "data_gap active", "data_gap cleared"]
    again = start(folder, node)
    feed(again, readings(32, first=LEARNT + 600))
    assert check_list(folder, Told()) == [*found, "data_gap active", "data_gap cleared"]


def test_a_lost_state_is_made_anew_from_events_and_baselines(tmp_path: Path, watching: Path) -> None:
    folder, node = tmp_path / "state", node_in(tmp_path)
    shutil.copytree(watching, folder)
    shutil.rmtree(folder / "loops")
    loop = start(folder, node).pipeline.loops["belt"]
    assert loop.baseline == "belt-1"
    assert loop.report is not None
    assert loop.report.health != "good"


def test_a_baseline_never_takes_the_name_of_another_one(
    tmp_path: Path, watching: Path, caplog: pytest.LogCaptureFixture
) -> None:
    folder, node = tmp_path / "state", node_in(tmp_path)
    shutil.copytree(watching, folder)
    shutil.rmtree(folder / "loops")
    (folder / "events.jsonl").unlink()
    first = (folder / "baselines" / "belt-1.json").read_bytes()
    parts = start(folder, node)
    assert parts.pipeline.loops["belt"].baseline is None
    feed(parts, ROWS[:LEARNT])
    assert parts.pipeline.loops["belt"].baseline == "belt-2"
    assert (folder / "baselines" / "belt-1.json").read_bytes() == first


def test_a_damaged_baseline_is_said_and_the_loop_learns(
    tmp_path: Path, watching: Path, caplog: pytest.LogCaptureFixture
) -> None:
    folder, node = tmp_path / "state", node_in(tmp_path)
    shutil.copytree(watching, folder)
    shutil.rmtree(folder / "loops")
    (folder / "baselines" / "belt-1.json").write_bytes(b"damaged")
    assert start(folder, node).pipeline.loops["belt"].baseline is None
    assert "baseline belt-1 cannot be had" in caplog.text
    assert "no baseline, it learns anew" in caplog.text


def test_numbers_go_on_when_the_event_list_was_taken_away(tmp_path: Path, watching: Path) -> None:
    folder, node = tmp_path / "state", node_in(tmp_path)
    shutil.copytree(watching, folder)
    act(start(folder, node), ACTIONS[1])
    (folder / "events.jsonl").unlink()
    act(start(folder, node), ACTIONS[1])
    assert listed(folder)[-1]["sequence"] == 3


CHANGES: dict[str, dict[str, Any]] = {
    "tolerance": {"tolerance": Tolerance(gain_pct=25.0)},
    "alarms": {"alarms": {"plant_drift": AlarmSetting(priority="high", latching=True)}},
    "budget": {"alarm_budget": AlarmBudget(2.0, 7.0)},
    "memory": {"memory_s": 50.0},
    "pace": {"publish_every_s": 5.0},
    "staleness": {"stale_after_s": 7.0},
    "baseline": {"baseline": Baseline(after_s=60.0)},
}


@pytest.mark.parametrize("change", CHANGES)
def test_what_is_no_other_plant_is_kept_when_the_configuration_changes(
    tmp_path: Path, watching: Path, change: str
) -> None:
    folder = tmp_path / "state"
    shutil.copytree(watching, folder)
    before = start(folder, node_in(tmp_path)).pipeline.loops["belt"]
    parts = start(folder, node_in(tmp_path, **CHANGES[change]))
    after = parts.pipeline.loops["belt"]
    assert after.baseline == before.baseline
    assert after.report is not None
    assert before.report is not None
    assert after.report.quantities == before.report.quantities
    feed(parts, ROWS[LEARNT : LEARNT + 100])
    assert after.state == "watching"
    assert names(listed(folder)) == ["baseline"]


def other_plants(folder: Path) -> dict[str, Node]:
    model = node_in(folder).loops["belt"].model
    return {
        "order": node_in(folder, model=replace(model, order=1)),
        "dead time": node_in(folder, model=replace(model, dead_time_s=(0.0, 0.08))),
        "period": node_in(folder, period_s=0.02),
        "signals": node_in(folder, inputs=("drive.speed",), output="drive.volts"),
    }


@pytest.mark.parametrize("change", ["order", "dead time", "period", "signals"])
def test_another_plant_learns_anew_and_its_old_state_is_kept(
    tmp_path: Path, watching: Path, caplog: pytest.LogCaptureFixture, change: str
) -> None:
    folder = tmp_path / "state"
    shutil.copytree(watching, folder)
    state = (folder / "loops" / "belt.json").read_bytes()
    parts = start(folder, other_plants(tmp_path)[change])
    assert parts.pipeline.loops["belt"].baseline is None
    assert [path.read_bytes() for path in (folder / "loops").glob("belt.*.old.json")] == [state]
    assert (folder / "baselines" / "belt-1.json").exists()
    assert names(listed(folder)) == ["baseline", "learns_anew"]
    assert "the old state is kept" in caplog.text
    again = start(folder, other_plants(tmp_path)[change])
    assert again.pipeline.loops["belt"].baseline is None
    assert names(listed(folder)) == ["baseline", "learns_anew"]


def test_alarms_of_another_plant_are_withdrawn(tmp_path: Path, watching: Path) -> None:
    folder = tmp_path / "state"
    shutil.copytree(watching, folder)
    feed(start(folder, node_in(tmp_path)), readings(20, first=LEARNT + 100))
    start(folder, other_plants(tmp_path)["order"])
    assert names(listed(folder)) == ["baseline", "data_gap active", "data_gap cleared", "learns_anew"]


def test_a_kill_while_it_begins_anew_loses_nothing(tmp_path: Path, watching: Path) -> None:
    node = other_plants(tmp_path)["order"]
    for step in range(1, 100):
        folder = tmp_path / f"at-{step}"
        shutil.copytree(watching, folder)
        try:
            with killed_at(step):
                start(folder, node)
        except Killed:
            start_in_spite_of_kills(folder, node)
        else:
            break
        assert check_list(folder, Told()) == ["baseline", "learns_anew"]
        assert any((folder / "loops").glob("belt.*.old.json"))
    assert step > 10


def test_states_are_saved_every_five_minutes_and_only_when_something_came(tmp_path: Path, watching: Path) -> None:
    folder = tmp_path / "state"
    shutil.copytree(watching, folder)
    parts, file = start(folder, node_in(tmp_path)), folder / "loops" / "belt.json"

    def saved_at(now: float) -> bool:
        before = file.read_bytes()
        parts.tend(now)
        return file.read_bytes() != before

    feed(parts, ROWS[LEARNT : LEARNT + 16])
    assert not saved_at(SAVE_EVERY_S - 1.0)
    assert saved_at(SAVE_EVERY_S + 1.0)
    assert not saved_at(3 * SAVE_EVERY_S)
    feed(parts, ROWS[LEARNT + 16 : LEARNT + 32])
    assert saved_at(3 * SAVE_EVERY_S)
