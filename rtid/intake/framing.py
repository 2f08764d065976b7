"""From bytes as they come to whole lines. No port, no clock: a partial line can be tested alone."""

from __future__ import annotations


class LineFramer:
    """Eats bytes, gives complete lines without their terminator (`\\n` or `\\r\\n`); empty lines are skipped.

    After opening, and after `reset()`, everything up to the next newline is dropped: it may be half a line. A line
    longer than `max_bytes` is dropped whole. How the bytes were split over the calls makes no difference.

    overlong: lines dropped for their length. discarded: bytes dropped for either reason.
    """

    def __init__(self, max_bytes: int = 4096) -> None:
        self.overlong = 0
        self.discarded = 0
        self._max_bytes = max_bytes
        self._buffer = bytearray()
        self._skipping = True

    def feed(self, data: bytes) -> list[bytes]:
        """The lines that end in `data`."""
        *ended, rest = data.split(b"\n")
        lines = []
        for part in ended:
            self._extend(part)
            lines.append(self._take())
        self._extend(rest)
        return [line for line in lines if line]

    def reset(self) -> None:
        """Drop what waits and everything up to the next newline."""
        self._drop_buffer()

    def _extend(self, part: bytes) -> None:
        if self._skipping:
            self.discarded += len(part)
            return
        self._buffer += part
        if len(self._buffer) > self._max_bytes:
            self.overlong += 1
            self._drop_buffer()

    def _take(self) -> bytes:
        line = bytes(self._buffer).removesuffix(b"\r")
        self._buffer.clear()
        self._skipping = False
        return line

    def _drop_buffer(self) -> None:
        self.discarded += len(self._buffer)
        self._buffer.clear()
        self._skipping = True
