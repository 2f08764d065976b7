"""Fifty SIGKILLs at random moments of a running plant: nothing that was told or confirmed is lost or comes twice."""

from __future__ import annotations

from pathlib import Path

from tests.support.kills import faults, killed, lines, uninterrupted


def test_after_fifty_kills_events_baseline_and_alarms_are_as_if_nobody_had_killed(tmp_path: Path) -> None:
    sent = lines(seed=1)
    outcome = killed(tmp_path, sent, kills=50, seed=1)
    assert faults(outcome, uninterrupted(tmp_path / "uninterrupted", sent)) == []
