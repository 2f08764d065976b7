"""The one queue between the sources' threads and the worker. It never blocks a source and never grows without end."""

from __future__ import annotations

import threading
from collections import deque
from collections.abc import Callable

from rtid.intake.reading import Counts, Reading

Action = Callable[[], object]  # what an operator wants done, run by the worker between two readings
Item = Reading | Action


class ReadingQueue:
    """Holds at most `limit` readings: a full queue drops the oldest reading and counts it on that reading's source.

    Operator actions travel in the same order, are not counted against the limit and are never dropped.
    """

    def __init__(self, limit: int = 20000) -> None:
        self._limit = limit
        self._readings: deque[tuple[int, Reading]] = deque()
        self._actions: deque[tuple[int, Action]] = deque()
        self._order = 0
        self._counts: dict[str, Counts] = {}
        self._filled = threading.Condition()

    def register(self, source: str, counts: Counts) -> None:
        """Name the counts on which dropped readings of `source` are written."""
        self._counts[source] = counts

    def put(self, item: Item) -> None:
        with self._filled:
            self._order += 1
            if isinstance(item, Reading):
                if len(self._readings) >= self._limit:
                    self._drop_oldest()
                self._readings.append((self._order, item))
            else:
                self._actions.append((self._order, item))
            self._filled.notify()

    def get(self, timeout: float) -> list[Item]:
        """Everything that waits, in order; an empty list when nothing came within `timeout` seconds."""
        with self._filled:
            self._filled.wait_for(lambda: self._readings or self._actions, timeout)
            waiting: list[tuple[int, Item]] = [*self._readings, *self._actions]
            if self._actions:
                waiting.sort(key=lambda pair: pair[0])
            self._readings.clear()
            self._actions.clear()
        return [item for _, item in waiting]

    def _drop_oldest(self) -> None:
        _, oldest = self._readings.popleft()
        counts = self._counts.get(oldest.source)
        if counts is not None:
            counts.dropped += 1
