"""The server with clients that misbehave; what is done with a request is played by the test."""

from __future__ import annotations

import contextlib
import socket
import threading
from collections.abc import Callable, Iterator, Mapping
from pathlib import Path
from typing import Any

import pytest

from rtid.errors import Unavailable, UsageError
from rtid.service import control
from rtid.service.control import MOST_CLIENTS, ControlServer
from rtid.service.control_request import MOST_BYTES, Request
from tests.support.control import answers, connect, do, lines_of
from tests.support.wait import wait_until

STATUS = b'{"do":"status"}\n'
BIG = "x" * 1_000_000  # more than the kernel keeps for a reader


def echo(request: Request, peer: str) -> Mapping[str, Any]:
    return {"request": request, "peer": bool(peer)}


@contextlib.contextmanager
def serving(folder: Path, answer: Callable[[Request, str], Mapping[str, Any]] = echo) -> Iterator[Path]:
    path = folder / "control.sock"
    with ControlServer(path, answer):
        yield path


@pytest.fixture
def short_patience(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(control, "IDLE_S", 0.4)


def test_every_request_of_a_connection_gets_one_line_in_order(tmp_path: Path) -> None:
    with serving(tmp_path) as path:
        found = answers(path, STATUS + b"\n  \r\nnonsense\n" + b'{"do":"resume","loop":"belt"}')
    assert [answer["ok"] for answer in found] == [True, False, True]
    assert found[0]["answer"] == {"request": {"do": "status"}, "peer": True}
    assert found[2]["answer"]["request"]["loop"] == "belt"


def test_a_request_may_come_in_pieces(tmp_path: Path) -> None:
    with serving(tmp_path) as path, connect(path) as client:
        for byte in STATUS:
            client.sendall(bytes([byte]))
        client.shutdown(socket.SHUT_WR)
        assert [answer["ok"] for answer in lines_of(client)] == [True]


@pytest.mark.parametrize("tail", [b"", b"\n"])
def test_a_request_that_is_too_long_is_refused_and_ends_the_connection(tmp_path: Path, tail: bytes) -> None:
    with serving(tmp_path) as path:
        (answer,) = answers(path, b"x" * (MOST_BYTES + 1) + tail + STATUS)
        assert (answer["ok"], answer["exit_code"]) == (False, 64)
        assert "longer than 65536 bytes" in answer["error"]
        assert do(path, do="status")["ok"]


def test_the_longest_request_is_taken(tmp_path: Path) -> None:
    with serving(tmp_path) as path:
        assert answers(path, b" " * (MOST_BYTES - len(STATUS)) + STATUS)[0]["ok"]


def test_errors_of_all_kinds_are_one_line(tmp_path: Path) -> None:
    errors = iter([UsageError("no\nloop"), Unavailable("busy"), ZeroDivisionError("ours")])

    def failing(request: Request, peer: str) -> Mapping[str, Any]:
        raise next(errors)

    with serving(tmp_path, failing) as path:
        found = answers(path, STATUS * 3)
    assert [(answer["error"], answer["exit_code"]) for answer in found] == [
        ("no loop", 64),
        ("busy", 69),
        ("unexpected ZeroDivisionError: ours", 70),
    ]


@pytest.mark.usefixtures("short_patience")
def test_half_a_request_is_not_waited_for(tmp_path: Path) -> None:
    with serving(tmp_path) as path, connect(path) as client:
        client.sendall(b'{"do":')
        (answer,) = lines_of(client)
    assert "line end did not come" in answer["error"]


@pytest.mark.usefixtures("short_patience")
def test_a_client_that_says_nothing_is_dropped(tmp_path: Path) -> None:
    with serving(tmp_path) as path, connect(path) as client:
        assert lines_of(client) == []


@pytest.mark.usefixtures("short_patience")
def test_a_client_that_never_reads_holds_up_nobody_and_is_dropped(tmp_path: Path) -> None:
    with serving(tmp_path, lambda request, peer: {"text": BIG}) as path, connect(path) as deaf:
        deaf.sendall(STATUS)
        assert len(do(path, do="status")["answer"]["text"]) == len(BIG)
        wait_until(lambda: "control-client" not in {thread.name for thread in threading.enumerate()}, what="the drop")
        received = 0
        while more := deaf.recv(65536):  # what the kernel had kept, then the end
            received += len(more)
        assert received < len(BIG)


def test_a_client_too_many_is_told_so_and_a_place_becomes_free(tmp_path: Path) -> None:
    with serving(tmp_path) as path, contextlib.ExitStack() as stack:
        clients = [stack.enter_context(connect(path)) for _ in range(MOST_CLIENTS)]
        (answer,) = answers(path, b"")
        assert (answer["exit_code"], "try again" in answer["error"]) == (69, True)
        clients[0].sendall(STATUS)
        clients[0].shutdown(socket.SHUT_WR)
        assert len(lines_of(clients[0])) == 1
        assert do(path, do="status")["ok"]


def test_at_the_end_everybody_is_hung_up_on_and_the_file_is_gone(tmp_path: Path) -> None:
    asked, never = threading.Event(), threading.Event()

    def slow(request: Request, peer: str) -> Mapping[str, Any]:
        asked.set()
        never.wait(10.0)
        return {}

    with contextlib.ExitStack() as stack:
        with serving(tmp_path, slow) as path:
            idle, waiting = (stack.enter_context(connect(path)) for _ in range(2))
            waiting.sendall(STATUS)
            assert asked.wait(10.0)
        assert not path.exists()
        assert lines_of(idle) == lines_of(waiting) == []
        never.set()


def test_a_second_server_leaves_the_first_one_its_file(tmp_path: Path) -> None:
    with serving(tmp_path) as path:
        with pytest.raises(Unavailable), serving(tmp_path):
            pass
        assert do(path, do="status")["ok"]
