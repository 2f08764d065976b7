"""A serial device on a real pseudo-terminal under a name that stays, to be pulled and plugged in again."""

from __future__ import annotations

import os
import select
import tty
from collections.abc import Iterable
from pathlib import Path
from types import TracebackType
from typing import Self

STREAM_S = 10.0  # longest wait for a reader


class PtyDevice:
    """`with PtyDevice(folder / "board") as device:` — the port is `device.port`, a symbolic link as in by-id."""

    def __init__(self, link: Path) -> None:
        self.port = str(link)
        self._link = link
        self._ends: tuple[int, int] | None = None

    def __enter__(self) -> Self:
        self.plug()
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.pull()

    def plug(self) -> None:
        """Appear under the name, as a new device node."""
        device, port = os.openpty()
        tty.setraw(port)
        os.set_blocking(device, False)
        self._link.symlink_to(os.ttyname(port))
        self._ends = device, port

    def pull(self) -> None:
        """Vanish: whoever has the port open gets an error."""
        if self._ends is not None:
            self._link.unlink()
            for end in self._ends:
                os.close(end)
            self._ends = None

    def send(self, data: bytes) -> None:
        """What the device says. More than the kernel holds (about 4 kB unread) raises BlockingIOError."""
        os.write(self._device, data)

    def stream(self, lines: Iterable[bytes]) -> None:
        """Whole lines, as fast as the reader takes them; returns when the kernel holds the last."""
        rest = memoryview(b"".join(line + b"\n" for line in lines))
        while rest:
            _, writable, _ = select.select([], [self._device], [], STREAM_S)
            if not writable:
                raise AssertionError(f"nobody reads: {len(rest)} bytes are left")
            rest = rest[os.write(self._device, rest[:1024]) :]

    def heard(self) -> bytes:
        """What was written to the device since the last call."""
        try:
            return os.read(self._device, 4096)
        except BlockingIOError:
            return b""

    @property
    def _device(self) -> int:
        if self._ends is None:
            raise AssertionError("the device is not plugged in")
        return self._ends[0]
