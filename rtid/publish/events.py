"""The event list on disk: JSON Lines, numbered, each line flushed to the disk before anybody hears of it."""

from __future__ import annotations

import contextlib
import json
import logging
import mmap
import os
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from rtid.publish import messages
from rtid.publish.files import cannot_create, cannot_write
from rtid.report import Transition

log = logging.getLogger(__name__)


class EventLog:
    """Appends to `path` and continues its numbers. A last line without end (power loss) goes to `path` + `.torn`.

    Raises CannotCreate when the file cannot be opened for writing.
    """

    def __init__(self, path: str | os.PathLike[str]) -> None:
        self._path = Path(path)
        try:
            self._path.open("ab").close()
            self._set_torn_end_aside()
            self.sequence = self._last_sequence()
        except OSError as error:
            raise cannot_create(self._path, error) from None

    def append(
        self, transition: Transition, *, node: str, loop: str, extra: Mapping[str, Any] | None = None
    ) -> dict[str, Any]:
        """The event as it was written; `extra` stands under its key `detail`.

        Raises InputOutputError when the disk refuses it: the event keeps its number, and the list has a gap there.
        """
        self.sequence += 1
        event = messages.event(transition, node=node, loop=loop, sequence=self.sequence)
        if extra is not None:
            event["detail"] = messages.plain(extra)
        try:
            _append(self._path, messages.dump(event) + b"\n")
        except OSError as error:
            raise cannot_write(self._path, error) from None
        return event

    def _set_torn_end_aside(self) -> None:
        with self._path.open("r+b") as file, _mapped(file.fileno()) as content:
            whole = content.rfind(b"\n") + 1
            torn = content[whole:]
        if torn:
            self._keep_torn(torn)
            os.truncate(self._path, whole)

    def _keep_torn(self, torn: bytes) -> None:
        aside = self._path.with_name(self._path.name + ".torn")
        try:
            _append(aside, torn + b"\n")
        except OSError as error:
            log.warning("%s: the last line was torn (power loss?) and is lost (%s)", self._path, error.strerror)
        else:
            log.warning("%s: the last line was torn (power loss?) and is set aside in %s", self._path, aside)

    def _last_sequence(self) -> int:
        with self._path.open("rb") as file, _mapped(file.fileno()) as content:
            end = len(content)
            while end > 0:
                start = content.rfind(b"\n", 0, end - 1) + 1
                sequence = _sequence(content[start:end])
                if sequence is not None:
                    return sequence
                end = start
        return 0


def _append(path: Path, line: bytes) -> None:
    """The whole line on the disk, or nothing of it and an OSError."""
    descriptor = os.open(path, os.O_WRONLY | os.O_CREAT | os.O_APPEND, 0o644)
    try:
        before = os.fstat(descriptor).st_size
        try:
            rest = memoryview(line)
            while rest:
                rest = rest[os.write(descriptor, rest) :]
            os.fsync(descriptor)
        except OSError:
            with contextlib.suppress(OSError):
                os.ftruncate(descriptor, before)
            raise
    finally:
        os.close(descriptor)


@contextlib.contextmanager
def _mapped(descriptor: int) -> Iterator[bytes | mmap.mmap]:
    """The content of a file without reading all of it; an empty file cannot be mapped."""
    if os.fstat(descriptor).st_size == 0:
        yield b""
        return
    with mmap.mmap(descriptor, 0, access=mmap.ACCESS_READ) as content:
        yield content


def _sequence(line: bytes) -> int | None:
    try:
        event = json.loads(line)
    except ValueError:
        return None
    sequence = event.get("sequence") if isinstance(event, dict) else None
    return sequence if isinstance(sequence, int) else None
