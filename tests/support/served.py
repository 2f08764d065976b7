"""A real service that reads a board on a pseudo-terminal, and the commands that talk to it."""

from __future__ import annotations

import contextlib
import io
import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from types import TracebackType
from typing import Any, Self

from rtid.cli.main import main
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until


@dataclass(frozen=True, slots=True)
class Said:
    """What a command left: exit code, stdout, stderr."""

    code: int
    out: str
    err: str

    @property
    def error(self) -> str:
        """The one line on stderr."""
        assert self.out == ""
        assert self.err.startswith("rtid: ")
        assert self.err.count("\n") == 1
        return self.err


class Served:
    """`with Served(folder) as served:` - loop `belt` of node `test-node`, in a process of its own."""

    def __init__(self, folder: Path, *, stale_after_s: float = 600.0, broker: int | None = None) -> None:
        self.folder = folder
        self.socket = folder / "state" / "control.sock"
        self._board = PtyDevice(folder / "board")
        self.config = configure(folder, self._board.port, broker=broker, stale_after_s=stale_after_s)
        self.process = RunningRtid("run", self.config)
        self._rows = self._sent = 0

    def __enter__(self) -> Self:
        self._board.__enter__()
        self.process.__enter__()
        self.process.wait_for_line("is open", 20.0)
        return self

    def __exit__(self, kind: type[BaseException] | None, error: BaseException | None, at: TracebackType | None) -> None:
        self.process.__exit__(kind, error, at)
        self._board.__exit__(kind, error, at)

    def stream(self, rows: int, *, skip: int = 0) -> None:
        """So many more rows of the plant, after `skip` that are missing; returns when the worker has taken them."""
        self._rows += skip
        self._board.stream(plant_rows(rows, first=self._rows, seed=1 + self._rows))
        self._rows += rows
        self._sent += rows
        wait_until(lambda: self.source()["messages"] >= self._sent - 1, 30.0, what="the rows")  # the first may be torn
        self.status()  # asked after they were read, so it is answered after they were taken

    def garble(self, line: bytes) -> None:
        """A line that is none of the plant's."""
        self._board.stream([line])
        self._sent += 1

    def wait_for(self, test: Callable[[dict[str, Any]], object], *, what: str) -> dict[str, Any]:
        """Until `status` tells something of the loop."""
        wait_until(lambda: test(self.loop()), 30.0, what=what)
        return self.loop()

    def run(self, command: str, *arguments: str | Path) -> Said:
        """An operator's command, to this service."""
        return said(command, *arguments, "--config", self.config)

    def status(self) -> dict[str, Any]:
        found: dict[str, Any] = json.loads(self.run("status", "--json").out)
        return found

    def loop(self) -> dict[str, Any]:
        found: dict[str, Any] = self.status()["loops"]["belt"]
        return found

    def source(self) -> dict[str, Any]:
        found: dict[str, Any] = self.status()["sources"]["drive"]
        return found

    def events(self) -> list[dict[str, Any]]:
        return [json.loads(line) for line in (self.folder / "state" / "events.jsonl").read_text().splitlines()]


def said(*arguments: str | Path) -> Said:
    """A command in this process."""
    out, err = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
        code = main([str(argument) for argument in arguments])
    return Said(code, out.getvalue(), err.getvalue())
