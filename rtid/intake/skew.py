"""How much later than the first topic of a source the others arrive."""

from __future__ import annotations

import threading
from collections import deque
from statistics import median

_REMEMBERED = 50  # arrivals per topic
_MOST_TOPICS = 256  # a filter with wildcards may bring any number


class Skew:
    """Running medians of arrival difference, in seconds. Without a `reference` topic the first one heard is it.

    Written by one thread, may be read by others.
    """

    def __init__(self, reference: str | None = None) -> None:
        self._reference = reference
        self._latest: float | None = None
        self._differences: dict[str, deque[float]] = {}
        self._lock = threading.Lock()

    def note(self, topic: str, arrival: float) -> None:
        with self._lock:
            if self._reference is None:
                self._reference = topic
            if topic == self._reference:
                self._latest = arrival
            if self._latest is not None and (topic in self._differences or len(self._differences) < _MOST_TOPICS):
                self._differences.setdefault(topic, deque(maxlen=_REMEMBERED)).append(arrival - self._latest)

    def medians(self) -> dict[str, float]:
        """Topic to the median of the last differences; empty until the reference was heard."""
        with self._lock:
            return {topic: median(differences) for topic, differences in self._differences.items()}
