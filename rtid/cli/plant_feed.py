"""A simulated plant that talks on a pseudo-terminal as a board talks on a serial port, line by line in real time."""

from __future__ import annotations

import os
import pty
import threading
import time
import tty
from collections.abc import Callable
from types import TracebackType
from typing import Self

from rtid.intake.checksum import xor8

Row = tuple[float, float, float]  # time in s, input, output


def csv_line(row: Row) -> bytes:
    """`ms,input,output*XX` with the checksum xor8 over what stands before the star."""
    time_s, value_in, value_out = row
    text = f"{round(1000.0 * time_s)},{value_in:.2f},{value_out:.2f}".encode("ascii")
    return b"%s*%02X\r\n" % (text, xor8(text))


class PlantFeed:
    """`with PlantFeed(next_row, period_s=0.01) as feed:` opens the port `feed.port`; `feed.start()` lets the plant run.

    Nobody at the other end: what does not fit into the terminal's buffer is lost, as on a wire.
    """

    def __init__(self, next_row: Callable[[], Row], *, period_s: float) -> None:
        self._next_row = next_row
        self._period_s = period_s
        self._stopping = threading.Event()
        self._thread = threading.Thread(target=self._run, name="plant", daemon=True)

    def __enter__(self) -> Self:
        self._here, self._there = pty.openpty()
        tty.setraw(self._there)
        os.set_blocking(self._here, False)
        self.port = os.ttyname(self._there)
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self._stopping.set()
        if self._thread.is_alive():
            self._thread.join()
        os.close(self._here)
        os.close(self._there)

    def start(self) -> None:
        self._thread.start()

    def _run(self) -> None:
        due = time.monotonic()
        while not self._stopping.wait(max(0.0, due - time.monotonic())):
            due += self._period_s
            self._send(csv_line(self._next_row()))

    def _send(self, line: bytes) -> None:
        try:
            os.write(self._here, line)
        except BlockingIOError:
            return
