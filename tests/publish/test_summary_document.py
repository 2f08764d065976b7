"""What a replay leaves behind as its summary."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from rtid.errors import CannotCreate, InputOutputError
from rtid.publish.files import write_json
from rtid.publish.summary import AlarmTally, summary
from tests.support.payloads import check
from tests.support.reports import make_report, make_transition


def test_summary_counts_what_became_active(tmp_path: Path) -> None:
    tally = AlarmTally()
    steps = ("active", "updated", "cleared", "active")
    action = make_transition(alarm=None, action="note", transition=None)
    gap = make_transition(alarm="data_gap")
    for transition in (*(make_transition(transition=step) for step in steps), action, gap):
        tally.report(make_report(transitions=(transition,)))
    path = tmp_path / "summary.json"
    reports = (make_report(), make_report(loop="oven", state="learning", health="function_check"))
    rejected = {"number": (3, "feed.csv:7: no number")}
    write_json(path, summary(reports, tally, samples=5000, wall_s=2.0, rejected=rejected))
    document = json.loads(path.read_text(encoding="utf-8"))
    check(document)
    assert document["samples_per_s"] == 2500.0
    assert document["rejected"] == {"number": {"count": 3, "first": "feed.csv:7: no number"}}
    assert document["loops"] == {
        "conveyor": {
            "state": "watching",
            "health": "out_of_specification",
            "alarms": {"plant_drift": 2, "data_gap": 1},
        },
        "oven": {"state": "learning", "health": "function_check", "alarms": {}},
    }


def test_file_that_cannot_be_made_or_written_is_named(tmp_path: Path) -> None:
    with pytest.raises(CannotCreate, match="no-such-folder/summary.json: cannot be created"):
        write_json(tmp_path / "no-such-folder" / "summary.json", {})
    with pytest.raises(InputOutputError, match="/dev/full: cannot be written"):
        write_json("/dev/full", {})
