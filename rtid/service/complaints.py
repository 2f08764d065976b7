"""What the sources lost, said in the log: at most once per ten seconds and source, however bad the line is."""

from __future__ import annotations

import logging
from collections.abc import Mapping

from rtid.intake.reading import Counts

EVERY_S = 10.0

log = logging.getLogger("rtid.service")


class Complaints:
    """`look` compares the counts of each source with those of the last line in the log."""

    def __init__(self, counts: Mapping[str, Counts]) -> None:
        self._counts = counts
        self._said: dict[str, dict[str, int]] = {name: {} for name in counts}
        self._last: dict[str, float] = {}

    def follow(self, counts: Mapping[str, Counts]) -> None:
        """Look at these from now on; what was said of counts that stay is not said again."""
        self._said = {name: self._said[name] if self._counts.get(name) is kept else {} for name, kept in counts.items()}
        self._counts = counts

    def look(self, now: float) -> None:
        """`now` is the monotonic clock in seconds."""
        for name, counts in self._counts.items():
            if now - self._last.get(name, -EVERY_S) >= EVERY_S:
                self._compare(name, counts, now)

    def _compare(self, name: str, counts: Counts, now: float) -> None:
        total = {**counts.rejected, "dropped because the queue was full": counts.dropped}
        news = {kind: count - self._said[name].get(kind, 0) for kind, count in total.items()}
        texts = [f"{count} {kind}" for kind, count in news.items() if count > 0]
        if texts:
            log.warning("%s: lost since the last such line: %s", name, "; ".join(texts))
            self._said[name], self._last[name] = total, now
