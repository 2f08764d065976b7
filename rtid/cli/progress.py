"""A progress bar of plain ASCII on stderr, on a terminal only."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from typing import TextIO

EVERY_S = 0.1
WIDTH = 30


class Progress:
    """`update(count)` as often as you like; it draws ten times a second. `fraction` says how far it is, from 0 to 1."""

    def __init__(
        self,
        fraction: Callable[[], float],
        *,
        stream: TextIO | None = None,
        what: str = "rows",
        monotonic: Callable[[], float] = time.monotonic,
    ) -> None:
        self._fraction = fraction
        self._stream = sys.stderr if stream is None else stream
        self._shown = self._stream.isatty()
        self._what = what
        self._monotonic = monotonic
        self._start = self._drawn = monotonic()

    def update(self, count: int) -> None:
        if self._shown and self._monotonic() - self._drawn >= EVERY_S:
            self._drawn = self._monotonic()
            self._draw(count)

    def close(self) -> None:
        """Wipe the bar, so that what follows stands on a clean line."""
        if self._shown:
            self._stream.write("\r\x1b[K")
            self._stream.flush()

    def _draw(self, count: int) -> None:
        done = min(1.0, max(0.0, self._fraction()))
        bar = "#" * round(done * WIDTH)
        rate = count / max(self._drawn - self._start, EVERY_S)
        self._stream.write(f"\r[{bar:.<{WIDTH}}] {100.0 * done:3.0f} %  {rate:,.0f} {self._what}/s\x1b[K")
        self._stream.flush()
