"""`rtid status` and `rtid watch` on a real service."""

from __future__ import annotations

import fcntl
import json
import os
import re
import signal
import struct
import subprocess
import sys
import termios
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import pytest

from rtid.cli.status_words import WIDTH
from tests.support.broker import Broker, Listener
from tests.support.payloads import check
from tests.support.process import ENVIRONMENT, RunningRtid
from tests.support.served import Served
from tests.support.wait import wait_until

FRAME = "\x1b[H"


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Served]:
    with Served(tmp_path_factory.mktemp("served")) as running:
        running.stream(600)
        yield running


class Terminal:
    """A command in a pseudo-terminal of 80 columns and 24 lines; `screen` is all it wrote."""

    def __init__(self, *arguments: str | Path) -> None:
        self.screen = ""
        self._here, there = os.openpty()
        fcntl.ioctl(there, termios.TIOCSWINSZ, struct.pack("4H", 24, 80, 0, 0))
        self.process = subprocess.Popen(
            [sys.executable, "-m", "rtid", *map(str, arguments)],
            env=ENVIRONMENT,
            stdin=there,
            stdout=there,
            stderr=there,
            preexec_fn=lambda: _own_terminal(there),  # noqa: PLW1509
        )
        os.close(there)
        os.set_blocking(self._here, False)

    def close(self) -> None:
        self.process.kill()
        self.process.wait()
        os.close(self._here)

    def type(self, keys: bytes) -> None:
        os.write(self._here, keys)

    def frames(self) -> list[str]:
        """What was drawn, one text per refreshing, without the controls of the terminal."""
        with suppress(OSError):  # nothing new, or the command has ended
            self.screen += os.read(self._here, 65536).decode(errors="replace")
        return [re.sub(r"\x1b\[[0-9]*[A-Z]", "", part) for part in self.screen.split(FRAME)[1:]]

    def ended(self) -> int:
        wait_until(lambda: (self.frames(), self.process.poll() is not None)[1], what="the end of the command")
        self.frames()
        return self.process.returncode


def _own_terminal(there: int) -> None:
    os.setsid()
    fcntl.ioctl(there, termios.TIOCSCTTY, 0)


@contextmanager
def terminal(*arguments: str | Path) -> Iterator[Terminal]:
    running = Terminal(*arguments)
    try:
        yield running
    finally:
        running.close()


def test_json_obeys_its_schema_while_learning(served: Served) -> None:
    found = served.status()
    check(found)
    assert (found["node"], found["schema"], found["broker"]) == ("test-node", "rtid/status_reply/1", None)
    belt, drive = found["loops"]["belt"], found["sources"]["drive"]
    assert (belt["state"], belt["baseline"], belt["drift_ratio"]) == ("learning", None, None)
    assert "more of moves" in belt["progress"]
    assert belt["blocks"] > 30
    assert belt["last_block_age_s"] >= 0.0
    assert (drive["connected"], drive["dropped"], drive["rejected"]) == (True, 0, {})
    assert drive["readings"] >= 599


def test_the_rate_is_known_after_a_second(served: Served) -> None:
    wait_until(lambda: served.source()["rate_per_s"] is not None, what="a rate")
    check(served.status())


def test_one_loop_only(served: Served) -> None:
    assert "loop belt: function_check, learning since" in served.run("status", "belt").out
    wrong = served.run("status", "belts")
    assert wrong.code == 64
    assert "(nearest valid name 'belt')" in wrong.error


def test_words_stay_within_80_columns(served: Served) -> None:
    assert max(len(line) for line in served.run("status").out.splitlines()) <= WIDTH


def test_what_a_source_rejected_is_told(served: Served) -> None:
    served.garble(b"1,2,3*00")
    wait_until(lambda: served.source()["rejected"] == {"checksum": 1}, what="a rejected line")
    said = served.run("status").out
    assert "rejected  1 checksum; the first: " in said


def test_a_stale_loop_its_alarm_and_its_broker(tmp_path: Path, broker: Broker) -> None:
    with Served(tmp_path, stale_after_s=1.0, broker=broker.port) as served:
        served.stream(300)
        found = served.wait_for(lambda loop: loop["state"] == "stale", what="silence")
        assert [(alarm["alarm"], alarm["acknowledged"]) for alarm in found["alarms"]] == [("data_stale", False)]
        assert found["progress"].startswith("learning")
        assert served.run("ack", "belt", "--alarm", "data_stale", "--by", "Kim").code == 0
        assert served.loop()["alarms"][0]["acknowledged"]
        wait_until(lambda: served.status()["broker"]["connected"], what="the broker")
        check(served.status())
        assert f"127.0.0.1:{broker.port}, connected" in served.run("status").out


def test_a_snapshot_that_is_asked_for_is_published_as_well(tmp_path: Path, broker: Broker) -> None:
    topic = "rtid/test-node/belt/snapshot"
    with Listener(broker.port, topic) as listener, Served(tmp_path, broker=broker.port) as served:
        wait_until(lambda: served.status()["broker"]["connected"], what="the broker")
        shown = json.loads(served.run("snapshot", "belt", "--reason", "weekly").out)
        assert json.loads(listener.wait_for(lambda message: message.topic == topic).payload) == shown


def test_watch_once_is_one_table(served: Served) -> None:
    done = served.run("watch", "--once")
    assert (done.code, done.err) == (0, "")
    assert done.out.count("LOOP") == 1
    assert "\x1b" not in done.out


@pytest.mark.parametrize("every", ["0", "nan", "inf", "x", "-1"])
def test_a_pace_that_is_none_is_refused(served: Served, every: str) -> None:
    assert served.run("watch", "--once", "--every", every).code == 64


def test_watch_in_a_terminal_refreshes_and_ends_with_ctrl_c(served: Served) -> None:
    with terminal("watch", "--every", "0.2", "--config", served.config) as shown:
        wait_until(lambda: len(shown.frames()) > 2, 20.0, what="a third table")
        shown.type(b"\x03")
        assert shown.ended() == 0
    lines = [line for frame in shown.frames()[:-1] for line in frame.splitlines()]
    assert max(map(len, lines)) < 80
    assert sum("belt" in line and "learning" in line for line in lines) >= 2
    assert "Traceback" not in shown.screen


def test_watch_without_a_terminal_prints_and_ends_when_the_service_ends(tmp_path: Path) -> None:
    with Served(tmp_path) as served, RunningRtid("watch", "--every", "0.2", "--config", served.config) as watching:
        wait_until(lambda: sum("LOOP" in line for line in watching.stdout) > 1, 20.0, what="a second table")
        assert served.process.end(signal.SIGTERM) == 0
        assert watching.ended() == 69
    assert len(watching.stderr) == 1
    assert watching.stderr[0].startswith(f"rtid: {served.socket}: ")
    assert not any("\x1b" in line for line in watching.stdout)
