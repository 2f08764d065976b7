"""What a replay did, in one document: how much, how fast, what was rejected, and where each loop stands."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping
from typing import Any

from rtid.report import Report


class AlarmTally:
    """Counts how often each alarm became active, per loop."""

    def __init__(self) -> None:
        self._counts: dict[str, Counter[str]] = {}

    def report(self, report: Report) -> None:
        counts = self._counts.setdefault(report.loop, Counter())
        counts.update(t.alarm for t in report.transitions if t.alarm is not None and t.transition == "active")

    def of(self, loop: str) -> dict[str, int]:
        return dict(self._counts.get(loop, {}))


def summary(
    reports: Iterable[Report],
    tally: AlarmTally,
    *,
    samples: int,
    wall_s: float,
    rejected: Mapping[str, tuple[int, str]],
) -> dict[str, Any]:
    """`reports` are the last ones of each loop, `samples` the grid rows over all loops, `rejected` maps a kind to its
    count and the first line of that kind."""
    return {
        "schema": "rtid/summary/1",
        "samples": int(samples),
        "wall_s": float(wall_s),
        "samples_per_s": samples / wall_s if wall_s > 0 else None,
        "rejected": {kind: {"count": count, "first": first} for kind, (count, first) in rejected.items()},
        "loops": {
            report.loop: {"state": report.state, "health": report.health, "alarms": tally.of(report.loop)}
            for report in reports
        },
    }
