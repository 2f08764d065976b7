"""Readings per second over the last seconds, from counts that only grow."""

from __future__ import annotations

from collections import deque

SPAN_S = 10.0
STEP_S = 1.0


class Rate:
    """`note` the count as often as you like. Times are the monotonic clock in seconds."""

    def __init__(self) -> None:
        self._kept: deque[tuple[float, int]] = deque(maxlen=round(SPAN_S / STEP_S) + 1)

    def note(self, count: int, now: float) -> None:
        if not self._kept or now - self._kept[-1][0] >= STEP_S:
            self._kept.append((now, count))

    def per_s(self, count: int, now: float) -> float | None:
        """Since the oldest note within the span; None while that is too short a time to tell."""
        within = [(then, before) for then, before in self._kept if now - then <= SPAN_S + STEP_S]
        if not within or now - within[0][0] < STEP_S:
            return None
        then, before = within[0]
        return (count - before) / (now - then)
