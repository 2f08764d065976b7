"""What a source hands over: readings, and the reasons why something was no reading."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class Reading:
    """The values of one message that hold at one time.

    `time` is data time in seconds: the payload's when it carries one, else the monotonic arrival time.
    `values` maps `source.signal` to a finite number in engineering units; a signal that was absent or not of good
    quality is simply not there.
    """

    source: str
    time: float
    values: Mapping[str, float]
    arrival: float = 0.0  # monotonic clock, seconds


class Rejected(ValueError):
    """A payload, or a part of it, that is no reading: `kind` is counted, `text` is shown for the first of its kind."""

    def __init__(self, kind: str, text: str) -> None:
        super().__init__(text)
        self.kind = kind
        self.text = text


@dataclass(slots=True)
class Counts:
    """What happened to the messages of one source. Written by the source's thread, read by others."""

    messages: int = 0
    readings: int = 0
    dropped: int = 0  # lost because the queue was full
    retained: int = 0  # MQTT messages that the broker had kept: never samples
    reconnects: int = 0
    last_arrival: float | None = None  # monotonic clock
    connected: bool = False
    rejected: dict[str, int] = field(default_factory=dict)
    first_rejected: dict[str, str] = field(default_factory=dict)

    def reject(self, problem: Rejected) -> None:
        self.rejected[problem.kind] = self.rejected.get(problem.kind, 0) + 1
        self.first_rejected.setdefault(problem.kind, problem.text)
