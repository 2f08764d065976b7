"""What waits to be published: the latest value per topic, never more. No network here."""

from __future__ import annotations

import threading
from collections import deque
from dataclasses import dataclass, replace

WINDOW = 16  # messages on their way at one time: below the 20 that brokers commonly accept unacknowledged
ALARMS = 256  # alarm messages that may wait while the connection is up


@dataclass(frozen=True, slots=True)
class Outgoing:
    """One message. `every` means that while the connection is up each one is sent, not only the latest (alarms)."""

    topic: str
    payload: bytes
    qos: int = 0
    retain: bool = True
    every: bool = False


class Outbox:
    """`put` by the worker, `take` by the one thread that publishes, `sent` by the network thread.

    While shut (no connection) only the latest message per topic is kept. At `open` all latest retained messages are due
    again, because a broker may have forgotten them. `dropped` counts the alarm messages that were never sent because a
    later one of their topic, or a full queue, took their place.
    """

    def __init__(self) -> None:
        self.dropped = 0
        self._latest: dict[str, Outgoing] = {}
        self._due: dict[str, Outgoing] = {}
        self._alarms: deque[Outgoing] = deque()
        self._on_the_way = 0
        self._is_open = False
        self._finished = False
        self._change = threading.Condition()

    def __len__(self) -> int:
        """How many messages are held."""
        with self._change:
            return len(self._latest) + len(self._due) + len(self._alarms)

    def put(self, message: Outgoing) -> None:
        """Never blocks on anything but the lock."""
        with self._change:
            if message.retain:
                self._latest[message.topic] = replace(message, every=False)
            replaced = self._due.pop(message.topic, None)
            self.dropped += replaced is not None and replaced.every
            if message.every and self._is_open:
                self._queue_alarm(message)
            else:
                self._due[message.topic] = message
            self._change.notify_all()

    def open(self) -> None:
        """The connection is up."""
        with self._change:
            self._due = self._latest | self._due
            self._is_open = True
            self._on_the_way = 0
            self._change.notify_all()

    def shut(self) -> None:
        """The connection is gone."""
        with self._change:
            self._is_open = False
            waiting = {message.topic: message for message in self._alarms}
            self.dropped += len(self._alarms) - len(waiting)
            self._alarms.clear()
            self._due |= waiting
            self._change.notify_all()

    def sent(self) -> None:
        """One message has left."""
        with self._change:
            self._on_the_way = max(0, self._on_the_way - 1)
            self._change.notify_all()

    def finish(self) -> None:
        """Nothing more will come: `take` ends when all is sent or cannot be."""
        with self._change:
            self._finished = True
            self._change.notify_all()

    def take(self) -> Outgoing | None:
        """The next message, waiting for it; alarms first. None: finished."""
        with self._change:
            self._change.wait_for(lambda: self._may_send() or self._may_end())
            if not self._may_send():
                return None
            self._on_the_way += 1
            if self._alarms:
                return self._alarms.popleft()
            return self._due.pop(next(iter(self._due)))

    def _queue_alarm(self, message: Outgoing) -> None:
        if len(self._alarms) >= ALARMS:
            self._alarms.popleft()
            self.dropped += 1
        self._alarms.append(message)

    def _has_waiting(self) -> bool:
        return bool(self._alarms or self._due)

    def _may_send(self) -> bool:
        return self._is_open and self._on_the_way < WINDOW and self._has_waiting()

    def _may_end(self) -> bool:
        return self._finished and not (self._is_open and self._has_waiting())
