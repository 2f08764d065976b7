"""The service inside this process: snapshots from another thread, and observers that fail."""

from __future__ import annotations

import logging
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from rtid import config
from rtid.errors import Unavailable, UsageError
from rtid.report import Report, Transition
from rtid.service import service as service_module
from rtid.service.service import Observer, Service
from tests.support.plant_lines import configure, plant_rows
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until


class FailsOnce:
    """An observer that raises at the first report and counts the others."""

    def __init__(self) -> None:
        self.calls = 0

    def report(self, report: Report) -> None:
        self.calls += 1
        if self.calls == 1:
            raise RuntimeError("an observer's own mistake")

    def event(self, payload: object, transition: Transition) -> None:
        pass


@pytest.fixture(autouse=True)
def plain_log(caplog: pytest.LogCaptureFixture) -> None:
    caplog.set_level(logging.INFO)


@contextmanager
def serving(path: Path, *observers: Observer) -> Iterator[Service]:
    service = Service(config.load(path), observers=observers)
    running = threading.Thread(target=service.run)
    running.start()
    try:
        yield service
    finally:
        service.stop()
        running.join()


def test_a_snapshot_may_be_asked_for_by_another_thread(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    with PtyDevice(tmp_path / "board") as board, serving(configure(tmp_path, board.port)) as service:
        wait_until(lambda: "is open" in caplog.text, what="an open port")
        board.stream(plant_rows(500))
        wait_until(lambda: service.snapshot("belt", "a look")["state"] == "learning", what="learning")
        snapshot = service.snapshot("belt", "by hand")
        assert (snapshot["schema"], snapshot["node"], snapshot["loop"]) == ("rtid/snapshot/1", "test-node", "belt")
        assert snapshot["reason"] == "by hand"
        with pytest.raises(UsageError, match="expected one of belt"):
            service.snapshot("bellt", "by hand")


def test_a_service_that_does_not_run_does_not_answer(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(service_module, "ANSWER_S", 0.01)
    with pytest.raises(Unavailable, match="is it running"):
        Service(config.load(configure(tmp_path))).snapshot("belt", "by hand")


def test_an_observer_that_raises_does_not_stop_the_worker(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    observer = FailsOnce()
    with PtyDevice(tmp_path / "board") as board, serving(configure(tmp_path, board.port), observer):
        wait_until(lambda: "is open" in caplog.text, what="an open port")
        board.stream(plant_rows(200))
        wait_until(lambda: observer.calls > 5, what="reports after the failure")


def test_a_service_that_never_ran_has_made_nothing(tmp_path: Path) -> None:
    Service(config.load(configure(tmp_path)))
    assert not (tmp_path / "state").exists()
