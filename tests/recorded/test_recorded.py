"""Recorded streams through the whole program. Each has its story and what must be seen in it beside the data."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from tests.support.process import rtid

FOLDER = Path(__file__).parent
NAMES = sorted(path.stem for path in FOLDER.glob("*.yaml"))


def test_there_are_streams() -> None:
    assert len(NAMES) >= 4


@pytest.mark.parametrize("name", NAMES)
def test_a_replay_shows_what_is_expected(name: str, tmp_path: Path) -> None:
    ended = rtid("replay", FOLDER / f"{name}.yaml", "--feed", f"plant={FOLDER / name}.csv", "--out", tmp_path)
    assert ended.returncode == 0, ended.stderr
    expected = json.loads((FOLDER / f"{name}.expected.json").read_text())
    snapshot = json.loads((tmp_path / "loop.snapshot.json").read_text())
    events = [json.loads(line) for line in (tmp_path / "events.jsonl").read_text().splitlines()]
    assert snapshot["state"] == expected["state"]
    for quantity, (low, high) in expected["quantities"].items():
        value = snapshot["quantities"][quantity]["value"]
        assert value is not None, quantity
        assert low <= value <= high, (quantity, value)
    judge_events(events, expected)


def judge_events(events: list[dict[str, Any]], expected: dict[str, Any]) -> None:
    alarms = [event for event in events if "alarm" in event]
    told = [(event["alarm"], event["transition"], event["time_s"], event["quantity"]) for event in alarms]
    seen = {alarm for alarm, *_ in told}
    assert not seen & set(expected.get("never", [])), told
    early = [event for event in told if event[2] < expected.get("quiet_until_s", 0.0)]
    assert not [event for event in early if event[0].startswith("plant_")], early
    for wanted in expected.get("alarms", []):
        matching = [
            event
            for event in told
            if event[0] == wanted["alarm"]
            and wanted["after_s"] <= event[2] <= wanted["before_s"]
            and wanted.get("quantity") in {None, event[3]}
        ]
        assert matching, (wanted, told)
