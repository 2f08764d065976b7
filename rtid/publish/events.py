"""The event list on disk: JSON Lines, numbered, each line flushed to the disk before anybody hears of it."""

from __future__ import annotations

import contextlib
import json
import logging
import mmap
import os
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Any

from rtid.errors import InputOutputError
from rtid.publish import messages
from rtid.publish.files import cannot_create, cannot_write
from rtid.report import Transition

MOST_UNWRITTEN = 1000  # events in memory while the disk refuses them; older ones are lost

log = logging.getLogger(__name__)

Event = dict[str, Any]


class EventLog:
    """Appends to `path` and continues its numbers. A last line without end (power loss) goes to `path` + `.torn`.

    `sequence` is the last number given, `unwritten` what the disk has not taken yet. Raises CannotCreate when the
    folder is missing or the file cannot be read; one that cannot be written is told by `write`.
    """

    def __init__(self, path: str | os.PathLike[str]) -> None:
        self._path = Path(path)
        self.unwritten: list[Event] = []
        self._ends_whole = False
        try:
            os.stat(self._path.parent)
            with contextlib.suppress(InputOutputError):
                self.write()
            self.sequence = next((event["sequence"] for event in self._backwards()), 0)
        except OSError as error:
            raise cannot_create(self._path, error) from None

    def append(self, transition: Transition, *, node: str, loop: str) -> Event:
        """The event as it was written. Raises InputOutputError when the disk refuses it; it waits in `unwritten`."""
        event = self.number(transition, node=node, loop=loop)
        self.write()
        return event

    def number(self, transition: Transition, *, node: str, loop: str) -> Event:
        """The event under the next number; `write` puts it on the disk."""
        self.sequence += 1
        event = messages.event(transition, node=node, loop=loop, sequence=self.sequence)
        self.unwritten.append(event)
        if len(self.unwritten) > MOST_UNWRITTEN:
            log.error("event %d is lost: the disk takes none", self.unwritten.pop(0)["sequence"])
        return event

    def write(self) -> None:
        """All that is unwritten, in order. Raises InputOutputError when the disk refuses; all of it waits then."""
        lines = b"".join(messages.dump(event) + b"\n" for event in self.unwritten)
        try:
            self._mend_end()
            _append(self._path, lines)
        except OSError as error:
            raise cannot_write(self._path, error) from None
        self.unwritten.clear()

    def recover(self, events: Iterable[Event], *, last: int) -> None:
        """Take up events that were numbered before a kill and are not in the list; go on after number `last`."""
        missing = {event["sequence"]: event for event in events if event["sequence"] > self.sequence}
        self.unwritten += [missing[number] for number in sorted(missing)]
        self.sequence = max((self.sequence, last, *missing))

    def after(self, sequence: int) -> list[Event]:
        """All events with higher numbers, oldest first."""
        found = []
        for event in self._backwards():
            if event["sequence"] <= sequence:
                break
            found.append(event)
        return found[::-1] + [event for event in self.unwritten if event["sequence"] > sequence]

    def latest(self, alarm: str) -> Event | None:
        """The last event of this alarm in the list, of whatever loop."""
        needle = messages.dump({"alarm": alarm})[1:-1]
        try:
            with self._path.open("rb") as file, _mapped(file.fileno()) as content:
                place = content.rfind(needle)
                line = content[content.rfind(b"\n", 0, place) + 1 : content.find(b"\n", place)]
        except FileNotFoundError:
            return None
        return _event(line) if place >= 0 else None

    def _mend_end(self) -> None:
        """Once: what an earlier process left unfinished."""
        if self._ends_whole:
            return
        with contextlib.suppress(FileNotFoundError):
            with self._path.open("rb") as file, _mapped(file.fileno()) as content:
                whole = content.rfind(b"\n") + 1
                torn = content[whole:]
            if torn:
                self._keep_torn(torn)
                os.truncate(self._path, whole)
        self._ends_whole = True

    def _keep_torn(self, torn: bytes) -> None:
        aside = self._path.with_name(self._path.name + ".torn")
        try:
            _append(aside, torn + b"\n")
        except OSError as error:
            log.warning("%s: the last line was torn (power loss?) and is lost (%s)", self._path, error.strerror)
        else:
            log.warning("%s: the last line was torn (power loss?) and is set aside in %s", self._path, aside)

    def _backwards(self) -> Iterator[Event]:
        """The events of the list, newest first; lines that are no events are passed over."""
        with contextlib.suppress(FileNotFoundError), self._path.open("rb") as file, _mapped(file.fileno()) as content:
            end = len(content)
            while end > 0:
                start = content.rfind(b"\n", 0, end - 1) + 1
                event = _event(content[start:end])
                if event is not None:
                    yield event
                end = start


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


def _event(line: bytes) -> Event | None:
    try:
        event = json.loads(line)
    except ValueError:
        return None
    return event if isinstance(event, dict) and isinstance(event.get("sequence"), int) else None
