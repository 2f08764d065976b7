"""A log handler that says the same thing at most ten times a minute, and how often it held its tongue."""

from __future__ import annotations

import logging
import threading
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TextIO, TypeAlias

MOST = 10  # messages of one kind in a window
WINDOW_S = 60.0

Kind: TypeAlias = tuple[str, int, str, str]
Later: TypeAlias = Callable[[float, Callable[[], None]], None]


@dataclass
class Burst:
    """The messages of one kind within a window that began with the first of them."""

    ends: float  # monotonic clock, seconds
    said: int = 0
    held: int = 0
    last: logging.LogRecord | None = None  # of those held back


def call_later(seconds: float, action: Callable[[], None]) -> None:
    timer = threading.Timer(seconds, action)
    timer.daemon = True
    timer.start()


class LimitedHandler(logging.StreamHandler[TextIO]):
    """Of one kind (logger, level, template and its first argument, which names the source or loop) a window shows
    `MOST`; the rest is counted, and said in one line when the window ends or the handler is closed."""

    def __init__(
        self, stream: TextIO, *, monotonic: Callable[[], float] = time.monotonic, later: Later = call_later
    ) -> None:
        super().__init__(stream)
        self._monotonic = monotonic
        self._later = later
        self._waiting = False  # for the end of a window
        self._bursts: dict[Kind, Burst] = {}

    def emit(self, record: logging.LogRecord) -> None:
        now = self._monotonic()
        self._end(now)
        burst = self._bursts.setdefault(_kind(record), Burst(ends=now + WINDOW_S))
        if burst.said < MOST:
            burst.said += 1
            super().emit(record)
        else:
            burst.held += 1
            burst.last = record
            self._wait(now)

    def close(self) -> None:
        with self._locked():
            self._end(float("inf"))
        super().close()

    @contextmanager
    def _locked(self) -> Iterator[None]:
        """As logging itself locks around `emit`."""
        self.acquire()
        try:
            yield
        finally:
            self.release()

    def _end(self, now: float) -> None:
        """Forget the windows that ended, and say what they held back."""
        for kind, burst in list(self._bursts.items()):
            if now >= burst.ends:
                del self._bursts[kind]
                if burst.last is not None:
                    super().emit(_more(burst.held, burst.last))

    def _wait(self, now: float) -> None:
        if not self._waiting:
            self._waiting = True
            self._later(min(burst.ends for burst in self._bursts.values() if burst.held) - now, self._wake)

    def _wake(self) -> None:
        with self._locked():
            self._waiting = False
            now = self._monotonic()
            self._end(now)
            if any(burst.held for burst in self._bursts.values()):
                self._wait(now)


def _kind(record: logging.LogRecord) -> Kind:
    first = record.args[0] if isinstance(record.args, tuple) and record.args else ""
    return record.name, record.levelno, str(record.msg), str(first)


def _more(count: int, last: logging.LogRecord) -> logging.LogRecord:
    text = f"{count} more like this within a minute, the last: {last.getMessage()}"
    return logging.makeLogRecord({**last.__dict__, "msg": text, "args": None})
