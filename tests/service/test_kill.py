"""Fifty SIGKILLs at random moments of a running plant: nothing that was told or confirmed is lost or comes twice."""

from __future__ import annotations

from collections import Counter
from pathlib import Path

from tests.support.kills import killed, lines, story, uninterrupted

KILLS = 50


def test_after_fifty_kills_events_baseline_and_alarms_are_as_if_nobody_had_killed(tmp_path: Path) -> None:
    sent = lines(seed=1)
    outcome = killed(tmp_path, sent, kills=KILLS, seed=1)
    events = outcome.events
    assert [event["sequence"] for event in events] == list(range(1, len(events) + 1))
    assert story(events) == uninterrupted(tmp_path / "uninterrupted", sent)
    made = Counter(event["text"] for event in events if event.get("action") == "note")
    assert [text for text in outcome.answered if made[text] != 1] == []
    assert [text for text, times in made.items() if times != 1 or text not in outcome.asked] == []
    assert len(outcome.answered) > KILLS
    assert not list((tmp_path / "state" / "loops").glob("*.bad.json"))
    assert [line for line in outcome.stderr if "Traceback" in line or "are taken from there" in line] == []
    assert outcome.exit_code == 0
