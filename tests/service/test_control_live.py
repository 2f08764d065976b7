"""A real service, and whatever may be said on its socket: it answers, goes on, and does nothing twice or late."""

from __future__ import annotations

import contextlib
import json
import signal
import stat
import threading
from collections.abc import Iterator, Mapping
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from rtid import config
from rtid.report import Report, Transition
from rtid.service import service as service_module
from rtid.service.control_request import FIELDS
from rtid.service.service import Service
from tests.support.control import answers, connect, do, listens
from tests.support.plant_lines import configure
from tests.support.served import Served
from tests.support.wait import wait_until

EXAMPLES = settings(max_examples=60, deadline=None)

values = (
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=30) | st.lists(st.none(), max_size=2)
)
names = st.sampled_from(sorted({name for fields in FIELDS.values() for name in fields} | {"node"}))
likely = st.fixed_dictionaries(
    {"do": st.sampled_from(sorted(FIELDS)), "loop": st.just("belt")},
    optional={
        "by": st.sampled_from(["Kim", "", " "]) | values,
        "reason": st.text(max_size=30),
        "for_s": st.floats(-1.0, 3.0) | values,
        "alarm": st.sampled_from(["data_gap", "plant_drift", "storage", "none"]),
        "signal": st.sampled_from(["drive.volts", "drive.none"]),
        "because": st.sampled_from(["repair", "age"]),
        "baseline": st.sampled_from(["belt-1", "belt-2", ""]),
        "text": st.text(max_size=30),
        "node": st.sampled_from(["test-node", "another"]),
    },
)


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Served]:
    """One service for the whole file; at the end it has written no traceback and stops in good order."""
    with Served(tmp_path_factory.mktemp("served")) as running:
        running.stream(2400)
        running.wait_for(lambda loop: loop["state"] == "watching", what="a baseline")
        yield running
        running.stream(100)
        assert running.process.end(signal.SIGTERM) == 0
    assert not [line for line in running.process.stderr if "Traceback" in line or "unexpected" in line]
    numbers = [event["sequence"] for event in running.events()]
    assert numbers == list(range(1, len(numbers) + 1))


def test_only_owner_and_group_may_connect(served: Served) -> None:
    assert stat.S_IMODE(served.socket.stat().st_mode) == 0o660


@EXAMPLES
@given(data=st.binary(min_size=1, max_size=300))
def test_arbitrary_bytes(served: Served, data: bytes) -> None:
    wanted = [line for line in data.split(b"\n") if line.strip()]
    found = answers(served.socket, data)
    assert len(found) == len(wanted)
    assert {answer["exit_code"] for answer in found} <= {64}
    assert do(served.socket, do="status")["ok"]


@EXAMPLES
@given(request=st.dictionaries(names, values) | likely)
def test_arbitrary_requests_are_done_or_refused(served: Served, request: dict[str, Any]) -> None:
    before = len(served.events())
    (answer,) = answers(served.socket, json.dumps(request).encode())
    assert answer["ok"] or answer["exit_code"] == 64
    if not answer["ok"]:
        assert len(served.events()) == before
    elif request["do"] not in ("status", "baselines", "snapshot"):
        assert len(served.events()) > before
    assert do(served.socket, do="status")["ok"]


def test_many_clients_at_once_are_all_answered(served: Served) -> None:
    before = len(served.events())
    with ThreadPoolExecutor(12) as pool:
        told = list(pool.map(lambda k: do(served.socket, do="note", loop="belt", text=f"n{k}", by="Kim"), range(60)))
    assert all(answer["ok"] for answer in told)
    assert sorted(event["text"] for event in served.events()[before:]) == sorted(f"n{k}" for k in range(60))


def test_a_client_that_never_reads_holds_up_neither_others_nor_the_readings(served: Served) -> None:
    with contextlib.ExitStack() as stack:
        for _ in range(8):
            stack.enter_context(connect(served.socket)).sendall(b'{"do":"status"}\n' * 2000)
        served.stream(300)
        assert do(served.socket, do="status")["ok"]


def test_the_file_of_a_killed_service_is_replaced_by_the_next(tmp_path: Path) -> None:
    with Served(tmp_path) as first:
        first.process.end(signal.SIGKILL)
        assert first.socket.is_socket()
    with Served(tmp_path) as second:
        assert do(second.socket, do="status")["ok"]
        assert second.process.end(signal.SIGTERM) == 0
        assert not second.socket.exists()


class Busy:
    """An observer that keeps the worker busy once, while the test looks."""

    def __init__(self) -> None:
        self.entered, self.free = threading.Event(), threading.Event()

    def report(self, report: Report) -> None:
        pass

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        self.entered.set()
        assert self.free.wait(20.0)


def test_what_the_worker_did_not_come_to_in_time_is_not_done_later(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(service_module, "ANSWER_S", 0.2)
    busy = Busy()
    service = Service(config.load(configure(tmp_path)), observers=[busy])
    running = threading.Thread(target=service.run)
    running.start()
    path = tmp_path / "state" / "control.sock"
    try:
        wait_until(lambda: listens(path), what="the socket")
        first = do(path, do="note", loop="belt", text="first", by="Kim")
        assert busy.entered.is_set()
        late = do(path, do="note", loop="belt", text="late", by="Kim")
        busy.free.set()
        wait_until(lambda: do(path, do="status")["ok"], what="an answer")
    finally:
        busy.free.set()
        service.stop()
        running.join()
    assert (first["exit_code"], "it may still be done" in first["error"]) == (69, True)
    assert (late["exit_code"], "nothing was done" in late["error"]) == (69, True)
    events = (tmp_path / "state" / "events.jsonl").read_text().splitlines()
    assert [json.loads(event)["text"] for event in events] == ["first"]
