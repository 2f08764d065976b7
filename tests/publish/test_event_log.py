"""The event list: numbers over restarts, torn lines, disks that refuse."""

from __future__ import annotations

import json
import logging
import resource
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

from rtid.errors import CannotCreate, InputOutputError
from rtid.publish.events import EventLog
from tests.support.payloads import check
from tests.support.reports import make_transition


def append(log: EventLog) -> dict[str, Any]:
    return log.append(make_transition(), node="packing-2", loop="conveyor")


def sequences(path: Path) -> list[int]:
    return [json.loads(line)["sequence"] for line in path.read_text(encoding="utf-8").splitlines()]


@contextmanager
def file_size_limit(size: int) -> Iterator[None]:
    """What a full disk does: a write ends early, the next one fails."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def test_event_is_on_disk_as_it_was_returned_and_obeys_the_schema(tmp_path: Path) -> None:
    path = tmp_path / "events.jsonl"
    event = append(EventLog(path))
    check(event)
    assert json.loads(path.read_text(encoding="utf-8")) == event
    assert event["sequence"] == 1


def test_numbers_continue_over_restarts(tmp_path: Path) -> None:
    path = tmp_path / "events.jsonl"
    for _ in range(3):
        log = EventLog(path)
        append(log)
        append(log)
    assert sequences(path) == [1, 2, 3, 4, 5, 6]


@pytest.mark.parametrize("torn", [b'{"schema":"rtid/event/1","sequ', b"\x00" * 5000])
def test_torn_last_line_is_set_aside_and_said(tmp_path: Path, caplog: pytest.LogCaptureFixture, torn: bytes) -> None:
    path = tmp_path / "events.jsonl"
    append(EventLog(path))
    with path.open("ab") as file:
        file.write(torn)
    with caplog.at_level(logging.WARNING):
        append(EventLog(path))
    assert sequences(path) == [1, 2]
    assert (tmp_path / "events.jsonl.torn").read_bytes() == torn + b"\n"
    assert [record.levelname for record in caplog.records if "torn" in record.getMessage()] == ["WARNING"]


def test_second_torn_line_does_not_replace_the_first(tmp_path: Path) -> None:
    path = tmp_path / "events.jsonl"
    for torn in (b"one", b"two"):
        path.write_bytes(torn)
        EventLog(path)
    assert (tmp_path / "events.jsonl.torn").read_bytes() == b"one\ntwo\n"


def test_lines_that_are_no_events_do_not_reset_the_numbers(tmp_path: Path) -> None:
    path = tmp_path / "events.jsonl"
    append(EventLog(path))
    with path.open("ab") as file:
        file.write(b"garbage\n[1]\n\n")
    assert append(EventLog(path))["sequence"] == 2


def test_full_disk_is_one_line_that_names_the_file() -> None:
    log = EventLog("/dev/full")
    with pytest.raises(InputOutputError, match=r"^/dev/full: cannot be written \(No space left on device\); [^\n]+$"):
        append(log)
    assert log.sequence == 1


def test_line_that_did_not_fit_leaves_nothing_behind_and_comes_with_the_next(tmp_path: Path) -> None:
    path = tmp_path / "events.jsonl"
    log = EventLog(path)
    append(log)
    with file_size_limit(path.stat().st_size + 100), pytest.raises(InputOutputError):
        append(log)
    append(log)
    assert sequences(path) == [1, 2, 3]


def test_torn_line_on_a_full_disk_does_not_stop_the_start(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    path = tmp_path / "events.jsonl"
    append(EventLog(path))
    with path.open("ab") as file:
        file.write(b"torn")
    with file_size_limit(0):
        log = EventLog(path)
    append(log)
    assert sequences(path) == [1, 2]
    assert "is lost" in caplog.text


def test_folder_that_is_missing_is_named(tmp_path: Path) -> None:
    with pytest.raises(CannotCreate, match="no-such-folder/events.jsonl: cannot be created"):
        EventLog(tmp_path / "no-such-folder" / "events.jsonl")
