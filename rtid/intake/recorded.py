"""Readings from recorded CSV files, row by row: a file may be larger than the memory."""

from __future__ import annotations

import heapq
import os
from collections.abc import Iterator, Sequence
from operator import itemgetter
from pathlib import Path
from typing import BinaryIO

from rtid.errors import DataError, InputOutputError, MissingInput
from rtid.intake.csv_layout import CsvLayout
from rtid.intake.reading import Counts, Reading, Rejected

__all__ = ["CsvLayout", "RecordedFeed", "merge"]

MAX_LINE = 64 * 1024  # bytes
BYTE_ORDER_MARK = b"\xef\xbb\xbf"


class RecordedFeed:
    """The rows of one file as readings, in the order of the file. Iterate once.

    The header names the columns: the time column, and `signal` or `source.signal`; other columns are ignored. An empty
    cell is an absent signal. A row that does not parse is rejected whole. So is a row whose time runs backwards, unless
    by more than `restart_after_s`: then the device may have restarted, and the grid decides, which waits for the next
    reading to confirm it.

    signals: full names (`source.signal`) of the source. restart_after_s: ten periods of the fastest loop.
    first_line: per kind of rejection, the line number of its first row (the header is line 1).
    Raises MissingInput, InputOutputError, or DataError when the header lacks the time or every signal.
    """

    def __init__(
        self,
        source_name: str,
        path: str | os.PathLike[str],
        *,
        signals: tuple[str, ...],
        layout: CsvLayout,
        restart_after_s: float,
    ) -> None:
        self.name = source_name
        self.counts = Counts()
        self.first_line: dict[str, int] = {}
        self.restart_after_s = restart_after_s
        self._path = Path(path)
        self._layout = layout
        self._latest = -float("inf")
        self._bytes_read = 0
        header = layout.split(self._first_line_of_file())
        self._width = len(header)
        self._time_column = self._find_time(header)
        self._columns = self._find_signals(header, signals)

    def __iter__(self) -> Iterator[Reading]:
        with self._open() as file:
            for line_number, line in enumerate(_lines(file), start=1):
                self._bytes_read += len(line)
                if line_number > 1 and line.strip():
                    reading = self._take(line, line_number)
                    if reading is not None:
                        yield reading

    def fraction(self) -> float:
        """Share of the file that was read, from 0 to 1."""
        return min(1.0, self._bytes_read / max(self._size, 1))

    def _open(self) -> BinaryIO:
        try:
            return self._path.open("rb")
        except FileNotFoundError:
            raise MissingInput(f"{self._path}: no such file; check the name after {self.name}=") from None
        except OSError as error:
            raise InputOutputError(f"{self._path}: cannot be read: {error.strerror}") from None

    def _first_line_of_file(self) -> bytes:
        with self._open() as file:
            self._size = os.fstat(file.fileno()).st_size
            return file.readline(MAX_LINE).removeprefix(BYTE_ORDER_MARK)

    def _find_time(self, header: list[str]) -> int:
        name = self._layout.time_column
        if header.count(name) != 1:
            raise self._wrong(header, f"one time column {name!r}, or name it with --time-column")
        return header.index(name)

    def _find_signals(self, header: list[str], signals: tuple[str, ...]) -> list[tuple[int, str]]:
        """Column and full name of every signal in the header."""
        prefix = f"{self.name}."
        full = [name if name in signals else prefix + name for name in header]
        columns = [(i, name) for i, name in enumerate(full) if name in signals and i != self._time_column]
        wanted = ", ".join(name.removeprefix(prefix) for name in signals)
        if not columns:
            raise self._wrong(header, f"a column for at least one of {wanted}")
        if len({name for _, name in columns}) < len(columns):
            raise self._wrong(header, f"only one column for each of {wanted}")
        return columns

    def _wrong(self, header: list[str], expected: str) -> DataError:
        found = ascii(self._layout.separator.join(header))
        return DataError(f"{self._path}:1: the header {found[:200]} does not fit {self.name}; expected {expected}")

    def _take(self, line: bytes, line_number: int) -> Reading | None:
        """The reading of one row; None, after counting, when there is none."""
        self.counts.messages += 1
        try:
            reading = self._parse(line)
        except Rejected as problem:
            self.counts.reject(Rejected(problem.kind, f"{self._path}:{line_number}: {problem.text}"))
            self.first_line.setdefault(problem.kind, line_number)
            return None
        self._latest = reading.time
        if not reading.values:
            return None
        self.counts.readings += 1
        return reading

    def _parse(self, line: bytes) -> Reading:
        if len(line) >= MAX_LINE:
            raise Rejected("length", f"the line is longer than {MAX_LINE} bytes")
        fields = self._layout.split(line)
        if len(fields) != self._width:
            raise Rejected("columns", f"the row has {len(fields)} columns, the header {self._width}")
        number = self._layout.number
        values = {name: number(fields[i]) for i, name in self._columns if fields[i]}
        time = self._layout.seconds(fields[self._time_column])
        if 0.0 < self._latest - time <= self.restart_after_s:
            raise Rejected("time", f"the time runs back from {self._latest!r} s to {time!r} s")
        return Reading(self.name, time, values)


def merge(feeds: Sequence[RecordedFeed]) -> Iterator[Reading]:
    """The readings of all feeds by time; at equal times in the order of `feeds`; never out of a feed's own order.

    A restart of the clock (a confirmed step back by more than the feed's `restart_after_s`) begins a new stretch: its
    readings come after those of the stretches before it in every feed, so feeds of one device stay together. A single
    reading with a time far away is passed on where it stands in the file.
    """
    if len(feeds) == 1:
        return iter(feeds[0])
    keyed = heapq.merge(*(_keyed(feed) for feed in feeds), key=itemgetter(0))
    return (reading for _, reading in keyed)


def _keyed(feed: RecordedFeed) -> Iterator[tuple[tuple[int, float], Reading]]:
    """Each reading with its place in the merged order: number of the stretch, then time."""
    readings = iter(feed)
    reading = next(readings, None)
    stretch = 0
    latest = reading.time if reading is not None else 0.0
    while reading is not None:
        following = next(readings, None)
        if not _stands_alone(reading, latest, following, feed.restart_after_s):
            stretch += reading.time < latest
            latest = reading.time
        yield (stretch, latest), reading
        reading = following


def _stands_alone(reading: Reading, latest: float, following: Reading | None, limit_s: float) -> bool:
    """A jump of more than `limit_s` that the next reading does not confirm."""
    if following is None or abs(reading.time - latest) <= limit_s:
        return False
    return abs(following.time - latest) <= abs(following.time - reading.time)


def _lines(file: BinaryIO) -> Iterator[bytes]:
    """Lines with their ends; what goes beyond MAX_LINE of a line is skipped."""
    while line := file.readline(MAX_LINE):
        rest = line
        while len(rest) == MAX_LINE and not rest.endswith(b"\n"):
            rest = file.readline(MAX_LINE)
        yield line
