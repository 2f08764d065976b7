"""Disks that refuse stop nothing: the node's alarm says it, the service watches on, and saves again when it can."""

from __future__ import annotations

import json
import signal
import time
from pathlib import Path

from rtid.actions import Action
from rtid.service.memory import RETRY_S, SAVE_EVERY_S
from tests.support.disk import full_disk, read_only, small_disk
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid, rtid
from tests.support.pty import PtyDevice
from tests.support.remembering import feed, listed, names, node_in, readings, start
from tests.support.wait import wait_until

NOTE = Action("note", "Kim", text="belt replaced")


def test_what_a_full_disk_refused_is_written_when_there_is_room(tmp_path: Path) -> None:
    folder, node, rows = tmp_path / "state", node_in(tmp_path), readings(400)
    parts = start(folder, node)
    with full_disk():
        feed(parts, rows[:200])
        parts.tend(SAVE_EVERY_S + 1.0)
        parts.pipeline.act("belt", NOTE, silent_s=0.0, stamp=1000.0)
        feed(parts, rows[200:])
    assert names(listed(folder)) == []
    parts.tend(time.monotonic() + 2 * RETRY_S)
    assert names(listed(folder)) == ["storage active", "note", "storage cleared"]
    assert [event["sequence"] for event in listed(folder)] == [1, 2, 3]
    again = start(folder, node)
    assert again.pipeline.report("belt", 0.0).samples >= 384
    assert names(listed(folder)) == ["storage active", "note", "storage cleared"]


def test_a_full_disk_at_the_start_is_said_at_once(tmp_path: Path) -> None:
    node = node_in(tmp_path)
    (tmp_path / "state").mkdir()
    with full_disk():
        parts = start(tmp_path / "state", node)
        feed(parts, readings(100))
    assert parts.pipeline.report("belt", 0.0).samples > 0
    parts.tend(time.monotonic() + 2 * RETRY_S)
    assert names(listed(tmp_path / "state")) == ["storage active", "storage cleared"]


def test_a_save_that_fails_leaves_the_one_before_and_what_was_told_since_is_caught_up_with(tmp_path: Path) -> None:
    """Events find room where the larger state does not; then the service is killed."""
    folder, node = tmp_path / "state", node_in(tmp_path)
    parts = start(folder, node)
    feed(parts, readings(200))
    (folder / "loops" / "belt.json.new").mkdir()
    parts.pipeline.act("belt", Action("hold", "Kim", for_s=600.0), silent_s=0.0, stamp=1000.0)
    (folder / "loops" / "belt.json.new").rmdir()
    again = start(folder, node).pipeline.loops["belt"]
    assert again.hold is not None
    assert names(listed(folder))[0] == "hold"


def test_the_real_service_on_a_disk_that_fills_up_and_is_freed(tmp_path: Path) -> None:
    state, filler = tmp_path / "state", tmp_path / "state" / "filler"
    state.mkdir()
    with small_disk(state, 600), PtyDevice(tmp_path / "board") as board:
        filler.write_bytes(bytes(550_000))
        with RunningRtid("run", configure(tmp_path, board.port)) as service:
            service.wait_for_line("is open")
            board.stream(plant_rows(3000))
            service.wait_for_line("not stored", 20.0)
            filler.unlink()
            assert service.end(signal.SIGTERM) == 0
        told = listed(state)
        assert [event["sequence"] for event in told] == list(range(1, len(told) + 1))
        assert names(told).count("baseline") == 1
        assert names(told)[-1] == "storage cleared"
        assert any("make room on the disk" in event["text"] for event in told)
        assert json.loads((state / "loops" / "belt.json").read_bytes())["schema"] == "rtid/state/1"


def test_the_real_service_starts_and_watches_in_a_folder_that_it_cannot_write(tmp_path: Path) -> None:
    state = tmp_path / "state"
    state.mkdir()
    with PtyDevice(tmp_path / "board") as board, read_only(state):
        path = configure(tmp_path, board.port)
        with RunningRtid("run", path) as service:
            service.wait_for_line("is open")
            service.wait_for_line("state and events are not stored")
            board.stream(plant_rows(2600))
            service.wait_for_line("baseline belt-1 accepted", 20.0)
            second = rtid("run", path)
            assert second.returncode == 69
            assert "another rtid service holds" in second.stderr
            wait_until(lambda: any("no control socket" in line for line in service.stderr), what="a word on it")
            assert service.end(signal.SIGTERM) == 0
        assert not any("Traceback" in line for line in service.stderr)
