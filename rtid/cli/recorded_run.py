"""One pass of recorded readings through the pipeline, and the files that it leaves."""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Sequence
from contextlib import ExitStack
from pathlib import Path
from typing import Any

from rtid.cli.progress import Progress
from rtid.errors import CannotCreate
from rtid.intake.recorded import RecordedFeed, merge
from rtid.publish import messages
from rtid.publish.events import EventLog
from rtid.publish.files import write_json
from rtid.publish.summary import AlarmTally, summary
from rtid.publish.trend import TrendFile
from rtid.report import Report
from rtid.service.pipeline import Pipeline
from rtid.settings import Node


class RecordedRun:
    """`run()` once. Stamps are data time. `snapshots` holds each loop's snapshot at the end of the data."""

    def __init__(self, node: Node, feeds: Sequence[RecordedFeed], folder: Path) -> None:
        self._node = node
        self._feeds = feeds
        self._folder = folder
        self._tally = AlarmTally()
        self._pipeline = Pipeline(node.loops, self._deliver)
        self._events = EventLog(_anew(folder / "events.jsonl"))
        self._trends: dict[str, TrendFile] = {}
        self.snapshots: dict[str, dict[str, Any]] = {}

    def run(self) -> dict[str, Any]:
        """The summary, as it stands in summary.json. Raises DataError, CannotCreate, InputOutputError."""
        begin = time.monotonic()
        with ExitStack() as open_files:
            for name, loop in self._pipeline.loops.items():
                trend = TrendFile(self._folder / f"{name}.trend.csv", tuple(loop.snapshot("columns")["quantities"]))
                self._trends[name] = open_files.enter_context(trend)
            end = self._read()
        for name, loop in self._pipeline.loops.items():
            self.snapshots[name] = messages.snapshot(loop.snapshot("end of the data"), node=self._node.name, stamp=end)
            write_json(self._folder / f"{name}.snapshot.json", self.snapshots[name])
        document = summary(
            [self._pipeline.report(name, end) for name in self._pipeline.loops],
            self._tally,
            samples=self._pipeline.rows,
            wall_s=time.monotonic() - begin,
            rejected=self._rejected(),
        )
        write_json(self._folder / "summary.json", document)
        return document

    def _read(self) -> float:
        """Every reading through the pipeline; the time of the last one."""
        progress = Progress(lambda: sum(feed.fraction() for feed in self._feeds) / len(self._feeds))
        end = 0.0
        try:
            for reading in merge(self._feeds):
                end = reading.time
                self._pipeline.feed(reading, end)
                progress.update(self._pipeline.rows)
        finally:
            progress.close()
        for name in self._pipeline.loops:
            self._pipeline.flush(name, end)
        return end

    def _deliver(self, reports: Sequence[Report]) -> None:
        for report in reports:
            for transition in report.transitions:
                self._events.append(transition, node=self._node.name, loop=report.loop)
            self._tally.report(report)
            self._trends[report.loop].row(report)

    def _rejected(self) -> dict[str, tuple[int, str]]:
        """Per kind: how many, and the first of them; over all files and all grids."""
        counts: Counter[str] = Counter()
        first: dict[str, str] = {}
        for feed in self._feeds:
            counts.update(feed.counts.rejected)
            first = feed.counts.first_rejected | first
        for name, grid in self._pipeline.grids.items():
            counts.update(grid.rejected)
            first = dict.fromkeys(grid.rejected, f"on the grid of {name}") | first
        return {kind: (count, first[kind]) for kind, count in counts.items() if count}


def _anew(path: Path) -> Path:
    """The path, with nothing there any more."""
    try:
        path.unlink(missing_ok=True)
    except OSError as error:
        raise CannotCreate(f"{path}: cannot be replaced ({error.strerror}); choose another folder for --out") from None
    return path
