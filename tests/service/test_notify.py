"""What the service manager hears: readiness, life, reload and stop, from the object and from the real process."""

from __future__ import annotations

import logging
import os
import signal
import threading
import time
from pathlib import Path

import pytest

from rtid import config
from rtid.report import Report, Transition
from rtid.service.notify import Notifier, in_words
from rtid.service.service import Service
from tests.support.notify_socket import NotifySocket
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until


@pytest.fixture(params=["in the file system", "abstract"])
def manager_name(request: pytest.FixtureRequest, tmp_path: Path) -> str:
    return f"@rtid-test-{os.getpid()}" if request.param == "abstract" else str(tmp_path / "notify")


def test_each_message_is_one_datagram_of_the_protocol(manager_name: str) -> None:
    with NotifySocket(manager_name) as manager:
        before = time.monotonic_ns() // 1000
        notifier = Notifier(manager.variables | {"WATCHDOG_USEC": "60000000"})
        notifier.ready()
        notifier.reloading()
        notifier.status("watching:\nbelt")
        notifier.alive(0.0)
        notifier.stopping()
        manager.wait_for("STOPPING")
        reloading = manager.messages[1]
        assert before <= int(reloading.pop("MONOTONIC_USEC")) <= time.monotonic_ns() // 1000
        assert manager.messages == [
            {"READY": "1"},
            {"RELOADING": "1"},
            {"STATUS": "watching: belt"},
            {"WATCHDOG": "1"},
            {"STOPPING": "1"},
        ]


def test_the_watchdog_is_fed_well_before_half_its_time_and_not_more_often(tmp_path: Path) -> None:
    with NotifySocket(str(tmp_path / "notify")) as manager:
        notifier = Notifier(manager.variables | {"WATCHDOG_USEC": "60000000", "WATCHDOG_PID": str(os.getpid())})
        for second in range(121):
            notifier.alive(1000.0 + second)
        notifier.stopping()
        manager.wait_for("STOPPING")
        assert manager.count("WATCHDOG") == 9  # at 0, 15, ... 120 s


@pytest.mark.parametrize(
    "variables",
    [
        {},
        {"WATCHDOG_USEC": "60000000", "WATCHDOG_PID": str(os.getpid() + 1)},
        {"WATCHDOG_USEC": "0"},
        {"WATCHDOG_USEC": "soon"},
    ],
)
def test_a_watchdog_that_is_off_or_for_another_process_is_not_fed(tmp_path: Path, variables: dict[str, str]) -> None:
    with NotifySocket(str(tmp_path / "notify")) as manager:
        notifier = Notifier(manager.variables | variables)
        notifier.alive(0.0)
        notifier.stopping()
        manager.wait_for("STOPPING")
        assert manager.messages == [{"STOPPING": "1"}]


def test_a_status_is_said_once_until_it_changes(tmp_path: Path) -> None:
    with NotifySocket(str(tmp_path / "notify")) as manager:
        notifier = Notifier(manager.variables)
        for text in ("learning: belt", "learning: belt", "watching: belt"):
            notifier.status(text)
        notifier.stopping()
        manager.wait_for("STOPPING")
        assert [message.get("STATUS") for message in manager.messages] == ["learning: belt", "watching: belt", None]


def test_a_manager_that_is_gone_is_logged_and_stops_nothing(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    gone = str(tmp_path / "gone")
    with caplog.at_level(logging.WARNING):
        Notifier({"NOTIFY_SOCKET": gone}).ready()
    assert [record.getMessage().split(": ")[0] for record in caplog.records] == [
        f"the service manager at {gone} cannot be told READY"
    ]


def test_without_a_manager_nothing_is_said_or_logged(caplog: pytest.LogCaptureFixture) -> None:
    notifier = Notifier({"WATCHDOG_USEC": "60000000"})
    notifier.ready()
    notifier.status("watching: belt")
    notifier.alive(0.0)
    assert not caplog.records


def test_loops_are_named_by_their_state() -> None:
    states = {"belt": "watching", "mill": "learning", "oven": "watching"}
    assert in_words(states) == "watching: belt, oven; learning: mill"


def test_a_process_is_ready_lives_with_and_without_data_and_stops_in_order(tmp_path: Path) -> None:
    """The watchdog waits 1 s here: a ping every quarter of it, whether lines come or not."""
    with NotifySocket(str(tmp_path / "notify")) as manager, PtyDevice(tmp_path / "board") as board:
        variables = manager.variables | {"WATCHDOG_USEC": "1000000"}
        with RunningRtid("run", configure(tmp_path, board.port), variables=variables) as service:
            manager.wait_for("READY")
            manager.wait_for("STATUS")
            assert manager.last("STATUS") == "waiting: belt"
            silent = manager.count("WATCHDOG")
            manager.wait_for("WATCHDOG", times=silent + 3)
            service.wait_for_line("is open")
            board.stream(plant_rows(600))
            manager.wait_for("STATUS", times=2)
            assert manager.last("STATUS") == "learning: belt"
            fed = manager.count("WATCHDOG")
            manager.wait_for("WATCHDOG", times=fed + 3)
            assert service.end(signal.SIGTERM) == 0
        manager.wait_for("STOPPING")
        assert manager.order == ["READY", "STOPPING"]
        assert manager.messages[-1] == {"STOPPING": "1"}


def test_sighup_is_a_reload_that_ends_whether_the_configuration_is_good_or_bad(tmp_path: Path) -> None:
    """For systemd a reload lasts from RELOADING to READY: one that never ended would hang `systemctl reload`."""
    path = configure(tmp_path)
    with NotifySocket(str(tmp_path / "notify")) as manager:
        with RunningRtid("run", path, variables=manager.variables) as service:
            manager.wait_for("READY")
            os.kill(service.pid, signal.SIGHUP)
            manager.wait_for("READY", times=2)
            path.write_text("node: [")
            os.kill(service.pid, signal.SIGHUP)
            manager.wait_for("READY", times=3)
            service.wait_for_line(f"{path}:1")
            assert service.end(signal.SIGTERM) == 0
        manager.wait_for("STOPPING")
        assert manager.order == ["READY", "RELOADING", "READY", "RELOADING", "READY", "STOPPING"]


class Threads(Notifier):
    """Remembers who called: as a notifier the feeder of the watchdog, as an observer the worker of the loops."""

    def __init__(self) -> None:
        super().__init__({})
        self.fed_by: set[threading.Thread] = set()
        self.reported_by: set[threading.Thread] = set()

    def alive(self, now: float) -> None:
        self.fed_by.add(threading.current_thread())

    def report(self, report: Report) -> None:
        self.reported_by.add(threading.current_thread())

    def event(self, payload: object, transition: Transition) -> None:
        pass


def test_who_feeds_the_watchdog_is_who_works_on_the_loops(tmp_path: Path) -> None:
    """So a worker that hangs in a loop feeds nothing."""
    threads = Threads()
    with PtyDevice(tmp_path / "board") as board:
        service = Service(config.load(configure(tmp_path, board.port)), observers=[threads], notifier=threads)
        worker = threading.Thread(target=service.run)
        worker.start()
        try:
            wait_until(lambda: threads.fed_by, what="a ping")
            board.stream(plant_rows(200))
            wait_until(lambda: threads.reported_by, what="a report")
        finally:
            service.stop()
            worker.join()
    assert threads.fed_by == threads.reported_by == {worker}
