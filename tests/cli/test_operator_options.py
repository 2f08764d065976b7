"""Durations, and which service a command talks to."""

from __future__ import annotations

import argparse
import contextlib
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from rtid.cli import operator
from rtid.cli.main import COMMANDS
from rtid.service import control_socket
from tests.support.plant_lines import configure
from tests.support.served import said

NEEDS = {
    "status": (),
    "watch": ("--once",),
    "snapshot": ("belt",),
    "rebaseline": ("belt", "--list"),
    "hold": ("belt", "--for", "5"),
    "resume": ("belt",),
    "ack": ("belt", "--alarm", "data_gap"),
    "shelve": ("belt", "--alarm", "data_gap", "--for", "5"),
    "unshelve": ("belt", "--alarm", "data_gap"),
    "note": ("belt", "x", "--by", "Kim"),
}


@pytest.mark.parametrize(
    ("text", "seconds"),
    [("90", 90.0), ("90s", 90.0), ("30m", 1800.0), ("8h", 28800.0), ("2d", 172800.0), ("1.5h", 5400.0), ("0.5", 0.5)],
)
def test_a_duration(text: str, seconds: float) -> None:
    assert operator.duration(text) == seconds


@pytest.mark.parametrize(
    "text", ["", "0", "0m", "-5", "5 m", "m", "1e3", "inf", "nan", "5w", "1h30m", "٣", "1_0", "5\n"]
)
def test_what_is_no_duration(text: str) -> None:
    with pytest.raises(argparse.ArgumentTypeError, match="give seconds, or 30m, 8h, 2d"):
        operator.duration(text)


@given(st.text(max_size=12))
def test_whatever_is_written_is_a_duration_above_zero_or_refused(text: str) -> None:
    seconds = 1.0
    with contextlib.suppress(argparse.ArgumentTypeError):
        seconds = operator.duration(text)
    assert 0.0 < seconds < 1e14


@pytest.mark.parametrize("command", NEEDS)
def test_without_a_service_every_command_is_69_with_the_path_and_the_mend(command: str, tmp_path: Path) -> None:
    assert command in COMMANDS
    error = said(command, *NEEDS[command], "--config", configure(tmp_path))
    assert error.code == 69
    assert error.error.startswith(f"rtid: {tmp_path}/state/control.sock: no service listens there; is it running?")
    by_path = said(command, *NEEDS[command], "--socket", tmp_path / "s")
    assert by_path.error.startswith(f"rtid: {tmp_path}/s: ")


@pytest.mark.parametrize("command", sorted(set(NEEDS) - {"status", "watch"}))
def test_what_a_command_needs_is_named(command: str) -> None:
    error = said(command)
    assert error.code == 64
    assert "LOOP" in error.error


def test_a_bad_configuration_is_said_as_everywhere(tmp_path: Path) -> None:
    path = tmp_path / "c.yaml"
    path.write_text("node: [\n")
    assert said("status", "--config", path).code == 78
    assert said("status", "--config", tmp_path / "none").code == 66


@pytest.fixture
def asked(monkeypatch: pytest.MonkeyPatch) -> list[tuple[Path, Any]]:
    """Where a request goes, and for which node."""
    seen: list[tuple[Path, Any]] = []

    def ask(path: Path, request: dict[str, Any]) -> dict[str, Any]:
        seen.append((path, request["node"]))
        return {"loop": "belt", "text": ""}

    monkeypatch.setattr(operator.control_client, "ask", ask)
    return seen


def test_the_default_is_the_socket_that_systemd_has_made(asked: list[tuple[Path, Any]]) -> None:
    said("resume", "belt")
    assert asked == [(Path("/run/rtid/control.sock"), None)]


def test_a_configuration_leads_to_its_state_else_to_the_socket_of_systemd(
    asked: list[tuple[Path, Any]], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    config, common = configure(tmp_path), tmp_path / "run.sock"
    monkeypatch.setattr(operator, "SOCKET", common)
    own = tmp_path / "state" / common.name
    own.parent.mkdir()
    said("resume", "belt", "--config", config)
    with control_socket.listen(common):
        said("resume", "belt", "--config", config)
        with control_socket.listen(own):
            said("resume", "belt", "--config", config)
        said("resume", "belt", "--config", config, "--socket", "elsewhere")
    paths = [own, common, own, Path("elsewhere")]
    assert asked == [(path, "test-node") for path in paths]
