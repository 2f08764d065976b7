"""A log line is one line, the journal gets its severity, and a flood is counted, never lost."""

from __future__ import annotations

import io
import logging
import os
import subprocess
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path

import pytest

from rtid.cli import logs
from rtid.cli.log_limit import MOST, WINDOW_S, LimitedHandler
from rtid.cli.logs import OneLine
from tests.support.process import ENVIRONMENT, rtid


def record(text: str, error: Exception | None = None) -> logging.LogRecord:
    trace = (type(error), error, None) if error else None
    return logging.LogRecord("rtid", logging.ERROR, __file__, 1, text, (), trace)


def test_line_breaks_in_a_message_become_spaces() -> None:
    assert OneLine(tracebacks=False).format(record("a\nb\r\n c")).endswith(" ERROR a b c")


def test_an_exception_is_named_without_its_traceback() -> None:
    text = OneLine(tracebacks=False).format(record("failed", ValueError("bad\nnumber")))
    assert text.endswith(" ERROR failed (ValueError: bad number)")


def test_the_journal_gets_the_severity_and_no_time() -> None:
    assert OneLine(tracebacks=False, journal=True).format(record("a\nb")) == "<3>a b"


def test_every_line_of_a_traceback_that_was_asked_for_has_the_severity() -> None:
    lines = OneLine(tracebacks=True, journal=True).format(record("failed", ValueError("bad"))).splitlines()
    assert len(lines) > 1
    assert all(line.startswith("<3>") for line in lines)


@pytest.mark.parametrize(
    ("level", "number"),
    [(logging.CRITICAL, 2), (logging.ERROR, 3), (logging.WARNING, 4), (logging.INFO, 6), (logging.DEBUG, 7), (33, 6)],
)
def test_severities_are_those_of_syslog(level: int, number: int) -> None:
    assert logs.severity(level) == f"<{number}>"


def test_only_the_stream_that_the_journal_names_is_the_journal(tmp_path: Path) -> None:
    with (tmp_path / "journal").open("w") as journal, (tmp_path / "file").open("w") as file:
        there = os.fstat(journal.fileno())
        environment = {"JOURNAL_STREAM": f"{there.st_dev}:{there.st_ino}"}
        assert logs.in_journal(journal, environment)
        assert not logs.in_journal(file, environment)
        assert not logs.in_journal(journal, {})
        assert not logs.in_journal(io.StringIO(), environment)


def test_a_command_that_fails_under_the_journal_says_so_as_an_error(tmp_path: Path) -> None:
    """The process is told which pipe its stderr is, as systemd would tell it."""
    script = tmp_path / "in_journal.py"
    script.write_text(
        "import os, sys\n"
        "there = os.fstat(2)\n"
        "os.environ['JOURNAL_STREAM'] = f'{there.st_dev}:{there.st_ino}'\n"
        "from rtid.cli.main import main\n"
        "sys.exit(main(sys.argv[1:]))\n"
    )
    command = [sys.executable, script, "run", tmp_path / "none.yaml"]
    ended = subprocess.run(command, env=ENVIRONMENT, capture_output=True, text=True, timeout=60.0)
    assert ended.returncode == 66
    assert ended.stderr.startswith(f"<3>rtid: {tmp_path}/none.yaml: ")
    assert not rtid("run", tmp_path / "none.yaml").stderr.startswith("<")


@dataclass
class Clock:
    """Time that passes when the test says so, and what was asked to be done later."""

    now: float = 100.0
    waiting: list[tuple[float, Callable[[], None]]] = field(default_factory=list)

    def later(self, seconds: float, action: Callable[[], None]) -> None:
        self.waiting.append((self.now + seconds, action))

    def go_to_next(self) -> None:
        self.now, action = self.waiting.pop(0)
        action()


@dataclass
class Log:
    """A logger of its own whose lines can be read."""

    logger: logging.Logger
    clock: Clock
    handler: LimitedHandler
    stream: io.StringIO

    @property
    def lines(self) -> list[str]:
        return self.stream.getvalue().splitlines()


@pytest.fixture
def log() -> Iterator[Log]:
    clock, stream = Clock(), io.StringIO()
    handler = LimitedHandler(stream, monotonic=lambda: clock.now, later=clock.later)
    logger = logging.Logger("rtid.test")
    logger.addHandler(handler)
    yield Log(logger, clock, handler, stream)
    handler.close()


def test_a_flood_is_ten_lines_and_then_one_with_the_count(log: Log) -> None:
    for count in range(MOST + 30):
        log.logger.warning("%s: rejected: %s", "drive", count)
    assert log.lines == [f"drive: rejected: {count}" for count in range(MOST)]
    log.clock.go_to_next()
    assert log.lines[MOST:] == [f"30 more like this within a minute, the last: drive: rejected: {MOST + 29}"]
    assert not log.clock.waiting


def test_the_count_comes_when_the_window_ends(log: Log) -> None:
    start = log.clock.now
    log.logger.warning("the same")
    log.clock.now += WINDOW_S / 2
    for _ in range(MOST):
        log.logger.warning("the same")
    assert [due for due, _ in log.clock.waiting] == [start + WINDOW_S]


def test_exactly_ten_are_ten_lines_and_no_count(log: Log) -> None:
    for _ in range(MOST):
        log.logger.warning("the same")
    assert not log.clock.waiting
    log.clock.now += WINDOW_S
    log.logger.warning("another")
    assert log.lines == ["the same"] * MOST + ["another"]


def test_sources_and_levels_are_counted_apart(log: Log) -> None:
    for name in ("drive", "hall"):
        for _ in range(MOST):
            log.logger.warning("%s: %s", name, "lost")
    log.logger.error("%s: %s", "drive", "lost")
    assert len(log.lines) == 2 * MOST + 1


def test_two_floods_that_began_apart_each_get_their_count(log: Log) -> None:
    for _ in range(MOST + 1):
        log.logger.warning("first")
    log.clock.now += WINDOW_S / 2
    for _ in range(MOST + 2):
        log.logger.warning("second")
    log.clock.go_to_next()
    assert log.lines[-1] == "1 more like this within a minute, the last: first"
    log.clock.go_to_next()
    assert log.lines[-1] == "2 more like this within a minute, the last: second"


def test_after_its_window_a_message_is_shown_again(log: Log) -> None:
    for _ in range(MOST + 1):
        log.logger.warning("the same")
    log.clock.now += WINDOW_S
    log.logger.warning("the same")
    assert log.lines[MOST:] == ["1 more like this within a minute, the last: the same", "the same"]


def test_what_was_held_back_is_said_at_the_end_of_the_process(log: Log) -> None:
    for _ in range(MOST + 5):
        log.logger.warning("the same")
    log.handler.close()
    assert log.lines[MOST:] == ["5 more like this within a minute, the last: the same"]
