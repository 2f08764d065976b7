"""What every live source has: a name, counts, the way to the queue, and one voice in the log."""

from __future__ import annotations

import logging

from rtid.intake.delivery import Delivery
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Counts
from rtid.settings import Source

log = logging.getLogger("rtid.intake")


class LiveSource:
    """Base of the sources that a thread of their own listens to."""

    def __init__(self, source: Source, queue: ReadingQueue) -> None:
        self.name = source.name
        self._delivery = Delivery(source, queue)
        self._connected_before = False
        self._said = ""

    @property
    def counts(self) -> Counts:
        return self._delivery.counts

    @property
    def connected(self) -> bool:
        """True while the other end is there: the port is open, the broker answers."""
        return self.counts.connected

    def _note_connected(self, text: str) -> None:
        """Note and log that the other end is there; from the second time on it has come back."""
        self.counts.connected = True
        self.counts.reconnects += self._connected_before
        self._connected_before = True
        self._say(logging.INFO, text)

    def _say(self, level: int, text: str) -> None:
        """Log a change of state once, however often the same attempt fails."""
        if text != self._said:
            self._said = text
            log.log(level, "%s: %s", self.name, text)
